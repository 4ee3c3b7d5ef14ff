"""Flux from volume and time, robust to the noise of a balance or a cylinder.

A difference of neighboring readings divides the reading error by a short time: on a 1 mL cylinder read
every other minute that is a tenth of the flow. The estimate here is the slope of a straight line through
nearby readings (local linear regression, Cleveland, J. Am. Stat. Assoc. 74 (1979) 829, with equal weights).
For each reading the widest window is taken, before, around or after it, in which the readings lie on a line
within their own noise (the idea of Lepski, Theory Probab. Appl. 35 (1990) 454; both memory). A steady pump
thus gets long windows and a slipping one short ones that do not reach across the moment it slips.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from trainopt.bench.run import Floats

SHORTEST = 3
FINEST = 1e-5
"""Steps finer than this part of the largest reading do not matter and count as none."""


def resolution(values: Floats) -> float:
    """The step that all readings are multiples of, in whatever unit they are; 0 where there is none to
    speak of.

    Euclid's algorithm on all readings at once, blind to rounding in the last digits.
    """
    left = np.unique(np.abs(values[np.isfinite(values)]))
    largest = float(left[-1]) if len(left) else 0.0
    left = left[left > 1e-9 * largest]
    step = 0.0
    while len(left):
        step = float(left[0])
        if step < FINEST * largest:
            return 0.0
        rest = np.abs(left - np.round(left / step) * step)
        left = np.unique(rest[rest > 1e-9 * largest])
    return step


def local_flow(time: Floats, volume: Floats, step: float = 0.0) -> Floats:
    """Flow dV/dt at each reading, (n,), in units of `volume` over `time`, which must increase.

    `step` is the resolution of `volume`.
    """
    n = len(time)
    if n < SHORTEST:
        return np.full(n, (volume[-1] - volume[0]) / (time[-1] - time[0]) if n == 2 else np.nan)
    noise = _noise(time, volume, step)
    slope = np.zeros(n)
    settled = np.zeros(n, dtype=bool)
    for size in reversed(_sizes(n)):
        limit = noise**2 * (1.0 + 3.0 * np.sqrt(2.0 / (size - 2.0)))
        slopes, variances = _placed(time, volume, size)
        # A window around the reading has the least bias where the flow drifts, so it goes first.
        best = np.where(variances[0] <= limit, 0, np.argmin(variances, axis=0))
        at = np.arange(n)
        good = ~settled & ((variances[best, at] <= limit) | (size == SHORTEST))
        slope[good] = slopes[best, at][good]
        settled |= good
        if settled.all():
            break
    return slope


def _noise(time: Floats, volume: Floats, step: float) -> float:
    """Standard deviation of a volume reading, from third differences, which a drifting flow leaves small."""
    least = max(step / float(np.sqrt(12.0)), 1e-12 * float(np.max(np.abs(volume))))
    if len(time) < 4:
        return least
    windows = np.lib.stride_tricks.sliding_window_view
    t, v = windows(time, 4), windows(volume, 4)
    gaps = t[:, :, None] - t[:, None, :] + np.eye(4)
    weights = 1.0 / np.prod(gaps, axis=2)
    off = (weights * (v - v[:, :1])).sum(axis=1) / np.sqrt((weights**2).sum(axis=1))
    return max(1.4826 * float(np.median(np.abs(off))), least)


def _sizes(n: int) -> list[int]:
    """Window sizes from 3 readings to all, each about half as large again as the one before."""
    sizes, size = [], float(SHORTEST)
    while size < n:
        sizes.append(int(size))
        size = max(size * 1.5, size + 1.0)
    return [*sizes, n]


def _placed(time: Floats, volume: Floats, size: int) -> tuple[Floats, Floats]:
    """Slope and residual variance (3, n) of lines through `size` readings around, up to and from each."""
    n = len(time)
    slope, variance = _lines(time, volume, size)
    at = np.arange(n)
    first = np.clip(np.stack([at - size // 2, at - size + 1, at]), 0, n - size)
    return slope[first], variance[first]


def _lines(time: Floats, volume: Floats, size: int) -> tuple[Floats, Floats]:
    """Slope and residual variance of the line through each `size` consecutive readings, (n − size + 1,)."""
    mean = (volume[-1] - volume[0]) / (time[-1] - time[0])
    t, v = time - time[0], volume - volume[0] - mean * (time - time[0])
    mean_t, mean_v = _means(t, size), _means(v, size)
    spread = np.maximum(_means(t * t, size) - mean_t**2, 1e-300)
    slope = (_means(t * v, size) - mean_t * mean_v) / spread
    residual = _means(v * v, size) - mean_v**2 - slope**2 * spread
    return mean + slope, np.maximum(residual, 0.0) * size / max(size - 2, 1)


def _means(values: Floats, size: int) -> Floats:
    total: NDArray[np.float64] = np.concatenate([[0.0], np.cumsum(values)])
    return np.asarray((total[size:] - total[:-size]) / size)
