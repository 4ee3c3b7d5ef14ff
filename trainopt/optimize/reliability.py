"""How sure a design on a reliability basis is: measured on lots that it was not made for (model.md, section 4)."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from trainopt.optimize.describe import cost_parts, total_area
from trainopt.optimize.margins import common_safety_factor
from trainopt.optimize.search import SolverOptions, best_route
from trainopt.optimize.times import Choice, Route, holding_lots
from trainopt.train.build import prune
from trainopt.train.options import demand, take
from trainopt.train.problem import DesignProblem
from trainopt.train.results import Chance, ReliabilityResult, UsualDesign
from trainopt.train.sampling import FRESH, FRESH_TIMES

SOLVER = SolverOptions()
_NORMAL_95 = 1.959963984540054
"""Two-sided 95 % point of the normal distribution."""


@dataclass(frozen=True)
class Bought:
    """A pick to be measured: its route, block times in h, and the derating that its areas are held at."""

    route: Route
    times: tuple[float, ...]
    safety_factor: float


def wilson(successes: int, trials: int) -> Chance:
    """A share with its 95 % Wilson score interval (E. B. Wilson, J. Am. Stat. Assoc. 22 (1927) 209, memory)."""
    z2 = _NORMAL_95**2
    share = successes / trials
    middle = (share + z2 / (2.0 * trials)) / (1.0 + z2 / trials)
    half = _NORMAL_95 / (1.0 + z2 / trials) * math.sqrt(share * (1.0 - share) / trials + z2 / (4.0 * trials**2))
    # The ends at 0 and 1 are exact; rounding must not move them.
    low = 0.0 if successes == 0 else middle - half
    high = 1.0 if successes == trials else middle + half
    return Chance(share, low, high)


def reliability(
    problem: DesignProblem,
    bought: Bought,
    even: Bought | None,
    usual: DesignProblem | None,
    options: SolverOptions = SOLVER,
) -> ReliabilityResult | None:
    """The reliability of a design, of the even split and of the safety-factor design, on the same fresh lots.

    `usual` is the same case on the worst-lot basis. None for a problem without a reliability basis or without
    samplers.
    """
    basis = problem.reliability
    samplers = {(s.name, c.medium): c.sampler for b in problem.blocks for s in b.stages for c in s.candidates}
    if basis is None or any(one is None for one in samplers.values()):
        return None
    lots = FRESH_TIMES * len(problem.lots)
    fresh = measured(problem, bought, lots)
    return ReliabilityResult(
        target=basis.target,
        in_sample=len(holding_lots(problem, bought.route, bought.times)) / len(problem.lots),
        fresh=fresh,
        samples=len(problem.lots),
        fresh_samples=lots,
        even_split=None if even is None else measured(problem, even, lots),
        usual=None if usual is None else _usual(problem, usual, lots, options),
        equivalent_safety_factor=equivalent_safety_factor(problem, bought),
        seed=basis.seed,
    )


def measured(problem: DesignProblem, bought: Bought, lots: int, stream: str = FRESH) -> Chance:
    """The share of so many lots of a stream that finish inside every limit at the pick's block times."""
    names = tuple(f"fresh {k}" for k in range(1, lots + 1))
    wide = replace(problem, lots=names, safety_factor=bought.safety_factor)
    route = tuple(
        tuple(_measured_choice(problem, block.operation, choice, bought.safety_factor, lots, stream)
              for choice in choices)
        for block, choices in zip(problem.blocks, bought.route, strict=True)
    )  # fmt: skip
    return wilson(len(holding_lots(wide, route, bought.times)), lots)


def _measured_choice(
    problem: DesignProblem, operation: str, choice: Choice, factor: float, lots: int, stream: str
) -> Choice:
    one = choice.candidate
    assert one.sampler is not None
    curves = one.sampler.curves(lots, stream)
    bought = take(one.options, np.array([choice.option]))
    loading = factor * problem.volume / (one.scale_up * bought.area)
    options = replace(bought, loading=loading, demand=demand(curves, operation, loading))
    return Choice(choice.stage, replace(one, curves=curves, options=options), 0)


def _usual(problem: DesignProblem, usual: DesignProblem, lots: int, options: SolverOptions) -> UsualDesign:
    found = best_route(prune(usual), options)
    if found.route is None or found.times is None:
        return UsualDesign(usual.safety_factor, None, None, None)
    draws = {(s.name, c.medium): c.sampler for b in problem.blocks for s in b.stages for c in s.candidates}
    route = tuple(
        tuple(replace(c, candidate=replace(c.candidate, sampler=draws[c.stage.name, c.candidate.medium]))
              for c in choices)
        for choices in found.route
    )  # fmt: skip
    return UsualDesign(
        safety_factor=usual.safety_factor,
        area=total_area(found.route),
        cost=cost_parts(usual, found.route, found.times).total,
        fresh=measured(problem, Bought(route, found.times, 1.0), lots),
    )


def equivalent_safety_factor(problem: DesignProblem, bought: Bought) -> float | None:
    """The common derating that a pick takes at the pooled curve, block times as they are (None: nothing filters)."""

    def pooled(choice: Choice) -> Choice:
        one = choice.candidate
        curve = one.curves[0] if one.pooled is None else one.pooled
        cap = one.loading_cap if one.pooled is None else one.pooled_cap
        return Choice(choice.stage, replace(one, curves=(curve,), loading_cap=cap), choice.option)

    route = tuple(tuple(pooled(choice) for choice in choices) for choices in bought.route)
    alone = replace(problem, lots=("pooled",), reliability=None)
    return common_safety_factor(alone, route, bought.times)
