"""Larger trains against another exact solver, on all options and a model written again from the algebra."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from independent import random_spec, write
from plain import best_by, scipy_solve

import trainopt


@pytest.mark.parametrize("first", range(0, 50, 10))
def test_larger_trains_equal_a_second_solver_on_all_options(first: int, tmp_path: Path) -> None:
    solved = 0
    for seed in range(first, first + 10):
        spec = random_spec(7000 + seed, stages=5, counts=25, features=False)
        result = trainopt.design(trainopt.load_case(write(spec, tmp_path / str(seed))))
        expected = best_by(spec, scipy_solve)
        if math.isinf(expected):
            assert result.status == "infeasible", seed
            continue
        assert result.objective is not None, (seed, expected)
        assert result.objective.value == pytest.approx(expected, rel=1e-6), seed
        solved += 1
    assert solved > 0
