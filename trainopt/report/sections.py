"""The sections of a design report, in an engineer's reading order."""

from __future__ import annotations

from typing import TYPE_CHECKING

from trainopt.report.beside_sections import reliability_section
from trainopt.report.budget_section import budget_section
from trainopt.report.cautions import CAUTIONS
from trainopt.report.content import Column, Picture, Section, Table, pressure_column, used_stages, words
from trainopt.report.curve_sections import course_section, curves_section
from trainopt.report.dossier import Dossier
from trainopt.report.insight import insight_sections
from trainopt.report.notices import grouped
from trainopt.report.numbers import (
    PRESSURE_UNITS,
    duration,
    fixed,
    limit_words,
    needed,
    percent,
    significant,
    trimmed,
)
from trainopt.report.text import even_split_sentence, headline
from trainopt.report.train_figure import train_figure

if TYPE_CHECKING:
    from trainopt.train.results import Design


def sections(dossier: Dossier, units: str = "bar") -> tuple[Section, ...]:
    """All sections that have something to say; pressures in `units`."""
    found: list[Section | None] = [_answer(dossier)]
    if dossier.design.blocks:
        found += [
            _train(dossier, units),
            budget_section(dossier, units),
            curves_section(dossier, units),
            course_section(dossier, units),
            *insight_sections(dossier, units),
            _cost(dossier.design),
        ]
        if dossier.design.reliability is not None:
            found.append(reliability_section(dossier.design, dossier.design.reliability))
    found += [_assumptions(dossier), _cautions(dossier.design), _provenance(dossier)]
    return tuple(section for section in found if section is not None)


def _answer(dossier: Dossier) -> Section:
    design = dossier.design
    task = (
        f"{trimmed(dossier.volume)} L within {duration(dossier.time_allowed)}, safety factor "
        f"{trimmed(dossier.safety_factor)}, for {_held_for(dossier)}."
    )
    if not design.blocks:
        needs = tuple(
            (name, needed(value, reason.module)) for reason in design.reasons for name, value in reason.needs.items()
        )
        table = Table("What would do, each change alone", (words("Field"), words("Value")), needs)
        return Section(
            "answer",
            "Answer",
            (headline(design), task),
            tables=(table,) if needs else (),
            items=tuple(reason.text for reason in design.reasons),
        )
    paragraphs = [headline(design), task]
    if design.even_split is not None:
        paragraphs.append(even_split_sentence(design))
    if design.safety_factor is not None:
        paragraphs.append(
            f"At these times all areas could be derated by {fixed(design.safety_factor, 2)} before a limit is met."
        )
    return Section("answer", "Answer", tuple(paragraphs), tables=(bill_table(design),))


def _held_for(dossier: Dossier) -> str:
    sure = dossier.design.reliability
    if dossier.sampled:
        asked = "" if sure is None else f"{percent(100.0 * sure.target)} of "
        return f"{asked}{dossier.sampled} sampled lots"
    return _lots(dossier.lots)


def _lots(lots: tuple[str, ...]) -> str:
    if lots in ((), ("pooled",)):
        return "the pooled feed"
    return f"lot {lots[0]}" if len(lots) == 1 else f"the worst of lots {', '.join(lots)}"


def bill_table(design: Design) -> Table:
    """What to buy, stage by stage, with the total."""
    rows = [
        (
            stage.stage,
            stage.module,
            stage.medium,
            ", ".join(f"{count} × {name}" for name, count in stage.holders.items()),
            stage.count,
            stage.area,
            stage.modules_cost,
        )
        for _, stage in used_stages(design.blocks)
    ]
    costs = [stage.modules_cost for _, stage in used_stages(design.blocks)]
    total = None if None in costs else sum(cost for cost in costs if cost is not None)
    count = sum(stage.count for _, stage in used_stages(design.blocks))
    rows.append(("total", "", "", "", count, design.area or 0.0, total))
    columns = (
        words("Stage"),
        words("Module"),
        words("Medium"),
        words("Holders"),
        Column("Count", "", "whole"),
        Column("Area", "m²"),
        Column("Price", design.currency, "whole"),
    )
    return Table("Bill of modules", columns, tuple(rows), total=True)


def stage_table(design: Design, units: str = "bar") -> Table:
    """What each stage carries, takes of the pressure, and is limited by."""
    factor = PRESSURE_UNITS[units]
    rows = tuple(
        (
            stage.stage,
            limit_words(stage.limited_by),
            stage.area,
            stage.ideal_area,
            stage.loading,
            stage.flux,
            stage.pressure * factor,
            100.0 * stage.pressure_share,
            stage.safety_factor,
        )
        for _, stage in used_stages(design.blocks)
    )
    columns = (
        words("Stage"),
        words("Limited by"),
        Column("Area", "m²"),
        Column("Ideal area", "m²", decimals=1),
        Column("Loading", "L/m²", "significant"),
        Column("Flux", "LMH", "significant"),
        pressure_column("Pressure", units),
        Column("Share of pressure", "%", decimals=0),
        Column("Safety factor"),
    )
    caption = (
        "Stages: loading and flux at the installed area; pressure at the end of the batch, worst lot, derated area"
    )
    return Table(caption, columns, rows)


def _train(dossier: Dossier, units: str) -> Section:
    design = dossier.design
    route = ", then ".join(
        f"{block.block} ({' → '.join(stage.stage for stage in block.stages)})" for block in design.blocks
    )
    picture = Picture(
        "train",
        lambda: train_figure(design.blocks, units),
        "Flow runs from left to right; each bar between two headers is a module. Below each block, the "
        "pressure at the end of the batch (worst lot, derated area) falls from the pump to the outlet; the "
        "number is what a stage takes.",
        f"Drawing of the train: {route}, with the pressure falling along each block.",
    )
    return Section("train", "Train", (), (picture,), (stage_table(design, units),))


def _cost(design: Design) -> Section | None:
    parts = design.cost_parts
    if parts is None:
        return None
    rows: list[tuple[str | float | None, ...]] = []
    even = design.even_split.cost_parts if design.even_split is not None else None
    for name in ("modules", "holders", "flush", "product", "hours"):
        label = {"product": "product left in the hold-up"}.get(name, name)
        share = 100.0 * getattr(parts, name) / parts.total if parts.total else None
        rows.append((label, getattr(parts, name), share, None if even is None else getattr(even, name)))
    rows.append(("total", parts.total, 100.0 if parts.total else None, None if even is None else even.total))
    columns = (
        words("Part"),
        Column("Optimum", design.currency, "whole"),
        Column("Share", "%", decimals=0),
        Column("Even split", design.currency, "whole"),
    )
    return Section("cost", "Cost per batch", (), (), (Table("Cost parts", columns, tuple(rows), True),))


def _assumptions(dossier: Dossier) -> Section:
    rows = grouped(dossier.design.warnings)
    table = Table("Warnings", (words("Code"), words("Text")), rows)
    return Section(
        "assumptions",
        "Assumptions and warnings",
        () if rows else ("No warnings.",),
        tables=(table,) if rows else (),
        items=dossier.assumptions,
    )


def _cautions(design: Design) -> Section | None:
    return Section("cautions", "Cautions", items=CAUTIONS) if design.blocks else None


def _provenance(dossier: Dossier) -> Section:
    proof: tuple[tuple[str, str], ...] = ()
    objective = dossier.design.objective
    if objective is not None:
        proof = (
            ("Objective", f"{objective.kind}, {significant(objective.value, 8)}"),
            ("Lower bound", significant(objective.bound, 8)),
            ("Gap", f"{percent(100.0 * objective.gap)}; {dossier.design.status}"),
        )
    solver = dossier.design.proof
    run = () if solver is None else (
        ("Solver", f"{solver.solver} {solver.solver_version}, by {solver.modeler} {solver.modeler_version}"),
        ("Seed and threads", f"{solver.seed}, {solver.threads}"),
        ("Gap allowed", significant(solver.relative_gap)),
        ("Tolerance on a row", f"{significant(solver.feasibility_tolerance)} h"),
        ("Runs; model", f"{solver.solves}; {solver.rows} rows, {solver.columns} columns"),
    )  # fmt: skip
    facts = (("Date", dossier.date), *proof, *run, *dossier.options.items())
    tables = [
        Table("Run", (words("What"), words("Value")), facts),
        Table("Program and libraries", (words("Name"), words("Version")), tuple(dossier.versions.items())),
    ]
    if dossier.design.inputs:
        inputs = tuple(dossier.design.inputs.items())
        tables.append(Table("Input files", (words("File"), words("Hash")), inputs))
    return Section("provenance", "Provenance", tables=tuple(tables))
