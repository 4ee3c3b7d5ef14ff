"""Sweeps, ratings, courses and audits as tables for people."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from trainopt.report.cautions import CAUTIONS
from trainopt.report.numbers import (
    NONE,
    Pressure,
    aligned,
    duration,
    fixed,
    limit_words,
    money,
    percent,
    significant,
    trimmed,
)
from trainopt.report.tables import WIDTH, Page

if TYPE_CHECKING:
    from collections.abc import Sequence

    from trainopt.study.audit import Audit, CaseAudit
    from trainopt.study.axis import Axis
    from trainopt.study.rate import Rating
    from trainopt.study.results import Change, Sweep, SweepCell
    from trainopt.study.simulate import Simulation
    from trainopt.train.results import Pick

MOST_ROWS = 60
"""Rows of a table on a terminal: JSON and CSV hold them all."""

MOST_CHANGES = 20
"""Changes listed on a terminal: JSON holds them all."""


def sweep_text(sweep: Sweep, width: int = WIDTH, color: bool = False) -> str:
    """A sweep of one axis as a table of cells, of two as a summary; where the pick changes; why cells have no
    design."""
    page = Page()
    page.line(sweep.scenario, "bold")
    page.line(_sweep_headline(sweep))
    if len(sweep.axes) == 1:
        _cells(page, sweep)
    else:
        _map_rows(page, sweep)
    if sweep.changes:
        _changes(page, sweep)
    _reasons(page, sweep)
    return page.render(width, color)


def _sweep_headline(sweep: Sweep) -> str:
    solved = sum(cell.status == "optimal" for cell in sweep.cells)
    what = "cost per batch" if sweep.kind == "cost" else "installed area"
    text = f"Least {what} in {solved} of {len(sweep.cells)} cells, each proven optimal"
    missing = sum(cell.status == "not-computed" for cell in sweep.cells)
    return text + (f"; {missing} were not computed, the sweep was stopped." if missing else ".")


def _axis_name(axis: Axis) -> str:
    return f"{axis.field}\n{axis.unit}" if axis.unit else axis.field


def _value(axis: Axis, value: float) -> str:
    return f"{axis.shown(value):.6g}"


def _cells(page: Page, sweep: Sweep) -> None:
    page.heading("Designs")
    axis = sweep.axes[0]
    cells = _thinned(sweep.cells)
    areas, evens = (
        aligned(cell.area for cell in cells),
        aligned(None if cell.even_split is None else cell.even_split.area for cell in cells),
    )
    rows = [
        (
            _value(axis, cell.at[0]),
            picks_text(cell.picks) if cell.picks or cell.status == "optimal" else cell.status.replace("-", " "),
            area,
            even,
            fixed(cell.cost, 0),
            fixed(cell.time, 2),
            fixed(min(cell.spare), 3) if cell.spare else NONE,
        )
        for cell, area, even in zip(cells, areas, evens, strict=True)
    ]
    currency = f"\n{sweep.currency}" if sweep.currency else ""
    headings = (_axis_name(axis), "Pick", "Area\nm²", "Even\nm²", f"Cost{currency}", "Time\nh", "Spare\nbar")
    page.table(headings, rows, 2)
    _left_out(page, len(sweep.cells), len(cells), "cells")


def _thinned(items: Sequence[SweepCell]) -> Sequence[SweepCell]:
    """At most `MOST_ROWS` cells, evenly taken, ends included."""
    if len(items) <= MOST_ROWS:
        return items
    step = (len(items) - 1) / (MOST_ROWS - 1)
    return [items[round(k * step)] for k in range(MOST_ROWS)]


def _left_out(page: Page, total: int, shown: int, what: str, where: str = "--json and --csv hold all") -> None:
    if shown < total:
        page.line(f"  {shown} of {total} {what} shown; {where}.")


def picks_text(picks: Sequence[Pick]) -> str:
    """What is bought, in one line."""
    return ", ".join(f"{pick.count} × {pick.module}" for pick in picks) or "no module"


def _map_rows(page: Page, sweep: Sweep) -> None:
    """One row per value of the first axis: the range of the objective over the second, and where designs exist."""
    first, second = sweep.axes
    page.heading(f"By {first.field}, over {second.field}")
    rows = []
    groups = [[cell for cell in sweep.cells if cell.at[0] == value] for value in first.values]
    for value, cells in list(zip(first.values, groups, strict=True))[:MOST_ROWS]:
        solved = [cell for cell in cells if cell.status == "optimal" and cell.objective is not None]
        best = [cell.objective for cell in solved if cell.objective is not None]
        at = sorted(cell.at[1] for cell in solved)
        rows.append(
            (
                _value(first, value),
                f"{_value(second, at[0])} to {_value(second, at[-1])}" if at else "no design",
                significant(min(best), 4) if best else NONE,
                significant(max(best), 4) if best else NONE,
                str(len({cell.picks for cell in solved})),
            )
        )
    unit = sweep.currency if sweep.kind == "cost" else "m²"
    page.table((_axis_name(first), f"{second.field} with a design, {second.unit}".rstrip(", "),
                f"Least\n{unit}", f"Most\n{unit}", "Picks"), rows, 2)  # fmt: skip
    _left_out(page, len(first.values), len(rows), "rows")


def _changes(page: Page, sweep: Sweep) -> None:
    page.heading(f"Where the pick changes ({len(sweep.changes)} times)")
    rows = [_change_row(sweep, change) for change in sweep.changes[:MOST_CHANGES]]
    headings = ["Field", "Changes between", "To"]
    if len(sweep.axes) > 1:
        headings.insert(2, "At")
    page.table(headings, rows, len(headings))
    _left_out(page, len(sweep.changes), len(rows), "changes", "--json holds all")


def _change_row(sweep: Sweep, change: Change) -> list[str]:
    axis = next(axis for axis in sweep.axes if axis.field == change.axis)
    low, high = (_value(axis, value) for value in change.between)
    row = [change.axis, f"{low} and {high} {axis.unit}".rstrip()]
    others = [other for other in sweep.axes if other is not axis]
    if others:
        row.append(
            ", ".join(f"{o.field} {_value(o, v)} {o.unit}".rstrip() for o, v in zip(others, change.others, strict=True))
        )
    row.append(_difference(change.before, change.after))
    return row


def _difference(before: Sequence[Pick], after: Sequence[Pick]) -> str:
    """What is bought after a change, only the stages that differ."""
    if not after:
        return "no design"
    old = {pick.stage: pick for pick in before}
    return picks_text([pick for pick in after if old.get(pick.stage) != pick]) if before else picks_text(after)


def _reasons(page: Page, sweep: Sweep) -> None:
    reasons: dict[str, list[SweepCell]] = {}
    for cell in sweep.cells:
        if cell.reason and cell.status in ("infeasible", "invalid"):
            reasons.setdefault(cell.reason, []).append(cell)
    if not reasons:
        return
    page.heading("Cells without a design")
    texts = []
    for reason, cells in list(reasons.items())[:12]:
        where = " ".join(
            f"{axis.field} {_value(axis, value)} {axis.unit}".rstrip()
            for axis, value in zip(sweep.axes, cells[0].at, strict=True)
        )
        more = f" (and {len(cells) - 1} more)" if len(cells) > 1 else ""
        texts.append(f"{where}{more}: {reason}")
    if len(reasons) > len(texts):
        texts.append(f"{len(reasons) - len(texts)} more reasons; --json and --csv hold all")
    page.items(texts)


def rate_text(rating: Rating, units: str = "bar", width: int = WIDTH, color: bool = False) -> str:
    """A rating: the answer, lots, blocks, stages, and the list of batches where one was asked for."""
    page, pressure = Page(), Pressure(units)
    page.line(rating.scenario, "bold")
    page.line(_rate_headline(rating))
    page.line(
        f"Largest batch in {duration(rating.time)}: {fixed(rating.largest_volume, 1)} L, "
        f"held by {limit_text(rating.limited_by)}. "
        f"{_shortest(rating)}"
    )
    page.line(
        f"Largest common safety factor for {trimmed(rating.volume)} L: {fixed(rating.safety_factor, 2)}"
        f" (all figures here are with areas divided by {trimmed(rating.derated_by)})."
    )
    page.heading("By lot")
    names = [f"{name}\n{pressure.unit}" for name in rating.block_names]
    page.table(
        ("Lot", "Largest batch\nL", "Shortest time\nh", *names),
        [
            (
                lot.lot,
                fixed(lot.largest_volume, 1),
                fixed(lot.shortest_time, 2),
                *(pressure.number(p) for p in lot.pressures),
            )
            for lot in rating.lots
        ],
    )
    if rating.blocks:
        page.line(f"  Pressure at the pump at the end of {trimmed(rating.volume)} L, in the time allowed.")
        _rated_stages(page, rating, pressure)
    if rating.batches:
        page.heading("Batches")
        page.table(
            ("Batch\nL", "Limited by", "Goes through", "Shortest time\nh", "Safety\nfactor"),
            [
                (
                    trimmed(b.volume),
                    limit_text(b.limited_by),
                    "yes" if b.passes else "no",
                    fixed(b.shortest_time, 2),
                    fixed(b.safety_factor, 2),
                )
                for b in rating.batches
            ],
            2,
        )
    if rating.warnings:
        page.heading("Warnings")
        page.items((notice.text for notice in rating.warnings), "yellow")
    page.heading("Cautions")
    page.items(CAUTIONS)
    return page.render(width, color)


def limit_text(limit: str) -> str:
    """`stage: code` in words."""
    where, colon, code = limit.partition(": ")
    return f"{where}: {limit_words(code)}" if colon else limit


def _rate_headline(rating: Rating) -> str:
    batch = f"{trimmed(rating.volume)} L in {duration(rating.time)}"
    if rating.status == "passes":
        return f"The train passes: {batch} go through with every limit met."
    return f"The train fails: {batch} do not go through with every limit met."


def _shortest(rating: Rating) -> str:
    if rating.shortest_time is None:
        return f"No time is long enough for {trimmed(rating.volume)} L: {limit_text(rating.forbidden_by)}."
    return f"Shortest time for {trimmed(rating.volume)} L: {duration(rating.shortest_time)}."


def _rated_stages(page: Page, rating: Rating, pressure: Pressure) -> None:
    page.heading(f"Stages with {trimmed(rating.volume)} L in the time allowed; pressure at the end, worst lot")
    rows = [
        (
            stage.stage,
            f"{stage.count} × {stage.module}",
            limit_words(stage.limited_by),
            significant(stage.area),
            significant(stage.loading),
            significant(stage.flux),
            pressure.number(stage.pressure),
            fixed(block.time, 2),
            pressure.number(block.pressure.spare),
        )
        for block in rating.blocks
        for stage in block.stages
    ]
    page.table(
        ("Stage", "Installed", "Nearest limit", "Area\nm²", "Loading\nL/m²", "Flux\nLMH", f"Pressure\n{pressure.unit}",
         "Time\nh", f"Spare\n{pressure.unit}"), rows, 3)  # fmt: skip


_MODES = {
    "constant-flow": "constant flow",
    "constant-pressure": "constant pressure",
    "flow-then-pressure": "constant flow, held at the pressure limit once it is met",
}


def simulate_text(simulation: Simulation, units: str = "bar", width: int = WIDTH, color: bool = False) -> str:
    """The course of a batch: what each block and lot needs, and the pressures at its end."""
    page, pressure = Page(), Pressure(units)
    page.line(simulation.scenario, "bold")
    page.line(
        f"{trimmed(simulation.volume)} L through {picks_text(simulation.picks)}, "
        f"areas divided by {trimmed(simulation.derated_by)}."
    )
    if math.isinf(simulation.needed):
        page.line("A stage plugs before the batch is through.")
    elif simulation.over_run > 0.0:
        page.line(
            f"The worst lot takes {duration(simulation.needed)} with setups, "
            f"{duration(simulation.over_run)} more than allowed."
        )
    else:
        page.line(
            f"The worst lot takes {duration(simulation.needed)} with setups; {duration(simulation.time)} are allowed."
        )
    for block in simulation.blocks:
        met = [(lot.limit_volume, lot.lot) for lot in block.lots if lot.limit_volume is not None]
        if block.mode == "constant-flow" and met:
            first, lot = min(met)
            page.line(
                f"{block.block}: at this flow lot {lot} meets the pressure limit at {fixed(first, 0)} L, "
                f"before the batch is through."
            )
    for block in simulation.blocks:
        flow = "" if block.flow is None else f", set to {significant(block.flow)} L/h"
        page.heading(f"{block.block}: {_MODES.get(block.mode, block.mode)}{flow}; limit {pressure.text(block.limit)}")
        rows = [
            (
                lot.lot,
                fixed(lot.needed, 2),
                fixed(lot.over_run, 2),
                fixed(lot.limit_volume, 0) if block.mode != "constant-pressure" else NONE,
                pressure.number(float(np.nanmax(lot.course.total))),
                significant(float(lot.course.flow[-1])),
                *(pressure.number(float(values[-1])) for values in lot.course.pressure),
            )
            for lot in block.lots
        ]
        stages = [f"{name}\n{pressure.unit}" for name in block.lots[0].course.stages]
        page.table(
            (
                "Lot",
                "Time\nh",
                "Over-run\nh",
                "Limit met at\nL",
                f"Highest\n{pressure.unit}",
                "Last flow\nL/h",
                *stages,
            ),
            rows,
        )
    page.heading("Cautions")
    page.items(CAUTIONS)
    return page.render(width, color)


def audit_text(audit: Audit, units: str = "bar", width: int = WIDTH, color: bool = False) -> str:
    """An audit: a summary of all cases, then each case's verdict and where the pressure went."""
    page, pressure = Page(), Pressure(units)
    page.line(
        f"The even split beside the optimum, {len(audit.cases)} case{'' if len(audit.cases) == 1 else 's'}", "bold"
    )
    if audit.cases:
        page.table(
            ("Case", "Area\nm²", "Even\nm²", "Saved", "Cost\nper batch", "Even", "Saved", "Modules", "Even"),
            [_audit_row(case) for case in audit.cases],
        )
    for case in audit.cases:
        page.heading(f"{case.file}: {case.design.scenario}")
        page.line(case.verdict)
        if case.waste is not None:
            bound = (
                f"With modules of any size the even split could waste at most {percent(case.waste.percent)} "
                f"on this route; for stages that do not foul never more than a factor {trimmed(case.waste.factor)}."
            )
            page.line(bound)
        if case.shifts:
            page.table(
                ("Block", "Stage", f"Optimum\n{pressure.unit}", f"Even split\n{pressure.unit}"),
                [(s.block, s.stage, pressure.number(s.optimum), pressure.number(s.even)) for s in case.shifts],
                2,
            )
    if audit.failures:
        page.heading("Not audited")
        page.items(str(problem) for problem in audit.failures)
    return page.render(width, color)


def _audit_row(case: CaseAudit) -> tuple[str, ...]:
    design, even, saving = case.design, case.design.even_split, case.design.saving
    return (
        case.file,
        trimmed(design.area),
        trimmed(even.area if even else None),
        percent(saving.area_percent if saving else None),
        money(design.cost, ""),
        money(even.cost if even else None, ""),
        percent(saving.cost_percent if saving else None),
        str(case.modules[0]),
        NONE if case.modules[1] is None else str(case.modules[1]),
    )
