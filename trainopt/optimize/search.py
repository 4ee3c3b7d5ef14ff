"""The best pick of a problem, proven by HiGHS and checked in closed form, ties broken as in model.md, section 4."""

from __future__ import annotations

import math
import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from trainopt.optimize.bounds import Bounds, bounds, first_design, within
from trainopt.optimize.index import SINK, SOURCE, Index, index_problem
from trainopt.optimize.run import TIE, Cut, Name, Pick, Run, SolverOptions, route_of
from trainopt.optimize.times import Route, block_times, objective_of
from trainopt.train.problem import DesignProblem, Floats

__all__ = [
    "TIE",
    "Clock",
    "Cut",
    "Found",
    "SolverOptions",
    "best_route",
    "fixed_order",
    "hopeless",
    "route_of",
    "searched",
]


class Clock:
    """Shares one time limit between several searches."""

    def __init__(self, options: SolverOptions) -> None:
        self.options = options
        self.deadline = None if options.time_limit is None else time.monotonic() + options.time_limit

    def left(self) -> SolverOptions:
        """The options with what is left of the time."""
        if self.deadline is None:
            return self.options
        return replace(self.options, time_limit=max(self.deadline - time.monotonic(), 0.0))


@dataclass(frozen=True)
class Found:
    """The best pick with its block times in h and the proof; `status` "optimal", "limit" or "infeasible".

    `solves` counts HiGHS runs; `rows` and `columns` are the size of the model that proved the optimum.
    """

    status: str
    route: Route | None
    times: tuple[float, ...] | None
    objective: float
    bound: float
    solves: int
    rows: int
    columns: int


NOTHING = Found("infeasible", None, None, math.inf, math.inf, 0, 0, 0)


def best_route(problem: DesignProblem, options: SolverOptions | None = None) -> Found:
    """Solve a problem (pruned or not; the answer is the same) to proven optimality."""
    index = index_problem(problem)
    if hopeless(index):
        return NOTHING
    found = bounds(index)
    ceiling, first = first_design(index, found)
    few = index_problem(within(index, found.option, ceiling))
    options = options or SolverOptions()
    result = searched(few, options, dict(zip(index.names, fixed_order(index).tolist(), strict=True)), (), found)
    if result.route is None and result.status == "limit" and first is not None:
        # Stopped before the solver had any design: the one that set the ceiling is there.
        return _found(few, "limit", first, block_times(few.problem, first), result.bound, result)
    return result


def searched(
    index: Index,
    options: SolverOptions,
    order: Mapping[Name, float],
    cuts: Sequence[Cut] = (),
    known: Bounds | None = None,
) -> Found:
    """The best pick of an index that `cuts` do not forbid; equal ones are told apart by spare, then by `order`.

    `known`: bounds of the problem with more options.
    """
    deadline = None if options.time_limit is None else time.monotonic() + options.time_limit
    run = Run(index, options, deadline, cuts)
    pick = run.solve()
    size = run.size
    found = Found(pick.answer.status, None, None, math.inf, pick.answer.bound, run.solves, *size)
    if pick.route is None or pick.times is None:
        return found
    if pick.proven and options.ties:
        best = objective_of(index.problem, pick.route, pick.times)
        pick, solves = _told_apart(index, options, order, cuts, pick, best, deadline, known)
        found = Found(*(found.status, None, None, math.inf, found.bound), found.solves + solves, *size)
    return _found(index, found.status, pick.route, pick.times, found.bound, found)


def _found(
    index: Index, status: str, route: Route | None, times: tuple[float, ...] | None, bound: float, proof: Found
) -> Found:
    assert route is not None
    assert times is not None
    value = objective_of(index.problem, route, times)
    # The bound is HiGHS's, in its tolerance; a proven optimum's bound is the optimum.
    bound = value if status == "optimal" else bound
    return Found(status, route, times, value, bound, proof.solves, proof.rows, proof.columns)


def _told_apart(
    index: Index,
    options: SolverOptions,
    order: Mapping[Name, float],
    cuts: Sequence[Cut],
    pick: Pick,
    best: float,
    deadline: float | None,
    known: Bounds | None,
) -> tuple[Pick, int]:
    """Among designs as good as `best` the one with most spare, then the first in a fixed order; and the solves it took.

    Few options can be part of such a design: a model of those alone is asked.
    """
    few = index_problem(within(index, bounds(index, known).option, best * (1.0 + math.copysign(2.0 * TIE, best))))
    if few.plain and len(few.names) == len(few.stages):
        return pick, 0
    run = Run(few, options, deadline, cuts)
    run.keep_objective(best)
    places = run.ask_for_spare()
    better = run.improve(pick, best)
    if better is not pick:
        run.keep_spare(better, places, order)
        better = run.improve(better, best)
    return better, run.solves


def hopeless(index: Index) -> bool:
    """Whether some block has no time, a stage that must be used no option, or no route is allowed."""
    problem = index.problem
    for block in problem.blocks:
        longest = problem.longest_time(block)
        if longest <= 0.0 or problem.volume / block.max_flow > longest or block.head <= 0.0:
            return True
    served = {node.place for node in index.nodes}
    if any(not stage.optional and place not in served for place, (_, stage) in enumerate(index.stages)):
        return True
    return not index.plain and not _passable(index)


def _passable(index: Index) -> bool:
    """Whether some allowed route leads through the train."""
    reached, onward = {SOURCE}, [SOURCE]
    while onward:
        tail = onward.pop()
        heads = {head for at, head in index.arcs if at == tail} - reached
        reached |= heads
        onward.extend(heads)
    return SINK in reached


def fixed_order(index: Index) -> Floats:
    """A cost per option whose sums differ between any two picks: smaller options in earlier stages come first."""
    out = np.zeros(len(index.names))
    for n, node in enumerate(index.nodes):
        # Square roots of distinct primes are independent over the rationals, so no two picks cost the same.
        root = math.sqrt(_PRIMES[node.place % len(_PRIMES)])
        out[node.options.start : node.options.stop] = root * (1.0 + np.arange(len(node.options))) + 1e-3 * n
    return out / max(float(out.max(initial=1.0)), 1.0)


_PRIMES = (2, 3, 5, 7, 11, 13, 17, 19, 23, 29, 31, 37)
