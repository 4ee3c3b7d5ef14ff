"""A small workspace that is sound, and what a way to break it is: one edit, where it must be found, in what words."""

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


def missing(file: str, line: str, key: str, mark: str, *words: str) -> Broken:
    """The line `line` left out; the problem stands at the part around it."""
    return Broken(
        f"{Path(file).stem}-{mark.strip('-: ')}-without-{key}", file, line, "", mark, (f"'{key}' is missing", *words)
    )


def value(file: str, old: str, new: str, *words: str, name: str = "", mark: str = "", follows: bool = False) -> Broken:
    """One value written wrong; the problem stands in its line."""
    label = name or f"{Path(file).stem}-{new.strip()}".replace(" ", "-").replace("/", "-")
    return Broken(label, file, old, new, mark or new.strip().splitlines()[0], words, follows=follows)
