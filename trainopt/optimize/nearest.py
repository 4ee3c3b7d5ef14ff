"""The least change of one limit alone at which the best design gets better, exact.

A better design found anywhere is followed down to the value where it first meets every limit, in closed form; the
search ends when the solver proves that just below that value nothing is better.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

from trainopt.optimize.restate import Move, picks_of, restated, route_of_picks
from trainopt.optimize.search import SolverOptions, best_route
from trainopt.optimize.times import block_times, objective_of
from trainopt.train.build import prune
from trainopt.train.problem import DesignProblem
from trainopt.train.results import Pick

Picks = tuple[Pick, ...]
TIE = 1e-7
"""Objectives closer than this, relative to their size, count as equal."""
_FAR = 100.0
"""How many times a limit is raised at most."""
_CLOSE = 1e-2
_STEP = 1.1
"""Where a limit gains continuously (paid hours), the gain is that of this much more."""


@dataclass(frozen=True)
class Lever:
    """One limit that may be raised from `now` up to `most`: its field with the unit, how to move it, and the value
    that a user knows it by where that is another."""

    field: str
    what: str
    unit: str
    now: float
    move: Callable[[float], Move]
    most: float = math.inf
    shown: Callable[[float], float] = float


@dataclass(frozen=True)
class Better:
    """A better design at the value `needs` of a limit."""

    needs: float
    objective: float
    picks: Picks


def solved(problem: DesignProblem, move: Move, ties: bool = True) -> tuple[float, Picks] | None:
    """Objective and picks of the best design with the limits moved; None where there is none."""
    found = best_route(prune(restated(problem, move)), SolverOptions(ties=ties))
    return None if found.route is None else (found.objective, picks_of(found.route))


def value_of(problem: DesignProblem, picks: Picks, move: Move) -> float:
    """Objective of a pick with the limits moved, in closed form; infinite where it meets not all of them."""
    moved = restated(problem, move)
    route = route_of_picks(moved, picks)
    times = None if route is None else block_times(moved, route)
    return math.inf if route is None or times is None else objective_of(moved, route, times)


def nearest_better(problem: DesignProblem, lever: Lever, picks: Picks, base: float) -> Better | None:
    """The least value of the limit with a design better than `base`, the objective of `picks` as things are."""
    enough = base - TIE * max(1.0, abs(base))
    top = min(lever.most, lever.now * _FAR)
    if not top > lever.now * (1.0 + 1e-9):
        return None
    if value_of(problem, picks, lever.move(min(top, lever.now * _STEP))) < enough:
        needs = min(top, lever.now * _STEP)
        found = solved(problem, lever.move(needs))
        return None if found is None else Better(needs, *found)
    best = _at(problem, lever, top, enough)
    if best is None:
        return None
    low, high = lever.now, _first(problem, lever, best.picks, top, enough)
    while True:
        # Halve while the interval is wide; then ask whether anything is better just below.
        wide = high > low * (1.0 + _CLOSE)
        middle = math.sqrt(low * high) if wide else low + (high - low) * (1.0 - 1e-6)
        other = _at(problem, lever, middle, enough) if low < middle < high else None
        if other is not None:
            high = _first(problem, lever, other.picks, middle, enough)
        elif wide:
            low = middle
        else:
            break
    # Just above, so that the solver, whose limits are a rounding tighter, finds it as well.
    return _at(problem, lever, high * (1.0 + 1e-8), enough, ties=True)


def _at(problem: DesignProblem, lever: Lever, value: float, enough: float, ties: bool = False) -> Better | None:
    found = solved(problem, lever.move(value), ties)
    return Better(value, *found) if found is not None and found[0] < enough else None


def _first(problem: DesignProblem, lever: Lever, picks: Picks, high: float, enough: float) -> float:
    """The least value, up to `high`, at which a pick is good enough, to the last digits."""
    low = lever.now
    for _ in range(100):
        middle = 0.5 * (low + high)
        if not low < middle < high:
            break
        if value_of(problem, picks, lever.move(middle)) < enough:
            high = middle
        else:
            low = middle
    return high
