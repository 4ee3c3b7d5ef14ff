"""What stands beside a design, as text: its reliability, other routes, and near designs."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from typing import TYPE_CHECKING

from trainopt.report.numbers import NONE, Pressure, aligned, fixed, money, significant, trimmed
from trainopt.train.limit_words import block_words, gain_words, longer_run_words

if TYPE_CHECKING:
    from trainopt.report.tables import Page
    from trainopt.train.results import Chance, Design, Limits, NearDesign, Pick, ReliabilityResult, RouteDesign


def beside(page: Page, design: Design, pressure: Pressure) -> None:
    """Add the sections that apply to the page."""
    if design.limits is not None:
        page.heading("What limits, and what more would buy" if design.limits.searched else "What limits")
        page.items(limit_sentences(design.limits, pressure.unit))
    if design.reliability is not None:
        page.heading("Reliability, share of batches that finish inside every limit")
        page.table(("Design", "Area\nm²", "Fresh lots", "95 % interval"), reliability_rows(design), 1)
        page.gap()
        page.items(reliability_sentences(design.reliability))
    if design.routes is not None and design.routes.designs:
        page.heading("The best design with other media")
        page.table(route_header(design), route_rows(design), 2)
        left = design.routes.allowed - len(design.routes.designs)
        if left:
            page.gap()
            page.line(_more_routes(left, design.routes.proven))
    if design.alternatives is not None:
        near = design.alternatives
        page.heading(f"The best picks within {share(near.gap)} of the design")
        page.table(near_header(design, pressure), near_rows(design, pressure), 1)
        if len(near.designs) < near.asked:
            page.gap()
            page.line(_no_more(len(near.designs), near.proven))


def _more_routes(left: int, proven: bool) -> str:
    if not proven:
        return f"{left} more sequences of media are allowed; a limit stopped the search before all were looked at."
    return f"{left} more allowed sequences of media are no better than these."


def _no_more(found: int, proven: bool) -> str:
    if not proven:
        return "A limit stopped the search: there may be more."
    return "There is no other within that gap." if found == 1 else "There are no more within that gap."


def limit_sentences(limits: Limits, units: str) -> list[str]:
    """What binds in each block, what a little more of each limit gains, what longer bench runs would be worth."""
    texts = [block_words(block, units) for block in limits.blocks]
    texts += [gain_words(gain, units) for gain in limits.gains]
    texts += [longer_run_words(run, units) for run in limits.longer_runs]
    if limits.searched and len(texts) == len(limits.blocks):
        texts.append(NO_GAIN)
    return texts


NO_GAIN = "No single limit, moved a little, gives a better design."


def share(value: float | None) -> str:
    """A share as a percentage to sensible digits: more of them toward all."""
    if value is None:
        return NONE
    percent = 100.0 * value
    return f"{percent:.1f} %" if percent < 99.0 else f"{percent:.2f} %" if value < 1.0 else "100 %"


def _interval(chance: Chance | None) -> str:
    return NONE if chance is None else f"{share(chance.low)} to {share(chance.high)}"


def share_rows(design: Design) -> list[tuple[str, float | None, Chance | None]]:
    """The design, the even split and the safety-factor design: area in m² and share of the same fresh lots."""
    sure, even = design.reliability, design.even_split
    assert sure is not None
    rows: list[tuple[str, float | None, Chance | None]] = [("this design", design.area, sure.fresh)]
    rows.append(("even split", None if even is None else even.area, sure.even_split))
    if sure.usual is not None:
        name = f"worst lot run, safety factor {trimmed(sure.usual.safety_factor)}"
        rows.append((name, sure.usual.area, sure.usual.fresh))
    return rows


def reliability_rows(design: Design) -> list[tuple[str, ...]]:
    """The same as texts."""
    rows = share_rows(design)
    areas = aligned([area for _, area, _ in rows])
    return [(name, area, share(chance.share if chance else None), _interval(chance))
            for (name, _, chance), area in zip(rows, areas, strict=True)]  # fmt: skip


def reliability_sentences(sure: ReliabilityResult) -> Iterator[str]:
    """What the reliability rests on, and what it amounts to."""
    yield (
        f"Asked for {share(sure.target)}; {share(sure.in_sample)} of the {sure.samples} sampled lots that it was "
        f"designed for hold (seed {sure.seed}). The shares in the table are of {sure.fresh_samples} other lots."
    )
    if sure.equivalent_safety_factor is not None:
        yield (
            f"It amounts to a safety factor of {fixed(sure.equivalent_safety_factor, 2)} on the pooled curve. "
            "A sampled lot also fails where it would be loaded beyond what was tested."
        )


def media_words(media: Iterable[tuple[str, str]]) -> str:
    """(stage, medium) pairs as the media in flow order."""
    return " → ".join(medium for _, medium in media) or "no stage"


def bought(picks: Sequence[Pick]) -> str:
    """What is bought, in one line."""
    return ", ".join(f"{pick.count} × {pick.module}" for pick in picks) or "no module"


def route_header(design: Design) -> tuple[str, ...]:
    """Headings of the table of routes."""
    return ("Media", "Modules", "Area\nm²", f"Cost\n{design.currency}" if design.currency else "Cost", "More")


def route_rows(design: Design) -> list[tuple[str, ...]]:
    """One row a route, the design's own first."""
    assert design.routes is not None
    areas = aligned([design.area, *(route.area for route in design.routes.designs)])
    own = media_words((s.stage, s.medium) for b in design.blocks for s in b.stages)
    rows: list[tuple[str, ...]] = [(f"{own} (this design)", bought(design.picks), areas[0], money(design.cost, ""), "")]
    for route, area in zip(design.routes.designs, areas[1:], strict=True):
        media = media_words(route.media)
        if route.objective is None:
            rows.append((media, "no design", NONE, NONE, ""))
        else:
            rows.append((media, bought(route.picks), area, money(route.cost, ""), _more(design, route)))
    return rows


def _more(design: Design, other: RouteDesign | NearDesign) -> str:
    """How much higher the objective is, in percent."""
    if design.objective is None or other.objective is None or design.objective.value <= 0.0:
        return ""
    return f"{100.0 * (other.objective / design.objective.value - 1.0):.1f} %"


def near_header(design: Design, pressure: Pressure) -> tuple[str, ...]:
    """Headings of the table of near designs: pressure that each block does not need, time left, derating it takes."""
    spare = [f"Spare in {block.block}\n{pressure.unit}" for block in design.blocks]
    return ("Modules", "Area\nm²", "More", *spare, "Spare\nh", "Safety\nfactor")


def near_rows(design: Design, pressure: Pressure) -> list[tuple[str, ...]]:
    """One row a pick, the design first."""
    assert design.alternatives is not None
    designs = design.alternatives.designs
    areas = aligned([one.area for one in designs])
    return [
        (
            bought(one.picks),
            area,
            "" if one is designs[0] else _more(design, one),
            *(pressure.number(block.pressure) for block in one.blocks),
            significant(one.spare_time, 2) if one.spare_time > 1e-9 else "0",
            fixed(one.safety_factor, 2),
        )
        for one, area in zip(designs, areas, strict=True)
    ]
