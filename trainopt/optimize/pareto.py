"""Undominated points: the exact filters that the staircase is built with."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from trainopt.train.problem import Floats

_CHUNK = 256
TIE = 1e-9
"""Weights closer than this, relative to their size, count as equal."""


def undominated_points(points: Floats) -> NDArray[np.intp]:
    """Places of the points, shape (k, n), that no other is at most equal to in every row; sorted by the first row.

    Of equal points the first (in the order of all rows, then of place) is kept. O(n log n) for two rows.
    """
    order = np.lexsort((np.arange(points.shape[1]), *points[::-1]))
    rows = points[:, order]
    varying = [row for row in rows[1:] if row.size and row.min() < row.max()]
    if not varying:
        return order[:1] if len(order) else order
    if len(varying) == 1:
        row = varying[0]
        before = np.concatenate([[np.inf], np.minimum.accumulate(row)[:-1]])
        return np.asarray(order[row < before])
    return np.asarray(order[_many(np.array(varying))])


def _many(rows: Floats) -> NDArray[np.intp]:
    """The same for points sorted by a leading row: a point falls to an earlier one at most equal in all rows."""
    kept = np.zeros(0, dtype=np.intp)
    for start in range(0, rows.shape[1], _CHUNK):
        chunk = np.arange(start, min(start + _CHUNK, rows.shape[1]))
        chunk = chunk[~_beaten(rows[:, kept], rows[:, chunk])]
        survivors: list[int] = []
        for place in chunk.tolist():
            if not survivors or not (rows[:, survivors] <= rows[:, [place]]).all(axis=0).any():
                survivors.append(place)
        kept = np.concatenate([kept, np.array(survivors, dtype=np.intp)])
    return kept


def _beaten(kept: Floats, chunk: Floats) -> NDArray[np.bool_]:
    beaten = np.zeros(chunk.shape[1], dtype=bool)
    for start in range(0, kept.shape[1], 4096):
        part = kept[:, start : start + 4096]
        beaten |= (part[:, :, None] <= chunk[:, None, :]).all(axis=0).any(axis=0)
    return beaten


def cheapest_by_time(weight: Floats, time: Floats, spent: Floats) -> NDArray[np.intp]:
    """Places, sorted by weight, that may be the answer within some time: least weight first, then least `spent`.

    A point falls to one of strictly less weight and no more time, whatever it spends; among points of equal weight,
    to one that is at most equal in both time and spent.
    """
    order = np.lexsort((spent, time, weight))
    w, t, s = weight[order], time[order], spent[order]
    step = np.diff(w, prepend=w[:1]) > TIE * np.maximum(1.0, np.abs(w))
    group = np.cumsum(step)
    least = np.minimum.accumulate(t)
    starts = np.flatnonzero(np.concatenate([[True], step[1:]])) if len(w) else np.zeros(0, dtype=np.intp)
    before = np.concatenate([[np.inf], least[starts[1:] - 1]]) if len(w) else np.zeros(0)
    alive = np.flatnonzero(t < before[group]) if len(w) else np.zeros(0, dtype=np.intp)
    kept: list[int] = []
    current, best = -1, np.inf
    # Within a group the points come by rising time: each must spend less than those before it.
    for place in alive[np.lexsort((s[alive], t[alive], group[alive]))].tolist():
        if group[place] != current:
            current, best = int(group[place]), np.inf
        if s[place] < best:
            kept.append(place)
            best = s[place]
    return np.asarray(order[np.array(kept, dtype=np.intp)])
