"""The ideal split: a block's areas with no catalog, min Σ w_i·A_i with Σ D_i(A_i) ≤ B (model.md, section 5).

At its optimum every stage that no limit holds has the same marginal −D_i'(A_i)/w_i.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from trainopt.curves.curve import LotCurve
from trainopt.optimize.roots import largest_where
from trainopt.train.options import demand
from trainopt.train.problem import Floats

_BOUNDLESS = 1e100
_MANY = 24
_CUTS = 100
_POINTS = 100
_LEVELS = 4


@dataclass(frozen=True)
class IdealStage:
    """One stage of the ideal split.

    `loading_area` = F·V/φ in L, so that L = loading_area/A; `most` the highest design loading allowed, L/m² (caps,
    flux, rating); `weight` of a m² in the objective; `suffix_budget` bar·h for this stage and those downstream
    (infinite: none).
    """

    curves: Sequence[LotCurve]
    operation: str
    loading_area: float
    most: float
    weight: float = 1.0
    suffix_budget: float = math.inf

    def demand(self, loading: Floats, lots: Floats) -> Floats:
        """Σ_s p_s·D_s at each loading, bar·h, for the weights `lots` of the lots."""
        counted = np.flatnonzero(lots)
        curves = [self.curves[s] for s in counted.tolist()]
        return np.asarray(lots[counted] @ demand(curves, self.operation, loading))


def loading_limit(curves: Sequence[LotCurve], operation: str, cap: float, rating_budget: float) -> float:
    """Highest design loading in L/m² inside `cap` at which every lot's D stays within the stage's own rating, bar·h."""
    finite = min(cap, *(curve.pole * (1.0 - 1e-9) for curve in curves))
    # Far beyond any use an exponential leaves the range of numbers: that is a limit too.
    room = min(rating_budget, _BOUNDLESS)

    def holds(loading: Floats) -> np.ndarray[tuple[int], np.dtype[np.bool_]]:
        return np.asarray(demand(curves, operation, loading).max(axis=0) <= room)

    return largest_where(holds, finite)


def ideal_areas(stages: Sequence[IdealStage], budget: float) -> tuple[float, ...] | None:
    """Areas in m² of the ideal split within `budget` bar·h for every lot, or None where no area is large enough."""
    if not stages or budget <= 0.0:
        return None
    areas = _within(stages, budget)
    if areas is None:
        return None
    # Inlet ratings are budgets of the stages from there down: where one is broken it holds with equality,
    # and the train falls into two independent parts.
    for k, stage in enumerate(stages):
        spent = _worst(stages[k:], areas[k:])
        if spent > stage.suffix_budget * (1.0 + 1e-9) and not (k == 0 and stage.suffix_budget >= budget):
            below = ideal_areas([*_freed(stages[k : k + 1]), *stages[k + 1 :]], stage.suffix_budget)
            if below is None or k == 0:
                return below
            above = ideal_areas(stages[:k], budget - _worst(stages[k:], below))
            return None if above is None else (*above, *below)
    return areas


def _freed(stages: Sequence[IdealStage]) -> list[IdealStage]:
    return [replace(stage, suffix_budget=math.inf) for stage in stages]


def _worst(stages: Sequence[IdealStage], areas: Sequence[float]) -> float:
    """The worst lot's Σ D at these areas, bar·h."""
    total = sum(
        demand(s.curves, s.operation, np.array([s.loading_area / a]))[:, 0] for s, a in zip(stages, areas, strict=True)
    )
    return float(np.max(total))


def _within(stages: Sequence[IdealStage], budget: float) -> tuple[float, ...] | None:
    """The split for the worst lot: one lot if its split holds for all, else the mixture of lots that binds."""
    count = len(stages[0].curves)
    if count > _MANY:
        return _by_cuts(stages, budget)
    best: tuple[float, ...] | None = None
    # The lot that asks most of the stages at their highest loadings is most likely the one that binds.
    asked = sum(demand(s.curves, s.operation, np.array([s.most]))[:, 0] for s in stages)
    for lot in np.argsort(-np.asarray(asked), kind="stable").tolist():
        areas = _equal_marginals(stages, budget, np.eye(count)[lot])
        if areas is None:
            return None
        if _worst(stages, areas) <= budget * (1.0 + 1e-9):
            return areas
        if best is None or _weighed(stages, areas) > _weighed(stages, best):
            best = areas
    assert best is not None
    return _mixed(stages, budget, best)


def _by_cuts(stages: Sequence[IdealStage], budget: float) -> tuple[float, ...] | None:
    """The split for very many lots: for a few of them, and the worst of the others added until it holds for all."""
    asked = sum(demand(s.curves, s.operation, np.array([s.most]))[:, 0] for s in stages)
    active, areas = [int(np.argmax(asked))], None
    for _ in range(_CUTS):
        few = [replace(s, curves=tuple(s.curves[lot] for lot in active)) for s in stages]
        areas = _within(few, budget)
        if areas is None:
            return None
        total = sum(
            demand(s.curves, s.operation, np.array([s.loading_area / a]))[:, 0]
            for s, a in zip(stages, areas, strict=True)
        )
        worst = int(np.argmax(total))
        if float(np.max(total)) <= budget * (1.0 + 1e-6) or worst in active:
            return areas
        if len(active) == _MANY:
            active.pop(1)
        active.append(worst)
    return areas


def _weighed(stages: Sequence[IdealStage], areas: Sequence[float]) -> float:
    return sum(s.weight * a for s, a in zip(stages, areas, strict=True))


def _mixed(stages: Sequence[IdealStage], budget: float, start: tuple[float, ...]) -> tuple[float, ...]:
    """Several lots bind at once: a general constrained minimizer, from the best single lot's split scaled to hold."""
    from scipy.optimize import minimize

    def demands(areas: Floats) -> Floats:
        return np.asarray(
            sum(
                demand(s.curves, s.operation, np.array([s.loading_area / a]))[:, 0]
                for s, a in zip(stages, areas, strict=True)
            )
        )

    first, least = np.array(start), np.array([s.loading_area / s.most for s in stages])
    while demands(first).max() > budget:
        first = first * 1.05
    weights = np.array([s.weight for s in stages])
    scale = first.copy()
    answer: Any = minimize(  # type: ignore[call-overload]
        lambda y: float(weights @ (y * scale)) / float(weights @ scale),
        np.ones(len(first)),
        jac=lambda _: weights * scale / float(weights @ scale),
        bounds=[(low, None) for low in (least / scale)],
        constraints=[{"type": "ineq", "fun": lambda y: 1.0 - demands(y * scale) / budget}],
        method="SLSQP",
        options={"ftol": 1e-12, "maxiter": 300},
    )
    areas = np.maximum(answer.x * scale, least)
    return tuple((areas if demands(areas).max() <= budget * (1.0 + 1e-7) else first).tolist())


def _equal_marginals(stages: Sequence[IdealStage], budget: float, lots: Floats) -> tuple[float, ...] | None:
    """Loadings with one marginal −dD/dA per weight whose demands add up to the budget.

    D and its slope are tabulated on a loading grid that is refined around the answer: no derivative of a law is needed,
    and a curve that dips only makes the marginal's running maximum level.
    """
    tops = [s.most for s in stages]
    at_top = sum(float(s.demand(np.array([top]), lots)[0]) for s, top in zip(stages, tops, strict=True))
    if at_top <= budget:
        return tuple(s.loading_area / top for s, top in zip(stages, tops, strict=True))
    spans = [(top * 1e-12, top) for top in tops]
    loadings = tops
    for _ in range(_LEVELS):
        grids = [_grid(low, high) for low, high in spans]
        tables = [_table(s, grid, lots) for s, grid in zip(stages, grids, strict=True)]
        if sum(float(table[2][0]) for table in tables) > budget:
            return None
        level = _level(tables, budget)
        loadings = [float(np.interp(level, table[0], table[1])) for table in tables]
        spans = [_around(grid, loading) for grid, loading in zip(grids, loadings, strict=True)]
    return tuple(s.loading_area / loading for s, loading in zip(stages, loadings, strict=True))


_STEPS = np.linspace(0.0, 1.0, 2 * _POINTS + 1)


def _grid(low: float, high: float) -> Floats:
    """Geometric from low to high, both exact."""
    grid = low * (high / low) ** _STEPS
    grid[-1] = high
    return np.asarray(grid)


def _table(stage: IdealStage, grid: Floats, lots: Floats) -> tuple[Floats, Floats, Floats]:
    """ln marginal (increasing), loading and demand at the grid's odd points, its ends included."""
    spent = stage.demand(grid, lots)
    area = stage.loading_area / grid
    marginal = np.maximum.accumulate(np.diff(spent[::2]) / -np.diff(area[::2]) / stage.weight)
    places = np.concatenate([[0], np.arange(1, len(grid), 2), [len(grid) - 1]])
    log_marginal = np.log(np.maximum(np.concatenate([marginal[:1], marginal, marginal[-1:]]), 1e-300))
    # Strictly increasing, so that a level has one loading; the steps are below any that matters.
    return log_marginal + 1e-13 * np.arange(len(places)), grid[places], spent[places]


def _level(tables: Sequence[tuple[Floats, Floats, Floats]], budget: float) -> float:
    """The common ln marginal at which the demands, linear between the tables' points, add up to the budget."""
    levels = np.sort(np.concatenate([table[0] for table in tables]))
    total = sum(np.interp(levels, table[0], table[2]) for table in tables)
    place = int(np.searchsorted(np.maximum.accumulate(total), budget, side="right"))
    if place in (0, len(levels)):
        return float(levels[min(place, len(levels) - 1)])
    low, high = float(total[place - 1]), float(total[place])
    part = (budget - low) / (high - low) if high > low else 0.0
    return float(levels[place - 1] + part * (levels[place] - levels[place - 1]))


def _around(grid: Floats, loading: float) -> tuple[float, float]:
    place = int(np.searchsorted(grid, loading))
    return float(grid[max(place - 6, 0)]), float(grid[min(place + 6, len(grid) - 1)])
