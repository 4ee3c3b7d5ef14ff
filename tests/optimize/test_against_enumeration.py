"""The proven optimum against full enumeration and against another solver, through a user's files."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from independent import best_value, random_spec, write

import trainopt


@pytest.mark.parametrize("first", range(0, 300, 20))
def test_random_trains_equal_full_enumeration(first: int, tmp_path: Path) -> None:
    seen = {"optimal": 0, "infeasible": 0}
    for seed in range(first, first + 20):
        spec = random_spec(seed)
        result = trainopt.design(trainopt.load_case(write(spec, tmp_path / str(seed))))
        expected = best_value(spec)
        seen[result.status] += 1
        if math.isinf(expected):
            assert result.status == "infeasible", seed
            assert result.reasons, seed
        else:
            assert result.objective is not None, (seed, expected)
            assert result.objective.value == pytest.approx(expected, rel=1e-9), seed
    assert seen["optimal"] > 0
