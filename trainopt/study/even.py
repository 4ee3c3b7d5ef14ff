"""The even split for any time allowed, without a root to find: a table of the times from which each option is
large enough.

An option's area is at least the recommended one (`optimize/even_split.py`) exactly if its own demand fits its
even share: n·D + r·V ≤ (P − Pstatic)·t, D ≤ ΔPmax·t and τ ≤ t, for D falls with area. A test holds this against
the rule itself.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from trainopt.optimize.even_split import even_times, routes
from trainopt.optimize.index import Node, index_problem
from trainopt.optimize.owned import credit
from trainopt.optimize.times import Choice, Route, block_bounds, route_weight
from trainopt.study.results import EvenCell
from trainopt.train.options import CAP_SLACK, cost_alone, least_weight
from trainopt.train.problem import DesignProblem, Floats


@dataclass(frozen=True, eq=False)
class _Ladder:
    """A node's options in the order the rule prefers them, with the block time from which each is large enough."""

    places: NDArray[np.intp]
    needed: Floats

    def at(self, time: float) -> int | None:
        """The option the rule takes at a block time in h."""
        good = self.needed <= time * (1.0 + CAP_SLACK)
        first = int(np.argmax(good)) if len(good) else 0
        return int(self.places[first]) if len(good) and good[first] else None


@dataclass(frozen=True)
class _Sized:
    """One route sized: what it weighs and costs (hours left out), its area, the times its inlet ratings ask
    for, by block."""

    weight: float
    media: tuple[str, ...]
    area: float
    cost: float
    inlet: tuple[float, ...]


class EvenTable:
    """The even split of one problem (all options, unpruned) at any time allowed."""

    def __init__(self, problem: DesignProblem) -> None:
        self.problem = problem
        self.index = index_problem(problem)
        self.routes = tuple(routes(self.index))
        self._ladders: dict[tuple[int, int], _Ladder] = {}
        self._sized: dict[tuple[int, ...], _Sized] = {}

    def at(self, problem: DesignProblem) -> EvenCell:
        """The even split of `problem`, which differs from the table's in its time alone."""
        times = even_times(problem)
        for block, time in zip(problem.blocks, times, strict=True):
            if time <= 0.0 or not (
                block.min_flow * (1.0 - 1e-9) <= problem.volume / time <= block.max_flow * (1.0 + 1e-9)
            ):
                return EvenCell("infeasible")
        found = [sized for nodes in self.routes if (sized := self._route(nodes, times)) is not None]
        if not found:
            return EvenCell("infeasible")
        best = min(found, key=lambda sized: (sized.weight, sized.media))
        hours = math.fsum(t + block.setup for t, block in zip(times, problem.blocks, strict=True))
        return EvenCell("optimal", best.area, best.cost + problem.hour_rate * hours)

    def _route(self, nodes: tuple[Node, ...], times: tuple[float, ...]) -> _Sized | None:
        used = [0] * len(times)
        for node in nodes:
            used[node.block] += 1
        picked: list[int] = []
        for node in nodes:
            option = self._ladder(node, used[node.block]).at(times[node.block])
            if option is None:
                return None
            picked.append(node.options.start + option)
        key = tuple(picked)
        if key not in self._sized:
            self._sized[key] = self._size(nodes, key)
        sized = self._sized[key]
        fits = all(needed <= time * (1.0 + 1e-9) for needed, time in zip(sized.inlet, times, strict=True))
        return sized if fits else None

    def _ladder(self, node: Node, stages: int) -> _Ladder:
        key = (node.options.start, stages)
        if key not in self._ladders:
            self._ladders[key] = _ladder(self.problem, node, stages)
        return self._ladders[key]

    def _size(self, nodes: tuple[Node, ...], picked: tuple[int, ...]) -> _Sized:
        choices = [Choice(n.spec, n.candidate, k - n.options.start) for n, k in zip(nodes, picked, strict=True)]
        route: Route = tuple(
            tuple(c for c, n in zip(choices, nodes, strict=True) if n.block == b)
            for b in range(len(self.problem.blocks))
        )
        inlet = []
        for block, own in zip(self.problem.blocks, route, strict=True):
            limits = block_bounds(block, own, self.problem.volume).limits
            inlet.append(max((t for (_, what), t in limits.items() if what == "inlet-pressure"), default=0.0))
        return _Sized(
            weight=route_weight(self.problem, route),
            media=tuple(c.candidate.medium for c in choices),
            area=math.fsum(float(c.candidate.options.area[c.option]) for c in choices),
            cost=cost_of(self.problem, route),
            inlet=tuple(inlet),
        )


def _ladder(problem: DesignProblem, node: Node, stages: int) -> _Ladder:
    one, options, block = node.candidate, node.candidate.options, problem.blocks[node.block]
    worst = options.demand.max(axis=0)
    line = block.line * problem.volume
    needed = (stages * worst + line) / block.head if block.head > 0.0 else np.full(len(options), math.inf)
    if block.operation == "constant-flow":
        needed = np.maximum(needed, worst / one.differential_pressure)
    needed = np.maximum(needed, options.shortest_time)
    weight, cost = least_weight(options, problem.owned, problem.objective), cost_alone(options, problem.owned)
    keys = zip(weight.tolist(), cost.tolist(), (-options.area).tolist(), options.count.tolist(), options.module,
               strict=True)  # fmt: skip
    places = np.array([place for _, place in sorted((key, place) for place, key in enumerate(keys))], dtype=np.intp)
    return _Ladder(places, needed[places])


def cost_of(problem: DesignProblem, route: Route) -> float:
    """Cost per batch of modules, holders, flush and product, hours left out."""
    parts = (
        float(part[c.option])
        for block in route
        for c in block
        for o in (c.candidate.options,)
        for part in (o.modules_cost, o.holders_cost, o.flush_cost, o.product_cost)
    )
    return math.fsum([*parts, -credit(problem, route)])
