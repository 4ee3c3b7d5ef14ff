"""The sparse index sets of the model: options, nodes and arcs, in the order of the problem.

Symbols as in model.md, section 4: block b, stage i, medium m, option c, lot s.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from trainopt.train.options import least_weight
from trainopt.train.problem import Candidate, DesignProblem, Floats, Stage

SOURCE, SINK = -1, -2
"""The ends of every route."""


@dataclass(frozen=True)
class Node:
    """One candidate medium of one stage that has options: its block, its stage's place in the block and in the train.

    `options` is the range of its x's in the flat list of options.
    """

    block: int
    stage: int
    place: int
    spec: Stage
    candidate: Candidate
    options: range


@dataclass(frozen=True)
class Index:
    """The nodes of a problem and what follows from them; built once, read by every constraint."""

    problem: DesignProblem
    nodes: tuple[Node, ...]

    @cached_property
    def stages(self) -> tuple[tuple[int, Stage], ...]:
        """(block, stage) of every stage in flow order."""
        return tuple((b, stage) for b, block in enumerate(self.problem.blocks) for stage in block.stages)

    @cached_property
    def names(self) -> tuple[tuple[str, str, str, int], ...]:
        """(stage, medium, module, count) of every option."""
        return tuple(
            (node.spec.name, node.candidate.medium, module, int(count))
            for node in self.nodes
            for module, count in zip(node.candidate.options.module, node.candidate.options.count.tolist(), strict=True)
        )

    @cached_property
    def weight(self) -> Floats:
        """w of every option."""
        return _joined([node.candidate.options.weight for node in self.nodes])

    @cached_property
    def least_weight(self) -> Floats:
        """The least that every option can add to the objective: w, for cost less all that owned holders can save it."""
        owned, objective = self.problem.owned, self.problem.objective
        return _joined([least_weight(node.candidate.options, owned, objective) for node in self.nodes])

    def nodes_of(self, block: int) -> tuple[Node, ...]:
        """The nodes of a block in flow order."""
        return tuple(node for node in self.nodes if node.block == block)

    @cached_property
    def plain(self) -> bool:
        """Whether every stage is used and every sequence of media allowed, so that routes need no arcs."""
        return not any(stage.optional for _, stage in self.stages) and all(
            node.candidate.after is None for node in self.nodes
        )

    @cached_property
    def arcs(self) -> tuple[tuple[int, int], ...]:
        """(from, to) between nodes (or the ends) that may follow one another, skipping only optional stages."""
        return tuple(self._arcs())

    def _arcs(self) -> Iterator[tuple[int, int]]:
        total = len(self.stages)
        for n, node in enumerate(self.nodes):
            if self._skippable(0, node.place) and node.candidate.after is None:
                yield SOURCE, n
            if self._skippable(node.place + 1, total):
                yield n, SINK
            for k, later in enumerate(self.nodes[n + 1 :], start=n + 1):
                after = later.candidate.after
                near = later.place > node.place and self._skippable(node.place + 1, later.place)
                if near and (after is None or node.candidate.medium in after):
                    yield n, k
        if self._skippable(0, total):
            yield SOURCE, SINK

    def _skippable(self, first: int, end: int) -> bool:
        return all(stage.optional for _, stage in self.stages[first:end])

    def lots(self, block: int) -> tuple[int, ...]:
        """Lots whose pressure rows matter in a block: those that no other lot exceeds in every option's D."""
        tables = [node.candidate.options.demand for node in self.nodes_of(block)]
        if not tables:
            return ()
        return undominated_lots(np.concatenate(tables, axis=1))


def undominated_lots(demand: Floats) -> tuple[int, ...]:
    """Places of the rows of D, shape (lots, n), that no other row equals or exceeds everywhere (first of equals)."""
    order = np.argsort(-demand.sum(axis=1), kind="stable")
    kept: list[int] = []
    for s in order.tolist():
        if not any((demand[k] >= demand[s]).all() for k in kept):
            kept.append(s)
    return tuple(sorted(kept))


def _joined(parts: list[Floats]) -> Floats:
    return np.concatenate(parts) if parts else np.zeros(0)


def index_problem(problem: DesignProblem) -> Index:
    """The index of a problem: its nodes are the candidates that have options."""
    nodes: list[Node] = []
    first = place = 0
    for b, block in enumerate(problem.blocks):
        for i, stage in enumerate(block.stages):
            for candidate in stage.candidates:
                count = len(candidate.options)
                if count:
                    nodes.append(Node(b, i, place, stage, candidate, range(first, first + count)))
                    first += count
            place += 1
    return Index(problem, tuple(nodes))
