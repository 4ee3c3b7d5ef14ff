"""HiGHS has one scheduler per process: runs on different numbers of threads must not get in each other's way."""

from __future__ import annotations

import pytest
from factory import Medium, block, problem, stage

from trainopt.optimize.index import index_problem
from trainopt.optimize.model import build_model
from trainopt.optimize.search import SolverOptions, best_route
from trainopt.optimize.solve import Matrix, Solver, compile_model
from trainopt.train.build import prune
from trainopt.train.problem import DesignProblem


def two_stages() -> DesignProblem:
    coarse = Medium("coarse", "intermediate", (1e-3, 4e-3), sizes=(("a", 1.1, 1.0, 30), ("b", 0.7, 1.0, 30)))
    fine = Medium("fine", "standard", (2e-3, 3e-3), sizes=(("a", 0.9, 1.0, 30),))
    return problem(block("one", stage("first", coarse), stage("second", fine)), volume=1500.0, time=4.0)


def matrix() -> Matrix:
    return compile_model(build_model(index_problem(prune(two_stages()))))


@pytest.mark.parametrize("order", [(1, 2, 1), (2, 1, 2)])
def test_one_design_after_another_on_other_threads(order: tuple[int, ...]) -> None:
    found = [best_route(two_stages(), SolverOptions(threads=threads)) for threads in order]
    assert {f.status for f in found} == {"optimal"}
    assert len({f.objective for f in found}) == 1
    assert len({f.times for f in found}) == 1


def test_two_instances_kept_side_by_side_take_turns() -> None:
    one, two = Solver(matrix(), threads=1), Solver(matrix(), threads=2)
    values = [solver.run().objective for _ in range(2) for solver in (one, two)]
    assert values == pytest.approx([values[0]] * 4, rel=1e-9)
