"""The staircase against every design one by one, at many batch times, and against the solver."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from factory import Medium, block, combinations, enumerated, flat, problem, random_problem, shortest_time, stage, values

from trainopt.optimize.index import index_problem
from trainopt.optimize.pareto import undominated_points
from trainopt.optimize.search import best_route
from trainopt.optimize.staircase import block_steps, staircase
from trainopt.train.build import prune


def best(p, time: float | None = None) -> float:  # type: ignore[no-untyped-def]
    """The least objective on the staircase."""
    stairs = staircase(prune(p))
    place = stairs.best(time)
    return math.inf if place is None else float(stairs.weight[place])


def test_random_trains_equal_enumeration() -> None:
    found = 0
    for seed in range(300):
        p = random_problem(seed, pressure=True)
        expected = enumerated(p)
        found += math.isfinite(expected)
        assert best(p) == pytest.approx(expected, rel=1e-9), seed
    assert 100 < found < 300


def test_one_staircase_answers_every_shorter_time() -> None:
    for seed in range(60):
        p = random_problem(seed, pressure=True)
        stairs = staircase(prune(p))
        every = [values(p, picks) for picks in combinations(p)]
        for part in (0.3, 0.55, 0.7, 0.85, 0.95, 1.0):
            time = part * p.time
            expected = min((v for v, needed in every if needed <= time * (1 + 1e-9)), default=math.inf)
            place = stairs.best(time)
            found = math.inf if place is None else float(stairs.weight[place])
            assert found == pytest.approx(expected, rel=1e-9), (seed, part)


def test_the_route_at_a_place_is_what_the_place_says() -> None:
    for seed in range(60):
        p = random_problem(seed)
        stairs = staircase(prune(p))
        for place in range(len(stairs.weight)):
            route = stairs.route(place)
            picks = tuple(tuple((c.candidate, c.option) for c in choices) for choices in route)
            value, needed = values(p, picks)
            assert value == pytest.approx(float(stairs.weight[place]), rel=1e-9), seed
            assert needed == pytest.approx(float(stairs.time[place]), rel=1e-9, abs=1e-12), seed


def test_no_place_is_beaten_by_another() -> None:
    for seed in range(40):
        stairs = staircase(prune(random_problem(seed)))
        for k in range(len(stairs.weight)):
            lighter = stairs.weight < stairs.weight[k] * (1 - 1e-8)
            assert not (lighter & (stairs.time <= stairs.time[k])).any(), seed


def test_longer_trains_agree_with_the_solver() -> None:
    for seed in range(25):
        p = prune(random_problem(seed, blocks=2, stages=4, most=25, lots=2))
        assert best(p) == pytest.approx(best_route(p).objective, rel=1e-9), seed


def test_tie_goes_to_the_design_that_leaves_most_spare_pressure_time() -> None:
    """Two media of one area and weight, one with less resistance."""
    one = block("b", stage("s", flat("rough", 2e-3), flat("smooth", 1e-3)))
    stairs = staircase(prune(problem(one, volume=1000.0, time=5.0)))
    place = stairs.best()
    assert place is not None
    assert stairs.route(place)[0][0].candidate.medium == "smooth"


def test_closed_form_steps_of_one_flat_stage() -> None:
    """n modules of 1 m² need t = R·V/(n·P): the staircase is those counts that fit, each with its time."""
    R, V, P = 1e-3, 1000.0, 2.0
    stairs = staircase(prune(problem(block("b", stage("s", flat("m", R)), pressure=P), volume=V, time=0.0501)))
    assert stairs.weight.tolist() == list(range(10, 41))
    assert stairs.time == pytest.approx(R * V / (stairs.weight * P), rel=1e-12)


def test_block_steps_are_the_undominated_designs_of_a_block() -> None:
    for seed in range(40):
        p = prune(random_problem(seed, blocks=1, routes=False, lots=1, hours=False))
        if any(not s.candidates or not any(len(c.options) for c in s.candidates) for s in p.blocks[0].stages):
            continue
        ((_, steps),) = block_steps(index_problem(p), 0).items() or ((None, None),)
        times = steps.times(p.blocks[0], p.volume)
        assert (times <= p.longest_time(p.blocks[0]) * (1 + 1e-8)).all()
        found = sorted({round(float(w), 9) for w in steps.weight})
        every = []
        for picks in combinations(p):
            time = shortest_time(p, p.blocks[0], picks[0])
            if time <= p.longest_time(p.blocks[0]):
                every.append((sum(float(c.options.weight[k]) for c, k in picks[0]), time))
        # The staircase keeps at least every weight that is best within some time.
        needed, quickest = [], math.inf
        for weight, time in sorted(every):
            if time < quickest * (1 - 1e-9):
                needed.append(round(weight, 9))
                quickest = time
        assert set(needed) <= set(found), seed


def test_points_are_filtered_exactly() -> None:
    rng = np.random.default_rng(7)
    for rows in (1, 2, 3, 4):
        points = rng.integers(0, 12, size=(rows, 400)).astype(float)
        kept = undominated_points(points)
        expected = {
            tuple(points[:, k]) for k in range(400)
            if not any((points[:, j] <= points[:, k]).all() and (points[:, j] < points[:, k]).any() for j in range(400))
        }  # fmt: skip
        assert {tuple(points[:, k]) for k in kept} == expected
        assert len(kept) == len(expected)


def test_no_staircase_without_an_option_or_a_route() -> None:
    heavy = problem(block("b", stage("s", flat("m", 1e-3, cap=1.0))), volume=1000.0)
    assert len(staircase(prune(heavy)).weight) == 0
    assert staircase(prune(heavy)).best() is None
    lost = problem(block("b", stage("s", flat("m", 1e-3)), stage("t", flat("n", 1e-3, after=("other",)))))
    assert len(staircase(prune(lost)).weight) == 0


def test_more_time_pressure_or_options_never_make_it_worse() -> None:
    for seed in range(60):
        p = random_problem(seed, hours=False)
        base = best(p)
        assert best(replace(p, time=p.time * 1.07)) <= base * (1 + 1e-9), seed
        raised = replace(p, blocks=tuple(replace(b, pressure=b.pressure * 1.05) for b in p.blocks))
        assert best(raised) <= base * (1 + 1e-9), seed


def test_volume_and_areas_scaled_together_change_no_pick() -> None:
    """Loadings stay, so do demands per volume: twice the volume through twice the areas is the same design."""
    sizes = (("x", 1.5, 200.0, 12),)
    doubled = (("x", 3.0, 200.0, 12),)

    def made(volume: float, on_offer: tuple[tuple[str, float, float, int], ...]) -> list[int]:
        one = block("b", stage("s", Medium("u", "intermediate", (1e-3, 0.01), sizes=on_offer, cap=250.0)),
                    stage("t", Medium("v", "cake", (2e-3, 0.02), sizes=on_offer, cap=300.0)))  # fmt: skip
        stairs = staircase(prune(problem(one, volume=volume, time=2.0)))
        place = stairs.best()
        assert place is not None
        return [int(c.candidate.options.count[c.option]) for c in stairs.route(place)[0]]

    assert made(1500.0, sizes) == made(3000.0, doubled)
