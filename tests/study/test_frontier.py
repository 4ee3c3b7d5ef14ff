"""The frontier against the solver, the fast even split against the rule: on random trains with everything
switched on."""

from __future__ import annotations

import math
import random
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import trainopt
from tests.study.trains import random_case
from trainopt.files import Case
from trainopt.optimize.design import even_design, prepare
from trainopt.optimize.search import best_route
from trainopt.optimize.times import block_times, objective_of
from trainopt.study import labels
from trainopt.study.cells import Cells
from trainopt.study.even import EvenTable
from trainopt.study.frontier import SharedHoldersError, TooManyLabelsError, frontier
from trainopt.train.build import prune


def named(route):
    return [
        (
            c.stage.name,
            c.candidate.medium,
            c.candidate.options.module[c.option],
            int(c.candidate.options.count[c.option]),
        )
        for block in route
        for c in block
    ]


@settings(max_examples=120, deadline=None, derandomize=True)
@given(seed=st.integers(0, 10**6), stages=st.integers(1, 3), factor=st.sampled_from([0.6, 1.0, 1.5]))
def test_it_picks_what_the_solver_picks_at_any_time_allowed(seed: int, stages: int, factor: float):
    full = prepare(random_case(seed, stages=stages)).problem
    table = frontier(prune(replace(full, time=1.5 * full.time)))
    problem = prune(replace(full, time=factor * full.time))
    found, place = best_route(problem), table.best(problem.time)
    assert (place is None) == (found.route is None)
    if place is None:
        return
    route = table.route(place)
    assert named(route) == named(found.route)
    times = block_times(problem, route)
    assert times is not None
    assert objective_of(problem, route, times) == pytest.approx(found.objective, rel=1e-9)


@settings(max_examples=120, deadline=None, derandomize=True)
@given(seed=st.integers(0, 10**6), factor=st.sampled_from([0.7, 1.0, 1.6]))
def test_the_fast_even_split_is_the_rule(seed: int, factor: float):
    full = prepare(random_case(seed, stages=3)).problem
    problem = replace(full, time=factor * full.time)
    fast, rule = EvenTable(full).at(problem), even_design(problem)
    assert fast.status == rule.status
    if rule.area is not None:
        assert fast.area == pytest.approx(rule.area, rel=1e-12)
        assert fast.cost == pytest.approx(rule.cost, rel=1e-12)


def test_stages_that_are_alike_tie_as_the_solver_breaks_them():
    # Two guards of one medium: swapped picks cost and spend the same, and only the fixed order tells them apart.
    case = trainopt.load_case(Path(__file__).parents[2] / "scenarios" / "redundant-guard.yaml")
    full = prepare(case).problem
    cells = Cells(full, 6.0)
    for time in (1.2, 1.7, 2.1, 2.6, 3.0, 3.7, 4.4, 5.9):
        found = best_route(prune(replace(full, time=time)))
        assert [(p.stage, p.medium, p.module, p.count) for p in cells.picks(time)] == (
            [] if found.route is None else named(found.route)
        )


def test_tables_that_would_grow_too_large_leave_the_cells_to_the_solver(monkeypatch: pytest.MonkeyPatch):
    full = prepare(random_case(12)).problem
    exact = Cells(full, full.time).cell((1.0,), full.time)
    monkeypatch.setattr(labels, "MOST_LABELS", 3)
    with pytest.raises(TooManyLabelsError):
        frontier(prune(full))
    cells = Cells(full, full.time)
    assert cells.frontier is None
    by_solver = cells.cell((1.0,), full.time)
    assert by_solver.picks == exact.picks
    assert by_solver.objective == pytest.approx(exact.objective, rel=1e-12)
    assert by_solver.even_split == exact.even_split


def test_a_cell_without_a_design_says_what_time_would_do():
    full = prepare(random_case(3)).problem
    cells = Cells(full, full.time)
    assert cells.frontier is not None
    shortest = cells.frontier.shortest
    assert math.isfinite(shortest)
    assert cells.cell((0.0,), shortest * (1 + 1e-9)).status == "optimal"
    late = cells.cell((0.0,), shortest * (1 - 1e-6))
    assert late.status == "infeasible"
    assert "takes at least" in late.reason
    assert float(late.reason.split()[5]) == pytest.approx(shortest, rel=1e-3)


def sharing_case(seed: int) -> Case:
    """A random case whose stages share racks, of which some are owned."""
    case = random_case(seed, stages=2)
    catalog, rng = case.workspace.catalog, random.Random(seed)
    rack = catalog.holders["rack"].model_copy(
        update={"modules": tuple(sorted(catalog.modules)), "owned": rng.randint(1, 6), "slots": rng.randint(1, 4)}
    )
    catalog = catalog.model_copy(update={"holders": {"rack": rack}})
    return replace(case, workspace=replace(case.workspace, catalog=catalog))


@pytest.mark.parametrize("objective", ["cost", "area"])
def test_cells_equal_the_design_where_stages_share_owned_holders(objective: str):
    seen = 0
    for seed in range(30):
        full = prepare(sharing_case(seed), objective).problem
        if not full.owned:
            continue
        if objective == "cost":
            with pytest.raises(SharedHoldersError):
                frontier(prune(full))
        cells = Cells(full, 1.3 * full.time)
        for time in (0.8 * full.time, full.time, 1.3 * full.time):
            cell = cells.cell((time,), time)
            result = trainopt.design(replace(full, time=time))
            assert cell.status == result.status, seed
            if result.objective is None:
                assert cell.reason
                continue
            assert cell.objective == pytest.approx(result.objective.value, rel=1e-9), seed
            assert cell.picks == result.picks, seed
            assert (cell.area, cell.cost) == pytest.approx((result.area, result.cost), rel=1e-9), seed
            even = result.even_split
            assert even is not None
            assert cell.even_split.status == even.status
            if even.cost is not None:
                assert cell.even_split.area == pytest.approx(even.area, rel=1e-12), seed
                assert cell.even_split.cost == pytest.approx(even.cost, rel=1e-12), seed
            seen += 1
    assert seen > 20
