"""Near designs and other routes against full enumeration, written apart from the package."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from independent import Spec, random_spec, routes, value_of, write

import trainopt
from trainopt.optimize.design import prepare
from trainopt.optimize.restate import route_of_picks
from trainopt.optimize.times import block_times

ROOT = Path(__file__).parent.parent.parent
Name = tuple[str, str, int]


def every_design(spec: Spec) -> list[tuple[float, tuple[tuple[str, Name], ...]]]:
    """(objective, ((stage, (medium, module, count)), …)) of every pick that meets every limit, best first."""
    found = []
    for blocks in routes(spec):
        value = value_of(spec, blocks)
        if math.isfinite(value):
            found.append((value, blocks))
    # Which stage an option serves follows from its place among the used ones only where all are used.
    return sorted(
        ((value, tuple((p.medium, p.module, p.count) for block in blocks for p in block)) for value, blocks in found),
        key=lambda one: one[0],
    )  # type: ignore[arg-type, return-value]


@pytest.mark.parametrize("first", range(0, 60, 20))
def test_near_designs_are_the_best_picks_in_order(first: int, tmp_path: Path) -> None:
    seen = 0
    for seed in range(first, first + 20):
        spec = random_spec(seed, counts=3)
        result = trainopt.design(trainopt.load_case(write(spec, tmp_path / str(seed))), alternatives=6, gap=0.25)
        if result.status != "optimal":
            continue
        expected = every_design(spec)
        near, best = result.alternatives, expected[0][0]
        assert near is not None
        assert near.proven
        within = [one for one in expected if one[0] <= best * 1.25 * (1.0 + 1e-9)][:6]
        assert [one.objective for one in near.designs] == pytest.approx([value for value, _ in within], rel=1e-9), seed
        assert near.designs[0].picks == result.picks
        assert len({one.picks for one in near.designs}) == len(near.designs)
        allowed = {picks for _, picks in expected}
        for one in near.designs:
            assert tuple((p.medium, p.module, p.count) for p in one.picks) in allowed, seed
            assert one.safety_factor is None or one.safety_factor >= spec.safety_factor * (1.0 - 1e-9)
            assert all(block.pressure >= 0.0 for block in one.blocks)
        seen += len(near.designs) > 1
    assert seen > 2


@pytest.mark.parametrize("first", range(0, 80, 20))
def test_every_other_route_has_its_best_design(first: int, tmp_path: Path) -> None:
    seen = 0
    for seed in range(first, first + 20):
        spec = random_spec(seed, counts=3)
        result = trainopt.design(trainopt.load_case(write(spec, tmp_path / str(seed))), routes=True)
        if result.status != "optimal" or result.routes is None:
            continue
        best: dict[tuple[str, ...], float] = {}
        for blocks in routes(spec):
            media = tuple(p.medium for block in blocks for p in block)
            best[media] = min(best.get(media, math.inf), value_of(spec, blocks))
        own = tuple(p.medium for p in result.picks)
        # Two stages that may be left out can give the same media in two ways: compare the best of each.
        found: dict[tuple[str, ...], float] = {}
        for route in result.routes.designs:
            media = tuple(medium for _, medium in route.media)
            value = math.inf if route.objective is None else route.objective
            found[media] = min(found.get(media, math.inf), value)
        complete = len(result.routes.designs) == result.routes.allowed
        for media, value in found.items():
            if media != own and media in best and complete:
                assert value == pytest.approx(best[media], rel=1e-9), (seed, media)
                seen += 1
        order = [math.inf if r.objective is None else r.objective for r in result.routes.designs]
        assert order == sorted(order)
    assert seen > 5


def test_spare_pressure_and_time_are_what_is_left() -> None:
    case = trainopt.load_case(ROOT / "scenarios" / "harvest.yaml")
    prepared = prepare(case)
    result = trainopt.design(prepared, alternatives=4)
    assert result.alternatives is not None
    first = result.alternatives.designs[0]
    assert [b.pressure for b in first.blocks] == pytest.approx([b.pressure.spare for b in result.blocks], abs=1e-12)
    assert first.safety_factor == pytest.approx(result.safety_factor)
    for one in result.alternatives.designs:
        # Without the spare time, and a hair more, the pick no longer finishes.
        for cut, works in ((one.spare_time * (1.0 - 1e-6), True), (one.spare_time + 1e-6, False)):
            from dataclasses import replace

            shorter = replace(prepared.problem, time=prepared.problem.time - cut)
            route = route_of_picks(shorter, one.picks)
            assert route is not None
            assert (block_times(shorter, route) is not None) is works


def test_many_routes_are_cut_to_the_best() -> None:
    from factory import Medium, block, problem, stage

    from trainopt.optimize.alternatives import ROUTES
    from trainopt.optimize.design import design

    def media(stage_name: str) -> list[Medium]:
        return [Medium(f"{stage_name}{k}", "intermediate", (1e-3 * (1 + 0.3 * k), 4e-3)) for k in range(5)]

    train = problem(block("b", stage("x", *media("x")), stage("y", *media("y"))), volume=1500.0, time=4.0)
    result = design(train, routes=True)
    assert result.routes is not None
    assert result.routes.allowed == 24
    assert len(result.routes.designs) == ROUTES
    values = [route.objective for route in result.routes.designs]
    alone = []
    for one in train.blocks[0].stages[0].candidates:
        for other in train.blocks[0].stages[1].candidates:
            from dataclasses import replace

            stages = (
                replace(train.blocks[0].stages[0], candidates=(one,)),
                replace(train.blocks[0].stages[1], candidates=(other,)),
            )
            found = design(replace(train, blocks=(replace(train.blocks[0], stages=stages),)))
            if found.objective is not None:
                alone.append(found.objective.value)
    assert values == pytest.approx(sorted(alone)[1 : ROUTES + 1])
