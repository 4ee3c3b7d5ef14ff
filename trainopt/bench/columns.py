"""Which column of a bench table is what: time, volume or mass, pressures, turbidity.

A column's unit says its dimension, its name decides between columns of the same dimension. What could be
two things is an error that names the candidates; the run's `columns:` settles it.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass

from trainopt.bench.table import Table, is_clock
from trainopt.bench.units import HeaderUnit, split_header, unit_of
from trainopt.errors import Problem

DIMENSIONS: Mapping[str, str] = {
    "time": "time",
    "volume": "volume",
    "mass": "mass",
    "pressure": "pressure",
    "outlet_pressure": "pressure",
    "differential_pressure": "pressure",
    "turbidity": "turbidity",
    "feed_volume": "volume",
    "feed_mass": "mass",
}
"""The roles a column can have (keys of `columns:`) and the dimension each is read in."""

EXAMPLES = {
    "time": "time (min)",
    "volume": "volume (mL)",
    "mass": "mass (g)",
    "pressure": "pressure (psi)",
    "outlet_pressure": "outlet pressure (psi)",
    "differential_pressure": "differential pressure (psi)",
    "turbidity": "turbidity (NTU)",
    "feed_volume": "feed volume (mL)",
    "feed_mass": "feed mass (g)",
}


@dataclass(frozen=True)
class Column:
    """One column with its role: `index` in the table, `header` as written, `unit` (None: clock times).

    `clock` is the form of clock times that the header states ("" where it states none).
    """

    role: str
    index: int
    header: str
    unit: HeaderUnit | None
    clock: str = ""


@dataclass(frozen=True)
class _Header:
    index: int
    text: str
    name: str
    unit_text: str
    unit: HeaderUnit | None

    @property
    def words(self) -> set[str]:
        return set(re.findall(r"[a-zµδ]+\d*|\d+", self.name.casefold().replace("Δ".casefold(), "delta ")))


CLOCK_FORMS = {"hh:mm:ss", "h:mm:ss", "hh:mm", "h:mm", "mm:ss", "m:ss"}

_TIME_WORDS = {"time", "t", "elapsed", "clock", "duration", "timestamp", "datetime"}
_IGNORED = {
    "set",
    "setpoint",
    "target",
    "limit",
    "max",
    "min",
    "alarm",
    "sample",
    "sampled",
    "flush",
    "added",
}
_FEED = {"feed", "inlet", "in", "load", "loaded", "reservoir", "tank"}
_FILTRATE = {"filtrate", "permeate", "collected", "cumulative", "throughput", "out", "outlet", "total"}
_OUTLET = {"out", "outlet", "downstream", "filtrate", "permeate", "pout"}
_INLET = {"in", "inlet", "upstream", "feed", "pin"}
_DIFFERENCE = {"dp", "delta", "differential", "difference", "drop", "deltap", "diff"}
_POOLED = {"pool", "pooled"}
_TURBIDITY_WORDS = {"turbidity", "turb", "ntu", "fnu"}


@dataclass
class _Search:
    """Columns found so far, what is wrong with them, and what was taken for granted."""

    table: Table
    left: list[_Header]
    given: set[str]
    found: dict[str, Column]
    problems: list[Problem]
    misnamed: list[tuple[str, str]]
    assumed: list[str]

    def wrong(self, text: str) -> None:
        self.problems.append(self.table.problem(self.table.header_line, text))

    def misnames(self, role: str, text: str) -> None:
        self.misnamed.append((role, text))

    def take(self, role: str, candidates: list[_Header]) -> None:
        """Give the role to its only candidate; several are a problem, none is none."""
        if len({header.text for header in candidates}) < len(candidates):
            self.wrong(f"several columns are headed '{candidates[0].text}'; expected headers that differ")
        elif len(candidates) > 1:
            names = " and ".join(f"'{header.text}'" for header in candidates)
            example = f'columns: {{{role}: "{candidates[0].text}"}}'
            what = role.replace("_", " ")
            self.wrong(f"{names} could each be the {what}; expected the run to say which, as in {example}")
        elif candidates:
            column = self.checked(role, candidates[0], candidates[0].unit)
            if isinstance(column, Column):
                self.found[role] = column
            else:
                self.wrong(column)

    def checked(self, role: str, header: _Header, unit: HeaderUnit | None) -> Column | str:
        """The column with its unit checked against its role, or what is wrong with it."""
        dimension, example = DIMENSIONS[role], EXAMPLES[role]
        if unit is None and role == "turbidity" and not header.unit_text:
            return Column(role, header.index, header.text, HeaderUnit("NTU", "turbidity", 1.0))
        clock = not header.unit_text or header.unit_text.casefold() in CLOCK_FORMS
        if unit is None and role == "time" and clock and _is_clock(self.table, header.index):
            return Column(role, header.index, header.text, None, header.unit_text.casefold())
        if unit is None:
            unknown = f"has the unit '{header.unit_text}', which is not known" if header.unit_text else "has no unit"
            return f"column '{header.text}' ({role}) {unknown}; expected for example '{example}'"
        if unit.dimension != dimension:
            what = f"column '{header.text}' is a {unit.dimension}, not a {dimension}"
            return f"{what}; expected for example '{example}'"
        return Column(role, header.index, header.text, unit)


@dataclass(frozen=True)
class Columns:
    """Columns by role; every problem with them; what was assumed; whether a pressure was there to be read.

    `misnamed`: entries of `columns:` that do not fit the table, as (role, what is wrong); they stand in the medium's
    file.
    """

    found: Mapping[str, Column]
    problems: tuple[Problem, ...]
    misnamed: tuple[tuple[str, str], ...]
    assumed: tuple[str, ...]
    pressure_seen: bool


def find_columns(table: Table, given: Mapping[str, str] | None) -> Columns:
    """Which column has which role, by `given` (role → header) where it says so, else by units and names."""
    headers = [_header(table, index) for index in range(len(table.header))]
    search = _Search(table, [], set(given or {}), {}, [], [], [])
    for role, text in (given or {}).items():
        _take_given(search, headers, role, text)
    taken = {column.index for column in search.found.values()}
    search.left = [header for header in headers if header.index not in taken and header.text]
    _find_time(search)
    _find_amount(search)
    _find_pressures(search)
    _find_turbidity(search)
    _find_feed(search)
    seen = any(DIMENSIONS.get(role) == "pressure" for role in (*search.found, *search.given))
    seen = seen or any(_is_pressure(header) for header in search.left)
    return Columns(search.found, tuple(search.problems), tuple(search.misnamed), tuple(search.assumed), seen)


def _header(table: Table, index: int) -> _Header:
    text = table.header[index]
    name, unit_text = split_header(text)
    if not unit_text and table.units[index]:
        unit_text = table.units[index].strip("[]()")
    return _Header(index, text, name, unit_text, unit_of(unit_text) if unit_text else None)


def _take_given(search: _Search, headers: list[_Header], role: str, text: str) -> None:
    """The column that the run names for a role: its header, perhaps with the unit it lacks, or none at all."""
    if role not in DIMENSIONS:
        search.misnames(role, f"'{role}' is not what a column can be; expected one of {', '.join(DIMENSIONS)}")
        return
    if text.strip().casefold() == "none":
        return
    matches = [header for header in headers if header.text == text.strip()]
    unit_text = ""
    if not matches:
        name, unit_text = split_header(text.strip())
        matches = [header for header in headers if unit_text and header.name == name and not header.unit_text]
    if len(matches) != 1:
        have = ", ".join(f"'{header.text}'" for header in headers if header.text)
        what = "several columns are" if matches else "no column is"
        search.misnames(role, f"{what} headed '{text}' in {search.table.file}; expected one of {have}")
        return
    column = search.checked(role, matches[0], unit_of(unit_text) if unit_text else matches[0].unit)
    if isinstance(column, Column):
        search.found[role] = column
    else:
        search.misnames(role, f"in {search.table.file}, {column}")


def _is_clock(table: Table, index: int) -> bool:
    if table.numbers is not None:
        return index in table.clocks
    cells = [cell for cell in table.column(index) if cell]
    return bool(cells) and sum(is_clock(cell) for cell in cells) * 2 > len(cells)


def _find_time(search: _Search) -> None:
    if "time" in search.given:
        return
    by_unit = [h for h in search.left if h.unit is not None and h.unit.dimension == "time"]
    named = [h for h in search.left if h.words & _TIME_WORDS and (h.unit is None or h in by_unit)]
    candidates = [h for h in by_unit if h in named] or by_unit or named
    if not candidates:
        search.wrong(f"no time column found; expected for example '{EXAMPLES['time']}'")
    search.take("time", candidates)


_VOLUME_WORDS = {"volume", "vol", "v", "throughput"}
_MASS_WORDS = {"mass", "weight", "balance", "scale", "m"}


def _find_amount(search: _Search) -> None:
    """Volume, or mass where there is no volume."""
    if search.given & {"volume", "mass"}:
        return
    volumes = _amounts(search.left, "volume", _VOLUME_WORDS)
    masses = _amounts(search.left, "mass", _MASS_WORDS)
    if not volumes and not masses:
        search.wrong("no volume or mass column found; expected for example 'volume (mL)' or 'mass (g)'")
    if len(volumes) == 1 and masses:
        search.assumed.append(f"volume from column '{volumes[0].text}'; column '{masses[0].text}' not used")
    search.take("volume" if volumes else "mass", volumes or masses)


def _amounts(left: list[_Header], dimension: str, words: set[str]) -> list[_Header]:
    """Columns that can be the amount of filtrate: by unit, those called filtrate first; else by name."""
    by_unit = [h for h in left if h.unit is not None and h.unit.dimension == dimension and not h.words & _IGNORED]
    by_name = [h for h in left if h.unit is None and h.words & words and not h.words & (_IGNORED | _FEED)]
    filtrate = [h for h in by_unit if h.words & _FILTRATE]
    not_feed = [h for h in by_unit if not h.words & _FEED]
    return filtrate or not_feed or by_name


def _find_pressures(search: _Search) -> None:
    """Inlet and outlet, or the differential pressure itself."""
    if "differential_pressure" in search.given:
        return
    kinds: dict[str, list[_Header]] = {
        "differential_pressure": [],
        "outlet_pressure": [],
        "pressure": [],
        "": [],
    }
    for header in search.left:
        if _is_pressure(header):
            kinds[_pressure_kind(header)].append(header)
    inlets = kinds["pressure"] or kinds[""]
    difference = kinds["differential_pressure"]
    if difference and not search.given & {"pressure", "outlet_pressure"}:
        unused = ", ".join(f"'{header.text}'" for header in (*inlets, *kinds["outlet_pressure"]))
        if unused:
            search.assumed.append(f"differential pressure from column '{difference[0].text}'; {unused} not used")
        search.take("differential_pressure", difference)
        return
    if "pressure" not in search.given:
        search.take("pressure", inlets)
    if "outlet_pressure" not in search.given:
        downstream = _downstream(search, kinds[""])
        if downstream:
            names = " and ".join(f"'{header.text}'" for header in downstream)
            example = f'columns: {{outlet_pressure: "{downstream[0].text}"}}'
            search.wrong(
                f"{names} could each be the outlet pressure; expected the run to say, as in {example}, or none"
            )
        search.take("outlet_pressure", kinds["outlet_pressure"])


def _downstream(search: _Search, gauges: list[_Header]) -> list[_Header]:
    """Numbered gauges that stand after the one given as the pressure: in an inline run one of them is its outlet."""
    given = search.found.get("pressure")
    if given is None or "pressure" not in search.given:
        return []
    own = re.search(r"\d+", given.header)
    later = [(re.search(r"\d+", header.text), header) for header in gauges]
    return [header for number, header in later if own and number and int(number[0]) > int(own[0])]


def _is_pressure(header: _Header) -> bool:
    if header.unit is not None:
        return header.unit.dimension == "pressure" and not header.words & _IGNORED
    named = header.words & {"pressure", "p", "dp", "pin", "pout", *(f"p{n}" for n in range(1, 6))}
    return bool(named) and not header.words & _IGNORED


def _pressure_kind(header: _Header) -> str:
    words = header.words
    if words & _DIFFERENCE:
        return "differential_pressure"
    if words & _INLET:
        return "pressure"
    return "outlet_pressure" if words & _OUTLET else ""


def _find_turbidity(search: _Search) -> None:
    if "turbidity" in search.given:
        return
    candidates = [h for h in search.left if _is_turbidity(h)]
    search.take("turbidity", [h for h in candidates if h.words & _FILTRATE] or candidates)


def _find_feed(search: _Search) -> None:
    """Feed taken so far, for the mass balance; nothing is lost where it is not to be told."""
    for role in ("feed_volume", "feed_mass"):
        candidates = [
            h
            for h in search.left
            if h.unit is not None
            and h.unit.dimension == DIMENSIONS[role]
            and h.words & (_FEED | {"fed"})
            and not h.words & (_IGNORED | _FILTRATE)
        ]
        if role not in search.given and len(candidates) == 1:
            search.take(role, candidates)


def _is_turbidity(header: _Header) -> bool:
    if header.words & (_IGNORED | _FEED | _POOLED):
        return False
    if header.unit is not None:
        return header.unit.dimension == "turbidity"
    return bool(header.words & _TURBIDITY_WORDS)
