"""Sections on what the design could be otherwise: shown for what was computed, left out for what was not."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from trainopt.report.beside_sections import beside_sections
from trainopt.report.beside_text import NO_GAIN, bought, limit_sentences
from trainopt.report.content import Column, Kind, Picture, Section, Table, pressure_column, words
from trainopt.report.numbers import PRESSURE_UNITS, fixed, limit_words, significant, trimmed
from trainopt.report.parts_figure import parts_figure
from trainopt.report.volume_figure import volume_figure

if TYPE_CHECKING:
    from trainopt.report.dossier import Dossier
    from trainopt.train.results import AreaParts, Limits


def insight_sections(dossier: Dossier, units: str) -> Iterator[Section]:
    """Where the area goes, what limits and what a little more would gain, near designs, other media, other volumes."""
    if dossier.area_parts is not None:
        yield _parts(dossier, dossier.area_parts)
    if dossier.limits is not None:
        yield _limits(dossier.limits, dossier, units)
    yield from beside_sections(dossier.design, units)
    if dossier.volumes:
        yield _volumes(dossier)


def _by_cost(dossier: Dossier) -> bool:
    objective = dossier.design.objective
    return objective is not None and objective.kind == "cost"


def _parts(dossier: Dossier, parts: AreaParts) -> Section:
    design, by_cost = dossier.design, _by_cost(dossier)
    unit = design.currency if by_cost else "m²"
    total = (design.cost if by_cost else design.area) or 0.0
    more = parts.even_split_cost if by_cost else parts.even_split_area
    beside = None if more is None else ("even split", total + more)
    shown = [(part.name, part.cost if by_cost else part.area) for part in parts.parts]
    rows: list[tuple[str | float | None, ...]] = [(part.name, part.area, part.cost) for part in parts.parts]
    rows.append(("installed", design.area, design.cost))
    columns = (words("Part"), Column("Area", "m²"), Column("Cost per batch", design.currency, "whole"))
    dearest = max(shown[1:] or shown, key=lambda part: part[1])
    paragraphs = [f"After the ideal split, most goes to {dearest[0]}: {significant(dearest[1])} {unit}."]
    if more is not None:
        paragraphs.append(f"The even split would add {significant(more)} {unit}.")
    picture = Picture(
        "parts",
        lambda: parts_figure(shown, unit, beside),
        "From the ideal split with nothing in its way down to what is installed: each bar is what one cause adds, "
        "so that the longest names the lever worth pulling.",
        f"Waterfall of {'cost' if by_cost else 'installed area'}: "
        + ", ".join(f"{name} {significant(amount)} {unit}" for name, amount in shown)
        + ".",
    )
    table = Table("Parts of area and cost, adding up to what is installed", columns, tuple(rows), True)
    title = "Where the cost goes" if by_cost else "Where the area goes"
    return Section("parts", title, tuple(paragraphs), (picture,), (table,))


def _limits(limits: Limits, dossier: Dossier, units: str) -> Section:
    unit = dossier.design.currency if _by_cost(dossier) else "m²"
    blocks = Table(
        "What binds in each block",
        (words("Block"), words("Limited by"), words("Stage"), Column("Used", "%", decimals=0)),
        tuple((b.block, limit_words(b.limited_by), b.stage, 100.0 * b.used) for b in limits.blocks),
    )
    tables = [blocks]
    if limits.gains:
        tables.append(_gains(limits, unit, units))
    if limits.longer_runs:
        tables.append(_longer_runs(limits, unit, units))
    nothing = "" if limits.gains or limits.longer_runs else NO_GAIN
    return Section(
        "limits",
        "What limits, and what more buys",
        (nothing,) if nothing else (),
        tables=tuple(tables),
        items=tuple(text for text in limit_sentences(limits, units) if text != NO_GAIN),
    )


def _gains(limits: Limits, unit: str, units: str) -> Table:
    rows = tuple(
        (
            _limit_name(gain.field, gain.unit),
            units if gain.unit == "bar" else gain.unit,
            _shown(gain.now, gain.unit, units),
            _shown(gain.needs, gain.unit, units),
            gain.saves,
            bought(gain.picks),
        )
        for gain in limits.gains
    )
    columns = (
        words("Limit"),
        words("Unit"),
        Column("Now", "", "significant"),
        Column("Needs", "", "significant"),
        Column("Saves", unit, "decimal" if unit == "m²" else "whole"),
        words("Buys"),
    )
    return Table("The next better design, each limit moved alone", columns, rows)


def _longer_runs(limits: Limits, unit: str, units: str) -> Table:
    rows = tuple(
        (
            run.medium,
            run.tested,
            run.loading,
            run.flux,
            _shown(run.pressure, "bar", units),
            run.saves,
            bought(run.picks),
        )
        for run in limits.longer_runs
    )
    columns = (
        words("Medium"),
        Column("Tested to", "L/m²", "significant"),
        Column("Run to", "L/m²", "significant"),
        Column("At flux", "LMH", "significant"),
        pressure_column("Up to", units),
        Column("Saves", unit, "decimal" if unit == "m²" else "whole"),
        words("Buys"),
    )
    return Table("What longer bench runs would be worth, if the curve holds that far", columns, rows)


def _limit_name(name: str, unit: str) -> str:
    """`clarification.pressure_bar` as `clarification: pressure`."""
    place, _, limit = name.rpartition(".")
    words_of_it = limit.removesuffix("_" + unit.replace("/", "_")).replace("_", " ")
    return f"{place}: {words_of_it}" if place else words_of_it


def _shown(value: float, unit: str, units: str) -> float:
    return value * PRESSURE_UNITS[units] if unit == "bar" else value


def _volumes(dossier: Dossier) -> Section:
    by_cost = _by_cost(dossier)
    unit = dossier.design.currency if by_cost else "m²"
    label = f"Cost per batch, {unit}" if by_cost else f"Installed area, {unit}"
    kind: Kind = "whole" if by_cost else "decimal"
    rows = tuple(
        (
            point.volume,
            point.objective,
            point.even_split,
            None if point.objective is None or point.even_split is None else point.even_split - point.objective,
        )
        for point in dossier.volumes
    )
    columns = (
        Column("Batch volume", "L", "whole"),
        Column("Optimum", unit, kind),
        Column("Even split", unit, kind),
        Column("Saved", unit, kind),
    )
    solved = [point for point in dossier.volumes if point.objective is not None]
    largest = f"; the largest volume tried that has a design is {fixed(solved[-1].volume, 0)} L" if solved else ""
    picture = Picture(
        "volume",
        lambda: volume_figure(dossier.volumes, dossier.volume, label),
        "Each mark is a design of its own, as good as the design of this report: whole modules make the steps. "
        "A gap means that no design meets every limit at that volume.",
        f"{label}, against batch volume from {trimmed(dossier.volumes[0].volume, 0)} to "
        f"{trimmed(dossier.volumes[-1].volume, 0)} L, for the optimum and the even split{largest}.",
    )
    return Section(
        "volume",
        "Other batch volumes",
        ("Time allowed, limits and catalog stay as they are.",),
        (picture,),
        (Table("Designs for other batch volumes", columns, rows),),
    )
