"""From a bench file to resistance and turbidity against loading."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from trainopt.bench import filtrate
from trainopt.bench.cells import column_step, column_values, complete_rows
from trainopt.bench.columns import Column, Columns, find_columns
from trainopt.bench.flux import local_flow
from trainopt.bench.quality import checked
from trainopt.bench.run import Flag, Floats, ReducedRun
from trainopt.bench.table import Table, read_table
from trainopt.errors import InputError, Problem

if TYPE_CHECKING:
    from trainopt.files import Run

Where = Callable[[tuple[str, ...], str], Problem]
"""Makes a problem at a field of the run as the medium file gives it: (field names, text) → problem."""

FEWEST_READINGS = 5
MOST_PROBLEMS = 100
MOST_POINTS = 2000
"""A logger's run is averaged down to this many readings: a curve needs no more, and averages are quieter."""


def reduce_run(run: Run, where: Where) -> ReducedRun:
    """Read and reduce one bench run; raises `InputError` with every problem found in it.

    Differential pressure is inlet minus outlet gauge (the inlet's alone where there is no outlet), loading
    the filtrate volume less the hold-up over the area, flux the local slope of volume in time, resistance
    their ratio.
    """
    table = read_table(run.file, run.sheet)
    found = find_columns(table, run.columns)
    misnamed = [where(("columns", role), text) for role, text in found.misnamed]
    problems = [*misnamed, *found.problems, *_missing_settings(run, found, where)]
    if problems:
        raise InputError(problems)
    readings = _readings(table, found, problems)
    if problems:
        raise InputError(_capped(problems))
    return _reduced(run, readings)


@dataclass(frozen=True, eq=False)
class _Readings:
    """Complete rows in canonical units: values (n,) and resolution by role, line numbers, remarks so far."""

    values: Mapping[str, Floats]
    steps: Mapping[str, float]
    swaps: NDArray[np.bool_]
    rows: NDArray[np.int64]
    remarks: tuple[tuple[str, tuple[int, int] | None, str], ...]


def _missing_settings(run: Run, found: Columns, where: Where) -> list[Problem]:
    """What the table cannot say and the run must."""
    out = []
    columns = found.found
    if "mass" in columns and "volume" not in columns and run.density is None:
        out.append(where((), "records mass; expected `density:`, for example '1.01 kg/L'"))
    if not found.pressure_seen and not (run.operation == "constant-pressure" and run.pressure is not None):
        text = "has no pressure column; expected one such as 'pressure (psi)'"
        if run.operation == "constant-pressure":
            text += ", or `pressure:` for a run at constant pressure"
        out.append(where(("file",), text))
    recorded = "volume" if "volume" in columns else "mass"
    tared = getattr(run.tare, "dimension", recorded)
    if recorded in columns and tared != recorded:
        out.append(where(("tare",), f"is a {tared}, but the run records {recorded}; expected the tare as a {recorded}"))
    inlet, outlet = columns.get("pressure"), columns.get("outlet_pressure")
    for column, other in ((inlet, outlet), (outlet, inlet)):
        if _absolute(column) and not _absolute(other):
            assert column is not None
            text = f"column '{column.header}' is absolute; expected gauge pressure"
            out.append(where(("file",), text + ", or inlet and outlet both absolute"))
    return out


def _absolute(column: Column | None) -> bool:
    return column is not None and column.unit is not None and column.unit.absolute


def _readings(table: Table, found: Columns, problems: list[Problem]) -> _Readings:
    """The table's complete rows; problems are added to the list."""
    columns = found.found
    values = {role: column_values(table, column, problems) for role, column in columns.items()}
    blank = [role for role, column in values.items() if role == "outlet_pressure" and not np.isfinite(column).any()]
    columns = {role: column for role, column in columns.items() if role not in blank}
    values = {role: values[role] for role in columns}
    keep = complete_rows(table, columns, values, problems)
    rows = table.lines[keep]
    values = {role: column[keep] for role, column in values.items()}
    swaps = np.zeros(len(rows), dtype=bool)
    if not problems:
        role = "volume" if "volume" in values else "mass"
        swaps = filtrate.swapped(values[role])
        faults = filtrate.time_faults(values["time"], swaps, rows)
        falls = filtrate.fall_faults(values[role], swaps, rows, role)
        faults.extend((line, f"column '{columns[role].header}': {text}") for line, text in falls)
        problems.extend(table.problem(line, text) for line, text in faults)
    if not problems and len(rows) < FEWEST_READINGS:
        text = f"holds {len(rows)} complete readings; expected at least {FEWEST_READINGS}"
        problems.append(table.problem(table.header_line, text))
    remarks: list[tuple[str, tuple[int, int] | None, str]] = [
        ("assumed", None, text) for text in (*table.assumed, *found.assumed)
    ]
    left_out = table.lines[~keep]
    if len(left_out):
        text = f"{len(left_out)} row(s) without a volume or pressure left out"
        remarks.append(("no-reading", (int(left_out[0]), int(left_out[-1])), text))
    steps = {role: column_step(values[role]) for role in columns}
    return _Readings(values, steps, swaps, rows, tuple(remarks))


def _capped(problems: list[Problem]) -> list[Problem]:
    if len(problems) <= MOST_PROBLEMS:
        return problems
    rest = Problem(problems[0].file, 0, f"{len(problems) - MOST_PROBLEMS} more problems like these follow")
    return [*problems[:MOST_PROBLEMS], rest]


def _reduced(run: Run, readings: _Readings) -> ReducedRun:
    name, rows, time = _name(run), readings.rows, readings.values["time"]
    flags = [Flag(code, name, place, text) for code, place, text in readings.remarks]
    volume, volume_step, more = _filtrate(run, readings)
    flags.extend(more)
    pressure, assumed = _differential(run, readings.values, len(time))
    flags.extend(Flag("assumed", name, None, text) for text in assumed)
    volume = volume - run.hold_up
    columns = {
        "time": time,
        "volume": volume,
        "pressure": pressure,
        "pressure_time": filtrate.pressure_time(time, volume, pressure),
        "turbidity": readings.values.get("turbidity", np.full(len(time), np.nan)),
        "feed": _feed(run, readings.values),
    }
    block = -(-len(time) // MOST_POINTS)
    if block > 1:
        columns, rows, volume_step = _averaged(columns, block), rows[::block], volume_step / np.sqrt(block)
        text = f"{len(time)} readings averaged in blocks of {block} before anything else is done"
        flags.append(Flag("averaged", name, None, text))
    flux = _flux(columns["time"], columns["volume"], volume_step) / run.area
    with np.errstate(divide="ignore", invalid="ignore"):
        resistance = columns["pressure"] / flux
    reduced = ReducedRun(
        name=name,
        lot=run.lot,
        operation=run.operation,
        area=run.area,
        temperature=run.temperature,
        rows=rows,
        loading=columns["volume"] / run.area,
        flux=flux,
        resistance=resistance,
        feed_loading=run.feed_loading,
        time_step=readings.steps["time"],
        volume_step=volume_step,
        pressure_step=max((step for role, step in readings.steps.items() if "pressure" in role), default=0.0),
        excluded=(None,) * len(rows),
        flags=tuple(flags),
        **columns,
    )
    return checked(reduced, keep=run.keep)


def _name(run: Run) -> str:
    """What a run is called: its file, and its sheet where the entry names one."""
    return run.file.name if run.sheet is None else f"{run.file.name} ({run.sheet})"


def _averaged(columns: Mapping[str, Floats], block: int) -> dict[str, Floats]:
    """Means over blocks of consecutive readings (the last may be shorter), of those that were read."""
    out = {}
    for name, values in columns.items():
        starts = np.arange(0, len(values), block)
        read = np.isfinite(values)
        count = np.add.reduceat(read.astype(float), starts)
        total = np.add.reduceat(np.where(read, values, 0.0), starts)
        out[name] = np.where(count > 0.0, total / np.maximum(count, 1.0), np.nan)
    return out


def _filtrate(run: Run, readings: _Readings) -> tuple[Floats, float, list[Flag]]:
    """Cumulative filtrate in L with its resolution, and what had to be done to it."""
    values, name = readings.values, _name(run)
    role = "volume" if "volume" in values else "mass"
    density = 1.0 if role == "volume" else run.density or 1.0
    start, assumed = filtrate.tare(values["time"], values[role], run.tare, role)
    flags = [Flag("assumed", name, None, assumed)] if assumed else []
    volume = (values[role] - start) / density
    if readings.swaps.any():
        # A fresh cylinder stands without what the first one held at the start.
        later = np.cumsum(readings.swaps) > 0
        volume = np.where(later, values[role] / density, volume)
        volume, more = filtrate.joined(values["time"], volume, readings.swaps, name, readings.rows)
        flags.extend(more)
    return volume, readings.steps[role] / density, flags


def _flux(time: Floats, volume: Floats, step: float) -> Floats:
    """Flow at each reading in L/h; readings at the same time (a swapped cylinder) share one."""
    distinct = np.concatenate([[True], np.diff(time) > 0.0])
    if distinct.all():
        return local_flow(time, volume, step)
    flow = local_flow(time[distinct], volume[distinct], step)
    return np.asarray(flow[np.cumsum(distinct) - 1])


def _differential(run: Run, values: Mapping[str, Floats], n: int) -> tuple[Floats, list[str]]:
    """Differential pressure in bar, and what was assumed."""
    if "differential_pressure" in values:
        pressure = values["differential_pressure"]
    elif "pressure" in values:
        pressure = values["pressure"] - values.get("outlet_pressure", np.zeros(n))
    else:
        return np.full(n, float(run.pressure or 0.0)), []
    if run.operation == "constant-pressure" and n > 1 and pressure[0] < 0.2 * float(np.median(pressure)):
        settled = pressure.copy()
        settled[0] = pressure[1]
        text = f"pressure of the first reading ({pressure[0]:.3g} bar) taken as that of the second: not yet applied"
        return settled, [text]
    return pressure, []


def _feed(run: Run, values: Mapping[str, Floats]) -> Floats:
    """Feed taken so far in L, NaN where it was not read; a reservoir that empties counts down."""
    if "feed_volume" in values:
        feed = values["feed_volume"]
    elif "feed_mass" in values and run.density:
        feed = values["feed_mass"] / run.density
    else:
        return np.full(len(values["time"]), np.nan)
    read = feed[np.isfinite(feed)]
    falling = len(read) > 1 and read[-1] < read[0]
    return np.asarray(read[0] - feed if falling else feed)
