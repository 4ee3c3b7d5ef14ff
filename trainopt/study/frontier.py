"""Every best design of a problem at once, for any time allowed: exact, by joining the stages' options.

Within a block the labels of model.md, section 5 (the staircase), are joined from the last stage upstream, one
demand per lot, so that inlet ratings and the worst lot are exact; then block after block under the shared time.
What limits a pick is its shortest block time, as in `optimize/times.py`, so that the tables hold for every
batch time: a sweep over time reads them, where a solver would start again. A test holds them against the solver
and against full enumeration.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from trainopt.optimize.index import SINK, SOURCE, Index, Node, index_problem
from trainopt.optimize.search import TIE, fixed_order, route_of
from trainopt.optimize.times import TIME_SLACK, Route
from trainopt.study.labels import (
    Complete,
    Partial,
    SharedHoldersError,
    TooManyLabelsError,
    pairs,
    thinned,
    thinned_partial,
)
from trainopt.train.problem import Block, DesignProblem, Floats

__all__ = ["Frontier", "SharedHoldersError", "TooManyLabelsError", "frontier"]

Ends = tuple[int, int]
"""First and last used node of a block."""


@dataclass(frozen=True, eq=False)
class Frontier:
    """The picks of a problem that are best for some time allowed, `labels` sorted by their shortest time."""

    index: Index
    labels: Complete
    lowest: Floats
    """Least objective among the labels up to each place, shape (n,)."""

    def best(self, time: float) -> int | None:
        """Place of the best pick when `time` h are allowed, setups included; None where no pick is that fast."""
        count = int(np.searchsorted(self.labels.finish, time * (1.0 + TIME_SLACK), side="right"))
        if not count:
            return None
        value = float(self.lowest[count - 1])
        tied = np.flatnonzero(self.labels.objective[:count] <= value + TIE * max(1.0, abs(value)))
        spent = self.labels.spent[tied]
        tied = tied[spent <= spent.min() * (1.0 + TIE)]
        return int(tied[np.argmin(self.labels.order[tied])])

    def route(self, place: int) -> Route:
        """The pick at a place."""
        return route_of(self.index, [k for k in self.labels.picks[place].tolist() if k >= 0])

    @property
    def shortest(self) -> float:
        """The shortest time in h that any pick allows (infinite where there is none)."""
        return float(self.labels.finish[0]) if len(self.labels) else math.inf


def frontier(problem: DesignProblem) -> Frontier:
    """The frontier of a problem (pruned for its longest time), exact for every time up to the problem's own.

    Raises `TooManyLabelsError` where the tables would not fit, and `SharedHoldersError` where the objective is cost and
    stages share holders that are owned; the solver then serves each time by itself.
    """
    if problem.shares_cost:
        raise SharedHoldersError
    index = index_problem(problem)
    arcs = set(index.arcs)
    states: dict[int, Complete] = {SOURCE: _nothing()}
    tables = [_block_table(index, b, arcs) for b in range(len(problem.blocks))]
    highest = sum(max((float(t.objective.max()) for t in table.values() if len(t)), default=0.0) for table in tables)
    tie = 2.0 * TIE * max(1.0, highest)
    for table in tables:
        states = _after_block(index.problem, states, table, arcs, tie)
    done = [labels for node, labels in states.items() if (node, SINK) in arcs]
    labels = thinned(_stacked(done), tie)
    labels = labels.take(np.lexsort((labels.objective, labels.finish)))
    return Frontier(index, labels, np.minimum.accumulate(labels.objective) if len(labels) else labels.objective)


def _nothing() -> Complete:
    zero = np.zeros(1)
    return Complete(zero, zero, zero, zero, np.zeros((1, 0), dtype=np.int32))


def _after_block(
    problem: DesignProblem, states: dict[int, Complete], table: dict[Ends | None, Complete], arcs: set[Ends], tie: float
) -> dict[int, Complete]:
    """The labels after one more block, by the last used node."""
    reached: dict[int, list[Complete]] = {}
    for tail, labels in states.items():
        for ends, block in table.items():
            if ends is None:
                reached.setdefault(tail, []).append(_joined(problem, labels, block))
            elif (tail, ends[0]) in arcs:
                reached.setdefault(ends[1], []).append(_joined(problem, labels, block))
    return {node: thinned(_stacked(parts), tie) for node, parts in reached.items()}


def _joined(problem: DesignProblem, upstream: Complete, block: Complete) -> Complete:
    i, j = pairs(len(upstream), len(block))
    if problem.schedule == "sequential":
        finish = upstream.finish[i] + block.finish[j]
    else:
        finish = np.maximum(upstream.finish[i], block.finish[j])
    joined = Complete(
        upstream.objective[i] + block.objective[j],
        finish,
        upstream.spent[i] + block.spent[j],
        upstream.order[i] + block.order[j],
        np.concatenate([upstream.picks[i], block.picks[j]], axis=1),
    )
    return joined.take(np.flatnonzero(finish <= problem.time * (1.0 + TIME_SLACK)))


def _stacked(parts: list[Complete]) -> Complete:
    if not parts:
        none = np.zeros(0)
        return Complete(none, none, none, none, np.zeros((0, 0), dtype=np.int32))
    return Complete(
        np.concatenate([p.objective for p in parts]),
        np.concatenate([p.finish for p in parts]),
        np.concatenate([p.spent for p in parts]),
        np.concatenate([p.order for p in parts]),
        np.concatenate([p.picks for p in parts]),
    )


def _block_table(index: Index, b: int, arcs: set[Ends]) -> dict[Ends | None, Complete]:
    """A block's complete labels by its first and last used node; None where it uses no stage."""
    block = index.problem.blocks[b]
    if block.head <= 0.0:
        return {}
    order = fixed_order(index)
    lots = np.array(index.lots(b), dtype=np.intp)
    suffixes: dict[Ends, Partial] = {}
    table: dict[Ends | None, Complete] = {}
    numbers = {node.options.start: n for n, node in enumerate(index.nodes)}
    nodes = index.nodes_of(b)
    inside = {numbers[node.options.start] for node in nodes}
    heads = {head for tail, head in arcs if tail not in inside}
    for node in reversed(nodes):
        n = numbers[node.options.start]
        wanted_upstream = any((numbers[other.options.start], n) in arcs for other in nodes if other.stage < node.stage)
        parts: dict[int, list[Partial]] = {n: [_alone(index, block, node, order, lots)]}
        for (head, last), suffix in suffixes.items():
            if (n, head) in arcs:
                parts.setdefault(last, []).append(_in_front(index, block, parts[n][0], node, suffix))
        for last, found in parts.items():
            labels = _in_time(index.problem, block, _stacked_partial(found))
            if n in heads:
                table[n, last] = _completed(index, block, labels)
            if wanted_upstream and len(labels):
                suffixes[n, last] = thinned_partial(labels)
    if all(stage.optional for stage in block.stages):
        zero = np.zeros(1)
        empty = Partial(zero, zero, np.zeros((1, len(lots))), zero, np.full((1, len(block.stages)), -1, np.int32))
        table[None] = _completed(index, block, empty)
    return {ends: labels for ends, labels in table.items() if len(labels)}


def _alone(
    index: Index, block: Block, node: Node, order: Floats, lots: np.ndarray[tuple[int], np.dtype[np.intp]]
) -> Partial:
    """A node's options as labels: nothing downstream of it yet."""
    one, options = node.candidate, node.candidate.options
    demand = options.demand[lots].T
    least = options.shortest_time.copy()
    if block.operation == "constant-flow":
        least = np.maximum(least, options.demand.max(axis=0) / one.differential_pressure)
    picks = np.full((len(options), len(block.stages)), -1, dtype=np.int32)
    picks[:, node.stage] = np.arange(node.options.start, node.options.stop, dtype=np.int32)
    labels = Partial(options.weight, least, demand, order[node.options.start : node.options.stop], picks)
    return _inlet(index, block, node, labels)


def _inlet(index: Index, block: Block, node: Node, labels: Partial) -> Partial:
    """The labels with the time that the node's inlet rating asks for, its own D and all downstream counted."""
    inlet = node.candidate.inlet_pressure
    if block.operation != "constant-flow" or inlet >= block.pressure:
        return labels
    room = inlet - block.static
    line = block.line * index.problem.volume
    needed = (labels.demand.max(axis=1) + line) / room if room > 0.0 else np.full(len(labels), math.inf)
    return Partial(labels.weight, np.maximum(labels.least, needed), labels.demand, labels.order, labels.picks)


def _in_front(index: Index, block: Block, alone: Partial, node: Node, suffix: Partial) -> Partial:
    """A node's options in front of what is downstream."""
    i, j = pairs(len(alone), len(suffix))
    picks = suffix.picks[j]
    picks[:, node.stage] = alone.picks[i, node.stage]
    labels = Partial(
        alone.weight[i] + suffix.weight[j],
        np.maximum(alone.least[i], suffix.least[j]),
        alone.demand[i] + suffix.demand[j],
        alone.order[i] + suffix.order[j],
        picks,
    )
    return _inlet(index, block, node, labels)


def _stacked_partial(parts: list[Partial]) -> Partial:
    if len(parts) == 1:
        return parts[0]
    return Partial(
        np.concatenate([p.weight for p in parts]),
        np.concatenate([p.least for p in parts]),
        np.concatenate([p.demand for p in parts]),
        np.concatenate([p.order for p in parts]),
        np.concatenate([p.picks for p in parts]),
    )


def _shortest(problem: DesignProblem, block: Block, labels: Partial) -> Floats:
    """The shortest block time of each label, h: its own, the pressure budget's, the pump's."""
    pressure = (labels.demand.max(axis=1, initial=0.0) + block.line * problem.volume) / block.head
    return np.asarray(np.maximum(np.maximum(labels.least, pressure), problem.volume / block.max_flow))


def _in_time(problem: DesignProblem, block: Block, labels: Partial) -> Partial:
    longest = problem.longest_time(block) + TIME_SLACK * problem.time
    return labels.take(np.flatnonzero(_shortest(problem, block, labels) <= longest))


def _completed(index: Index, block: Block, labels: Partial) -> Complete:
    """A block's labels by what is left to know of them."""
    problem = index.problem
    shortest = _shortest(problem, block, labels)
    objective = labels.weight
    if problem.objective == "cost":
        objective = objective + problem.hour_rate * (shortest + block.setup)
    spent = labels.demand.max(axis=1, initial=0.0) / block.head
    complete = Complete(objective, shortest + block.setup, spent, labels.order, labels.picks)
    complete = complete.take(np.flatnonzero(shortest <= problem.longest_time(block) + TIME_SLACK * problem.time))
    return thinned(complete, 2.0 * TIE * max(1.0, _highest(index)))


def _highest(index: Index) -> float:
    """No design's objective is higher: every stage at its dearest, all the time used."""
    dearest: dict[int, float] = {}
    for node in index.nodes:
        dearest[node.place] = max(dearest.get(node.place, 0.0), float(node.candidate.options.weight.max()))
    problem = index.problem
    hours = problem.hour_rate * problem.time * len(problem.blocks) if problem.objective == "cost" else 0.0
    return sum(dearest.values()) + (hours if math.isfinite(hours) else 0.0)
