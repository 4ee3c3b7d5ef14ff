"""Larger trains against another exact solver, on all options and a model written again from the algebra."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from independent import Option, Spec, lots_of, options_of, random_spec, write
from scipy.optimize import Bounds, LinearConstraint, milp

import trainopt


class Rows:
    """Rows least ≤ Σ value·column ≤ most, gathered one by one."""

    def __init__(self, width: int) -> None:
        self.width = width
        self.lines: list[np.ndarray] = []
        self.low: list[float] = []
        self.high: list[float] = []

    def add(self, terms: dict[int, float], least: float, most: float) -> None:
        line = np.zeros(self.width)
        for column, value in terms.items():
            line[column] = value
        self.lines.append(line)
        self.low.append(least)
        self.high.append(most)


def pressure_rows(rows: Rows, spec: Spec, b: int, here: list[tuple[int, int, Option]], s: int, time: int) -> None:
    """Budget and ratings of one block and lot; `time` is the column of its time."""
    block = spec.blocks[b]
    room, line = block["pressure"] - block["static"], block["line"] * spec.volume
    rows.add({**{k: o.demand[s] / room for k, _, o in here}, time: -1.0}, -np.inf, -line / room)
    for k, p, o in here:
        m = spec.media[o.medium]
        if m["dp"] is not None:
            rows.add({k: o.demand[s] / m["dp"], time: -1.0}, -np.inf, 0.0)
        if m["inlet"] is not None and m["inlet"] < block["pressure"]:
            free = m["inlet"] - block["static"]
            big = 50.0 * spec.time  # loose on purpose: not the package's own
            below = {j: q.demand[s] / free for j, at, q in here if at > p and q.demand[s] / free < big}
            rows.add({**below, k: o.demand[s] / free + big, time: -1.0}, -np.inf, big - line / free)


def time_bounds(spec: Spec, setups: float) -> list[tuple[float, float]]:
    """Shortest and longest time of every block by its pump and the batch time."""
    bounds = []
    for block in spec.blocks:
        slow, fast = block["pump"] or (None, None)
        most = spec.time - (setups if spec.schedule == "sequential" else block["setup"])
        bounds.append((spec.volume / fast if fast else 0.0, min(most, spec.volume / slow) if slow else most))
    return bounds


def plain_milp(spec: Spec) -> float:
    """Least objective by scipy's own call of a solver, dominated options included; infinite where none exists.

    Columns are options, then a time per block. For trains with no optional stage and no `after`.
    """
    per_stage = [(b, options_of(spec, block, st)) for b, block in enumerate(spec.blocks) for st in block["stages"]]
    options = [(place, b, o) for place, (b, own) in enumerate(per_stage) for o in own]
    n, blocks = len(options), len(spec.blocks)
    rows = Rows(n + blocks)
    for place in range(len(per_stage)):
        rows.add({k: 1.0 for k, (p, _, _) in enumerate(options) if p == place}, 1.0, 1.0)
    for b in range(blocks):
        here = [(k, p, o) for k, (p, at, o) in enumerate(options) if at == b]
        for s in range(len(lots_of(spec))):
            pressure_rows(rows, spec, b, here, s, n + b)
        for k, _, o in here:
            rows.add({k: o.tau, n + b: -1.0}, -np.inf, 0.0)
    setups = sum(block["setup"] for block in spec.blocks)
    if spec.schedule == "sequential":
        rows.add({n + b: 1.0 for b in range(blocks)}, -np.inf, spec.time - setups)
    bounds = time_bounds(spec, setups)
    if any(most < least for least, most in bounds):
        return math.inf
    area = spec.objective == "area"
    cost = [o.area if area else o.cost for _, _, o in options] + [0.0 if area else spec.hour] * blocks
    answer = milp(
        np.array(cost),
        constraints=LinearConstraint(np.array(rows.lines), rows.low, rows.high),
        integrality=np.array([1] * n + [0] * blocks),
        bounds=Bounds([0.0] * n + [low for low, _ in bounds], [1.0] * n + [high for _, high in bounds]),
        options={"mip_rel_gap": 0.0},
    )
    return math.inf if answer.x is None else float(answer.fun) + (0.0 if area else spec.hour * setups)


@pytest.mark.parametrize("first", range(0, 50, 10))
def test_larger_trains_equal_a_second_solver_on_all_options(first: int, tmp_path: Path) -> None:
    solved = 0
    for seed in range(first, first + 10):
        spec = random_spec(7000 + seed, stages=5, counts=25, features=False)
        result = trainopt.design(trainopt.load_case(write(spec, tmp_path / str(seed))))
        expected = plain_milp(spec)
        if math.isinf(expected):
            assert result.status == "infeasible", seed
            continue
        assert result.objective is not None, (seed, expected)
        assert result.objective.value == pytest.approx(expected, rel=1e-6), seed
        solved += 1
    assert solved > 0
