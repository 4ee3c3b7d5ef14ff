"""Where pressure and time go, the even split beside the optimum."""

from __future__ import annotations

from typing import TYPE_CHECKING

from trainopt.report.budget_figure import budget_figure
from trainopt.report.content import Column, Picture, Section, Table, pressure_column, used_stages, words
from trainopt.report.numbers import PRESSURE_UNITS, money
from trainopt.report.text import even_split_sentence

if TYPE_CHECKING:
    from trainopt.report.dossier import Dossier
    from trainopt.train.results import BlockDesign, Design, StageDesign


def budget_section(dossier: Dossier, units: str) -> Section:
    """Pressure of each block and time of all, as bars and tables."""
    design = dossier.design
    even = design.even_split
    tables = [_budget_table("Pressure and time of each block", design.blocks, units)]
    if even is not None and even.blocks:
        tables.append(_budget_table("The same, split evenly", even.blocks, units))
        tables.append(_beside(design))
    sentence = even_split_sentence(design)
    beside = ", the even split beside the optimum" if even is not None and even.blocks else ""
    picture = Picture(
        "budget",
        lambda: budget_figure(design, units, dossier.schedule),
        "Each bar fills up from static head and line over the stages in flow order to the spare; the "
        "dashed line is the pressure limit. Where a stage's share differs between the two bars, "
        "the optimum moved pressure.",
        f"Stacked bars of the pressure each stage takes and of the time each block takes{beside}.",
    )
    return Section("budget", "Where pressure and time go", (sentence,) if sentence else (), (picture,), tuple(tables))


def _budget_table(caption: str, blocks: tuple[BlockDesign, ...], units: str) -> Table:
    factor = PRESSURE_UNITS[units]
    starts = any(block.starting_flow is not None for block in blocks)
    rows = tuple(
        (
            block.block,
            block.operation.replace("-", " "),
            block.worst_lot,
            block.time,
            block.setup,
            block.flow,
            *((block.starting_flow,) if starts else ()),
            block.pressure.limit * factor,
            block.pressure.static * factor,
            block.pressure.line * factor,
            block.pressure.stages * factor,
            block.pressure.spare * factor,
        )
        for block in blocks
    )
    columns = (
        words("Block"),
        words("Operation"),
        words("Worst lot"),
        Column("Time", "h"),
        Column("Setup", "h"),
        Column("Flow", "L/h", "significant"),
        *((Column("Flow at start", "L/h", "significant"),) if starts else ()),
        pressure_column("Limit", units),
        pressure_column("Static", units),
        pressure_column("Line", units),
        pressure_column("Stages", units),
        pressure_column("Spare", units),
    )
    return Table(caption, columns, rows)


def _beside(design: Design) -> Table:
    even = design.even_split
    assert even is not None
    ours = {stage.stage: stage for _, stage in used_stages(design.blocks)}
    theirs = {stage.stage: stage for _, stage in used_stages(even.blocks)}
    rows: list[tuple[str | float | None, ...]] = [
        (
            name,
            _pick(ours.get(name)),
            _pick(theirs.get(name)),
            ours[name].area if name in ours else None,
            theirs[name].area if name in theirs else None,
        )
        for name in dict.fromkeys([*ours, *theirs])
    ]
    costs = (money(design.cost, design.currency), money(even.cost, design.currency))
    rows.append(("total", *costs, design.area, even.area))
    columns = (
        words("Stage"),
        words("Optimum"),
        words("Even split"),
        Column("Area, optimum", "m²"),
        Column("Area, even split", "m²"),
    )
    return Table("Optimum and even split; the last row has cost per batch and area", columns, tuple(rows), True)


def _pick(stage: StageDesign | None) -> str:
    return "not used" if stage is None else f"{stage.count} × {stage.module}"
