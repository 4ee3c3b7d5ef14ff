"""Which lots to let fail so that blocks take least time together: exact, in plain arrays."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from trainopt.train.problem import Floats


def spare_lots(needed: Floats, may_fail: int) -> NDArray[np.bool_]:
    """Which lots to keep, shape (lots,), so that the sum over blocks of the longest time any kept lot needs is least.

    `needed` of shape (blocks, lots) in h; at most `may_fail` lots are not kept. Of equal sums the one that spares the
    first block most is taken. Exact: whichever lots are spared, those of the first block that are spared for its sake
    are its slowest; for each number of them the rest is the same question with a block less.
    """
    _, dropped = _least(needed, np.arange(needed.shape[1]), may_fail, np.inf)
    keep = np.ones(needed.shape[1], dtype=bool)
    keep[dropped] = False
    return keep


def _least(needed: Floats, lots: NDArray[np.intp], may_fail: int, enough: float) -> tuple[float, NDArray[np.intp]]:
    """The least sum over these lots and the lots spared for it; `enough` is a sum that must be beaten to matter."""
    first = needed[0, lots]
    order = np.argsort(-first, kind="stable")
    ranked = first[order]
    most = min(may_fail, len(lots))
    if len(needed) == 1:
        return (float(ranked[most]) if most < len(lots) else 0.0), lots[order[:most]]
    # The other blocks can at best spare all that may fail for themselves.
    rest = sum(float(np.partition(row[lots], len(lots) - 1 - most)[len(lots) - 1 - most]) for row in needed[1:]) if (
        most < len(lots)) else 0.0  # fmt: skip
    best, dropped = np.inf, order[:0]
    for count in range(most, -1, -1):
        own = float(ranked[count]) if count < len(lots) else 0.0
        if own + rest >= min(best, enough):
            break  # fewer spared here only make this block slower
        others, spared = _least(needed[1:], lots[order[count:]], may_fail - count, min(best, enough) - own)
        if own + others < best:
            best, dropped = own + others, np.concatenate([lots[order[:count]], spared])
    return best, dropped
