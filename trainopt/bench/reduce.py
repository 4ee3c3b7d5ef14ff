"""From a bench file to resistance and turbidity against loading."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from trainopt.bench.columns import Column, Columns, find_columns
from trainopt.bench.flux import local_flow, resolution
from trainopt.bench.quality import quality_flags
from trainopt.bench.run import Flag, Floats, ReducedRun
from trainopt.bench.table import CLOCK, Table, is_number, read_table
from trainopt.errors import InputError, Problem

if TYPE_CHECKING:
    from trainopt.files import Run

Where = Callable[[tuple[str, ...], str], Problem]
"""Makes a problem at a field of the run as the medium file gives it: (field names, text) → problem."""

FEWEST_READINGS = 5
MOST_PROBLEMS = 100
_NOT_READ = {"", "-", "--", "n/a", "na", "nd"}
_DAY = 24.0


def reduce_run(run: Run, medium: str, where: Where) -> ReducedRun:
    """Read and reduce one bench run of `medium`; raises `InputError` with every problem found in it.

    Differential pressure is inlet minus outlet gauge (the inlet's alone where there is no outlet), loading
    the filtrate volume less the hold-up over the area, flux the local slope of volume in time, resistance
    their ratio.
    """
    table = read_table(run.file, getattr(run, "sheet", None))
    found = find_columns(table, run.columns)
    problems = [*found.problems, *_missing_settings(run, medium, found, where)]
    if problems:
        raise InputError(problems)
    columns = found.found
    values = {role: _numbers(table, column, problems) for role, column in columns.items()}
    keep = _complete(table, columns, values, problems)
    if problems:
        raise InputError(_capped(problems))
    lines = np.array(table.lines)[keep]
    values = {role: column[keep] for role, column in values.items()}
    problems.extend(_order_problems(table, columns, values, lines))
    if not problems and len(lines) < FEWEST_READINGS:
        text = f"holds {len(lines)} complete readings; expected at least {FEWEST_READINGS}"
        problems.append(table.problem(table.header_line, text))
    if problems:
        raise InputError(_capped(problems))
    left_out = [line for line, kept in zip(table.lines, keep, strict=True) if not kept]
    steps = {role: _step(values[role], column) for role, column in columns.items()}
    return _reduced(run, table, values, steps, lines, found.assumed, left_out)


def _missing_settings(run: Run, medium: str, found: Columns, where: Where) -> list[Problem]:
    """What the table cannot say and the run must."""
    out = []
    columns = found.found
    if "mass" in columns and "volume" not in columns and run.density is None:
        out.append(where((), f"run of '{medium}' records mass; expected `density:`, for example '1.01 kg/L'"))
    if not found.pressure_seen and not (run.operation == "constant-pressure" and run.pressure is not None):
        text = f"run of '{medium}': its file has no pressure column; expected one such as 'pressure (psi)'"
        if run.operation == "constant-pressure":
            text += ", or `pressure:` for a run at constant pressure"
        out.append(where(("file",), text))
    inlet, outlet = columns.get("pressure"), columns.get("outlet_pressure")
    for column in (inlet, outlet, columns.get("differential_pressure")):
        if column is not None and column.unit is not None and column.unit.absolute:
            other = outlet if column is inlet else inlet
            if other is None or other.unit is None or not other.unit.absolute:
                text = f"run of '{medium}': column '{column.header}' is absolute; expected gauge pressure"
                out.append(where(("file",), text + ", or inlet and outlet both absolute"))
    return out


def _numbers(table: Table, column: Column, problems: list[Problem]) -> Floats:
    """A column in canonical units, NaN where a cell is empty; each cell that is no number is a problem."""
    cells = table.column(column.index)
    out = np.full(len(cells), np.nan)
    if column.unit is None:
        return _clock_times(table, column, cells, problems)
    for index, cell in enumerate(cells):
        text = cell.lstrip("<>≤≥ ") if column.role == "turbidity" else cell
        if is_number(text):
            out[index] = float(text) * column.unit.factor
        elif cell.casefold() not in (_NOT_READ if column.role == "turbidity" else {""}):
            text = f"column '{column.header}': '{cell}' is not a number"
            problems.append(table.problem(table.lines[index], text + "; expected a plain number"))
    out[np.isinf(out)] = np.nan
    return out


def _clock_times(table: Table, column: Column, cells: list[str], problems: list[Problem]) -> Floats:
    """`h:mm:ss` (or `h:mm`) as hours; a clock that passes midnight goes on counting."""
    out = np.full(len(cells), np.nan)
    for index, cell in enumerate(cells):
        if CLOCK.fullmatch(cell):
            parts = [float(part) for part in cell.split(":")]
            out[index] = sum(part / 60.0**power for power, part in enumerate(parts))
        elif cell:
            text = f"column '{column.header}': '{cell}' is not a time; expected h:mm:ss throughout"
            problems.append(table.problem(table.lines[index], text))
    finite = np.flatnonzero(np.isfinite(out))
    jumps = np.diff(out[finite]) < -0.5 * _DAY
    out[finite[1:]] += _DAY * np.cumsum(jumps)
    return out - out[finite[0]] if len(finite) else out


def _complete(
    table: Table, columns: Mapping[str, Column], values: dict[str, Floats], problems: list[Problem]
) -> NDArray[np.bool_]:
    """Rows that hold every reading but turbidity; a row without its time is a problem."""
    keep = np.ones(len(table.lines), dtype=bool)
    for role, column in values.items():
        if role != "turbidity":
            keep &= np.isfinite(column)
    bad = {problem.line for problem in problems}
    for index in np.flatnonzero(np.isnan(values["time"])):
        line = table.lines[index]
        if line not in bad:
            problems.append(
                table.problem(line, f"column '{columns['time'].header}' is empty; expected a time")
            )
    return keep


def _order_problems(
    table: Table, columns: Mapping[str, Column], values: dict[str, Floats], lines: NDArray[np.int64]
) -> list[Problem]:
    """Times must increase; the amount of filtrate must not shrink by more than a reading's noise."""
    out = []
    time = values["time"]
    for index in np.flatnonzero(np.diff(time) <= 0.0):
        how = "repeats" if time[index + 1] == time[index] else "goes back behind"
        text = f"time {how} that of line {lines[index]}; expected times that increase"
        out.append(table.problem(int(lines[index + 1]), text))
    role = "volume" if "volume" in values else "mass"
    amount = values[role]
    noise = 0.02 * max(float(np.ptp(amount)), 1e-12)
    for index in np.flatnonzero(np.diff(amount) < -noise):
        text = f"{role} falls below that of line {lines[index]}; expected a cumulative {role}"
        out.append(table.problem(int(lines[index + 1]), f"column '{columns[role].header}': {text}"))
    return out


def _capped(problems: list[Problem]) -> list[Problem]:
    if len(problems) <= MOST_PROBLEMS:
        return problems
    rest = Problem(problems[0].file, 0, f"{len(problems) - MOST_PROBLEMS} more problems like these follow")
    return [*problems[:MOST_PROBLEMS], rest]


def _reduced(
    run: Run,
    table: Table,
    values: dict[str, Floats],
    steps: dict[str, float],
    lines: NDArray[np.int64],
    assumed: tuple[str, ...],
    left_out: list[int],
) -> ReducedRun:
    name = run.file.name
    time = values["time"]
    if "volume" in values:
        volume, volume_step = values["volume"], steps["volume"]
    else:
        density = run.density or 1.0
        volume, volume_step = values["mass"] / density, steps["mass"] / density
    flux = local_flow(time, volume, volume_step) / run.area
    volume = volume - run.hold_up
    pressure = _differential(run, values, len(time))
    with np.errstate(divide="ignore", invalid="ignore"):
        resistance = pressure / flux
    excluded = _excluded(volume, pressure, flux)
    if run.operation == "constant-flow":
        excluded = _without_flow_steps(excluded, flux)
    flags = [Flag("assumed", name, None, text) for text in (*table.assumed, *assumed)]
    if left_out:
        text = f"{len(left_out)} row(s) without a volume or pressure left out"
        flags.append(Flag("no-reading", name, (min(left_out), max(left_out)), text))
    reduced = ReducedRun(
        name=name,
        lot=run.lot,
        operation=run.operation,
        area=run.area,
        temperature=run.temperature,
        rows=lines,
        time=time,
        volume=volume,
        loading=volume / run.area,
        flux=flux,
        pressure=pressure,
        resistance=resistance,
        turbidity=values.get("turbidity", np.full(len(time), np.nan)),
        volume_step=volume_step,
        pressure_step=max((steps[role] for role in steps if "pressure" in role), default=0.0),
        excluded=excluded,
        flags=tuple(flags),
    )
    return quality_flags(reduced)


def _step(values: Floats, column: Column) -> float:
    """Resolution of a column in canonical units, found in the units of the file."""
    factor = column.unit.factor if column.unit is not None else 1.0
    return resolution(values / factor) * factor


def _differential(run: Run, values: dict[str, Floats], n: int) -> Floats:
    """Differential pressure in bar."""
    if "differential_pressure" in values:
        return values["differential_pressure"]
    if "pressure" in values:
        return values["pressure"] - values.get("outlet_pressure", np.zeros(n))
    return np.full(n, float(run.pressure or 0.0))


def _excluded(volume: Floats, pressure: Floats, flux: Floats) -> tuple[str | None, ...]:
    """Why a reading cannot be used at all: no resistance can be told from it."""
    reasons: list[str | None] = []
    for v, p, j in zip(volume, pressure, flux, strict=True):
        if v < 0.0:
            reasons.append("the hold-up is still being displaced")
        elif not p > 0.0:
            reasons.append("no differential pressure")
        else:
            reasons.append(None if j > 0.0 else "no flow")
    return tuple(reasons)


FLOW_STEP = 0.15


def _without_flow_steps(excluded: tuple[str | None, ...], flux: Floats) -> tuple[str | None, ...]:
    """Leave out readings at which the flow is just changing: pressure and flux may not belong together."""
    change = np.zeros(len(flux))
    change[1:-1] = np.abs(flux[2:] - flux[:-2])
    stepping = change > FLOW_STEP * np.median(flux)
    return tuple(
        reason if reason is not None or not step else "the flow is changing at this reading"
        for reason, step in zip(excluded, stepping, strict=True)
    )
