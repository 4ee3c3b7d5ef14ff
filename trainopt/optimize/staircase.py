"""The staircase: all undominated designs of a block or train, merged one stage at a time (model.md, section 5).

It finds what the MILP finds without a solver, so that each checks the other; and since it keeps all undominated
designs, one staircase answers every what-if on the batch time (and, of one block, on its pressure).
Stages are merged from the downstream end, where inlet ratings are counted from.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from trainopt.optimize.index import SINK, SOURCE, Index, Node, index_problem
from trainopt.optimize.pareto import TIE, cheapest_by_time, undominated_points
from trainopt.optimize.search import route_of
from trainopt.optimize.times import Route
from trainopt.train.problem import Block, DesignProblem, Floats

Places = NDArray[np.int32]
_ANY = -3
"""Stands for every medium of a stage where no medium asks for another."""


@dataclass(frozen=True, eq=False)
class BlockSteps:
    """Partial or whole designs of one block, arrays over n of them.

    `weight`; `demand` Σ D of shape (lots, n) in bar·h for the lots that matter; `floor` the time in h that ratings
    and flux limits ask for (0 where the pressure budget asks for more); `picks` the flat option of each stage of the
    train, −1 where unused, shape (stages, n).
    """

    weight: Floats
    demand: Floats
    floor: Floats
    picks: Places

    def __len__(self) -> int:
        return len(self.weight)

    def take(self, places: NDArray[np.intp]) -> BlockSteps:
        """Those at `places`, in that order."""
        return BlockSteps(self.weight[places], self.demand[:, places], self.floor[places], self.picks[:, places])

    def times(self, block: Block, volume: float) -> Floats:
        """Shortest time in h of each, at the block's pressure (model.md, section 4)."""
        needed = (self.demand.max(axis=0) + block.line * volume) / block.head
        return np.asarray(np.maximum(np.maximum(self.floor, needed), volume / block.max_flow))


@dataclass(frozen=True, eq=False)
class Staircase:
    """All designs of a train at one volume that are best within some batch time.

    Arrays over n designs sorted by weight: `weight` (hours included for cost), the least `time` in h (setups included),
    `spent` Σ_b D_b/(P_b − Pstatic_b) in h, and `picks` as in `BlockSteps`.
    """

    index: Index
    weight: Floats
    time: Floats
    spent: Floats
    picks: Places

    def best(self, time: float | None = None) -> int | None:
        """Place of the best design within `time` h (default: the problem's): least weight, then most spare."""
        allowed = self.index.problem.time if time is None else time
        fits = np.flatnonzero(self.time <= allowed * (1.0 + TIE))
        if not len(fits):
            return None
        least = float(self.weight[fits].min())
        ties = fits[self.weight[fits] <= least + TIE * max(1.0, abs(least))]
        spare = float(self.spent[ties].min())
        ties = ties[self.spent[ties] <= spare * (1.0 + TIE)]
        order: list[int] = ties.tolist()
        return min(order, key=lambda place: tuple(self.picks[:, place].tolist()))

    def route(self, place: int) -> Route:
        """The design at a place as a pick."""
        return route_of(self.index, [k for k in self.picks[:, place].tolist() if k >= 0])

    def take(self, places: NDArray[np.intp]) -> Staircase:
        """Those at `places`, in that order."""
        return Staircase(self.index, self.weight[places], self.time[places], self.spent[places], self.picks[:, places])


def staircase(problem: DesignProblem) -> Staircase:
    """The staircase of a whole train (usually pruned before). Exact: a design falls only to one that is never worse.

    Raises `ValueError` where stages share holders that are owned and the objective is cost: weights do not add up then.
    """
    if problem.shares_cost:
        raise ValueError("stages share owned holders; their costs do not add up")
    index = index_problem(problem)
    served = {node.place for node in index.nodes}
    if any(not stage.optional and place not in served for place, (_, stage) in enumerate(index.stages)):
        return _nothing(index).take(np.zeros(0, dtype=np.intp))
    follows = followers(index)
    # By the next used stage downstream: all that the train from there on may be.
    trains: dict[int, Staircase] = {SINK: _nothing(index)}
    for b in range(len(problem.blocks) - 1, -1, -1):
        merged: dict[int, list[Staircase]] = {}
        for exit_state, rest in trains.items():
            for head, steps in block_steps(index, b, exit_state, follows).items():
                own = _timed(index, b, steps)
                if len(own.weight):
                    merged.setdefault(head, []).append(_combined(problem, own, rest))
        trains = {head: _best_of(parts) for head, parts in merged.items()}
    ends = [trains[h] for h in ((_ANY, SINK) if index.plain else follows.get(SOURCE, ())) if h in trains]
    return _best_of(ends) if ends else _nothing(index).take(np.zeros(0, dtype=np.intp))


def followers(index: Index) -> Mapping[int, tuple[int, ...]]:
    """For each node (and the source) the nodes (or the sink) that may be used next."""
    out: dict[int, list[int]] = {}
    for tail, head in index.arcs:
        out.setdefault(tail, []).append(head)
    return {tail: tuple(heads) for tail, heads in out.items()}


def block_steps(
    index: Index, b: int, exit_state: int = SINK, follows: Mapping[int, tuple[int, ...]] | None = None
) -> dict[int, BlockSteps]:
    """Undominated designs of one block by its first used node, given the node that is used next after it.

    Where any medium may follow any, the key is one for all of them. A block none of whose stages is used keeps the
    exit as key.
    """
    problem, lots = index.problem, list(index.lots(b)) or [0]
    follows = followers(index) if follows is None else follows
    empty = BlockSteps(
        np.zeros(1), np.zeros((len(lots), 1)), np.zeros(1), np.full((len(index.stages), 1), -1, dtype=np.int32)
    )
    states: dict[int, BlockSteps] = {exit_state: empty}
    places = {node.place for node in index.nodes_of(b)}
    for place in sorted(places, reverse=True):
        here = [(n, node) for n, node in enumerate(index.nodes) if node.place == place]
        if index.plain:
            (steps,) = states.values()
            parts = [_extended(problem, node, lots, steps) for _, node in here]
            states = {_ANY: _undominated(_joined(parts))}
            continue
        fresh: dict[int, BlockSteps] = {}
        for n, node in here:
            parts = [_extended(problem, node, lots, states[h]) for h in follows.get(n, ()) if h in states]
            if any(len(part) for part in parts):
                fresh[n] = _undominated(_joined(parts))
        states.update(fresh)
    return {head: steps for head, steps in states.items() if len(steps)}


def _extended(problem: DesignProblem, node: Node, lots: list[int], steps: BlockSteps) -> BlockSteps:
    """Every partial design with every option of a node put upstream of it; those that take too long are left out."""
    block, options, count = problem.blocks[node.block], node.candidate.options, len(steps)
    demand = (options.demand[lots][:, :, None] + steps.demand[:, None, :]).reshape(len(lots), -1)
    floor = np.maximum(_own_floor(block, node)[:, None], steps.floor[None, :]).ravel()
    inlet, line = node.candidate.inlet_pressure, block.line * problem.volume
    worst = demand.max(axis=0)
    if block.operation == "constant-flow" and inlet < block.pressure:
        room = inlet - block.static
        floor = np.maximum(floor, (worst + line) / room if room > 0.0 else math.inf)
    needed = (worst + line) / block.head
    # What the budget asks for anyway need not be kept apart.
    floor = np.where(floor > needed, floor, 0.0)
    quick = np.flatnonzero(np.maximum(floor, needed) <= problem.longest_time(block) * (1.0 + TIE))
    own, rest = np.divmod(quick, count)
    picks = steps.picks[:, rest]
    picks[node.place] = own + node.options.start
    return BlockSteps(options.weight[own] + steps.weight[rest], demand[:, quick], floor[quick], picks)


def _own_floor(block: Block, node: Node) -> Floats:
    """Time in h that each option's flux limit and own rating ask for."""
    options = node.candidate.options
    if block.operation != "constant-flow":
        return options.shortest_time
    rated = options.demand.max(axis=0) / node.candidate.differential_pressure
    return np.asarray(np.maximum(options.shortest_time, rated))


def _joined(parts: list[BlockSteps]) -> BlockSteps:
    if len(parts) == 1:
        return parts[0]
    return BlockSteps(
        np.concatenate([p.weight for p in parts]),
        np.concatenate([p.demand for p in parts], axis=1),
        np.concatenate([p.floor for p in parts]),
        np.concatenate([p.picks for p in parts], axis=1),
    )


def _undominated(steps: BlockSteps) -> BlockSteps:
    if len(steps) < 2:
        return steps
    return steps.take(undominated_points(np.vstack([steps.weight, steps.demand, steps.floor])))


def _nothing(index: Index) -> Staircase:
    zero = np.zeros(1)
    return Staircase(index, zero, zero, zero, np.full((len(index.stages), 1), -1, dtype=np.int32))


def _timed(index: Index, b: int, steps: BlockSteps) -> Staircase:
    """A block's designs with their shortest times, setups and hours included, those too slow left out."""
    problem, block = index.problem, index.problem.blocks[b]
    time = steps.times(block, problem.volume)
    keep = np.flatnonzero(time <= problem.longest_time(block) * (1.0 + TIE))
    total = time + block.setup
    hours = problem.hour_rate * total if problem.objective == "cost" else np.zeros(len(time))
    spent = steps.demand.max(axis=0) / block.head
    return _best_of([Staircase(index, steps.weight + hours, total, spent, steps.picks).take(keep)])


def _combined(problem: DesignProblem, own: Staircase, rest: Staircase) -> Staircase:
    """Every design of a block with every one of the train after it."""
    k = np.arange(len(own.weight) * len(rest.weight))
    a, c = np.divmod(k, len(rest.weight))
    sequential = problem.schedule == "sequential"
    time = own.time[a] + rest.time[c] if sequential else np.maximum(own.time[a], rest.time[c])
    keep = np.flatnonzero(time <= problem.time * (1.0 + TIE))
    a, c = a[keep], c[keep]
    weight, spent = own.weight[a] + rest.weight[c], own.spent[a] + rest.spent[c]
    best = cheapest_by_time(weight, time[keep], spent)
    a, c = a[best], c[best]
    picks = np.maximum(own.picks[:, a], rest.picks[:, c])
    return Staircase(own.index, weight[best], time[keep][best], spent[best], picks)


def _best_of(parts: list[Staircase]) -> Staircase:
    whole = parts[0] if len(parts) == 1 else Staircase(
        parts[0].index,
        np.concatenate([p.weight for p in parts]),
        np.concatenate([p.time for p in parts]),
        np.concatenate([p.spent for p in parts]),
        np.concatenate([p.picks for p in parts], axis=1),
    )  # fmt: skip
    return whole.take(cheapest_by_time(whole.weight, whole.time, whole.spent))
