"""Tables of partial picks ("labels") and how they are joined and thinned without losing a best design.

A label is what is left to know about a pick of a block or train: what it costs, how long it takes at least,
what pressure–time it spends, and where it stands in the fixed order that breaks the last ties (model.md,
section 4). Thinning drops only labels that another one beats or equals in everything a design is chosen by, so
that the best of what is left is the best of all.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from trainopt.train.problem import Floats

EQUAL = 1e-12
"""Relative difference that is rounding alone."""

MOST_LABELS = 3_000_000
"""Labels of one table before thinning: past it a solver is the better tool."""


class TooManyLabelsError(Exception):
    """The tables of a problem would outgrow memory: pick by the solver instead."""


class SharedHoldersError(Exception):
    """Stages share owned holders, so that their costs do not add up label by label: pick by the solver instead."""


@dataclass(frozen=True, eq=False)
class Partial:
    """Picks of the last stages of a block: arrays of shape (n,), `demand` (n, lots), `picks` (n, stages used).

    `weight` what the objective counts, `least` the shortest block time in h that flux and the stages' own
    ratings ask for, `demand` Σ D in bar·h per lot, `order` the place in the fixed order, `picks` places in the
    flat list of options.
    """

    weight: Floats
    least: Floats
    demand: Floats
    order: Floats
    picks: NDArray[np.int32]

    def __len__(self) -> int:
        return len(self.weight)

    def take(self, places: NDArray[np.intp]) -> Partial:
        """The labels at `places`."""
        return Partial(
            self.weight[places], self.least[places], self.demand[places], self.order[places], self.picks[places]
        )


@dataclass(frozen=True, eq=False)
class Complete:
    """Picks of whole blocks: arrays of shape (n,), `picks` (n, stages), -1 where a stage is not used.

    `objective` (hours included where they cost), `finish` the shortest time in h with setups, `spent` Σ_b
    D_b/(P_b − Pstatic_b) for each block's worst lot in h, `order` as above.
    """

    objective: Floats
    finish: Floats
    spent: Floats
    order: Floats
    picks: NDArray[np.int32]

    def __len__(self) -> int:
        return len(self.objective)

    def take(self, places: NDArray[np.intp]) -> Complete:
        """The labels at `places`."""
        return Complete(
            self.objective[places], self.finish[places], self.spent[places], self.order[places], self.picks[places]
        )


def pairs(first: int, second: int) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Every pair of places of two tables; raises `TooManyLabelsError` where there are too many."""
    if first * second > MOST_LABELS:
        raise TooManyLabelsError
    left = np.repeat(np.arange(first, dtype=np.intp), second)
    return left, np.tile(np.arange(second, dtype=np.intp), first)


def thinned_partial(labels: Partial) -> Partial:
    """Labels without those that another beats or equals in weight, time, every lot's D and order.

    Each label is held against a few likely winners only: the one of at most its weight with the least D, for each
    lot. What that leaves in place costs time, never correctness.
    """
    if len(labels) < 2:
        return labels
    keys = (labels.order, labels.demand.sum(axis=1), labels.weight)
    labels = labels.take(np.lexsort(keys))
    keep = np.ones(len(labels), dtype=bool)
    own = np.arange(len(labels))
    for lot in range(labels.demand.shape[1]):
        best = _running_argmin(labels.demand[:, lot])
        # The winner so far, before the label itself.
        rival = np.concatenate([best[:1], best[:-1]])
        beaten = (
            (rival < own)
            & (labels.demand[rival] <= labels.demand * (1.0 + EQUAL)).all(axis=1)
            & (labels.least[rival] <= labels.least * (1.0 + EQUAL))
            & (labels.weight[rival] <= labels.weight * (1.0 + EQUAL))
            & (labels.order[rival] <= labels.order)
        )
        keep &= ~beaten
    return labels.take(np.flatnonzero(keep))


def _running_argmin(values: Floats) -> NDArray[np.intp]:
    lowest = np.minimum.accumulate(values)
    fresh = np.concatenate([[True], values[1:] < lowest[:-1]])
    return np.maximum.accumulate(np.where(fresh, np.arange(len(values)), 0))


def thinned(labels: Complete, tie: float) -> Complete:
    """Labels that are the best design for some time allowed, ties included; objectives within `tie` may tie.

    Dropped are, first, those that a clearly better one (by more than `tie`) outpaces; then, among those alike
    in the objective to rounding, those that another outpaces with less spent, or with the same spent and a
    lower place in the order.
    """
    if len(labels) < 2:
        return labels
    order = np.argsort(labels.objective, kind="stable")
    objective, finish = labels.objective[order], labels.finish[order]
    fastest = np.minimum.accumulate(finish)
    clearly = np.searchsorted(objective, objective - tie, side="left")
    outpaced = (clearly > 0) & (finish >= fastest[np.maximum(clearly - 1, 0)])
    labels = labels.take(order[~outpaced])
    labels = labels.take(np.lexsort((labels.order, labels.spent, labels.finish, labels.objective)))
    return labels.take(np.flatnonzero(~_beaten_among_equals(labels)))


def _beaten_among_equals(labels: Complete) -> NDArray[np.bool_]:
    """Among labels of one objective: those slower than another that spends clearly less, and repeats of a lower
    order."""
    n = len(labels)
    gap = np.diff(labels.objective) > EQUAL * np.maximum(np.abs(labels.objective[1:]), 1.0)
    group = np.concatenate([[0], np.cumsum(gap)])
    order = np.lexsort((labels.order, labels.spent, labels.finish, group))
    group, finish, spent, rank = group[order], labels.finish[order], labels.spent[order], labels.order[order]
    # Running minimum of `spent` within each group: shifted by group so that one pass serves all.
    offset = group.astype(float) * (4.0 * float(np.max(spent, initial=0.0)) + 1.0)
    before = np.concatenate([[np.inf], np.minimum.accumulate(spent - offset)[:-1]])
    first = np.concatenate([[True], group[1:] != group[:-1]])
    clear = 1e-7 * max(float(np.max(spent, initial=0.0)), 1.0)
    beaten = ~first & (spent - offset > before + clear)
    same = np.zeros(n, dtype=bool)
    if n > 1:
        same[1:] = (
            ~first[1:]
            & (np.abs(np.diff(finish)) <= EQUAL * np.abs(finish[1:]))
            & (np.abs(np.diff(spent)) <= EQUAL * np.abs(spent[1:]))
            & (rank[1:] >= rank[:-1])
        )
    out = np.zeros(n, dtype=bool)
    out[order] = beaten | same
    return out
