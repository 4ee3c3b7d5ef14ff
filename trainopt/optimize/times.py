"""Block times of a pick in closed form, and how spare time is shared out.

A pick is one option per used stage. Every limit on it reads "this block takes at least so long", so that a pick
is feasible exactly if its blocks' shortest times fit the batch time. It checks what HiGHS returns, and shares no code
with the model.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from trainopt.optimize.owned import credit
from trainopt.optimize.sparing import spare_lots
from trainopt.train.problem import Block, Candidate, DesignProblem, Floats, Stage

TIME_SLACK = 1e-9
"""Relative room for rounding when times are held against the time allowed."""


@dataclass(frozen=True)
class Choice:
    """One used stage with the candidate and the place of the option picked for it."""

    stage: Stage
    candidate: Candidate
    option: int

    @property
    def demand(self) -> Floats:
        """D in bar·h, shape (lots,)."""
        return np.asarray(self.candidate.options.demand[:, self.option])

    @property
    def weight(self) -> float:
        """What the objective counts for it."""
        return float(self.candidate.options.weight[self.option])


BlockChoice = tuple[Choice, ...]
Route = tuple[BlockChoice, ...]
"""A pick for a whole train: per block, the choices of its used stages in flow order."""


@dataclass(frozen=True)
class TimeBounds:
    """How long a block with its pick takes at least and at most, in h, and which limit sets the least.

    `pressure` is what the pressure budget alone asks for, `limits` every lower bound by name
    ("pressure", "pump", and per stage "differential-pressure", "inlet-pressure", "flux").
    """

    least: float
    most: float
    pressure: float
    limits: dict[tuple[str, str], float]


Lots = NDArray[np.intp]


def block_bounds(block: Block, choices: BlockChoice, volume: float, lots: Lots | None = None) -> TimeBounds:
    """Shortest and longest time of one block with its pick (model.md, section 4), for these lots (None: all)."""
    line = block.line * volume
    demands = np.array([choice.demand for choice in choices])
    if lots is not None and choices:
        demands = demands[:, lots]
    limits = {("", "pump"): volume / block.max_flow}
    if choices:
        total = float(demands.sum(axis=0).max())
        limits["", "pressure"] = _ratio(total + line, block.head)
    elif line > 0.0:
        limits["", "pressure"] = _ratio(line, block.head)
    for place, choice in enumerate(choices):
        one, name = choice.candidate, choice.stage.name
        limits[name, "flux"] = float(one.options.shortest_time[choice.option])
        if block.operation != "constant-flow":
            continue
        limits[name, "differential-pressure"] = float(demands[place].max()) / one.differential_pressure
        if one.inlet_pressure < block.pressure:
            downstream = float(demands[place:].sum(axis=0).max())
            limits[name, "inlet-pressure"] = _ratio(downstream + line, one.inlet_pressure - block.static)
    most = volume / block.min_flow if block.min_flow > 0.0 else math.inf
    return TimeBounds(max(limits.values()), most, limits.get(("", "pressure"), 0.0), limits)


def _ratio(need: float, have: float) -> float:
    return need / have if have > 0.0 else math.inf


def lot_times(block: Block, choices: BlockChoice, volume: float) -> Floats:
    """The shortest time in h that each lot allows one block with its pick, shape (lots,); no pick: shape (1,)."""
    line, least = block.line * volume, volume / block.max_flow
    if not choices:
        return np.array([max(least, _ratio(line, block.head) if line > 0.0 else 0.0)])
    demands = np.array([choice.demand for choice in choices])
    least = max(least, *(float(c.candidate.options.shortest_time[c.option]) for c in choices))
    needed = np.maximum(_ratios(demands.sum(axis=0) + line, block.head), least)
    for place, choice in enumerate(choices if block.operation == "constant-flow" else ()):
        one = choice.candidate
        if math.isfinite(one.differential_pressure):
            needed = np.maximum(needed, demands[place] / one.differential_pressure)
        if one.inlet_pressure < block.pressure:
            downstream = demands[place:].sum(axis=0) + line
            needed = np.maximum(needed, _ratios(downstream, one.inlet_pressure - block.static))
    return np.asarray(needed)


def _ratios(need: Floats, have: float) -> Floats:
    return np.asarray(need / have) if have > 0.0 else np.full_like(need, math.inf)


def holding_lots(problem: DesignProblem, route: Route, times: Sequence[float]) -> Lots:
    """Places of the lots that hold every limit of a pick at these block times."""
    holds = np.full(len(problem.lots), True)
    for block, choices, time in zip(problem.blocks, route, times, strict=True):
        holds &= lot_times(block, choices, problem.volume) <= time + TIME_SLACK * problem.time
    return np.flatnonzero(holds)


def kept_lots(problem: DesignProblem, route: Route) -> Lots | None:
    """Places of the lots that a pick holds for, those spared that slow it most; None where too many must fail.

    Spared are, of the lots that may fail, those without which the blocks' shortest times add up to least.
    """
    needed = np.array([
        np.broadcast_to(lot_times(b, c, problem.volume), len(problem.lots))
        for b, c in zip(problem.blocks, route, strict=True)
    ])  # fmt: skip
    slack = TIME_SLACK * problem.time
    longest = [min(problem.longest_time(b), most) for b, most in zip(problem.blocks, _allowed(problem), strict=True)]
    able = (needed <= np.array(longest)[:, None] + slack).all(axis=0)
    left = problem.may_fail - int((~able).sum())
    if left < 0:
        return None
    places = np.flatnonzero(able)
    paid = problem.objective == "cost" and problem.hour_rate > 0.0
    if paid or (problem.schedule == "sequential" and len(problem.blocks) > 1):
        places = places[spare_lots(needed[:, places], left)]
    return places


def block_times(problem: DesignProblem, route: Route) -> tuple[float, ...] | None:
    """Block times in h of a pick, spare time shared out, or None where the pick meets not every limit."""
    lots = None
    if problem.may_fail:
        lots = kept_lots(problem, route)
        if lots is None:
            return None
    bounds = [block_bounds(b, c, problem.volume, lots) for b, c in zip(problem.blocks, route, strict=True)]
    return share_time(problem, bounds)


def share_time(problem: DesignProblem, bounds: Sequence[TimeBounds]) -> tuple[float, ...] | None:
    """Block times within `bounds`: the shortest where an hour costs, else sharing the spare time.

    Spare time goes where the smallest relative spare pressure 1 − t_pressure/t is, which makes the smallest as large
    as can be.
    """
    allowed = _allowed(problem)
    slack = TIME_SLACK * problem.time
    for bound, most in zip(bounds, allowed, strict=True):
        if not (bound.least <= most + slack and bound.least <= bound.most + slack):
            return None
    least = [bound.least for bound in bounds]
    longest = [max(min(bound.most, own), bound.least) for bound, own in zip(bounds, allowed, strict=True)]
    if problem.schedule == "sequential":
        spare = process_time(problem) - sum(least)
        if spare < -slack:
            return None
    if problem.objective == "cost" and problem.hour_rate > 0.0:
        return tuple(least)
    if problem.schedule != "sequential":
        return tuple(longest)
    return _leveled([bound.pressure for bound in bounds], least, longest, process_time(problem))


def process_time(problem: DesignProblem) -> float:
    """Batch time left after all setups, h (blocks in sequence)."""
    return problem.time - sum(block.setup for block in problem.blocks)


def _allowed(problem: DesignProblem) -> list[float]:
    """The most each block alone may take, h."""
    if problem.schedule == "sequential":
        return [process_time(problem)] * len(problem.blocks)
    return [problem.time - block.setup for block in problem.blocks]


def _leveled(pressure: list[float], least: list[float], most: list[float], total: float) -> tuple[float, ...]:
    """t_b = pressure_b·level inside its bounds, with the level at which the times add up to `total`.

    Found on the piecewise linear sum by its break points, exactly.
    """
    if sum(most) <= total:
        return tuple(most)
    if sum(least) >= total:
        return tuple(least)
    weights = [max(p, 1e-12 * total) for p in pressure]
    # Each block's time rises with the level between these two.
    starts = [low / w for w, low in zip(weights, least, strict=True)]
    ends = [high / w for w, high in zip(weights, most, strict=True)]

    def at(level: float) -> list[float]:
        return [
            low if level <= start else high if level >= end else w * level
            for w, low, high, start, end in zip(weights, least, most, starts, ends, strict=True)
        ]

    breaks = sorted(level for level in {*starts, *ends} if math.isfinite(level))
    below = max(level for level in breaks if sum(at(level)) <= total)
    moving = sum(w for w, start, end in zip(weights, starts, ends, strict=True) if start <= below < end)
    level = below + (total - sum(at(below))) / moving if moving > 0.0 else below
    return tuple(at(min([level, *(later for later in breaks if later > below)])))


def objective_of(problem: DesignProblem, route: Route, times: Sequence[float]) -> float:
    """What the objective counts: weights, and for cost the hours, less what shared holders save."""
    total = route_weight(problem, route)
    if problem.objective == "cost":
        hours = math.fsum(t + block.setup for t, block in zip(times, problem.blocks, strict=True))
        total += problem.hour_rate * hours
    return total


def route_weight(problem: DesignProblem, route: Route) -> float:
    """What the objective counts of a pick, hours left out: weights, for cost less what shared holders save."""
    weights = (choice.weight for choices in route for choice in choices)
    return math.fsum([*weights, -credit(problem, route)] if problem.shares_cost else weights)
