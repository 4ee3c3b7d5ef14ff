"""What limits a design, what a little more of each limit would gain, and what a longer bench run would be worth."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import replace
from functools import partial
from typing import TYPE_CHECKING

from trainopt.curves.curve import Curve
from trainopt.curves.sampled import SampledCurves
from trainopt.optimize.area_parts import pooled_curve
from trainopt.optimize.nearest import TIE, Better, Lever, Picks, nearest_better, solved
from trainopt.optimize.restate import Move, restated, route_of_picks
from trainopt.optimize.times import Route, block_bounds, kept_lots
from trainopt.train.limit_words import block_words, gain_words, longer_run_words
from trainopt.train.problem import Block, Candidate, DesignProblem, Stage
from trainopt.train.results import BlockLimit, Design, Gain, Limits, LongerRun, Pick

if TYPE_CHECKING:
    from trainopt.files import Case
    from trainopt.optimize.design import Prepared


def what_limits(what: Case | Prepared, objective: str | None = None) -> Limits | None:
    """Design a case and say what limits it, what a little more of each limit gains, what longer bench runs are worth.

    None where no design exists (the design's `reasons` say why); raises what `design` raises.
    """
    # A design says what binds by this module, which asks for designs only here.
    from trainopt.optimize.design import Prepared, prepare
    from trainopt.optimize.design import design as find_design

    prepared = what if isinstance(what, Prepared) else prepare(what, objective)
    return limits(prepared.problem, find_design(prepared), prepared.curves)


def limits(
    problem: DesignProblem, design: Design, curves: Mapping[str, Curve] | None = None, search: bool = True
) -> Limits | None:
    """What limits a proven design of `problem` (with all its options), or None where there is none.

    `curves` gives the flux and temperature that the media were tested at; without them their flux limits stand in.
    `search` False: only what binds, without asking for other designs.
    """
    route = route_of_picks(problem, design.picks)
    if route is None or design.objective is None or not design.blocks:
        return None
    return Limits(
        blocks=tuple(_block_limits(problem, design, route)),
        gains=tuple(gains(problem, design)) if search else (),
        longer_runs=tuple(longer_runs(problem, design, curves or {})) if search else (),
        searched=search,
    )


def _block_limits(problem: DesignProblem, design: Design, route: Route) -> Iterator[BlockLimit]:
    lots = kept_lots(problem, route) if problem.may_fail else None
    for block, choices, shown in zip(problem.blocks, route, design.blocks, strict=True):
        needed = block_bounds(block, choices, problem.volume, lots).limits
        (stage, name), time = max(needed.items(), key=lambda item: item[1])
        used = time / shown.time if shown.time > 0.0 else 0.0
        stages = {one.stage: one.limited_by for one in shown.stages}
        one = BlockLimit(block.name, name, stage, used, stages, "", block.head, shown.pressure.spare)
        yield replace(one, text=block_words(one))


def gains(problem: DesignProblem, design: Design) -> Iterator[Gain]:
    """For time, each block's pressure and each used stage's limits: the least more that makes the design better.

    Exact: the better design is proven best at that value, and that there is none just below. With hours paid for, where
    more of a limit gains at once, what 10 % more gains. Limits that gain nothing, however high, are left out.
    """
    assert design.objective is not None
    base = design.objective.value
    found = [
        _gain(problem, lever, better, base, design.picks)
        for lever in _levers(problem, design.picks)
        if (better := nearest_better(problem, lever, design.picks, base)) is not None
    ]
    yield from sorted(found, key=lambda gain: (max(gain.needs / gain.now, gain.now / gain.needs), gain.field))


def _levers(problem: DesignProblem, picks: Picks) -> Iterator[Lever]:
    yield Lever("batch.time_h", "the batch", "h", problem.time, lambda v: Move(time=v))
    factor = problem.safety_factor
    if factor > 1.0:
        # Lowered, never below 1: its divisor is what is raised.
        lower = partial(_factor_divided, factor)
        yield Lever("safety_factor", "a safety factor", "", 1.0, lower, factor, lambda v: factor / v)
    used = {pick.stage: pick.medium for pick in picks}
    for block in problem.blocks:
        most = math.inf if block.operation == "constant-flow" else _rating(block)
        move = partial(_pressure, block.name)
        yield Lever(f"{block.name}.pressure_bar", f"'{block.name}'", "bar", block.pressure, move, most)
        for stage in block.stages:
            for one in stage.candidates:
                if used.get(stage.name) == one.medium:
                    yield from _stage_levers(block, stage, one)
                    yield from _count_levers(problem, stage, one)


def _rating(block: Block) -> float:
    """The most pressure that a constant-pressure block's media are rated for, bar."""
    rated = [min(c.differential_pressure + block.static, c.inlet_pressure) for s in block.stages for c in s.candidates]
    return min(rated, default=math.inf)


def _count_levers(problem: DesignProblem, stage: Stage, one: Candidate) -> Iterator[Lever]:
    """The highest count on offer of each module of a used medium; where cost counts, only of those without a holder."""
    offer = one.on_offer
    for size in one.modules if offer is not None else ():
        assert offer is not None
        held = any(h is not None for h, m in zip(offer.holders, offer.module, strict=True) if m == size.name)
        if held and problem.objective == "cost":
            continue
        most = partial(_most_of, stage.name, size.name)
        what = f"{size.name} in '{stage.name}'"
        yield Lever(f"{stage.name}.max_count", what, "modules", size.high, most, _MORE * size.high, _whole)


_MORE = 4.0
"""How many times the modules on offer are asked about at most."""


def _whole(count: float) -> float:
    return float(round(count))


def _most_of(stage: str, module: str, count: float) -> Move:
    return Move(count={(stage, module): count})


def _stage_levers(block: Block, stage: Stage, one: Candidate) -> Iterator[Lever]:
    """The limits of a used medium, without those that cannot bind whatever is picked."""
    key, what, options = (stage.name, one.medium), f"{one.medium} in '{stage.name}'", one.options
    cap, flux, rating, inlet = one.loading_cap, one.flux_limit, one.differential_pressure, one.inlet_pressure
    # Where a sampled lot fails beyond what was tested, a given limit would be another rule: longer runs are asked for.
    fails_beyond = isinstance(one.curves, SampledCurves) and math.isfinite(one.curves.known)
    if not fails_beyond and (one.on_offer is None or len(options) < len(one.on_offer)):
        yield Lever(f"{key[0]}.loading_limit_L_m2", f"loading of {what}", "L/m2", cap, lambda v: Move(cap={key: v}))
    if (options.shortest_time * block.head > options.demand.max(axis=0)).any():
        yield Lever(f"{key[0]}.flux_limit_LMH", f"flux of {what}", "LMH", flux, lambda v: Move(flux={key: v}))
    if block.operation != "constant-flow":
        return
    if rating < block.head:
        yield Lever(
            f"{key[0]}.differential_pressure_bar", f"differential pressure of {what}", "bar", rating,
            lambda v: Move(differential_pressure={key: v}), block.pressure,
        )  # fmt: skip
    if inlet < block.pressure:
        yield Lever(
            f"{key[0]}.inlet_pressure_bar", f"inlet pressure of {what}", "bar", inlet,
            lambda v: Move(inlet_pressure={key: v}), block.pressure,
        )  # fmt: skip


def _factor_divided(factor: float, divisor: float) -> Move:
    return Move(safety_factor=factor / divisor)


def _pressure(block: str, value: float) -> Move:
    return Move(pressure={block: value})


def _gain(problem: DesignProblem, lever: Lever, better: Better, base: float, before: Picks) -> Gain:
    now, needs, saves = lever.shown(lever.now), lever.shown(better.needs), base - better.objective
    parts = (lever.what, changes(before, better.picks), _amount(problem, saves))
    gain = Gain(lever.field, lever.unit, now, needs, better.objective, saves, better.picks, "", *parts)
    return replace(gain, text=gain_words(gain))


def _amount(problem: DesignProblem, saves: float) -> str:
    unit = "m2" if problem.objective == "area" else f"{problem.currency or 'of the cost'} per batch"
    return f"{saves:.3g} {unit}"


def changes(before: Picks, after: Picks) -> str:
    """What is bought otherwise, in words."""
    old, new = {p.stage: p for p in before}, {p.stage: p for p in after}
    texts = []
    for stage in dict.fromkeys([*old, *new]):
        one, other = old.get(stage), new.get(stage)
        if one is None or other is None:
            texts.append(f"'{stage}' is left out" if other is None else f"'{stage}' with {_many(other)}")
        elif (one.medium, one.module) != (other.medium, other.module):
            texts.append(f"{_many(other)} in place of {_many(one)} in '{stage}'")
        elif one.count != other.count:
            word = "fewer" if other.count < one.count else "more"
            texts.append(f"{abs(other.count - one.count)} × {one.module} {word} in '{stage}'")
    return ", ".join(texts) or "the same modules"


def _many(pick: Pick) -> str:
    return f"{pick.count} × {pick.module}"


def longer_runs(problem: DesignProblem, design: Design, curves: Mapping[str, Curve]) -> Iterator[LongerRun]:
    """For each medium held by the loading tested: what runs that went on further would be worth, most first."""
    assert design.objective is not None
    base = design.objective.value
    places: dict[str, list[tuple[str, Candidate]]] = {}
    for block in problem.blocks:
        for stage in block.stages:
            for one in stage.candidates:
                if one.cap_reason == "loading-tested":
                    places.setdefault(one.medium, []).append((stage.name, one))
    found = []
    for medium, held in sorted(places.items()):
        move = Move(cap={(stage, medium): one.further_cap for stage, one in held})
        better = solved(problem, move)
        if better is not None and better[0] < base - TIE * max(1.0, abs(base)):
            worst = _worst_fouling(restated(problem, move), medium, better[1], held[0][1])
            found.append(_longer_run(problem, held[0][1], better, base, curves.get(medium), worst))
    yield from sorted(found, key=lambda run: (-run.saves, run.medium))


def _worst_fouling(problem: DesignProblem, medium: str, picks: Picks, one: Candidate) -> float:
    """The highest κ of the lots that a design holds for, with a medium wherever it uses it."""
    route = route_of_picks(problem, picks)
    lots = kept_lots(problem, route) if problem.may_fail and route is not None else None
    if route is None or lots is None:
        return max(curve.fouling_factor for curve in one.curves)
    used = [c.candidate for choices in route for c in choices if c.candidate.medium == medium]
    return max(float(candidate.curves[lot].fouling_factor) for candidate in used for lot in lots.tolist())


def _longer_run(
    problem: DesignProblem,
    one: Candidate,
    better: tuple[float, Picks],
    base: float,
    curve: Curve | None,
    worst: float,
) -> LongerRun:
    """`worst` is the highest κ of the lots that the better design holds for."""
    objective, picks = better
    area = {m.name: m.area for m in one.modules}
    sampled = one.curves if isinstance(one.curves, SampledCurves) else None
    loading = max(
        worst * problem.safety_factor * problem.volume / (one.scale_up * area[p.module] * p.count)
        for p in picks if p.medium == one.medium
    )  # fmt: skip
    seen = pooled_curve(one) if curve is None else curve.lot_curve(None)
    flux = one.flux_limit if curve is None else curve.tested_flux
    pressure = seen.resistance(loading) * flux
    tested = worst * one.loading_cap if sampled is None else sampled.known
    saved = _amount(problem, base - objective)
    run = LongerRun(one.medium, tested, loading, flux, pressure, objective, base - objective, picks, "", saved)
    return replace(run, text=longer_run_words(run))
