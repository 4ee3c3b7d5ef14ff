"""What holders that are there already save a train: the count is shared by all of its stages.

A train that uses Σ number_h holders of a type of which owned_h are there pays for all but min(owned_h, Σ number_h). It
shares no code with the model.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from trainopt.train.problem import DesignProblem

if TYPE_CHECKING:
    from trainopt.optimize.times import Route


def stage_credits(problem: DesignProblem, route: Route) -> tuple[tuple[float, ...], ...]:
    """What the owned holders save each used stage per batch, by block, in the catalog's currency.

    They are given out in flow order. The sum is Σ_h price_h·min(owned_h, Σ number_h), whatever the order.
    """
    left = {holder.name: holder.owned for holder in problem.owned}
    price = {holder.name: holder.price for holder in problem.owned}
    blocks = []
    for choices in route:
        saved = []
        for choice in choices:
            name, number = choice.candidate.options.holders[choice.option] or ("", 0)
            free = min(number, left.get(name, 0))
            saved.append(free * price[name] if free else 0.0)
            left[name] = left.get(name, 0) - free
        blocks.append(tuple(saved))
    return tuple(blocks)


def credit(problem: DesignProblem, route: Route) -> float:
    """What the owned holders save the train per batch, in the catalog's currency."""
    return math.fsum(saved for block in stage_credits(problem, route) for saved in block)
