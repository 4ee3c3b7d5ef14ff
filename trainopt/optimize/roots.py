"""The one root finder of this room: the end of the range on which a monotone condition holds."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from trainopt.train.problem import Floats

_SPLITS = 64


def largest_where(holds: Callable[[Floats], NDArray[np.bool_]], high: float, relative: float = 1e-13) -> float:
    """The largest x in [0, high] at which `holds` is true, given that it is true up to there and false beyond.

    `holds` takes an array. The answer holds itself and is within `relative` of the true end; 0 where it holds nowhere.
    Interval after interval is cut into 64, which needs few calls of `holds`, each on an array.
    """
    if bool(holds(np.array([high]))[0]):
        return high
    low = 0.0
    for _ in range(60):
        if low > 0.0 and high - low <= relative * low:
            break
        # While nothing is known but the top, look over many decades.
        grid = np.geomspace(high * 1e-12, high, _SPLITS) if low == 0.0 else np.linspace(low, high, _SPLITS)
        true = holds(grid)
        if not true.any():
            if low == 0.0 and high < 1e-200:
                return 0.0
            high = float(grid[0])
            continue
        last = int(np.flatnonzero(true)[-1])
        new_low, new_high = float(grid[last]), float(grid[min(last + 1, _SPLITS - 1)])
        if (new_low, new_high) == (low, high) or new_low >= new_high:
            break
        low, high = new_low, new_high
    return low
