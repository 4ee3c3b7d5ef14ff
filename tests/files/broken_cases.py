"""A small workspace that is sound, and ways to break it: one fault each, where it must be found and in what words.

`BROKEN` is a table of edits, so that the loader, the check and the command line can be held to the same cases.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

OAT = """\
medium: oat
about: coarse sheet, invented
curve:
  law: intermediate
  parameters:
    R0: 0.0008 bar/LMH
    k: 0.012 m2/L
  tested:
    loading: 160 L/m2
    flux: 180 LMH
    temperature: 21 degC
  lots:
    a: {resistance: 1.0, fouling: 1.0}
    b: {resistance: 1.1, fouling: 1.25}
limits:
  loading: 150 L/m2
  flux: 200 LMH
  turbidity: 8
  differential_pressure: 2 bar
  inlet_pressure: 3.4 bar
scale_up: 1.0
flush:
  volume: 100 L/m2
  flux: 600 LMH
variability:
  resistance: 0.1
  fouling: 0.2
"""

RYE = """\
medium: rye
curve:
  law: cake
  runs:
    - file: ../bench/rye-a.csv
      lot: a
      operation: constant-flow
      area: 23 cm2
      pressure: 1 bar
      temperature: 21 degC
      density: 1.01 kg/L
      hold_up: 12 mL
      columns:
        time: t [min]
        volume: V [mL]
        pressure: P [psi]
      keep: false
      feed_loading: 120 L/m2
      tare: 5 mL
    - file: ../bench/rye-b.csv
      lot: b
      operation: constant-flow
      area: 23 cm2
limits:
  loading: 90 L/m2
"""

CATALOG = """\
currency: EUR
modules:
  oat-11:
    medium: oat
    area: 1.1 m2
    price: 940
    hold_up: 3.2 L
    max_count: 40
  rye-05:
    medium: rye
    area: 0.5 m2
    price: 610
    max_count: 40
holders:
  rack-10:
    modules: [oat-11, rye-05]
    slots: 10
    price: 4200
    batches: 200
    owned: 1
"""

CASE = """\
scenario: 500 L through oat and rye
batch:
  volume: 500 L
  time: 6 h
  temperature: 18 degC
objective: area
safety_factor: 1.5
basis: worst-lot
schedule: sequential
blocks:
  - block: clarification
    pressure: 2 bar
    operation: constant-flow
    setup: 30 min
    static: 0.05 bar
    line: 0.00002 bar/(L/h)
    pump:
      min_flow: 50 L/h
      max_flow: 1200 L/h
    stages:
      - stage: primary
        media: [oat]
        count: [1, 30]
      - stage: polish
        optional: false
        media:
          - medium: rye
            after: [oat]
costs:
  hour: 180
  flush: 0.02
  product:
    titer: 3 g/L
    value: 40
    recovered: 0.8
feed_variability:
  fouling: 0.15
installed:
  primary: {module: oat-11, count: 6}
  polish: {module: rye-05, count: 14}
"""

RUN = "t [min],V [mL],P [psi],NTU\n" + "".join(
    f"{5 * i},{5.0 + 18.0 * i},{0.0 if i == 0 else 2.0 + 0.35 * i + 0.05 * (i % 3):.2f},{2 + 0.1 * i:.1f}\n"
    for i in range(25)
)

OAT_FILE = "models/media/oat.yaml"
RYE_FILE = "models/media/rye.yaml"
CATALOG_FILE = "models/catalog.yaml"
CASE_FILE = "scenarios/case.yaml"

SOUND = {
    OAT_FILE: OAT,
    RYE_FILE: RYE,
    CATALOG_FILE: CATALOG,
    CASE_FILE: CASE,
    "models/bench/rye-a.csv": RUN,
    "models/bench/rye-b.csv": RUN,
}


@dataclass(frozen=True)
class Broken:
    """One edit: in `file`, `old` (found once) becomes `new`; the problem stands at `file` in the line that holds
    `mark` after the edit (None: the file as a whole) and its text holds `words`.

    `other`: the file that the problem stands in, where it is not the edited one. `old` None: `new` is the whole file.
    `follows`: other problems follow from this one.
    """

    name: str
    file: str
    old: str | None
    new: str
    mark: str | None
    words: tuple[str, ...]
    other: str | None = None
    follows: bool = False

    @property
    def at(self) -> str:
        """The file that the problem stands in."""
        return self.other or self.file

    def text(self) -> str:
        """The broken file's text."""
        if self.old is None:
            return self.new
        sound = SOUND[self.file]
        assert sound.count(self.old) == 1, f"{self.name}: {self.old!r} stands {sound.count(self.old)} times"
        return sound.replace(self.old, self.new)

    def line(self) -> int:
        """The line that the problem stands in."""
        if self.mark is None:
            return 0
        lines = (SOUND[self.other] if self.other else self.text()).splitlines()
        found = [number for number, line in enumerate(lines, 1) if self.mark in line]
        assert found, f"{self.name}: no line holds {self.mark!r}"
        return found[0]


def write_workspace(folder: Path, case: Broken | None = None) -> Path:
    """Write the sound workspace, broken by `case`; the scenario's path."""
    for name, text in SOUND.items():
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, encoding="utf-8")
    if case is not None:
        (folder / case.file).write_text(case.text(), encoding="utf-8")
    return folder / CASE_FILE


def _missing(file: str, line: str, key: str, mark: str, *words: str) -> Broken:
    """The line `line` left out; the problem stands at the part around it."""
    return Broken(
        f"{Path(file).stem}-{mark.strip('-: ')}-without-{key}", file, line, "", mark, (f"'{key}' is missing", *words)
    )


def _value(file: str, old: str, new: str, *words: str, name: str = "", mark: str = "", follows: bool = False) -> Broken:
    """One value written wrong; the problem stands in its line."""
    label = name or f"{Path(file).stem}-{new.strip()}".replace(" ", "-").replace("/", "-")
    return Broken(label, file, old, new, mark or new.strip().splitlines()[0], words, follows=follows)


MISSING = [
    _missing(OAT_FILE, "medium: oat\n", "medium", "about:", "a name"),
    Broken(
        "oat-without-curve",
        OAT_FILE,
        None,
        "medium: oat\nlimits: {flux: 200 LMH}\n",
        "medium:",
        ("'curve' is missing",),
    ),
    Broken(
        "oat-curve-says-nothing",
        OAT_FILE,
        OAT[OAT.index("  law:") : OAT.index("limits:")],
        "  law: intermediate\n",
        "curve:",
        ("runs, parameters, coefficients",),
    ),
    _missing(OAT_FILE, "    R0: 0.0008 bar/LMH\n", "R0", "parameters:", "law 'intermediate'"),
    _missing(OAT_FILE, "    k: 0.012 m2/L\n", "k", "parameters:", "law 'intermediate'"),
    Broken(
        "oat-without-tested",
        OAT_FILE,
        OAT[OAT.index("  tested:") : OAT.index("  lots:")],
        "",
        "parameters:",
        ("'tested' is missing",),
    ),
    _missing(OAT_FILE, "    loading: 160 L/m2\n", "loading", "tested:", "'150 L/m2'"),
    _missing(OAT_FILE, "    flux: 180 LMH\n", "flux", "tested:", "'200 LMH'"),
    _missing(OAT_FILE, "  volume: 100 L/m2\n", "volume", "flush:"),
    _missing(OAT_FILE, "  flux: 600 LMH\n", "flux", "flush:"),
    Broken(
        "rye-run-without-file",
        RYE_FILE,
        "file: ../bench/rye-b.csv\n      lot: b",
        "lot: b",
        "- lot: b",
        ("run 2", "'file' is missing", "path"),
    ),
    Broken(
        "rye-run-without-operation",
        RYE_FILE,
        "      lot: b\n      operation: constant-flow\n",
        "      lot: b\n",
        "rye-b.csv",
        ("run 2", "'operation' is missing", "constant-flow, constant-pressure"),
    ),
    Broken(
        "rye-run-without-area",
        RYE_FILE,
        "      area: 23 cm2\nlimits",
        "limits",
        "rye-b.csv",
        ("run 2", "'area' is missing", "23 cm2"),
    ),
    _missing(CATALOG_FILE, "    medium: oat\n", "medium", "oat-11:", "module 'oat-11'"),
    _missing(CATALOG_FILE, "    area: 1.1 m2\n", "area", "oat-11:", "module 'oat-11'"),
    _missing(CATALOG_FILE, "    price: 940\n", "price", "oat-11:", "module 'oat-11'"),
    Broken(
        "catalog-without-max_count",
        CATALOG_FILE,
        "    hold_up: 3.2 L\n    max_count: 40\n",
        "    hold_up: 3.2 L\n",
        "oat-11:",
        ("module 'oat-11'", "'max_count' is missing"),
    ),
    Broken(
        "catalog-without-modules",
        CATALOG_FILE,
        None,
        "currency: EUR\n",
        "currency",
        ("'modules' is missing", "medium, area, price, max_count"),
    ),
    _missing(CATALOG_FILE, "    modules: [oat-11, rye-05]\n", "modules", "rack-10:", "holder 'rack-10'"),
    _missing(CATALOG_FILE, "    slots: 10\n", "slots", "rack-10:", "holder 'rack-10'"),
    _missing(CATALOG_FILE, "    price: 4200\n", "price", "rack-10:", "holder 'rack-10'"),
    _missing(CASE_FILE, "scenario: 500 L through oat and rye\n", "scenario", "batch:"),
    Broken(
        "case-without-batch",
        CASE_FILE,
        CASE[CASE.index("batch:") : CASE.index("objective:")],
        "",
        "scenario:",
        ("'batch' is missing", "volume, time"),
    ),
    _missing(CASE_FILE, "  volume: 500 L\n", "volume", "batch:", "'2000 L'"),
    _missing(CASE_FILE, "  time: 6 h\n", "time", "batch:", "'6 h'"),
    Broken(
        "case-without-blocks",
        CASE_FILE,
        CASE[CASE.index("blocks:") : CASE.index("costs:")],
        "",
        "scenario:",
        ("'blocks' is missing", "block, pressure, stages"),
    ),
    Broken(
        "case-block-without-name",
        CASE_FILE,
        "  - block: clarification\n    pressure",
        "  - pressure",
        "- pressure",
        ("block 1", "'block' is missing"),
    ),
    _missing(CASE_FILE, "    pressure: 2 bar\n", "pressure", "- block:", "block 'clarification'"),
    Broken(
        "case-stage-without-name",
        CASE_FILE,
        "stage: polish\n        optional",
        "optional",
        "- optional",
        ("stage 2", "'stage' is missing"),
    ),
    Broken(
        "case-stage-without-media",
        CASE_FILE,
        "        media: [oat]\n",
        "",
        "stage: primary",
        ("stage 'primary'", "'media' is missing"),
    ),
    _missing(CASE_FILE, "    titer: 3 g/L\n", "titer", "product:"),
    _missing(CASE_FILE, "    value: 40\n", "value", "product:"),
    Broken(
        "case-without-feed-fouling",
        CASE_FILE,
        "feed_variability:\n  fouling: 0.15",
        "feed_variability: {}",
        "feed_variability",
        ("'fouling' is missing",),
    ),
    Broken(
        "case-installed-without-count",
        CASE_FILE,
        "{module: oat-11, count: 6}",
        "{module: oat-11}",
        "{module: oat-11}",
        ("installed stage 'primary'", "'count' is missing"),
    ),
]

WRONG_UNIT = [
    _value(OAT_FILE, "R0: 0.0008 bar/LMH", "R0: 0.0008 bar", "R0", "'bar' is not a unit of resistance"),
    _value(OAT_FILE, "k: 0.012 m2/L", "k: 0.012", "k", "0.012 has no unit", "m2/L"),
    _value(OAT_FILE, "loading: 160 L/m2", "loading: 160", "160 has no unit", "150 L/m2"),
    _value(OAT_FILE, "flux: 180 LMH", "flux: 180 L/h", "'L/h' is not a unit of flux"),
    _value(OAT_FILE, "temperature: 21 degC", "temperature: 21 C", "unknown unit 'C'", "degC"),
    _value(
        OAT_FILE,
        "differential_pressure: 2 bar",
        "differential_pressure: 2 bra",
        "unknown unit 'bra'",
        "did you mean 'bar'",
    ),
    _value(OAT_FILE, "inlet_pressure: 3.4 bar", "inlet_pressure: 49 psia", "absolute", "psi"),
    _value(OAT_FILE, "turbidity: 8\n", "turbidity: 8 bar\n", "'bar' is not a unit of turbidity"),
    _value(RYE_FILE, "hold_up: 12 mL", "hold_up: 12 ML", "run 1: hold_up", "unknown unit 'ML'"),
    _value(RYE_FILE, "density: 1.01 kg/L", "density: 1.01", "1.01 has no unit", "kg/L"),
    _value(RYE_FILE, "feed_loading: 120 L/m2", "feed_loading: 120 L", "'L' is not a unit of loading"),
    _value(RYE_FILE, "tare: 5 mL", "tare: 5 bar", "tare", "a mass or a volume"),
    _value(CATALOG_FILE, "area: 1.1 m2", "area: 1.1", "module 'oat-11': area", "1.1 has no unit"),
    _value(CATALOG_FILE, "hold_up: 3.2 L", "hold_up: 3,2 L", "comma"),
    _value(CASE_FILE, "volume: 500 L", "volume: 500", "batch.volume", "500 has no unit", "'2000 L'"),
    _value(CASE_FILE, "time: 6 h", "time: 6:00", "'6:00'", "'6 h'"),
    _value(CASE_FILE, "temperature: 18 degC", "temperature: 18 bar", "not a unit of temperature"),
    _value(CASE_FILE, "pressure: 2 bar", "pressure: 2", "block 'clarification': pressure", "2 has no unit"),
    _value(CASE_FILE, "line: 0.00002 bar/(L/h)", "line: 0.00002 bar", "not a unit of pressure per flow"),
    _value(CASE_FILE, "titer: 3 g/L", "titer: 3", "costs.product.titer", "3 has no unit"),
]

WRONG_VALUE = [
    _value(OAT_FILE, "law: intermediate", "law: intermediat", "did you mean 'intermediate'"),
    _value(
        OAT_FILE,
        "law: intermediate",
        "law: cubic",
        "coefficients",
        name="oat-parameters-of-a-polynomial",
        mark="parameters:",
    ),
    _value(OAT_FILE, "law: intermediate", "law: auto", "auto needs runs", name="oat-auto-without-runs"),
    Broken(
        "oat-parameter-of-another-law",
        OAT_FILE,
        "law: intermediate",
        "law: hermia",
        "parameters:",
        ("'n' is missing; law 'hermia'",),
    ),
    _value(OAT_FILE, "k: 0.012 m2/L", "k: -0.012 m2/L", "outside its range", "at least 0"),
    _value(OAT_FILE, "R0: 0.0008 bar/LMH", "R0: 0 bar/LMH", "outside its range", "above 0"),
    _value(OAT_FILE, "loading: 150 L/m2", "loading: 0 L/m2", "limits.loading", "above 0"),
    _value(OAT_FILE, "turbidity: 8\n", "turbidity: -8\n", "outside its range"),
    _value(OAT_FILE, "turbidity: 8\n", "turbidity: .nan\n", "not a finite number"),
    _value(OAT_FILE, "scale_up: 1.0", "scale_up: 0", "scale_up", "above 0"),
    _value(OAT_FILE, "scale_up: 1.0", "scale_up: one", "'one' is not a bare number"),
    _value(OAT_FILE, "flux: 600 LMH", "flux: nan LMH", "'nan LMH' is not a number"),
    _value(OAT_FILE, "volume: 100 L/m2", "volume: 1e999 L/m2", "not a finite number"),
    _value(OAT_FILE, "resistance: 0.1", "resistance: -0.1", "variability.resistance", "at least 0"),
    _value(OAT_FILE, "temperature: 21 degC", "temperature: 294 degC", "outside its range", "at most 100 degC"),
    _value(OAT_FILE, "{resistance: 1.0, fouling: 1.0}", "{resistance: 1.0, fouling: 0}", "lot 'a': fouling", "above 0"),
    _value(RYE_FILE, "area: 23 cm2\n      pressure", "area: -23 cm2\n      pressure", "run 1: area", "above 0"),
    _value(RYE_FILE, "hold_up: 12 mL", "hold_up: -1 mL", "at least 0 L"),
    _value(RYE_FILE, "density: 1.01 kg/L", "density: 1.01 g/L", "outside its range", "0.5 kg/L"),
    _value(RYE_FILE, "lot: a", "lot: a b", "'a b' is not a name"),
    _value(RYE_FILE, "keep: false", "keep: maybe", "neither true nor false"),
    _value(RYE_FILE, "time: t [min]", "time: ''", "time", "not text"),
    _value(RYE_FILE, "volume: V [mL]", "volum: V [mL]", "unknown column 'volum'", "did you mean 'volume'"),
    Broken(
        "rye-operation",
        RYE_FILE,
        "operation: constant-flow\n      area: 23 cm2\n      pressure",
        "operation: constant-flux\n      area: 23 cm2\n      pressure",
        "constant-flux",
        ("run 1: operation", "did you mean 'constant-flow'"),
    ),
    _value(RYE_FILE, "../bench/rye-b.csv", "../bench/rye-c.csv", "run 2: file", "no such file"),
    Broken(
        "rye-run-twice",
        RYE_FILE,
        "../bench/rye-b.csv\n      lot: b",
        "../bench/rye-a.csv # again\n      lot: bb",
        "again",
        ("run 1's file too",),
    ),
    _value(CATALOG_FILE, "price: 940", "price: 940 EUR", "'940 EUR' is not a bare number"),
    _value(CATALOG_FILE, "price: 940", "price: -1", "at least 0"),
    Broken(
        "catalog-max_count-zero",
        CATALOG_FILE,
        "hold_up: 3.2 L\n    max_count: 40",
        "hold_up: 3.2 L\n    max_count: 0",
        "max_count: 0",
        ("module 'oat-11': max_count", "at least 1"),
    ),
    Broken(
        "catalog-max_count-half",
        CATALOG_FILE,
        "hold_up: 3.2 L\n    max_count: 40",
        "hold_up: 3.2 L\n    max_count: 4.5",
        "max_count: 4.5",
        ("a whole number",),
    ),
    _value(CATALOG_FILE, "slots: 10", "slots: ten", "holder 'rack-10': slots", "a whole number"),
    _value(CATALOG_FILE, "batches: 200", "batches: 0", "at least 1"),
    _value(CATALOG_FILE, "owned: 1", "owned: -1", "at least 0"),
    _value(CATALOG_FILE, "modules: [oat-11, rye-05]", "modules: oat-11", "a list"),
    _value(CATALOG_FILE, "modules: [oat-11, rye-05]", "modules: []", "is empty"),
    _value(CASE_FILE, "volume: 500 L", "volume: -500 L", "batch.volume", "above 0 L"),
    _value(CASE_FILE, "time: 6 h", "time: 0 h", "above 0 h"),
    _value(CASE_FILE, "objective: area", "objective: price", "unknown 'price'", "area, cost"),
    _value(CASE_FILE, "safety_factor: 1.5", "safety_factor: 0.9", "at least 1"),
    _value(CASE_FILE, "safety_factor: 1.5", "safety_factor: '1.5'", "not a bare number"),
    _value(CASE_FILE, "safety_factor: 1.5", "safety_factor: true", "not a bare number"),
    _value(CASE_FILE, "basis: worst-lot", "basis: worst", "did you mean 'worst-lot'"),
    _value(CASE_FILE, "basis: worst-lot", "basis: {reliability: 1.0}", "basis.reliability", "below 1"),
    _value(CASE_FILE, "basis: worst-lot", "basis: {samples: 400}", "'reliability' is missing"),
    _value(CASE_FILE, "basis: worst-lot", "basis: 0.95", "basis", "reliability"),
    _value(CASE_FILE, "schedule: sequential", "schedule: parallel", "sequential, side-by-side"),
    _value(CASE_FILE, "operation: constant-flow", "operation: no", "unknown 'no'"),
    _value(CASE_FILE, "setup: 30 min", "setup: -30 min", "at least 0 h"),
    _value(CASE_FILE, "static: 0.05 bar", "static: 2 bar", "leaves no pressure", "less than 2 bar"),
    _value(CASE_FILE, "min_flow: 50 L/h", "min_flow: 5000 L/h", "above max_flow", "1200 L/h"),
    _value(CASE_FILE, "max_flow: 1200 L/h", "max_flow: 0 L/h", "above 0 L/h"),
    _value(CASE_FILE, "count: [1, 30]", "count: [30, 1]", "holds no count"),
    _value(CASE_FILE, "count: [1, 30]", "count: 12", "12 is not a range", "[8, 16]"),
    _value(CASE_FILE, "count: [1, 30]", "fix: {}", "fix says nothing"),
    _value(CASE_FILE, "optional: false", "optional: 0", "neither true nor false"),
    _value(CASE_FILE, "media: [oat]", "media: []", "is empty", "at least one medium", follows=True),
    _value(CASE_FILE, "media: [oat]", "media: oat", "a list"),
    _value(CASE_FILE, "media: [oat]", "media: [oat, oat]", "'oat' stands twice"),
    _value(CASE_FILE, "media: [oat]", "media:", "nothing does not fit", "a list"),
    _value(CASE_FILE, "recovered: 0.8", "recovered: 80", "at most 1"),
    _value(CASE_FILE, "fouling: 0.15", "fouling: 15 %", "feed_variability.fouling", "not a bare number"),
    _value(CASE_FILE, "hour: 180", "hour: [180]", "a list is not a bare number"),
    _value(CASE_FILE, "scenario: 500 L through oat and rye", "scenario: ''", "not text"),
]

UNKNOWN = [
    _value(OAT_FILE, "scale_up: 1.0", "scaleup: 1.0", "unknown key 'scaleup'", "did you mean 'scale_up'"),
    _value(
        OAT_FILE,
        "inlet_pressure: 3.4 bar",
        "outlet_pressure: 3.4 bar",
        "limits: unknown key",
        "did you mean 'inlet_pressure'",
    ),
    _value(OAT_FILE, "    k: 0.012 m2/L", "    K: 0.012 m2/L", "has no parameter 'K'"),
    _value(RYE_FILE, "hold_up: 12 mL", "holdup: 12 mL", "run 1: unknown key 'holdup'", "did you mean 'hold_up'"),
    _value(CATALOG_FILE, "slots: 10", "slot: 10", "holder 'rack-10': unknown key 'slot'", "did you mean 'slots'"),
    _value(CATALOG_FILE, "currency: EUR", "currencies: EUR", "did you mean 'currency'"),
    _value(
        CASE_FILE,
        "setup: 30 min",
        "set_up: 30 min",
        "block 'clarification': unknown key 'set_up'",
        "did you mean 'setup'",
    ),
    _value(CASE_FILE, "objective: area", "aim: area", "unknown key 'aim'", "expected one of"),
    _value(CASE_FILE, "max_flow: 1200 L/h", "maxflow: 1200 L/h", "did you mean 'max_flow'"),
    _value(CASE_FILE, "hour: 180", "hours: 180", "costs: unknown key 'hours'", "did you mean 'hour'"),
]

BETWEEN = [
    _value(OAT_FILE, "medium: oat", "medium: oats", "'oats' is not the file's name", "'oat'"),
    _value(
        CATALOG_FILE,
        "medium: oat",
        "medium: oatt",
        "module 'oat-11'",
        "unknown medium 'oatt'",
        "did you mean 'oat'",
        follows=True,
    ),
    _value(
        CATALOG_FILE,
        "modules: [oat-11, rye-05]",
        "modules: [oat-11, rye-50]",
        "unknown module 'rye-50'",
        "did you mean 'rye-05'",
    ),
    _value(
        CASE_FILE,
        "media: [oat]",
        "media: [oad]",
        "stage 'primary'",
        "unknown medium 'oad'",
        "did you mean 'oat'",
        follows=True,
    ),
    _value(CASE_FILE, "after: [oat]", "after: [rye]", "stage 'polish'", "no stage upstream can use 'rye'", "oat"),
    _value(CASE_FILE, "after: [oat]", "after: [barley]", "unknown medium 'barley'"),
    _value(CASE_FILE, "after: [oat]", "after: []", "is empty"),
    Broken(
        "case-after-in-first-stage",
        CASE_FILE,
        "media: [oat]",
        "media: [{medium: oat, after: [rye]}]",
        "after: [rye]",
        ("no stage upstream can use 'rye'",),
    ),
    Broken(
        "case-stage-twice",
        CASE_FILE,
        "stage: polish\n        optional: false",
        "optional: false\n        stage: primary",
        "        stage: primary",
        ("'primary' stands twice",),
        follows=True,
    ),
    Broken(
        "case-block-twice",
        CASE_FILE,
        "costs:",
        "  - block: clarification\n    pressure: 1 bar # second\n    stages: [{stage: third, media: [oat]}]\ncosts:",
        None,
        ("'clarification' stands twice",),
        follows=True,
    ),
    Broken(
        "case-medium-without-module",
        CATALOG_FILE,
        "medium: rye",
        "medium: oat",
        "medium: rye",
        ("stage 'polish'", "no module of the catalog is built from 'rye'"),
        CASE_FILE,
        follows=True,
    ),
    Broken(
        "case-rating-differential",
        CASE_FILE,
        "pressure: 2 bar\n    operation: constant-flow",
        "pressure: 2.6 bar\n    operation: constant-pressure",
        "media: [oat]",
        ("rated for 2 bar", "2.55 bar"),
    ),
    Broken(
        "case-rating-inlet",
        OAT_FILE,
        "inlet_pressure: 3.4 bar",
        "inlet_pressure: 1.9 bar",
        None,
        ("rated for 1.9 bar at its inlet",),
        CASE_FILE,
    ),
    _value(
        CASE_FILE,
        "count: [1, 30]",
        "fix: {module: oat-12, count: 4}",
        "unknown module 'oat-12'",
        "did you mean 'oat-11'",
    ),
    _value(CASE_FILE, "count: [1, 30]", "fix: {module: rye-05}", "is of medium 'rye'", "oat"),
    _value(
        CASE_FILE, "primary: {module: oat-11, count: 6}", "primary: {module: oat-1, count: 6}", "unknown module 'oat-1'"
    ),
    _value(
        CASE_FILE,
        "primary: {module: oat-11, count: 6}",
        "first: {module: oat-11, count: 6}",
        "unknown stage 'first'",
        follows=True,
    ),
    Broken(
        "case-installed-half",
        CASE_FILE,
        "  polish: {module: rye-05, count: 14}\n",
        "",
        "installed:",
        ("'polish' is missing",),
    ),
    Broken(
        "oat-two-curves",
        OAT_FILE,
        "  law: intermediate",
        "  law: intermediate\n  coefficients: [1 bar/LMH, 0 bar/LMH/(L/m2), 0 bar/LMH/(L/m2)^2]",
        "coefficients:",
        ("stands beside parameters",),
    ),
    Broken(
        "rye-lots-beside-runs",
        RYE_FILE,
        "  law: cake",
        "  law: cake\n  lots: {a: {resistance: 1.0}}",
        "lots:",
        ("none beside runs",),
    ),
]

YAML = [
    Broken(
        "case-duplicate-key",
        CASE_FILE,
        "  time: 6 h\n",
        "  time: 6 h\n  time: 7 h\n",
        "time: 7 h",
        ("key 'time' stands here again", "line 4"),
    ),
    Broken(
        "catalog-duplicate-module",
        CATALOG_FILE,
        "  rye-05:\n",
        "  oat-11:\n",
        None,
        ("key 'oat-11' stands here again",),
        follows=True,
    ),
    Broken("case-tab", CASE_FILE, "  time: 6 h\n", "\ttime: 6 h\n", "\ttime", ("a tab", "spaces")),
    Broken("oat-empty", OAT_FILE, None, "", None, ("is empty",)),
    Broken("oat-only-comments", OAT_FILE, None, "# nothing\n", None, ("is empty",)),
    Broken("case-a-list", CASE_FILE, None, "- scenario: x\n", "- scenario", ("not a mapping",)),
    Broken("case-only-text", CASE_FILE, None, "just text\n", "just", ("not a mapping",)),
    Broken(
        "catalog-unclosed",
        CATALOG_FILE,
        "modules: [oat-11, rye-05]",
        "modules: [oat-11, rye-05",
        None,
        ("cannot be read as YAML",),
    ),
    Broken("case-unclosed-quote", CASE_FILE, "objective: area", 'objective: "area', None, ("closing quote",)),
    Broken("case-colon-in-text", CASE_FILE, "500 L through oat and rye", "500 L: oat", "500 L: oat", ("needs quotes",)),
    Broken("case-alias", CASE_FILE, "media: [oat]", "media: *oats", "*oats", ("alias '*oats' is not supported",)),
    Broken(
        "case-tag",
        CASE_FILE,
        "objective: area",
        "objective: !!python/name:os.system area",
        "!!python",
        ("tag", "not supported"),
    ),
    Broken("case-two-documents", CASE_FILE, "objective: area", "---\nobjective: area", "---", ("second document",)),
    Broken(
        "case-key-is-a-list", CASE_FILE, "objective: area", "[objective]: area", "[objective]", ("where a key belongs",)
    ),
    Broken("case-deep", CASE_FILE, "objective: area", f"objective: {'[' * 200}{']' * 200}", "[[[", ("levels deep",)),
    Broken("case-bell", CASE_FILE, "objective: area", "objective: \a", "\a", ("a character",)),
]

BROKEN = [*MISSING, *WRONG_UNIT, *WRONG_VALUE, *UNKNOWN, *BETWEEN, *YAML]
