"""The constraints of a reliability basis, one function each (model.md, section 4): y_s = 1 lets sampled lot s fail.

They stand in for the pressure rows of `constraints.py`: the same rows for every sampled lot, each with a term
M_s·y_s by which a spared lot's row gives. M_s is as small as `samples.py` can show that it may be.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from trainopt.optimize.constraints import Row, Variables, linear, rated
from trainopt.optimize.index import Index, Node
from trainopt.optimize.samples import Excess, excess, largest, node_demand
from trainopt.train.problem import Floats

Spared = Mapping[int, Any]


@dataclass(frozen=True)
class Relief:
    """How far each sampled lot's budget rows must give, in h, which rows are implied, and which lots need a y."""

    index: Index

    @cached_property
    def budget(self) -> tuple[Excess, ...]:
        """Of every block: M of the budget rows."""
        return tuple(self._budget(b) for b in range(len(self.index.problem.blocks)))

    def _budget(self, b: int) -> Excess:
        problem, nodes = self.index.problem, self.index.nodes_of(b)
        block = problem.blocks[b]
        if not nodes:
            return Excess(np.zeros(len(problem.lots)), np.zeros(len(problem.lots), dtype=bool))
        line, most = block.line * problem.volume / block.head, problem.longest_time(block)
        least = problem.volume / block.max_flow
        found = excess(node_demand(nodes), problem.may_fail)
        give = np.minimum(found.give * (most - line), largest(self.index, nodes, block.head) + line - least)
        return Excess(np.maximum(give, 0.0), found.implied)

    @cached_property
    def lots(self) -> tuple[int, ...]:
        """Lots that may break a limit which the others do not imply: each gets a y."""
        needed = np.zeros(len(self.index.problem.lots), dtype=bool)
        for found in self.budget:
            needed |= ~found.implied
        for node in self.index.nodes:
            needed |= ~np.isfinite(node.candidate.options.demand).all(axis=1)
            if _inlet_binds(self.index, node) or rated(self.index.problem.blocks[node.block], [node]):
                needed[:] = True
        return tuple(np.flatnonzero(needed).tolist())


def _inlet_binds(index: Index, node: Node) -> bool:
    block = index.problem.blocks[node.block]
    return block.operation == "constant-flow" and node.candidate.inlet_pressure < block.pressure


def spared_lots(index: Index, y: Spared) -> Row:
    """Σ_s y_s ≤ floor((1 − q)·N)."""
    return None, linear([(1.0, v) for v in y.values()]), float(index.problem.may_fail)


def untested(index: Index, x: Variables, y: Spared) -> Iterator[tuple[tuple[int, int], Row]]:
    """Σ_{c: D_{c,s} infinite} x_c ≤ y_s per stage: past a pole or beyond what was tested, lot s fails."""
    for place in range(len(index.stages)):
        nodes = [node for node in index.nodes if node.place == place]
        for s in y:
            beyond = [k for n in nodes for k, d in zip(n.options, n.candidate.options.demand[s].tolist(), strict=True)
                      if not np.isfinite(d)]  # fmt: skip
            if beyond:
                yield (place, s), (None, linear([*((1.0, x[k]) for k in beyond), (-1.0, y[s])]), 0.0)


def sampled_budget(
    index: Index, x: Variables, t: Variables, y: Spared, relief: Relief
) -> Iterator[tuple[tuple[int, int], Row]]:
    """Σ_{i in b} D_{i,m,c,s}·x + r_b·V ≤ (P_b − Pstatic_b)·t_b + M_{b,s}·y_s, every block and lot not implied."""
    for b, block in enumerate(index.problem.blocks):
        line = block.line * index.problem.volume / block.head
        for s in y:
            if not relief.budget[b].implied[s]:
                give = float(relief.budget[b].give[s])
                terms = [*_spent(index.nodes_of(b), x, s, block.head), (-1.0, t[b]), (-give, y[s])]
                yield (b, s), (None, linear(terms), -line)


def sampled_rating(index: Index, x: Variables, t: Variables, y: Spared) -> Iterator[tuple[tuple[int, int], Row]]:
    """D_{i,m,c,s}·x ≤ ΔPmax_m·(t_b + M_s·y_s), constant flow."""
    problem = index.problem
    for place, (b, _) in enumerate(index.stages):
        block = problem.blocks[b]
        nodes = [node for node in index.nodes if node.place == place]
        if not rated(block, nodes):
            continue
        needed = np.concatenate([_rated_hours(n) for n in nodes], axis=1)
        found, longest = excess(needed, problem.may_fail), problem.longest_time(block)
        columns = [x[k] for node in nodes for k in node.options]
        for s in y:
            if not found.implied[s]:
                terms = [(a, v) for a, v in zip(needed[s].tolist(), columns, strict=True) if np.isfinite(a)]
                give = float(found.give[s]) * longest
                yield (place, s), (None, linear([*terms, (-1.0, t[b]), (-give, y[s])]), 0.0)


def _rated_hours(node: Node) -> Floats:
    """D/ΔPmax in h, infinite where the lot fails anyway."""
    spent = node.candidate.options.demand
    # A medium without a rating has no hours to ask for, but a lot that fails with it still does.
    return np.where(np.isfinite(spent), np.where(np.isfinite(spent), spent, 0.0) / node.candidate.differential_pressure,
                    np.inf)  # fmt: skip


def sampled_inlet(
    index: Index, x: Variables, t: Variables, y: Spared, relief: Relief
) -> Iterator[tuple[tuple[int, int], Row]]:
    """The inlet rating of `constraints.inlet_rating` for every lot, its row giving by M_s where the lot is spared."""
    problem = index.problem
    for n, node in enumerate(index.nodes):
        if not _inlet_binds(index, node):
            continue
        block, inlet = problem.blocks[node.block], node.candidate.inlet_pressure
        downstream = [k for k in index.nodes_of(node.block) if k.stage >= node.stage]
        longest = problem.longest_time(block)
        off = (block.pressure - inlet) * longest / block.head
        line, slope = block.line * problem.volume / block.head, (inlet - block.static) / block.head
        own = excess(node_demand(downstream), problem.may_fail).give * max(slope * longest - line, 0.0)
        # Where the medium is not picked, `off` leaves the row as loose as the budget's.
        give = np.maximum(own, relief.budget[node.block].give)
        for s in y:
            spent = {id(v): (a, v) for a, v in _spent(downstream, x, s, block.head)}
            for k in node.options:
                spent[id(x[k])] = (spent.get(id(x[k]), (0.0, x[k]))[0] + off, x[k])
            terms = [*spent.values(), (-slope, t[node.block]), (-float(give[s]), y[s])]
            yield (n, s), (None, linear(terms), off - line)


def _spent(nodes: tuple[Node, ...] | list[Node], x: Variables, s: int, head: float) -> Iterator[tuple[float, Any]]:
    for node in nodes:
        for k, need in zip(node.options, (node.candidate.options.demand[s] / head).tolist(), strict=True):
            if np.isfinite(need):
                yield need, x[k]
