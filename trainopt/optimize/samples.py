"""What a reliability basis adds to the model: which sampled lots need a row, and how far a spared lot's row must give.

With at most k of the lots spared, one of any k + 1 lots holds. Let r be the ratio max over options of D_s/D_s'. If s'
holds, lot s spends at most r times what s' may spend. So the (k + 1)-th smallest r over any set of lots s' bounds lot s
whatever is picked: at r ≤ 1 its row is implied, else r − 1 times the budget is all that its row must ever give (the
strengthening of chance constraints by their own quantiles, after Luedtke, Math. Program. 146 (2014) 219, memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from trainopt.optimize.index import Index, Node
from trainopt.train.problem import Floats

_MORE = 60
"""How many lots beyond k + 1 the bound is looked for among: more tighten it ever less."""


@dataclass(frozen=True, eq=False)
class Excess:
    """By what part of a limit each lot's demand may at most exceed it, shape (lots,), 0 or more; `implied` marks lots
    that hold wherever the model's other rows do, and so need no row."""

    give: Floats
    implied: NDArray[np.bool_]


def excess(demand: Floats, may_fail: int) -> Excess:
    """The excess of each lot over these options; `demand` D of shape (lots, options), infinite where a lot fails."""
    lots = len(demand)
    if not demand.shape[1]:
        return Excess(np.zeros(lots), np.ones(lots, dtype=bool))
    finite = np.isfinite(demand)
    with np.errstate(divide="ignore"):
        logs = np.log(np.where(finite, np.maximum(demand, 1e-300), np.inf))
    level = np.where(finite, logs, 0.0).sum(axis=1) / np.maximum(finite.sum(axis=1), 1)
    order = np.argsort(-level, kind="stable")
    hardest = order[: 2 * may_fail + 1 + _MORE]
    ratios = np.empty((lots, len(hardest)))
    own = np.where(finite, logs, -np.inf)  # what lot s cannot take at all is ruled by its own row
    for column, other in enumerate(hardest.tolist()):
        # An option that s' cannot take is not picked where s' holds.
        ratios[:, column] = (own[:, finite[other]] - logs[other, finite[other]]).max(axis=1, initial=-np.inf)
    rank = np.empty(lots, dtype=int)
    rank[order] = np.arange(lots)
    # Lots may imply only easier ones, lest two equal lots imply each other and neither keeps a row.
    harder = np.where(np.arange(len(hardest)) < rank[:, None], ratios, np.inf)
    place = min(may_fail, len(hardest) - 1)
    bound = np.partition(ratios, place, axis=1)[:, place]
    shown = np.partition(harder, place, axis=1)[:, place] if may_fail < len(hardest) else np.full(lots, np.inf)
    return Excess(np.expm1(np.clip(bound, 0.0, 500.0)), shown <= 0.0)


def node_demand(nodes: Sequence[Node]) -> Floats:
    """D of all options of these nodes side by side, shape (lots, options)."""
    return np.concatenate([node.candidate.options.demand for node in nodes], axis=1)


def largest(index: Index, nodes: Sequence[Node], head: float) -> Floats:
    """The most that each lot can spend over these nodes, in h at `head` bar, shape (lots,), infinities aside."""
    by_place: dict[int, Floats] = {}
    for node in nodes:
        spent = node.candidate.options.demand
        most = np.where(np.isfinite(spent), spent, 0.0).max(axis=1, initial=0.0) / head
        by_place[node.place] = np.maximum(by_place.get(node.place, 0.0), most)
    return np.asarray(sum(by_place.values(), start=np.zeros(len(index.problem.lots))))
