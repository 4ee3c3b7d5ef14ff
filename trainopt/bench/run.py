"""A bench run reduced to what a curve is fitted on, with its quality flags."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Flag:
    """Something a run's reader should know: file rows first to last (None: the run as a whole)."""

    code: str
    run: str
    rows: tuple[int, int] | None
    text: str


@dataclass(frozen=True, eq=False)
class ReducedRun:
    """One run, reading by reading: arrays of shape (n,).

    `rows` line numbers in the file; `time` h; `volume` L of filtrate, hold-up subtracted; `loading` L/m²;
    `flux` LMH; `pressure` differential, bar; `resistance` bar/LMH; `pressure_time` ∫ΔP dt in bar·h since
    the first filtrate; `turbidity` NTU and `feed` L taken so far, NaN where not read; `time_step` h,
    `volume_step` L and `pressure_step` bar the resolutions that the readings show (0: none); `excluded` why
    a fit must leave a reading out (None: use it). `temperature` degC, `feed_loading` L/m² of the filter
    upstream, or None.
    """

    name: str
    lot: str
    operation: str
    area: float
    temperature: float | None
    rows: NDArray[np.int64]
    time: Floats
    volume: Floats
    loading: Floats
    flux: Floats
    pressure: Floats
    resistance: Floats
    pressure_time: Floats
    turbidity: Floats
    feed: Floats
    time_step: float
    volume_step: float
    pressure_step: float
    feed_loading: float | None
    excluded: tuple[str | None, ...]
    flags: tuple[Flag, ...]

    @property
    def used(self) -> NDArray[np.bool_]:
        """Which readings a fit may use, shape (n,)."""
        return np.array([reason is None for reason in self.excluded], dtype=bool)

    @property
    def pool_turbidity(self) -> Floats:
        """Turbidity of the pooled filtrate so far (volume-weighted, by trapezoids), NaN where it was not read."""
        out = np.full(len(self.time), np.nan)
        read = np.flatnonzero(np.isfinite(self.turbidity) & (self.volume > 0.0))
        if len(read):
            v, t = self.volume[read], self.turbidity[read]
            steps = np.concatenate([[t[0] * v[0]], 0.5 * (t[1:] + t[:-1]) * np.diff(v)])
            out[read] = np.cumsum(steps) / v
        return out
