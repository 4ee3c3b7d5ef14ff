"""A problem and a pick as those lots see them that the pick holds for: how a reliability design is shown."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from trainopt.curves.sampled import SampledCurves
from trainopt.optimize.times import Choice, Lots, Route, holding_lots, lot_times
from trainopt.train.problem import Block, Candidate, DesignProblem


def shown_lots(problem: DesignProblem, route: Route, times: tuple[float, ...]) -> Lots:
    """Lots that hold at these block times; of a pick that no lot holds, the one that comes nearest."""
    lots = holding_lots(problem, route, times)
    if len(lots):
        return lots
    late = np.max([
        np.broadcast_to(lot_times(b, c, problem.volume) / t if t > 0.0 else np.inf, len(problem.lots))
        for b, c, t in zip(problem.blocks, route, times, strict=True)
    ], axis=0)  # fmt: skip
    return np.array([int(np.argmin(late))])


def held(problem: DesignProblem, lots: Lots) -> DesignProblem:
    """The problem with these lots only, all of which must hold."""

    def block(one: Block) -> Block:
        stages = tuple(replace(s, candidates=tuple(held_candidate(c, lots) for c in s.candidates)) for s in one.stages)
        return replace(one, stages=stages)

    return replace(
        problem,
        lots=tuple(problem.lots[s] for s in lots.tolist()),
        blocks=tuple(block(one) for one in problem.blocks),
        reliability=None,
    )


def held_candidate(one: Candidate, lots: Lots) -> Candidate:
    """A candidate with the curves and demands of these lots; what was tested of them becomes a cap for each."""
    options = replace(one.options, demand=one.options.demand[lots])
    if not isinstance(one.curves, SampledCurves):
        return replace(one, curves=tuple(one.curves[s] for s in lots.tolist()), options=options)
    curves = one.curves.at(lots)
    cap = min(one.loading_cap, curves.known / float(curves.fouling_factor.max()))
    return replace(one, curves=replace(curves, known=np.inf), options=options, loading_cap=cap)


def held_route(route: Route, lots: Lots) -> Route:
    """The pick with the curves and demands of these lots."""
    return tuple(
        tuple(Choice(c.stage, held_candidate(c.candidate, lots), c.option) for c in choices) for choices in route
    )
