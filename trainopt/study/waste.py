"""The most an even split could waste on a route: even and ideal split with modules of any size (model.md,
section 5)."""

from __future__ import annotations

import math
from dataclasses import dataclass

from trainopt.optimize.even_split import even_times, least_area
from trainopt.optimize.ideal_train import ideal_train
from trainopt.optimize.index import Node
from trainopt.optimize.times import Choice, Route
from trainopt.train.problem import DesignProblem


@dataclass(frozen=True)
class Waste:
    """Even and ideal split of one route with modules of any size, in what the objective counts (m², or cost
    with hours).

    `percent` of the even one; `factor` the bound that holds for stages that do not foul, whatever their
    resistances: the most stages in a block, times the blocks that share the time.
    """

    even: float
    ideal: float
    percent: float
    factor: float


def most_waste(problem: DesignProblem, route: Route) -> Waste | None:
    """Both splits of a pick's route, safety factor and all limits included; None where one does not exist."""
    even, ideal = _even_total(problem, route), ideal_train(problem, route)
    if even is None or ideal is None or not math.isfinite(even):
        return None
    counted = _rate(problem) * math.fsum(ideal.times) + math.fsum(
        weight_of(problem, choice) * area
        for choices, areas in zip(route, ideal.areas, strict=True)
        for choice, area in zip(choices, areas, strict=True)
    )
    # The ideal split is found to some digits only; the even one is one of those it is the best of.
    least = min(counted, even)
    used = [len(choices) for choices in route if choices]
    factor = float(max(used, default=1)) * (max(len(used), 1) if problem.schedule == "sequential" else 1)
    return Waste(even, least, 100.0 * (1.0 - least / even) if even > 0.0 else 0.0, factor)


def _rate(problem: DesignProblem) -> float:
    return problem.hour_rate if problem.objective == "cost" else 0.0


def _even_total(problem: DesignProblem, route: Route) -> float | None:
    """The rule without a catalog: n·D = B in every stage, F included."""
    total = 0.0
    for b, (block, choices, time) in enumerate(zip(problem.blocks, route, even_times(problem), strict=True)):
        if time <= 0.0:
            return None
        total += _rate(problem) * time
        for choice in choices:
            node = Node(b, 0, 0, choice.stage, choice.candidate, range(0))
            share = block.budget(time, problem.volume) / len(choices)
            least = problem.safety_factor * least_area(problem, node, share, time)
            total += weight_of(problem, choice) * max(least, problem.volume / (choice.candidate.flux_limit * time))
    return total


def weight_of(problem: DesignProblem, choice: Choice) -> float:
    """What the objective counts per m² of a picked stage: 1, or the picked module's cost."""
    if problem.objective != "cost":
        return 1.0
    options, c = choice.candidate.options, choice.option
    cost = float(options.modules_cost[c] + options.flush_cost[c] + options.product_cost[c]) / float(options.area[c])
    return cost if cost > 0.0 else 1.0
