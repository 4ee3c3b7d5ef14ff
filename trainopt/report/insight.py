"""Sections on what the design could be otherwise: shown for what was computed, left out for what was not."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from trainopt.report.content import Column, Kind, Picture, Section, Table
from trainopt.report.numbers import fixed, trimmed
from trainopt.report.volume_figure import volume_figure

if TYPE_CHECKING:
    from trainopt.report.dossier import Dossier


def insight_sections(dossier: Dossier) -> Iterator[Section]:
    """What-if on batch volume."""
    if dossier.volumes:
        yield _volumes(dossier)


def _volumes(dossier: Dossier) -> Section:
    objective = dossier.design.objective
    by_cost = objective is not None and objective.kind == "cost"
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
