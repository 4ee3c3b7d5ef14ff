"""What must hold for any train (hypothesis): never worse than the even split, monotone, scalable, the same two ways."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest
from factory import random_problem
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from trainopt.optimize.design import design
from trainopt.optimize.even_split import even_split
from trainopt.optimize.restate import Move, refilled, restated
from trainopt.optimize.search import best_route
from trainopt.optimize.staircase import staircase
from trainopt.optimize.times import block_times, objective_of
from trainopt.train.build import prune
from trainopt.train.problem import DesignProblem

trains = st.integers(0, 10**6).map(lambda seed: random_problem(seed, pressure=True))
few = settings(max_examples=100, deadline=None, suppress_health_check=[HealthCheck.too_slow], derandomize=True)


def objective(p: DesignProblem) -> float:
    return best_route(prune(p)).objective


@few
@given(trains)
def test_the_optimum_never_loses_to_the_even_split(p: DesignProblem) -> None:
    even = even_split(p)
    if even.route is None:
        return
    assert block_times(p, even.route) is not None
    assert objective(p) <= objective_of(p, even.route, even.times) * (1 + 1e-9)


@few
@given(trains)
def test_staircase_and_solver_agree(p: DesignProblem) -> None:
    stairs = staircase(prune(p))
    place = stairs.best()
    found = best_route(prune(p))
    if place is None or found.route is None:
        assert place is None and found.route is None
        return
    assert float(stairs.weight[place]) == pytest.approx(found.objective, rel=1e-9)


@few
@given(trains, st.floats(1.0, 1.5), st.floats(1.0, 1.5))
def test_more_time_and_pressure_are_never_worse(p: DesignProblem, longer: float, higher: float) -> None:
    base = objective(p)
    assert objective(replace(p, time=p.time * longer)) <= base * (1 + 1e-9)
    raised = {b.name: b.pressure * higher for b in p.blocks if b.operation == "constant-flow"}
    assert objective(restated(p, Move(pressure=raised))) <= base * (1 + 1e-9)


@few
@given(trains, st.data())
def test_one_more_option_is_never_worse(p: DesignProblem, data: st.DataObject) -> None:
    """A problem with one module type taken away is never better than the whole."""
    whole = objective(p)
    names = sorted({m for b in p.blocks for s in b.stages for c in s.candidates for m in c.options.module})
    if not names:
        return
    gone = data.draw(st.sampled_from(names))
    caps = {(s.name, c.medium): 1e-9 for b in p.blocks for s in b.stages for c in s.candidates
            if gone in c.options.module}  # fmt: skip
    assert objective(restated(p, Move(cap=caps))) >= whole * (1 - 1e-9)


@few
@given(trains, st.floats(0.25, 4.0))
def test_volume_and_areas_scaled_together_change_no_loading_and_no_pick(p: DesignProblem, factor: float) -> None:
    """Line and pump scale with the flow: per area nothing changes."""
    blocks = []
    for b in p.blocks:
        wider = replace(b, line=b.line / factor, min_flow=b.min_flow * factor, max_flow=b.max_flow * factor)
        blocks.append(wider)
    scaled = replace(p, volume=p.volume * factor, blocks=tuple(blocks))

    def bigger(block, candidate):  # type: ignore[no-untyped-def]
        offer = candidate.on_offer
        weight = offer.weight * factor if p.objective == "area" else offer.weight
        offer = replace(offer, area=offer.area * factor, weight=weight)
        sizes = tuple(replace(size, area=size.area * factor) for size in candidate.modules)
        return refilled(scaled, block, replace(candidate, on_offer=offer, modules=sizes))

    scaled = replace(scaled, blocks=tuple(
        replace(b, stages=tuple(replace(s, candidates=tuple(bigger(b, c) for c in s.candidates)) for s in b.stages))
        for b in scaled.blocks))  # fmt: skip
    first, second = design(p), design(scaled)
    assert first.status == second.status
    assert [(k.stage, k.module, k.count) for k in first.picks] == [(k.stage, k.module, k.count) for k in second.picks]
    loadings = [[s.loading for b in d.blocks for s in b.stages] for d in (first, second)]
    assert loadings[0] == pytest.approx(loadings[1], rel=1e-9)


@few
@given(trains, st.floats(0.2, 0.95))
def test_a_smaller_batch_or_safety_factor_is_never_worse(p: DesignProblem, part: float) -> None:
    if any(b.min_flow > 0.0 for b in p.blocks):
        return  # a smaller batch must also be done sooner where a pump has a least flow
    base = objective(p)
    assert objective(restated(p, Move(volume=p.volume * part))) <= base * (1 + 1e-9) or math.isinf(base)
    assert objective(restated(p, Move(safety_factor=p.safety_factor * part))) <= base * (1 + 1e-9) or math.isinf(base)
