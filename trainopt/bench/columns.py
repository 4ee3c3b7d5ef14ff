"""Which column of a bench table is what: time, volume or mass, pressures, turbidity.

A column's unit says its dimension, its name decides between columns of the same dimension. What could be
two things is an error that names the candidates; the run's `columns:` settles it.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass

from trainopt.bench.table import CLOCK, Table
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
}


@dataclass(frozen=True)
class Column:
    """One column with its role: `index` in the table, `header` as written, `unit` (None: clock times)."""

    role: str
    index: int
    header: str
    unit: HeaderUnit | None


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


_TIME_WORDS = {"time", "t", "elapsed", "clock", "duration"}
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


def find_columns(
    table: Table, given: Mapping[str, str] | None
) -> tuple[dict[str, Column], list[Problem], list[str]]:
    """Columns by role, every problem with them, and what was assumed."""
    problems: list[Problem] = []
    assumed: list[str] = []
    headers = [_header(table, index) for index in range(len(table.header))]
    found: dict[str, Column] = {}
    for role, text in (given or {}).items():
        column = _given_column(table, headers, role, text, problems)
        if column is not None:
            found[role] = column
    taken = {column.index for column in found.values()}
    left = [header for header in headers if header.index not in taken and header.text]
    refused = set(given or {})
    _find_time(table, left, found, refused, problems)
    _find_amount(table, left, found, refused, problems, assumed)
    _find_pressures(table, left, found, refused, problems, assumed)
    _find_turbidity(table, left, found, refused, problems)
    return found, problems, assumed


def _header(table: Table, index: int) -> _Header:
    text = table.header[index]
    name, unit_text = split_header(text)
    if not unit_text and table.units[index]:
        unit_text = table.units[index].strip("[]()")
    return _Header(index, text, name, unit_text, unit_of(unit_text) if unit_text else None)


def _given_column(
    table: Table, headers: list[_Header], role: str, text: str, problems: list[Problem]
) -> Column | None:
    line = table.header_line
    if role not in DIMENSIONS:
        known = ", ".join(DIMENSIONS)
        problems.append(table.problem(line, f"`columns:` names the role '{role}'; expected one of {known}"))
        return None
    matches = [header for header in headers if header.text == text.strip()]
    unit_text = ""
    if not matches:
        name, unit_text = split_header(text.strip())
        matches = [header for header in headers if unit_text and header.name == name and not header.unit_text]
    if len(matches) != 1:
        have = ", ".join(f"'{header.text}'" for header in headers if header.text)
        what = "two columns are" if matches else "no column is"
        problems.append(
            table.problem(line, f"{what} headed '{text}' ({role} by `columns:`); expected one of {have}")
        )
        return None
    header = matches[0]
    unit = unit_of(unit_text) if unit_text else header.unit
    return _column(table, role, header, unit, problems)


def _column(
    table: Table, role: str, header: _Header, unit: HeaderUnit | None, problems: list[Problem]
) -> Column | None:
    """The column with its unit checked against its role."""
    dimension, example = DIMENSIONS[role], EXAMPLES[role]
    if unit is None and role == "turbidity" and not header.unit_text:
        return Column(role, header.index, header.text, HeaderUnit("NTU", "turbidity", 1.0))
    if unit is None and role == "time" and _is_clock(table, header.index):
        return Column(role, header.index, header.text, None)
    if unit is None:
        said = f"has the unit '{header.unit_text}', which is not known" if header.unit_text else "has no unit"
        text = f"column '{header.text}' ({role}) {said}; expected for example '{example}'"
        problems.append(table.problem(table.header_line, text))
        return None
    if unit.dimension != dimension:
        text = f"column '{header.text}' is a {unit.dimension}; expected '{example}'"
        problems.append(table.problem(table.header_line, text))
        return None
    return Column(role, header.index, header.text, unit)


def _is_clock(table: Table, index: int) -> bool:
    cells = [cell for cell in table.column(index) if cell]
    return bool(cells) and sum(CLOCK.fullmatch(cell) is not None for cell in cells) * 2 > len(cells)


def _ambiguous(table: Table, role: str, headers: list[_Header], problems: list[Problem]) -> None:
    names = " and ".join(f"'{header.text}'" for header in headers)
    example = f'columns: {{{role}: "{headers[0].text}"}}'
    text = (
        f"{names} could each be the {role.replace('_', ' ')}; expected the run to say which, as in {example}"
    )
    problems.append(table.problem(table.header_line, text))


def _missing(table: Table, role: str, problems: list[Problem]) -> None:
    text = f"no {role.replace('_', ' ')} column found; expected for example '{EXAMPLES[role]}'"
    problems.append(table.problem(table.header_line, text))


def _find_time(
    table: Table, left: list[_Header], found: dict[str, Column], refused: set[str], problems: list[Problem]
) -> None:
    if "time" in refused:
        return
    named = [h for h in left if h.words & _TIME_WORDS and (h.unit is None or h.unit.dimension == "time")]
    by_unit = [h for h in left if h.unit is not None and h.unit.dimension == "time"]
    candidates = [h for h in by_unit if h in named] or by_unit or named
    if len(candidates) > 1:
        _ambiguous(table, "time", candidates, problems)
    elif not candidates:
        _missing(table, "time", problems)
    else:
        column = _column(table, "time", candidates[0], candidates[0].unit, problems)
        if column is not None:
            found["time"] = column


_VOLUME_WORDS = {"volume", "vol", "v", "throughput"}
_MASS_WORDS = {"mass", "weight", "balance", "scale", "m"}


def _find_amount(
    table: Table,
    left: list[_Header],
    found: dict[str, Column],
    refused: set[str],
    problems: list[Problem],
    assumed: list[str],
) -> None:
    """Volume, or mass where there is no volume."""
    if refused & {"volume", "mass"}:
        return
    volumes = _amounts(left, "volume", _VOLUME_WORDS)
    masses = _amounts(left, "mass", _MASS_WORDS)
    role, candidates = ("volume", volumes) if volumes else ("mass", masses)
    if not candidates:
        text = "no volume or mass column found; expected for example 'volume (mL)' or 'mass (g)'"
        problems.append(table.problem(table.header_line, text))
        return
    if len(candidates) > 1:
        _ambiguous(table, role, candidates, problems)
        return
    if volumes and masses:
        assumed.append(f"volume from column '{volumes[0].text}'; column '{masses[0].text}' not used")
    column = _column(table, role, candidates[0], candidates[0].unit, problems)
    if column is not None:
        found[role] = column


def _amounts(left: list[_Header], dimension: str, words: set[str]) -> list[_Header]:
    """Columns that can be the amount of filtrate: by unit, those called filtrate first; else by name."""
    by_unit = [
        h for h in left if h.unit is not None and h.unit.dimension == dimension and not h.words & _IGNORED
    ]
    by_name = [h for h in left if h.unit is None and h.words & words and not h.words & (_IGNORED | _FEED)]
    filtrate = [h for h in by_unit if h.words & _FILTRATE]
    not_feed = [h for h in by_unit if not h.words & _FEED]
    return filtrate or not_feed or by_name


_PRESSURES = ("pressure", "outlet_pressure", "differential_pressure")


def _find_pressures(
    table: Table,
    left: list[_Header],
    found: dict[str, Column],
    refused: set[str],
    problems: list[Problem],
    assumed: list[str],
) -> None:
    """Inlet and outlet, or the differential pressure itself."""
    headers = [h for h in left if _is_pressure(h)]
    kinds: dict[str, list[_Header]] = {
        "differential_pressure": [],
        "outlet_pressure": [],
        "pressure": [],
        "plain": [],
    }
    for header in headers:
        kinds[_pressure_kind(header)].append(header)
    if kinds["plain"] and not kinds["pressure"] and "pressure" not in refused:
        kinds["pressure"] = kinds["plain"]
    difference = kinds["differential_pressure"]
    if (
        "differential_pressure" not in refused
        and not refused & {"pressure", "outlet_pressure"}
        and difference
    ):
        inlets = [*kinds["pressure"], *kinds["outlet_pressure"]]
        if inlets:
            names = ", ".join(f"'{header.text}'" for header in inlets)
            assumed.append(f"differential pressure from column '{difference[0].text}'; {names} not used")
        roles = ["differential_pressure"]
    else:
        roles = [
            role for role in ("pressure", "outlet_pressure") if role not in refused and role not in found
        ]
        if "differential_pressure" in refused:
            roles = []
    for role in roles:
        candidates = kinds[role]
        if len(candidates) > 1:
            _ambiguous(table, role, candidates, problems)
        elif candidates:
            column = _column(table, role, candidates[0], candidates[0].unit, problems)
            if column is not None:
                found[role] = column


def _is_pressure(header: _Header) -> bool:
    if header.unit is not None:
        return header.unit.dimension == "pressure" and not header.words & _IGNORED
    named = header.words & ({"pressure", "p", "dp", "pin", "pout"} | {f"p{n}" for n in range(1, 6)})
    return bool(named) and not header.words & _IGNORED


def _pressure_kind(header: _Header) -> str:
    words = header.words
    if words & _DIFFERENCE:
        return "differential_pressure"
    if words & _INLET:
        return "pressure"
    return "outlet_pressure" if words & _OUTLET else "plain"


def _find_turbidity(
    table: Table, left: list[_Header], found: dict[str, Column], refused: set[str], problems: list[Problem]
) -> None:
    if "turbidity" in refused:
        return
    candidates = [
        h
        for h in left
        if (h.unit.dimension == "turbidity" if h.unit is not None else bool(h.words & _TURBIDITY_WORDS))
        and not h.words & (_IGNORED | _FEED | _POOLED)
    ]
    candidates = [h for h in candidates if h.words & _FILTRATE] or candidates
    if len(candidates) > 1:
        _ambiguous(table, "turbidity", candidates, problems)
    elif candidates:
        column = _column(table, "turbidity", candidates[0], candidates[0].unit, problems)
        if column is not None:
            found["turbidity"] = column
