"""A design problem with some of its limits moved, in plain numbers: no file is read and no curve fitted again."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from trainopt.curves.sampled import SampledCurves
from trainopt.optimize.times import Choice, Route
from trainopt.train.options import Cap, inside_caps, joined, take
from trainopt.train.problem import Block, Candidate, DesignProblem, Options, Stage
from trainopt.train.results import Pick

NodeKey = tuple[str, str]
"""(stage, medium)."""


@dataclass(frozen=True)
class Move:
    """What to move; what is not named stays.

    `time` h, `volume` L, `safety_factor`; by block name `pressure` in bar; by (stage, medium) the loading `cap` L/m²,
    `flux` limit LMH, and the ratings `differential_pressure` and `inlet_pressure` in bar; by (stage, module) the
    highest `count` on offer.
    """

    time: float | None = None
    volume: float | None = None
    safety_factor: float | None = None
    pressure: Mapping[str, float] = field(default_factory=dict)
    cap: Mapping[NodeKey, float] = field(default_factory=dict)
    flux: Mapping[NodeKey, float] = field(default_factory=dict)
    differential_pressure: Mapping[NodeKey, float] = field(default_factory=dict)
    inlet_pressure: Mapping[NodeKey, float] = field(default_factory=dict)
    count: Mapping[tuple[str, str], float] = field(default_factory=dict)


def restated(problem: DesignProblem, move: Move) -> DesignProblem:
    """The problem (unpruned) with its limits moved; its options are those inside the caps as they then stand.

    Candidates that do not know all that is on offer keep to the options they have.
    """
    moved = replace(
        problem,
        time=problem.time if move.time is None else move.time,
        volume=problem.volume if move.volume is None else move.volume,
        safety_factor=problem.safety_factor if move.safety_factor is None else move.safety_factor,
    )
    scaled = move.volume is not None or move.safety_factor is not None
    return replace(moved, blocks=tuple(_block(moved, block, move, scaled) for block in problem.blocks))


def _block(problem: DesignProblem, block: Block, move: Move, scaled: bool) -> Block:
    stages = tuple(
        Stage(s.name, s.optional, tuple(_candidate(problem, block, s, c, move, scaled) for c in s.candidates))
        for s in block.stages
    )
    return replace(block, pressure=move.pressure.get(block.name, block.pressure), stages=stages)


def _candidate(
    problem: DesignProblem, block: Block, stage: Stage, one: Candidate, move: Move, scaled: bool
) -> Candidate:
    key = (stage.name, one.medium)
    out = replace(
        one,
        differential_pressure=move.differential_pressure.get(key, one.differential_pressure),
        inlet_pressure=move.inlet_pressure.get(key, one.inlet_pressure),
        flux_limit=move.flux.get(key, one.flux_limit),
        loading_cap=move.cap.get(key, one.loading_cap),
    )
    for (place, module), most in move.count.items():
        if place == stage.name and one.on_offer is not None and module in one.on_offer.module:
            return refilled(problem, block, replace(out, on_offer=more_of(one.on_offer, module, int(most + 1e-6))))
    if key in move.cap and isinstance(one.curves, SampledCurves):
        # A loading limit in place of what was tested lets every lot go that far.
        out = replace(out, curves=replace(one.curves, known=math.inf))
    return refilled(problem, block, out) if scaled or key in move.cap or key in move.flux else out


def more_of(offer: Options, module: str, most: int) -> Options:
    """What is on offer with higher counts of one module, up to `most`, each at the price of one more of it.

    Holders are left out: where they cost something, their number is not known here.
    """
    own = np.array([place for place, name in enumerate(offer.module) if name == module])
    last = int(own[np.argmax(offer.count[own])])
    counts = np.arange(int(offer.count[last]) + 1, most + 1)
    if not len(counts):
        return offer
    added = take(offer, np.full(len(counts), last))
    scale = counts / offer.count[last]
    added = replace(
        added,
        count=counts,
        holders=(None,) * len(counts),
        area=added.area * scale,
        modules_cost=added.modules_cost * scale,
        holders_cost=np.zeros(len(counts)),
        flush_cost=added.flush_cost * scale,
        product_cost=added.product_cost * scale,
        weight=added.weight * scale,
        loading=added.loading / scale,
    )
    return joined([offer, added])


def refilled(problem: DesignProblem, block: Block, one: Candidate) -> Candidate:
    """The candidate with the options that its caps and curves allow at the problem's volume and safety factor."""
    source = one.options if one.on_offer is None else one.on_offer
    order = np.lexsort((source.count, source.area))
    offer = take(source, order) if one.on_offer is not None else source
    loading = problem.safety_factor * problem.volume / (one.scale_up * offer.area)
    empty = replace(offer, loading=loading, demand=np.zeros((0, len(offer))))
    cap = Cap(one.loading_cap, one.cap_reason)
    options, dropped = inside_caps(empty, cap, one.curves, block.operation, one.flux_limit, problem.volume,
                                   problem.may_fail)  # fmt: skip
    return replace(one, options=options, dropped=dropped)


def route_of_picks(problem: DesignProblem, picks: Iterable[Pick]) -> Route | None:
    """The picks as options of this problem, None where one of them is not among its options."""
    wanted = {pick.stage: pick for pick in picks}
    blocks: list[tuple[Choice, ...]] = []
    for block in problem.blocks:
        choices: list[Choice] = []
        for stage in block.stages:
            pick = wanted.get(stage.name)
            if pick is None:
                continue
            choice = _choice(stage, pick)
            if choice is None:
                return None
            choices.append(choice)
        blocks.append(tuple(choices))
    return tuple(blocks)


def _choice(stage: Stage, pick: Pick) -> Choice | None:
    for candidate in stage.candidates:
        if candidate.medium == pick.medium:
            place = _place(candidate.options, pick)
            return None if place is None else Choice(stage, candidate, place)
    return None


def _place(options: Options, pick: Pick) -> int | None:
    for place in np.flatnonzero(options.count == pick.count).tolist():
        if options.module[place] == pick.module:
            return int(place)
    return None


def picks_of(route: Route) -> tuple[Pick, ...]:
    """What a pick buys, in flow order."""
    return tuple(
        Pick(c.stage.name, c.candidate.medium, c.candidate.options.module[c.option],
             int(c.candidate.options.count[c.option]))
        for block in route for c in block
    )  # fmt: skip
