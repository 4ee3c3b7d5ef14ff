"""Ratings, courses and audits as tables for people."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from trainopt.report.beside_text import bought, share
from trainopt.report.cautions import CAUTIONS
from trainopt.report.notices import grouped
from trainopt.report.numbers import (
    NONE,
    Pressure,
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
    from trainopt.study.audit import Audit, CaseAudit
    from trainopt.study.rate import Rating
    from trainopt.study.simulate import Simulation


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
    if rating.chance is not None:
        page.line(_chance(rating))
    if rating.lots:
        _rated_lots(page, rating, pressure)
    if rating.blocks:
        if rating.lots:
            page.line(f"  Pressure at the pump at the end of {trimmed(rating.volume)} L, in the time allowed.")
        _rated_stages(page, rating, pressure)
    if rating.batches:
        _rated_batches(page, rating)
    if rating.warnings:
        page.heading("Warnings")
        page.items((text for _, text in grouped(rating.warnings)), "yellow")
    page.heading("Cautions")
    page.items(CAUTIONS)
    return page.render(width, color)


def _chance(rating: Rating) -> str:
    assert rating.chance is not None
    one = rating.chance
    return (
        f"Chance of finishing in time, with what is known to vary: {share(one.share)} ({share(one.low)} to "
        f"{share(one.high)} with 95 % confidence, {rating.chance_lots} sampled lots)."
    )


def _rated_lots(page: Page, rating: Rating, pressure: Pressure) -> None:
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


def _rated_batches(page: Page, rating: Rating) -> None:
    page.heading("Batches")
    page.table(
        ("Batch\nL", "Limited by", "Goes through", "Shortest time\nh", "Safety\nfactor", "Chance"),
        [
            (
                trimmed(b.volume),
                limit_text(b.limited_by),
                "yes" if b.passes else "no",
                fixed(b.shortest_time, 2),
                fixed(b.safety_factor, 2),
                share(None if b.chance is None else b.chance.share),
            )
            for b in rating.batches
        ],
        2,
    )


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
        f"{trimmed(simulation.volume)} L through {bought(simulation.picks)}, "
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
