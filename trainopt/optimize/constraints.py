"""The constraints of the model, one function each, the algebra in its docstring (model.md, section 4).

x is the list of all options' binaries in the order of the index, t the blocks' times in h. Pressure rows are divided
by the pressure left for the stages, P_b − Pstatic_b, so that every row reads in hours: HiGHS's tolerance is absolute.
u_{i,m} = Σ_c x_{i,m,c} is substituted wherever it occurs.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from typing import Any

import numpy as np
from pyomo.core.expr.numeric_expr import LinearExpression

from trainopt.optimize.index import SINK, SOURCE, Index, Node
from trainopt.train.problem import Block

Row = tuple[float | None, LinearExpression, float | None]
Variables = Sequence[Any]


def linear(terms: Sequence[tuple[float, Any]], constant: float = 0.0) -> LinearExpression:
    """Σ coefficient·variable + constant."""
    return LinearExpression(constant=constant, linear_coefs=[a for a, _ in terms], linear_vars=[v for _, v in terms])


def one_option(index: Index, x: Variables) -> Iterator[tuple[int, Row]]:
    """Σ_{m,c} x_{i,m,c} = 1 for every stage i, where every stage is used and any medium may follow any."""
    for place in range(len(index.stages)):
        here = [x[k] for node in index.nodes if node.place == place for k in node.options]
        yield place, (1.0, linear([(1.0, v) for v in here]), 1.0)


def route_start(arcs: dict[tuple[int, int], Any]) -> Row:
    """Σ_{(source, n)} f = 1: one route through the train."""
    return 1.0, linear([(1.0, f) for (tail, _), f in arcs.items() if tail == SOURCE]), 1.0


def route_in(index: Index, x: Variables, arcs: dict[tuple[int, int], Any]) -> Iterator[tuple[int, Row]]:
    """Σ_{(k, n)} f = u_n: a candidate is used exactly if the route comes to it."""
    yield from _throughput(index, x, arcs, 1)


def route_out(index: Index, x: Variables, arcs: dict[tuple[int, int], Any]) -> Iterator[tuple[int, Row]]:
    """Σ_{(n, k)} f = u_n: and the route goes on from it, to an allowed medium or to the end."""
    yield from _throughput(index, x, arcs, 0)


def _throughput(index: Index, x: Variables, arcs: dict[tuple[int, int], Any], end: int) -> Iterator[tuple[int, Row]]:
    for n, node in enumerate(index.nodes):
        flow = [(1.0, f) for arc, f in arcs.items() if arc[end] == n]
        yield n, (0.0, linear([*flow, *((-1.0, x[k]) for k in node.options)]), 0.0)


def pressure_budget(index: Index, x: Variables, t: Variables) -> Iterator[tuple[tuple[int, int], Row]]:
    """Σ_{i in b} D_{i,m,c,s}·x + r_b·V ≤ (P_b − Pstatic_b)·t_b for every block b and lot s that matters."""
    for b, block in enumerate(index.problem.blocks):
        for s in index.lots(b):
            terms = list(_spent(index.nodes_of(b), x, s, block.head))
            line = block.line * index.problem.volume / block.head
            yield (b, s), (None, linear([*terms, (-1.0, t[b])]), -line)


def differential_rating(index: Index, x: Variables, t: Variables) -> Iterator[tuple[int, Row]]:
    """D_{i,m,c,s}·x ≤ ΔPmax_m·t_b, constant flow: the stage's own rating, for its worst lot.

    No row where every rating is at least P_b − Pstatic_b: the budget implies it.
    """
    for place, (b, _) in enumerate(index.stages):
        block = index.problem.blocks[b]
        nodes = [node for node in index.nodes if node.place == place]
        if not rated(block, nodes):
            continue
        terms = [
            (float(need), x[k])
            for node in nodes
            for k, need in zip(
                node.options,
                (node.candidate.options.demand.max(axis=0) / node.candidate.differential_pressure).tolist(),
                strict=True,
            )
        ]
        yield place, (None, linear([*terms, (-1.0, t[b])]), 0.0)


def rated(block: Block, nodes: Sequence[Node]) -> bool:
    """Whether some differential-pressure rating of a stage's nodes can bind where the budget does not."""
    return block.operation == "constant-flow" and any(n.candidate.differential_pressure < block.head for n in nodes)


def inlet_rating(index: Index, x: Variables, t: Variables) -> Iterator[tuple[tuple[int, int], Row]]:
    """Σ_{k≥i} D_{k,s}·x + r_b·V ≤ (Pin_max,m − Pstatic_b)·t_b + (P_b − Pin_max,m)·t_max·(1 − u_{i,m}), constant flow.

    Counted from the downstream end; binds only when m is chosen; no row where Pin_max,m ≥ P_b.
    """
    for n, node in enumerate(index.nodes):
        block = index.problem.blocks[node.block]
        inlet = node.candidate.inlet_pressure
        if block.operation != "constant-flow" or inlet >= block.pressure:
            continue
        downstream = [k for k in index.nodes_of(node.block) if k.stage >= node.stage]
        relief = (block.pressure - inlet) * index.problem.longest_time(block) / block.head
        line = block.line * index.problem.volume / block.head
        for s in index.lots(node.block):
            spent = dict(_spent_by_option(downstream, s, block.head))
            for k in node.options:
                spent[k] = spent.get(k, 0.0) + relief
            terms = [(a, x[k]) for k, a in spent.items()]
            slope = (inlet - block.static) / block.head
            yield (n, s), (None, linear([*terms, (-slope, t[node.block])]), relief - line)


def flux_limit(index: Index, x: Variables, t: Variables) -> Iterator[tuple[int, Row]]:
    """τ_{i,m,c}·x ≤ t_b: the flux of the installed area stays within the medium's limit."""
    for place, (b, _) in enumerate(index.stages):
        terms = [
            (float(tau), x[k])
            for node in index.nodes
            if node.place == place
            for k, tau in zip(node.options, node.candidate.options.shortest_time.tolist(), strict=True)
        ]
        yield place, (None, linear([*terms, (-1.0, t[b])]), 0.0)


def batch_time(index: Index, t: Variables) -> Row:
    """Σ_b (t_b + setup_b) ≤ T, blocks one after the other."""
    problem = index.problem
    return None, linear([(1.0, v) for v in t]), problem.time - sum(block.setup for block in problem.blocks)


def holder_uses(index: Index) -> dict[str, list[tuple[int, int]]]:
    """Of every shared holder type that some option uses: the places of those options, and how many each uses."""
    uses: dict[str, list[tuple[int, int]]] = {}
    shared = {holder.name for holder in index.problem.owned}
    for node in index.nodes:
        for k, one in zip(node.options, node.candidate.options.holders, strict=True):
            if one is not None and one[0] in shared:
                uses.setdefault(one[0], []).append((k, one[1]))
    return uses


def owned_holders(index: Index, x: Variables, r: dict[str, Any]) -> Iterator[tuple[str, Row]]:
    """r_h ≤ Σ number_{i,m,c,h}·x for every shared holder type h, with 0 ≤ r_h ≤ owned_h its bounds; for cost only.

    r_h holders cost nothing: the objective counts −price_h·r_h, and its least makes r_h = min(owned_h, Σ number·x), for
    every x a whole number.
    """
    for name, used in holder_uses(index).items():
        yield name, (None, linear([(1.0, r[name]), *((-float(number), x[k]) for k, number in used)]), 0.0)


def time_bounds(index: Index, b: int) -> tuple[float, float]:
    """V/Qmax_b ≤ t_b ≤ V/Qmin_b, and t_b + setup_b ≤ T, blocks side by side (in sequence: less all setups)."""
    block = index.problem.blocks[b]
    low = index.problem.volume / block.max_flow if math.isfinite(block.max_flow) else 0.0
    return low, index.problem.longest_time(block)


def _spent(nodes: Sequence[Node], x: Variables, s: int, head: float) -> Iterator[tuple[float, Any]]:
    for k, need in _spent_by_option(nodes, s, head):
        yield need, x[k]


def _spent_by_option(nodes: Sequence[Node], s: int, head: float) -> Iterator[tuple[int, float]]:
    for node in nodes:
        yield from zip(node.options, np.divide(node.candidate.options.demand[s], head).tolist(), strict=True)


__all__ = [
    "SINK", "SOURCE", "Row", "Variables", "batch_time", "differential_rating", "flux_limit", "holder_uses",
    "inlet_rating", "linear", "one_option", "owned_holders", "pressure_budget", "rated", "route_in", "route_out",
    "route_start", "time_bounds",
]  # fmt: skip
