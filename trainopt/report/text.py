"""A design as text for people: what to buy, what limits it, and what the even split would have bought."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from trainopt.report.beside_text import beside, share
from trainopt.report.cautions import CAUTIONS
from trainopt.report.notices import grouped
from trainopt.report.numbers import (
    NONE,
    Pressure,
    aligned,
    duration,
    fixed,
    limit_words,
    money,
    needed,
    percent,
    significant,
    trimmed,
)
from trainopt.report.tables import WIDTH, Page

if TYPE_CHECKING:
    from trainopt.train.results import BlockDesign, Design, EvenSplit, StageDesign


def design_text(design: Design, units: str = "bar", width: int = WIDTH, color: bool = False) -> str:
    """The design as tables at most `width` columns wide; pressures in `units` (bar, psi or kPa)."""
    page, pressure = Page(), Pressure(units)
    page.line(design.scenario, "bold")
    page.line(headline(design))
    if design.status == "infeasible":
        _reasons(page, design)
    if design.blocks:
        _bill(page, design)
        _stages(page, design.blocks, pressure)
        _blocks(page, design.blocks, pressure)
        _cost(page, design)
    if design.even_split is not None and design.blocks:
        _even_split(page, design, pressure)
    if design.blocks:
        beside(page, design, pressure)
    if design.warnings:
        page.heading("Warnings")
        page.items((text for _, text in grouped(design.warnings)), "yellow")
    if design.blocks:
        page.heading("Cautions")
        page.items(CAUTIONS)
    return page.render(width, color)


def headline(design: Design) -> str:
    """The answer in one sentence."""
    if design.status == "infeasible":
        return "No design meets every limit."
    if not design.blocks:
        return "No design was found before a limit stopped the search; there may be one."
    modules = sum(stage.count for block in design.blocks for stage in block.stages)
    answer = (
        f"{trimmed(design.area)} m² in {modules} {_plural('module', modules)}, "
        f"{duration(design.time)} with setups, {money(design.cost, design.currency)} per batch"
    )
    objective = design.objective
    if design.status == "limit" or objective is None:
        gap = NONE if objective is None else percent(100.0 * objective.gap)
        return f"Best found before a limit stopped the search, not proven (gap {gap}): {answer}."
    return f"Least {objective.kind}, proven optimal: {answer}."


def _plural(word: str, number: int) -> str:
    return word if number == 1 else f"{word}s"


def _stage_rows(blocks: tuple[BlockDesign, ...]) -> Iterator[StageDesign]:
    return (stage for block in blocks for stage in block.stages)


def _holders(stage: StageDesign) -> str:
    return ", ".join(f"{count} × {name}" for name, count in stage.holders.items()) or NONE


def _bill(page: Page, design: Design) -> None:
    page.heading("What to buy")
    stages = list(_stage_rows(design.blocks))
    areas = aligned([*(stage.area for stage in stages), design.area])
    rows = [
        (
            stage.stage,
            stage.module,
            stage.medium,
            _holders(stage),
            str(stage.count),
            area,
            fixed(stage.modules_cost, 0),
        )
        for stage, area in zip(stages, areas, strict=False)
    ]
    prices = [stage.modules_cost for stage in stages]
    price = None if None in prices else sum(value for value in prices if value is not None)
    count = str(sum(stage.count for stage in stages))
    rows.append(("total", "", "", "", count, areas[-1], fixed(price, 0)))
    currency = f"\n{design.currency}" if design.currency else ""
    page.table(("Stage", "Module", "Medium", "Holders", "Count", "Area\nm²", f"Price{currency}"), rows, 4, True)


def _stages(page: Page, blocks: tuple[BlockDesign, ...], pressure: Pressure) -> None:
    page.heading("Stages, at the installed area; pressure at the end of the batch, worst lot, derated area")
    stages = list(_stage_rows(blocks))
    areas, ideals = aligned(s.area for s in stages), aligned((s.ideal_area for s in stages), 1)
    rows = [
        (
            stage.stage,
            limit_words(stage.limited_by),
            area,
            ideal,
            significant(stage.loading),
            significant(stage.flux),
            pressure.number(stage.pressure),
            percent(100.0 * stage.pressure_share),
            fixed(stage.safety_factor, 2),
        )
        for stage, area, ideal in zip(stages, areas, ideals, strict=True)
    ]
    page.table(
        (
            "Stage",
            "Limited by",
            "Area\nm²",
            "Ideal\nm²",
            "Loading\nL/m²",
            "Flux\nLMH",
            f"Pressure\n{pressure.unit}",
            "Share",
            "Safety\nfactor",
        ),
        rows,
        2,
    )


def _blocks(page: Page, blocks: tuple[BlockDesign, ...], pressure: Pressure) -> None:
    page.heading("Time of each block")
    times = [
        (
            block.block,
            block.operation.replace("-", " "),
            fixed(block.time, 2),
            fixed(block.setup, 2),
            significant(block.flow),
            significant(block.starting_flow),
        )
        for block in blocks
    ]
    head = ("Block", "Operation", "Time\nh", "Setup\nh", "Flow\nL/h", "At start\nL/h")
    kept = len(head) if any(block.starting_flow is not None for block in blocks) else len(head) - 1
    page.table(head[:kept], [row[:kept] for row in times], 2)
    page.heading(f"Pressure of each block at the end of the batch, {pressure.unit}")
    pressures = [
        (
            block.block,
            block.worst_lot,
            *(pressure.number(bar) for bar in (p.limit, p.static, p.line, p.stages, p.spare)),
        )
        for block in blocks
        for p in (block.pressure,)
    ]
    page.table(("Block", "Worst lot", "Limit", "Static", "Line", "Stages", "Spare"), pressures, 2)


def _cost(page: Page, design: Design) -> None:
    if design.cost_parts is None:
        return
    currency = f", {design.currency}" if design.currency else ""
    page.heading(f"Cost per batch{currency}")
    parts = design.cost_parts
    values = (parts.modules, parts.holders, parts.flush, parts.product, parts.hours, design.cost)
    names = ("Modules", "Holders", "Flush", "Product left behind", "Hours", "Total")
    page.table(names, [[fixed(value, 0) for value in values]], 0)


def even_split_sentence(design: Design) -> str:
    """What the even split of pressure and time would have cost, in a sentence."""
    even, saving = design.even_split, design.saving
    if even is None:
        return ""
    if even.status == "infeasible" or saving is None:
        because = f": {even.text}" if even.text else "."
        return f"The even split of pressure and time yields no design here{because}"
    cost_counts = design.objective is not None and design.objective.kind == "cost"
    decisive = saving.cost if cost_counts else saving.area
    if abs(decisive) < 1e-9 * max(1.0, even.cost or 0.0 if cost_counts else even.area or 0.0):
        return "The even split costs nothing here: it is as good as the optimum."
    if decisive < 0.0:
        return _cheaper_but(design, cost_counts)
    area = f"{trimmed(saving.area)} m² ({percent(saving.area_percent)}) of area"
    cost = f"{money(saving.cost, design.currency)} ({percent(saving.cost_percent)}) per batch"
    first, second = (cost, area) if cost_counts else (area, cost)
    return f"Against the even split of pressure and time this saves {first} and {second}."


def _cheaper_but(design: Design, cost_counts: bool) -> str:
    """On a reliability basis the even split, each stage sized alone, can be smaller: it fails more often."""
    saving, sure = design.saving, design.reliability
    assert saving is not None
    if cost_counts:
        less = f"costs {money(-saving.cost, design.currency)} ({percent(-(saving.cost_percent or 0.0))}) less per batch"
    else:
        less = f"installs {trimmed(-saving.area)} m² ({percent(-saving.area_percent)}) less"
    if sure is None or sure.even_split is None:
        return f"The even split of pressure and time {less}, but does not hold as this design does."
    return (
        f"The even split of pressure and time {less}, but sizes each stage alone for its share: "
        f"{share(sure.even_split.share)} of fresh lots finish with it, {share(sure.fresh.share)} with this design."
    )


def _even_split(page: Page, design: Design, pressure: Pressure) -> None:
    even = design.even_split
    assert even is not None
    page.heading("Beside the even split")
    page.line(even_split_sentence(design))
    if even.status != "infeasible":
        page.gap()
        page.table(
            ("Stage", "Optimum", "Even split", "Area\nm²", "Even\nm²", f"Pressure\n{pressure.unit}", "Even"),
            _beside(design, even, pressure),
            3,
            True,
        )


def _beside(design: Design, even: EvenSplit, pressure: Pressure) -> list[tuple[str, ...]]:
    """Both picks of each stage that either of them uses, in flow order, and the totals."""
    ours = {stage.stage: stage for stage in _stage_rows(design.blocks)}
    theirs = {stage.stage: stage for stage in _stage_rows(even.blocks)}
    names = list(theirs) if len(theirs) > len(ours) else list(ours)
    names += [name for name in (*ours, *theirs) if name not in names]
    pairs = [(ours.get(name), theirs.get(name)) for name in names]
    areas = aligned([*(_area(mine) for mine, _ in pairs), design.area])
    evens = aligned([*(_area(other) for _, other in pairs), even.area])
    rows = [
        (
            name,
            _pick(mine),
            _pick(other),
            area,
            even_area,
            pressure.number(mine.pressure if mine else None),
            pressure.number(other.pressure if other else None),
        )
        for name, (mine, other), area, even_area in zip(names, pairs, areas, evens, strict=False)
    ]
    costs = (money(design.cost, design.currency), money(even.cost, design.currency))
    return [*rows, ("total", *costs, areas[-1], evens[-1], "", "")]


def _area(stage: StageDesign | None) -> float | None:
    return None if stage is None else stage.area


def _pick(stage: StageDesign | None) -> str:
    return "not used" if stage is None else f"{stage.count} × {stage.module}"


def _reasons(page: Page, design: Design) -> None:
    page.heading("What stands in the way")
    page.items(reason.text for reason in design.reasons)
    needs = [(name, needed(value, reason.module)) for reason in design.reasons for name, value in reason.needs.items()]
    if needs:
        page.heading("What would do, each change alone")
        page.table(("Field", "Value"), needs)
