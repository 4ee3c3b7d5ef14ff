"""One cell of a sweep after another: what `design` would pick, from tables that many cells share.

Cells that differ in the batch time alone share one frontier and one table of the even split. Where the frontier
would be too large, does not serve the basis, or costs do not add up since stages share owned holders, each cell is
picked by the solver itself.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from trainopt.optimize.describe import total_area, total_time
from trainopt.optimize.recheck import recheck
from trainopt.optimize.search import best_route
from trainopt.optimize.times import Route, TimeBounds, block_bounds, route_weight, share_time
from trainopt.study.even import EvenTable, cost_of
from trainopt.study.frontier import Frontier, SharedHoldersError, TooManyLabelsError, frontier
from trainopt.study.results import SweepCell
from trainopt.train.build import prune
from trainopt.train.options import take
from trainopt.train.problem import Candidate, DesignProblem
from trainopt.train.results import Pick

SHORTEST = 1e-9
"""A block time in h that stands for none at all (a block that neither filters nor resists)."""


@dataclass(frozen=True)
class _Bought:
    """What is known of a pick whatever the time: its route, its blocks' time bounds, area, cost without hours."""

    route: Route
    bounds: tuple[TimeBounds, ...]
    area: float
    cost: float
    picks: tuple[Pick, ...]
    weight: float


class Cells:
    """Cells of one problem (all options, unpruned) at any batch time up to `longest` h."""

    def __init__(self, full: DesignProblem, longest: float) -> None:
        self.full = replace(full, time=longest)
        self._bought: dict[int, _Bought] = {}
        self._fastest: float | None = None
        self.frontier: Frontier | None
        try:
            self.frontier = frontier(prune(self.full))
        except (TooManyLabelsError, SharedHoldersError):
            self.frontier = None

    @cached_property
    def even(self) -> EvenTable:
        """The even split at any batch time."""
        return EvenTable(self.full)

    def cell(self, at: tuple[float, ...], time: float) -> SweepCell:
        """The cell at a batch time in h."""
        problem = replace(self.full, time=time)
        bought = self._pick(problem)
        times = None if bought is None else share_time(problem, bought.bounds)
        if bought is None or times is None:
            return SweepCell(at, "infeasible", reason=self.why_not(problem))
        hours = math.fsum(t + block.setup for t, block in zip(times, problem.blocks, strict=True))
        paid = problem.hour_rate * hours
        return SweepCell(
            at=at,
            status="optimal",
            objective=bought.weight + (paid if problem.objective == "cost" else 0.0),
            area=bought.area,
            cost=bought.cost + paid,
            time=total_time(problem, times),
            spare=tuple(
                block.head * (1.0 - (bound.pressure / t if t > 0.0 else 0.0))
                for block, bound, t in zip(problem.blocks, bought.bounds, times, strict=True)
            ),
            picks=bought.picks,
            even_split=self.even.at(problem),
        )

    def picks(self, time: float) -> tuple[Pick, ...]:
        """What is bought at a batch time in h; empty where there is no design."""
        bought = self._pick(replace(self.full, time=time))
        return () if bought is None else bought.picks

    def _pick(self, problem: DesignProblem) -> _Bought | None:
        if self.frontier is None:
            found = best_route(prune(problem))
            return None if found.route is None else _bought(problem, found.route)
        place = self.frontier.best(problem.time)
        if place is None:
            return None
        if place not in self._bought:
            self._bought[place] = bought = _bought(problem, self.frontier.route(place))
            # Marched once, at the shortest times the pick allows: any longer time only lowers pressures and fluxes.
            recheck(self.full, bought.route, tuple(max(bound.least, SHORTEST) for bound in bought.bounds))
        return self._bought[place]

    def why_not(self, problem: DesignProblem) -> str:
        """Why there is no design, in a sentence, from the largest options alone."""
        for block in problem.blocks:
            for stage in block.stages:
                if not stage.optional and not any(len(candidate.options) for candidate in stage.candidates):
                    return _nothing_fits(stage.name, stage.candidates)
        if self._fastest is None:
            self._fastest = _fastest(self.full)
        if math.isfinite(self._fastest):
            least = f"the batch takes at least {self._fastest:.4g} h with the largest options"
            return f"{least}; {problem.time:.4g} h are allowed"
        return "no pick holds every pressure, flow and loading limit, however long the batch may take"


def _nothing_fits(stage: str, candidates: tuple[Candidate, ...]) -> str:
    notes = [note.text for candidate in candidates for note in candidate.dropped if note.code != "dominated"]
    detail = f": {notes[0]}" if notes else ""
    return f"stage '{stage}': no module count is allowed{detail}"


def _fastest(full: DesignProblem) -> float:
    """The shortest time in h that any pick allows: each medium at its largest area."""

    def largest(candidate: Candidate) -> Candidate:
        options = candidate.options
        if not len(options):
            return candidate
        return replace(candidate, options=take(options, np.array([int(np.argmax(options.area))], dtype=np.intp)))

    blocks = tuple(
        replace(b, stages=tuple(replace(s, candidates=tuple(map(largest, s.candidates))) for s in b.stages))
        for b in full.blocks
    )
    # What holders cost has no say in the time.
    return frontier(replace(full, blocks=blocks, time=math.inf, owned=())).shortest


def _bought(problem: DesignProblem, route: Route) -> _Bought:
    return _Bought(
        route=route,
        bounds=tuple(block_bounds(b, c, problem.volume) for b, c in zip(problem.blocks, route, strict=True)),
        area=total_area(route),
        cost=cost_of(problem, route),
        picks=tuple(
            Pick(
                c.stage.name,
                c.candidate.medium,
                c.candidate.options.module[c.option],
                int(c.candidate.options.count[c.option]),
            )
            for block in route
            for c in block
        ),
        weight=route_weight(problem, route),
    )
