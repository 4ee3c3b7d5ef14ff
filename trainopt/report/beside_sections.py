"""Sections on what stands beside a design: near designs, other media, and how sure it is."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from trainopt.report.beside_text import bought, media_words, reliability_sentences, share, share_rows
from trainopt.report.content import Cell, Column, Picture, Section, Table, pressure_column, words
from trainopt.report.numbers import PRESSURE_UNITS, fixed, percent
from trainopt.report.reliability_figure import reliability_figure

if TYPE_CHECKING:
    from trainopt.train.results import Alternatives, Design, NearDesign, ReliabilityResult, RouteDesign, RouteDesigns


def beside_sections(design: Design, units: str) -> Iterator[Section]:
    """Near designs, the best designs with other media; each only where it was worked out."""
    if design.alternatives is not None:
        yield _alternatives(design, design.alternatives, units)
    if design.routes is not None and design.routes.designs:
        yield _routes(design, design.routes)


def _more(design: Design, other: NearDesign | RouteDesign) -> float | None:
    """How much higher the objective is, %."""
    if design.objective is None or other.objective is None or design.objective.value <= 0.0:
        return None
    return 100.0 * (other.objective / design.objective.value - 1.0)


def _alternatives(design: Design, near: Alternatives, units: str) -> Section:
    factor = PRESSURE_UNITS[units]
    names = [block.block for block in near.designs[0].blocks]
    rows: list[tuple[Cell, ...]] = [
        (
            bought(one.picks),
            one.area,
            one.cost,
            _more(design, one),
            *(block.pressure * factor for block in one.blocks),
            one.spare_time,
            one.safety_factor,
        )
        for one in near.designs
    ]
    columns = (
        words("Modules"),
        Column("Area", "m²"),
        Column("Cost per batch", design.currency, "whole"),
        Column("More", "%", decimals=1),
        *(pressure_column(f"Spare in {name}", units) for name in names),
        Column("Spare time", "h"),
        Column("Safety factor"),
    )
    within = percent(100.0 * near.gap)
    paragraphs = [
        f"The best picks whose objective is within {within} of the design's, the design first. Choose among them by "
        "what the model does not know: by pressure and time to spare, or by how far all areas could be derated."
    ]
    if len(near.designs) < near.asked:
        paragraphs.append(
            f"There are no more within {within}." if near.proven else "A limit stopped the search: there may be more."
        )
    table = Table("Near designs, best first", columns, tuple(rows))
    return Section("alternatives", "Near designs", tuple(paragraphs), tables=(table,))


def _routes(design: Design, routes: RouteDesigns) -> Section:
    own = tuple((s.stage, s.medium) for b in design.blocks for s in b.stages)
    rows: list[tuple[Cell, ...]] = [
        (f"{media_words(own)} (this design)", bought(design.picks), design.area, design.cost, 0.0)
    ]
    for route in routes.designs:
        what = "no design" if route.objective is None else bought(route.picks)
        rows.append((media_words(route.media), what, route.area, route.cost, _more(design, route)))
    columns = (
        words("Media"),
        words("Modules"),
        Column("Area", "m²"),
        Column("Cost per batch", design.currency, "whole"),
        Column("More", "%", decimals=1),
    )
    left = routes.allowed - len(routes.designs)
    closing = (f"{left} more allowed sequences of media are no better than these.",) if left and routes.proven else ()
    if left and not routes.proven:
        closing = (f"{left} more sequences of media are allowed; not all were looked at.",)
    table = Table("The best design for each sequence of media", columns, tuple(rows))
    return Section("media", "Other media", ("Each is proven best with its media.", *closing), tables=(table,))


def reliability_section(design: Design, sure: ReliabilityResult) -> Section:
    """The share of batches that finish, for the design and for what it is compared with."""
    rows = share_rows(design)
    table = Table(
        "Share of fresh sampled lots that finish inside every limit",
        (
            words("Design"),
            Column("Area", "m²"),
            Column("Finish", "%"),
            Column("95 % interval from", "%"),
            Column("to", "%"),
        ),
        tuple(
            (name, area, None, None, None)
            if chance is None
            else (name, area, 100.0 * chance.share, 100.0 * chance.low, 100.0 * chance.high)
            for name, area, chance in rows
        ),
    )
    shown = [(name, chance) for name, _, chance in rows]
    picture = Picture(
        "reliability",
        lambda: reliability_figure(shown, sure.target),
        "Marks are shares of lots that no design was made for, bars their 95 % intervals; the dashed line is what was "
        "asked for. A design left of it fails more often than allowed, one far right of it is larger than it need be.",
        f"{share(sure.fresh.share)} of {sure.fresh_samples} fresh lots finish with this design, {share(sure.target)} "
        "were asked for; "
        + "; ".join(f"{name}: {share(chance.share)}" for name, chance in shown[1:] if chance is not None)
        + ".",
    )
    factor = "" if sure.usual is None else (
        f"The last row is the design by the worst lot that was run and a safety factor of "
        f"{fixed(sure.usual.safety_factor, 2)}, its areas as installed.")  # fmt: skip
    paragraphs = (*reliability_sentences(sure), *((factor,) if factor else ()))
    return Section("reliability", "Reliability", paragraphs, (picture,), (table,))
