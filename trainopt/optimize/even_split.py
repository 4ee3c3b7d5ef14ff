"""The even split: pressure divided evenly over a block's stages, time evenly over the blocks (model.md, section 5).

Each stage is then sized alone, as though no other used the holders that are there already; what they save is counted
once, over the train. It is the usual rule, and what a design is compared with.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from trainopt.optimize.index import SINK, SOURCE, Index, Node, index_problem
from trainopt.optimize.roots import largest_where
from trainopt.optimize.times import Choice, Route, block_bounds, lot_times, objective_of
from trainopt.train.options import CAP_SLACK, cost_alone, demand, least_weight
from trainopt.train.problem import Block, DesignProblem, Floats


@dataclass(frozen=True)
class EvenPick:
    """What the even split buys: a pick and its block times in h, or None and why the rule yields no design."""

    route: Route | None
    times: tuple[float, ...]
    text: str = ""


def even_times(problem: DesignProblem) -> tuple[float, ...]:
    """The time left after setups, h: divided evenly over blocks in sequence, whole for blocks side by side."""
    if problem.schedule == "sequential":
        left = problem.time - sum(block.setup for block in problem.blocks)
        return (left / len(problem.blocks),) * len(problem.blocks)
    return tuple(problem.time - block.setup for block in problem.blocks)


def least_area(problem: DesignProblem, node: Node, budget: float, time: float) -> float:
    """A_min in m²: demand at F = 1 within `budget` bar·h and the rating, loading inside the cap, for every lot.

    On a reliability basis for every sampled lot but those that may fail: each stage is sized alone, as the rule has it,
    so that stages that fail with different lots make the train fail more often.
    """
    candidate, block = node.candidate, problem.blocks[node.block]
    room = min(budget, candidate.differential_pressure * time) if block.operation == "constant-flow" else budget

    def holds(loading: Floats) -> np.ndarray[tuple[int], np.dtype[np.bool_]]:
        return np.asarray(problem.worst(demand(candidate.curves, block.operation, loading)) <= room)

    loading = largest_where(holds, candidate.loading_cap) if room > 0.0 else 0.0
    return problem.volume / (candidate.scale_up * loading) if loading > 0.0 else math.inf


def sized_option(problem: DesignProblem, node: Node, budget: float, time: float) -> int | None:
    """The option of at least the recommended area with the least objective, the stage alone; None: none is so large."""
    options = node.candidate.options
    recommended = max(
        problem.safety_factor * least_area(problem, node, budget, time),
        problem.volume / (node.candidate.flux_limit * time),
    )
    large = np.flatnonzero(options.area >= recommended * (1.0 - CAP_SLACK))
    if not len(large):
        return None
    weight = least_weight(options, problem.owned, problem.objective)
    cost = cost_alone(options, problem.owned)
    return min(
        large.tolist(),
        key=lambda c: (weight[c], cost[c], -options.area[c], options.count[c], options.module[c]),
    )


def routes(index: Index) -> Iterator[tuple[Node, ...]]:
    """Every allowed sequence of used candidates through the train, in a fixed order."""
    following: dict[int, list[int]] = {}
    for tail, head in index.arcs:
        following.setdefault(tail, []).append(head)

    def onward(tail: int, so_far: tuple[Node, ...]) -> Iterator[tuple[Node, ...]]:
        for head in following.get(tail, []):
            if head == SINK:
                yield so_far
            else:
                yield from onward(head, (*so_far, index.nodes[head]))

    yield from onward(SOURCE, ())


def even_split(problem: DesignProblem) -> EvenPick:
    """The best design that the rule yields over all allowed routes."""
    times = even_times(problem)
    failure = _time_failure(problem, times)
    if failure:
        return EvenPick(None, times, failure)
    index = index_problem(problem)
    sized: dict[tuple[int, int], int | None] = {}
    best: tuple[float, tuple[str, ...], Route] | None = None
    failure = "no allowed route through the stages has modules inside the loading caps"
    for nodes in _apart(problem, index, times, sized) or routes(index):
        route, text = _sized_route(problem, nodes, times, sized)
        if route is None:
            failure = text
            continue
        key = (objective_of(problem, route, times), tuple(node.candidate.medium for node in nodes))
        if best is None or key < best[:2]:
            best = (*key, route)
    return EvenPick(best[2], times) if best else EvenPick(None, times, failure)


def _apart(
    problem: DesignProblem, index: Index, times: tuple[float, ...], sized: dict[tuple[int, int], int | None]
) -> list[tuple[Node, ...]]:
    """The one route that is best where stages do not touch one another: each stage's best medium by itself.

    Empty where a stage may be left out, a medium asks for another, an inlet rating may bind, a stage has no medium, or
    stages share owned holders that the objective counts.
    """
    binding = any(n.candidate.inlet_pressure < problem.blocks[n.block].pressure for n in index.nodes)
    if not index.plain or binding or problem.shares_cost:
        return []
    best: list[Node] = []
    for place, (b, _) in enumerate(index.stages):
        stages = len(problem.blocks[b].stages)
        offers = []
        for node in (node for node in index.nodes if node.place == place):
            key = (node.options.start, stages)
            if key not in sized:
                share = problem.blocks[b].budget(times[b], problem.volume) / stages
                sized[key] = sized_option(problem, node, share, times[b])
            option = sized[key]
            if option is not None:
                offers.append((float(node.candidate.options.weight[option]), node.candidate.medium, node))
        if not offers:
            return []
        best.append(min(offers, key=lambda offer: offer[:2])[2])
    return [tuple(best)]


def _sized_route(
    problem: DesignProblem,
    nodes: tuple[Node, ...],
    times: tuple[float, ...],
    sized: dict[tuple[int, int], int | None],
) -> tuple[Route | None, str]:
    """The rule's pick on one route, or why there is none; `sized` remembers (node, stages in its block)."""
    blocks: list[tuple[Choice, ...]] = []
    for b, (block, time) in enumerate(zip(problem.blocks, times, strict=True)):
        here = [node for node in nodes if node.block == b]
        choices: list[Choice] = []
        for node in here:
            key = (node.options.start, len(here))
            if key not in sized:
                share = block.budget(time, problem.volume) / len(here)
                sized[key] = sized_option(problem, node, share, time)
            option = sized[key]
            if option is None:
                return None, _too_small(block, node, block.budget(time, problem.volume) / len(here), time)
            choices.append(Choice(node.spec, node.candidate, option))
        text = _rating_failure(problem, block, tuple(choices), time)
        if text:
            return None, text
        blocks.append(tuple(choices))
    return tuple(blocks), ""


def _too_small(block: Block, node: Node, share: float, time: float) -> str:
    return (
        f"stage '{node.spec.name}': with an even share of {max(share / time, 0.0):.3g} bar over {time:.3g} h, "
        f"even the largest option of '{node.candidate.medium}' in block '{block.name}' is too small"
    )


def _rating_failure(problem: DesignProblem, block: Block, choices: tuple[Choice, ...], time: float) -> str:
    """What fails once all stages are sized: an inlet rating, counted from the downstream end."""
    if all(choice.candidate.inlet_pressure >= block.pressure for choice in choices):
        return ""
    lots = None
    if problem.may_fail and choices:
        lots = np.argsort(lot_times(block, choices, problem.volume), kind="stable")[: -problem.may_fail]
    for (stage, what), needed in block_bounds(block, choices, problem.volume, lots).limits.items():
        if what == "inlet-pressure" and needed > time * (1.0 + 1e-9):
            return f"stage '{stage}': the even split breaks its inlet rating in block '{block.name}'"
    return ""


def _time_failure(problem: DesignProblem, times: tuple[float, ...]) -> str:
    for block, time in zip(problem.blocks, times, strict=True):
        if time <= 0.0:
            return "the setups leave no time"
        flow = problem.volume / time
        if flow > block.max_flow * (1.0 + 1e-9):
            return f"block '{block.name}': an even share of {time:.3g} h needs {flow:.4g} L/h, more than the pump gives"
        if flow < block.min_flow * (1.0 - 1e-9):
            return f"block '{block.name}': an even share of {time:.3g} h needs {flow:.4g} L/h, less than the pump can"
    return ""
