"""Where the installed area goes: the ideal split with nothing in its way, and what each cause adds to it.

Each rung of the ladder is the ideal split of the picked route (`ideal_train`) under more of what a real train must
meet; the last rung is the design. The differences are the parts, so that they add up to what is installed.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, replace

from trainopt.curves.curve import LotCurve
from trainopt.optimize.ideal_split import loading_limit
from trainopt.optimize.ideal_train import IdealTrain, ideal_train
from trainopt.optimize.restate import route_of_picks
from trainopt.optimize.times import Choice, Route
from trainopt.train.problem import Block, Candidate, DesignProblem
from trainopt.train.results import AreaPart, AreaParts, Design


@dataclass(frozen=True)
class _Rung:
    """What one ideal split has to meet: limits of the media, every lot (else the pooled curve), safety factor."""

    name: str
    limits: bool
    lots: bool
    factor: bool


_RUNGS = (
    _Rung("ideal split", limits=False, lots=False, factor=False),
    _Rung("loading caps, flux limits and ratings", limits=True, lots=False, factor=False),
    _Rung("lots", limits=True, lots=True, factor=False),
    _Rung("safety factor", limits=True, lots=True, factor=True),
)
WHOLE = "whole modules and holders"


def area_parts(problem: DesignProblem, design: Design) -> AreaParts | None:
    """The parts of a design's installed area and cost; `problem` with all its options. None where there is no design.

    A rung that no areas can meet (a loading cap inside a rating that pooled lots break) is skipped: its part goes to
    the next.
    """
    route = route_of_picks(problem, design.picks)
    if route is None or design.area is None or design.cost is None or not design.picks:
        return None
    parts: list[AreaPart] = []
    area = cost = 0.0
    for rung in _RUNGS:
        ideal = _ideal(problem, route, rung)
        if ideal is None:
            continue
        rung_area, rung_cost = ideal.area, _cost(problem, route, ideal)
        parts.append(AreaPart(rung.name, rung_area - area, rung_cost - cost))
        area, cost = rung_area, rung_cost
    parts.append(AreaPart(WHOLE, design.area - area, design.cost - cost))
    even = design.even_split
    adds_area = even.area - design.area if even is not None and even.area is not None else None
    adds_cost = even.cost - design.cost if even is not None and even.cost is not None else None
    return AreaParts(tuple(parts), adds_area, adds_cost)


def _ideal(problem: DesignProblem, route: Route, rung: _Rung) -> IdealTrain | None:
    eased = problem if rung.factor else replace(problem, safety_factor=1.0)
    if not rung.lots:
        eased = replace(eased, lots=problem.lots[:1])
    blocks = [tuple(_eased(eased, block, choice, rung) for choice in choices)
              for block, choices in zip(problem.blocks, route, strict=True)]  # fmt: skip
    return ideal_train(eased, tuple(blocks))


def _eased(problem: DesignProblem, block: Block, choice: Choice, rung: _Rung) -> Choice:
    one = choice.candidate
    if not rung.lots:
        one = replace(one, curves=(pooled_curve(one),), loading_cap=_pooled_cap(one))
    if not rung.limits:
        # No more pressure–time than the block has can be spent: that alone bounds the loading.
        most = block.head * problem.longest_time(block)
        whole = problem.safety_factor * problem.volume / (one.scale_up * _NO_AREA)
        cap = loading_limit(one.curves, block.operation, whole, most)
        one = replace(
            one, loading_cap=cap, flux_limit=math.inf, differential_pressure=math.inf, inlet_pressure=math.inf
        )
    return replace(choice, candidate=one)


_NO_AREA = 1e-9
"""An area in m² that stands for none at all."""


def pooled_curve(candidate: Candidate) -> LotCurve:
    """The curve of the pooled lot; of a candidate that does not know it, the geometric mean of its lots."""
    if candidate.pooled is not None:
        return candidate.pooled
    curves = candidate.curves
    rho = math.exp(math.fsum(math.log(c.resistance_factor) for c in curves) / len(curves))
    kappa = math.exp(math.fsum(math.log(c.fouling_factor) for c in curves) / len(curves))
    return replace(curves[0], resistance_factor=rho, fouling_factor=kappa)


def _pooled_cap(candidate: Candidate) -> float:
    return candidate.loading_cap if candidate.pooled is None else candidate.pooled_cap


def _cost(problem: DesignProblem, route: Route, ideal: IdealTrain) -> float:
    """Cost of ideal areas per batch, without holders: each m² at the picked module's prices; hours."""
    hours = math.fsum(t + b.setup for t, b in zip(ideal.times, problem.blocks, strict=True))
    return math.fsum([*_stage_costs(route, ideal), problem.hour_rate * hours])


def _stage_costs(route: Route, ideal: IdealTrain) -> Iterator[float]:
    for choices, areas in zip(route, ideal.areas, strict=True):
        for choice, area in zip(choices, areas, strict=True):
            options, c = choice.candidate.options, choice.option
            per_batch = float(options.modules_cost[c] + options.flush_cost[c] + options.product_cost[c])
            yield per_batch / float(options.area[c]) * area
