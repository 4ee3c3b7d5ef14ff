"""Plan of a bench run, and the sheet to record it in, which is then read as a run without any further setting."""

from __future__ import annotations

import csv
import io
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from trainopt.errors import InputError, Problem
from trainopt.units import convert

if TYPE_CHECKING:
    from trainopt.files import Medium

FLUSH_VOLUME, FLUSH_FLUX = 100.0, 600.0
"""L/m² and LMH: flush about 100 L/m² at up to 600 LMH (common practice, no source)."""

ENDPOINT = 1.38
"""bar: bench runs go to about 20 psi (common practice, no source)."""

SAMPLE, SAMPLE_EVERY = 0.010, 12.0
"""L per turbidity sample, and minutes between samples: every 10 to 15 min (common practice, no source)."""

HOLD_UP_PER_AREA = 5.0
"""L/m² assumed for a bench holder where the medium's runs say nothing: 12 mL on 23 cm² (common practice,
no source).
"""

MOST_READINGS = 90

CAUTIONS = (
    "Stay below the rating of the weakest part: device, tubing, fittings, gauge. Use relief or a pump that stalls.",
    "Purge air before loading; zero and check the gauges; calibrate the pump with water at both settings.",
    "Stop at the pressure endpoint, the turbidity endpoint or the planned loading, whichever comes first.",
    "Return turbidity samples to the cylinder or add their volume; write down every change as a remark.",
    "Feed may be hazardous: follow local rules and the judgment of a qualified engineer.",
)


@dataclass(frozen=True)
class RunPlan:
    """Settings of a constant-flow bench run: area m², flux LMH, loading L/m², flows L/h, volumes L, times
    h, bar, NTU.

    `times` are the readings, `sampled` those at which turbidity is read; `feed_volume` holds filtrate,
    hold-up and samples.
    """

    medium: str | None
    area: float
    flux: float
    loading: float
    flow: float
    flush_flow: float
    flush_volume: float
    flush_time: float
    hold_up: float
    feed_volume: float
    duration: float
    times: tuple[float, ...]
    sampled: tuple[bool, ...]
    pressure_endpoint: float
    turbidity_endpoint: float | None


def plan_run(area: float, flux: float, loading: float, medium: Medium | None = None) -> RunPlan:
    """Plan a run of `loading` L/m² at `flux` LMH on `area` m²; a medium brings its flush, hold-up and limits."""
    bad = [name for name, value in (("area", area), ("flux", flux), ("loading", loading)) if not value > 0.0]
    if bad:
        raise InputError([Problem(f"--{name}", 0, "expected a value above zero") for name in bad])
    flush_volume, flush_flux, endpoint, turbidity = FLUSH_VOLUME, FLUSH_FLUX, ENDPOINT, None
    hold_up = HOLD_UP_PER_AREA * area
    if medium is not None:
        if medium.flush is not None:
            flush_volume, flush_flux = medium.flush.volume, medium.flush.flux
        endpoint = min(endpoint, medium.limits.differential_pressure or endpoint)
        turbidity = medium.limits.turbidity
        hold_up = max((run.hold_up for run in medium.curve.runs if run.hold_up > 0.0), default=hold_up)
    duration = (loading * area + hold_up) / (flux * area)
    times, sampled = _readings(duration)
    return RunPlan(
        medium=medium.medium if medium is not None else None,
        area=area,
        flux=flux,
        loading=loading,
        flow=flux * area,
        flush_flow=flush_flux * area,
        flush_volume=flush_volume * area,
        flush_time=flush_volume / flush_flux,
        hold_up=hold_up,
        feed_volume=loading * area + hold_up + SAMPLE * sum(sampled),
        duration=duration,
        times=times,
        sampled=sampled,
        pressure_endpoint=endpoint,
        turbidity_endpoint=turbidity,
    )


def _readings(duration: float) -> tuple[tuple[float, ...], tuple[bool, ...]]:
    """Reading times in h, every couple of minutes or so that there are not too many, and where turbidity is read."""
    minutes = duration * 60.0
    steps = (0.5, 1.0, 2.0, 5.0, 10.0, 15.0, 30.0, 60.0)
    step = next((step for step in steps if minutes / step <= MOST_READINGS), minutes / MOST_READINGS)
    count = int(np.ceil(minutes / step - 1e-9))
    every = max(round(SAMPLE_EVERY / step), 1)
    times = tuple(index * step / 60.0 for index in range(count + 1))
    return times, tuple(index > 0 and (index % every == 0 or index == count) for index in range(count + 1))


def plan_lines(plan: RunPlan, pressure_unit: str = "psi") -> tuple[str, ...]:
    """The plan in words, one setting a line."""
    endpoint = convert(plan.pressure_endpoint, "pressure", pressure_unit)
    lines = [
        f"Bench run at constant flow{f', medium {plan.medium}' if plan.medium else ''}: {plan.loading:.0f} "
        f"L/m2 at "
        f"{plan.flux:.0f} LMH on {plan.area * 1e4:.4g} cm2",
        f"Flush: {plan.flush_volume * 1e3:.0f} mL at {plan.flush_flow / 60.0 * 1e3:.2f} mL/min, "
        f"{plan.flush_time * 60.0:.0f} min",
        f"Run: pump at {plan.flow / 60.0 * 1e3:.2f} mL/min, expected {plan.duration * 60.0:.0f} min",
        f"Feed needed: {plan.feed_volume * 1e3:.0f} mL (filtrate {plan.loading * plan.area * 1e3:.0f}, "
        f"hold-up "
        f"{plan.hold_up * 1e3:.0f}, turbidity samples {SAMPLE * sum(plan.sampled) * 1e3:.0f})",
        f"Pressure endpoint: {endpoint:.3g} {pressure_unit} differential",
    ]
    if plan.turbidity_endpoint is not None:
        lines.append(f"Turbidity endpoint: {plan.turbidity_endpoint:g} NTU")
    return (*lines, *(f"Caution: {caution}" for caution in CAUTIONS))


def sheet_rows(plan: RunPlan, pressure_unit: str = "psi") -> list[list[object]]:
    """The sheet: the plan as comment lines, the header, and one row per reading with its time; the rest to
    be filled in.
    """
    header: list[object] = [
        "time (min)",
        "volume (mL)",
        f"inlet pressure ({pressure_unit})",
        f"outlet pressure ({pressure_unit})",
        "turbidity (NTU)",
        "remark",
    ]
    rows: list[list[object]] = [[f"# {line}"] for line in plan_lines(plan, pressure_unit)]
    rows.append(header)
    for time, sampled in zip(plan.times, plan.sampled, strict=True):
        remark = "read turbidity" if sampled else None
        rows.append([round(time * 60.0, 6), None, None, None, None, remark])
    return rows


def sheet_bytes(plan: RunPlan, kind: str, pressure_unit: str = "psi") -> bytes:
    """The sheet as a file: `kind` "csv" or "xlsx"."""
    rows = sheet_rows(plan, pressure_unit)
    if kind == "csv":
        text = io.StringIO()
        csv.writer(text, lineterminator="\n").writerows([["" if c is None else c for c in row] for row in rows])
        return text.getvalue().encode("utf-8")
    return _spreadsheet(rows)


def _spreadsheet(rows: list[list[object]]) -> bytes:
    import openpyxl
    from openpyxl.styles import Font, PatternFill

    book = openpyxl.Workbook()
    page = book.active
    assert page is not None
    page.title = "run"
    for row in rows:
        page.append(row)
    top = next(index for index, row in enumerate(rows, start=1) if len(row) > 1)
    for cell in page[top]:
        cell.font = Font(bold=True)
        cell.fill = PatternFill("solid", fgColor="DDE6EE")
    for letter, width in zip("ABCDEF", (12, 14, 20, 20, 16, 40), strict=True):
        page.column_dimensions[letter].width = width
    page.freeze_panes = f"A{top + 1}"
    out = io.BytesIO()
    book.save(out)
    return out.getvalue()
