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
    `flux` LMH; `pressure` differential, bar; `resistance` bar/LMH; `turbidity` NTU, NaN where not read;
    `volume_step` L and `pressure_step` bar the resolutions that the readings show (0: none); `excluded` why a
    fit must leave a reading out (None: use it). `temperature` degC or None.
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
    turbidity: Floats
    volume_step: float
    pressure_step: float
    excluded: tuple[str | None, ...]
    flags: tuple[Flag, ...]

    @property
    def used(self) -> NDArray[np.bool_]:
        """Which readings a fit may use, shape (n,)."""
        return np.array([reason is None for reason in self.excluded], dtype=bool)
