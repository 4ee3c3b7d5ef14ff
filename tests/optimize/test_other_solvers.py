"""Random workspaces against two exact solvers that share no code with HiGHS (the extra `bench`: SCIP and GLPK)."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from independent import Spec, write
from plain import Solve, best_by
from solvers import glpk_solve, scip_solve
from workspaces import random_workspace

import trainopt

SOLVERS = [pytest.param("pyscipopt", scip_solve, id="SCIP"), pytest.param("swiglpk", glpk_solve, id="GLPK")]


@pytest.mark.parametrize(("package", "solve"), SOLVERS)
def test_forty_random_workspaces_have_the_same_optimum(package: str, solve: Solve, tmp_path: Path) -> None:
    compare(package, solve, {seed: random_workspace(seed) for seed in range(0, 280, 7)}, tmp_path)


@pytest.mark.parametrize(("package", "solve"), SOLVERS)
def test_larger_workspaces_have_the_same_optimum(package: str, solve: Solve, tmp_path: Path) -> None:
    compare(package, solve, {seed: random_workspace(seed, stages=6, counts=40) for seed in range(900, 910)}, tmp_path)


def compare(package: str, solve: Solve, specs: dict[int, Spec], folder: Path) -> None:
    """Every design from files beside the solver's optimum of the plain matrix."""
    pytest.importorskip(package, reason=f"{package} is not installed; the extra `bench` brings it")
    kinds = set()
    for seed, spec in specs.items():
        found = trainopt.design(trainopt.load_case(write(spec, folder / str(seed))))
        expected = best_by(spec, solve)
        value = math.inf if found.objective is None else found.objective.value
        assert value == pytest.approx(expected, rel=1e-6), seed
        kinds.add(found.status)
    assert "optimal" in kinds
