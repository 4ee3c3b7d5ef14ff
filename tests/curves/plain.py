"""Readings for a fit without any file behind them."""

from __future__ import annotations

import numpy as np

from trainopt.curves.fit import Readings


def plain(
    loading: np.ndarray,
    log: np.ndarray,
    resistance: np.ndarray,
    integral: bool = False,
    lot: np.ndarray | None = None,
    lots: tuple[str, ...] = ("a",),
) -> Readings:
    """Readings of equal weight, one run per lot."""
    n = len(loading)
    place = np.zeros(n, dtype=np.intp) if lot is None else lot
    return Readings(
        loading=loading,
        log=log,
        integral=np.full(n, integral),
        weight=np.ones(n),
        lot=place,
        run=place,
        resistance=resistance,
        walk=np.zeros(n),
        row=np.arange(2, n + 2),
        lots=lots,
        runs=lots,
    )
