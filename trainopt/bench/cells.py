"""Cells of a bench table to numbers in canonical units, each cell that is none named with its line."""

from __future__ import annotations

import datetime
from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from trainopt.bench.columns import Column
from trainopt.bench.flux import resolution
from trainopt.bench.run import Floats
from trainopt.bench.table import CLOCK, STAMP, Table, is_number
from trainopt.errors import Problem

_NOT_READ = {"", "-", "--", "n/a", "na", "nd"}
_DAY = 24.0
MOST_CLOCK_HOURS = 1e4
"""A clock shows fewer hours than this, a dated time more (they are counted from 2000)."""


def column_values(table: Table, column: Column, problems: list[Problem]) -> Floats:
    """A column in canonical units, NaN where a cell is empty; each cell that is no number is a problem."""
    if table.numbers is not None:
        numbers = table.numbers[:, column.index]
        return _since_first(numbers) if column.unit is None else np.asarray(numbers * column.unit.factor)
    cells = table.column(column.index)
    if column.unit is None:
        return _clock_times(table, column, cells, problems)
    out = np.full(len(cells), np.nan)
    turbidity = column.role == "turbidity"
    for index, cell in enumerate(cells):
        text = cell.lstrip("<>≤≥ ") if turbidity else cell
        if is_number(text):
            out[index] = float(text) * column.unit.factor
        elif cell.casefold() not in (_NOT_READ if turbidity else {""}):
            said = f"column '{column.header}': '{cell}' is not a number; expected a plain number"
            problems.append(table.problem(table.lines[index], said))
    out[np.isinf(out)] = np.nan
    return out


def _clock_times(table: Table, column: Column, cells: list[str], problems: list[Problem]) -> Floats:
    """Clock times as hours since the first reading; a clock that passes midnight goes on counting.

    Three parts are h:mm:ss. Two could be h:mm or mm:ss, so the header must say which.
    """
    out = np.full(len(cells), np.nan)
    two = [index for index, cell in enumerate(cells) if CLOCK.fullmatch(cell) and cell.count(":") == 1]
    if two and not column.clock:
        text = f"column '{column.header}': '{cells[two[0]]}' may be h:mm or mm:ss"
        expected = f"expected the header to say, as in '{column.header} (mm:ss)'"
        problems.append(table.problem(table.lines[two[0]], f"{text}; {expected}"))
        return out
    shortest = 1 if column.clock in {"mm:ss", "m:ss"} else 0
    for index, cell in enumerate(cells):
        if STAMP.fullmatch(cell):
            out[index] = _stamped(cell)
        elif CLOCK.fullmatch(cell):
            parts = [float(part) for part in cell.split(":")]
            shift = shortest if len(parts) == 2 else 0
            out[index] = sum(part / 60.0 ** (power + shift) for power, part in enumerate(parts))
        elif cell:
            text = f"column '{column.header}': '{cell}' is not a time; expected h:mm:ss or 2026-03-01 09:30:00"
            problems.append(table.problem(table.lines[index], text))
    return _since_first(out)


def _since_first(hours: Floats) -> Floats:
    """Hours since the first reading; hours of a day (not those of a dated time) go on counting past midnight."""
    out = hours.copy()
    read = np.flatnonzero(np.isfinite(out))
    if not len(read):
        return out
    if out[read[0]] < MOST_CLOCK_HOURS:
        out[read[1:]] += _DAY * np.cumsum(np.diff(out[read]) < -0.5 * _DAY)
    return np.asarray(out - out[read[0]])


def _stamped(cell: str) -> float:
    """Hours since an early day; a date that does not exist is no number."""
    try:
        return (datetime.datetime.fromisoformat(cell) - datetime.datetime(2000, 1, 1)).total_seconds() / 3600.0
    except ValueError:
        return float("nan")


def column_step(values: Floats) -> float:
    """Resolution of a column in its own canonical unit; a long column is sampled.

    Values one and the same step apart (read at every 50 mL) show a schedule, not a resolution: 0.
    """
    apart = np.diff(values)
    if len(apart) and np.ptp(apart) <= 1e-6 * np.max(np.abs(apart)):
        return 0.0
    return resolution(values[:: max(len(values) // 2000, 1)])


def complete_rows(
    table: Table, columns: Mapping[str, Column], values: Mapping[str, Floats], problems: list[Problem]
) -> NDArray[np.bool_]:
    """Rows that hold every reading but turbidity and feed; a row without its time is a problem."""
    keep = np.ones(len(table.lines), dtype=bool)
    for role, column in values.items():
        if role not in {"turbidity", "feed_volume", "feed_mass"}:
            keep &= np.isfinite(column)
    bad = {problem.line for problem in problems}
    ambiguous = any("may be h:mm or mm:ss" in problem.text for problem in problems)
    for index in np.flatnonzero(np.isnan(values["time"])) if not ambiguous else ():
        line = table.lines[index]
        if line not in bad:
            problems.append(table.problem(line, f"column '{columns['time'].header}' is empty; expected a time"))
    return keep
