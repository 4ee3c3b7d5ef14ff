"""The ideal split of a whole route: every block's ideal split, with the batch time shared so that their sum is least.

A block's least weight falls with its time ever more slowly (it is convex where demands are convex in the area). Two
blocks share their time by a line search, more of them by the steepest falls first, on a grid refined around the answer.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from trainopt.optimize.describe import block_ideal, ideal_stage
from trainopt.optimize.ideal_split import ideal_areas
from trainopt.optimize.times import Route, process_time
from trainopt.train.problem import Block, DesignProblem, Floats

_POINTS = 9
_ROUNDS = 6
Span = tuple[float, float]
Value = Callable[[float], float]


@dataclass(frozen=True)
class IdealTrain:
    """Areas in m² per block and stage, and block times in h, of the ideal split of a route."""

    areas: tuple[tuple[float, ...], ...]
    times: tuple[float, ...]

    @property
    def area(self) -> float:
        """Sum of all areas, m²."""
        return math.fsum(area for block in self.areas for area in block)


def ideal_train(problem: DesignProblem, route: Route) -> IdealTrain | None:
    """The ideal split of the media picked in `route`, within the problem's limits; None where no areas meet them.

    The least Σ w·A over areas and block times; for cost, hours included. The picked options give only the weights w.
    """
    spans = [_span(problem, block) for block in problem.blocks]
    if any(not low < high for low, high in spans):
        return None
    values = [_value(problem, b, route) for b in range(len(problem.blocks))]
    if problem.schedule == "sequential":
        times = _in_sequence(values, spans, process_time(problem), _paid_hours(problem))
    else:
        times = _each_best(values, spans, _paid_hours(problem))
    areas = [
        block_ideal(problem, block, choices, t) if choices else ()
        for block, choices, t in zip(problem.blocks, route, times, strict=True)
    ]
    found = tuple(one for one in areas if one is not None)
    return IdealTrain(found, times) if len(found) == len(areas) else None


def _paid_hours(problem: DesignProblem) -> bool:
    return problem.objective == "cost" and problem.hour_rate > 0.0


def _span(problem: DesignProblem, block: Block) -> Span:
    """The least time in h that pump and line allow, and the most that the batch and the pump do."""
    line = block.line * problem.volume
    least = line / block.head if block.head > 0.0 else math.inf
    return max(least, problem.volume / block.max_flow), problem.longest_time(block)


def _value(problem: DesignProblem, b: int, route: Route) -> Value:
    """A block's least Σ w·A (hours included) as a function of its time; infinite where no areas do."""
    block, choices = problem.blocks[b], route[b]
    rate = problem.hour_rate if _paid_hours(problem) else 0.0

    def value(time: float) -> float:
        if choices and time <= 0.0:
            return math.inf
        stages = [ideal_stage(problem, block, choice, time) for choice in choices]
        areas = ideal_areas(stages, block.budget(time, problem.volume)) if stages else ()
        if areas is None:
            return math.inf
        return math.fsum(s.weight * a for s, a in zip(stages, areas, strict=True)) + rate * time

    return value


def _each_best(values: Sequence[Value], spans: Sequence[Span], paid: bool) -> tuple[float, ...]:
    """Each block's best time by itself: the longest, unless its hours are paid for."""
    return tuple(_lowest(value, span) if paid else span[1] for value, span in zip(values, spans, strict=True))


def _in_sequence(values: Sequence[Value], spans: Sequence[Span], total: float, paid: bool) -> tuple[float, ...]:
    """Times that add up to at most `total` with the least sum of values."""
    alone = _each_best(values, spans, paid)
    if math.fsum(alone) <= total:
        return alone
    if len(values) != 2:
        return _shared(values, spans, total)
    (first, second), ((low, high), (low_2, high_2)) = values, spans
    span = (max(low, total - high_2), min(high, total - low_2))
    time = _lowest(lambda t: first(t) + second(total - t), span)
    return time, total - time


def _lowest(value: Value, span: Span) -> float:
    """Where a convex function is least inside a span."""
    from scipy.optimize import minimize_scalar

    low, high = span
    if not low < high:
        return high
    inside = float(minimize_scalar(value, bounds=span, method="bounded", options={"xatol": 1e-5 * (high - low)}).x)
    # The search comes close to an end of the span but never to it.
    return min((inside, high), key=value)


def _shared(values: Sequence[Value], spans: Sequence[Span], total: float) -> tuple[float, ...]:
    """Times inside `spans`, adding up to at most `total`, with the least sum of values."""
    # Values are steepest at the short end of a span, where the first grid is therefore denser.
    grids = [low + (high - low) * (np.arange(_POINTS) / (_POINTS - 1)) ** 2 for low, high in spans]
    times: tuple[float, ...] = ()
    for _ in range(_ROUNDS):
        tables = [np.array([value(t) for t in grid.tolist()]) for value, grid in zip(values, grids, strict=True)]
        times = _steepest_first(grids, tables, total)
        grids = [_around(grid, time) for grid, time in zip(grids, times, strict=True)]
    return times


def _steepest_first(grids: Sequence[Floats], tables: Sequence[Floats], total: float) -> tuple[float, ...]:
    """The times at which the sum of the values, linear between grid points, is least."""
    times, falls = [], []
    for k, (grid, table) in enumerate(zip(grids, tables, strict=True)):
        first = int(np.argmax(np.isfinite(table)))
        times.append(float(grid[first]))
        lengths = np.diff(grid[first:])
        # A slope that steepens again (curves that are not convex) is held level, so that segments are taken in order.
        slopes = np.maximum.accumulate(np.diff(table[first:]) / lengths)
        falls += [(slope, k, length) for slope, length in zip(slopes.tolist(), lengths.tolist(), strict=True)]
    left = total - math.fsum(times)
    for slope, k, length in sorted(falls):
        if slope >= 0.0 or left <= 0.0:
            break
        times[k] += min(length, left)
        left -= min(length, left)
    return tuple(times)


def _around(grid: Floats, time: float) -> Floats:
    place = int(np.searchsorted(grid, time))
    low, high = float(grid[max(place - 2, 0)]), float(grid[min(place + 1, len(grid) - 1)])
    return np.linspace(low, high, _POINTS)
