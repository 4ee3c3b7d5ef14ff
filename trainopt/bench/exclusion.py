"""The stated rules by which a reading is left out of a fit; `keep: true` keeps all but the impossible ones."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from trainopt.bench.run import ReducedRun

FLOW_STEP = 0.15
"""Change of flux over two readings, of the run's median, from which the reading between belongs to neither side."""

START_SHARE = 0.1
"""Air is purged and the pump settles within this part of the run's loading."""

START_EXCESS, START_LACK = 1.15, 0.5
"""A start-up reading resists this much more than the least after it, or less than this part of what follows."""

Reasons = list[str | None]


def impossible(run: ReducedRun) -> Reasons:
    """Readings from which no resistance can be told."""
    integral = run.operation == "constant-pressure"
    tells = run.pressure_time > 0.0 if integral else run.flux > 0.0
    reasons: Reasons = [None] * len(run.time)
    for index in range(len(run.time)):
        if run.volume[index] < 0.0:
            reasons[index] = "the hold-up is still being displaced"
        elif integral and run.volume[index] == 0.0:
            reasons[index] = "no filtrate yet"
        elif not run.pressure[index] > 0.0:
            reasons[index] = "no differential pressure"
        elif not tells[index]:
            reasons[index] = "no flow"
    return reasons


def flow_steps(run: ReducedRun) -> NDArray[np.bool_]:
    """Readings at which the flow is just changing: pressure and flux may not belong together."""
    change = np.zeros(len(run.flux))
    change[1:-1] = np.abs(run.flux[2:] - run.flux[:-2])
    return np.asarray(change > FLOW_STEP * np.median(run.flux))


def start_up(run: ReducedRun, usable: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Readings before air is purged (resistance falls to its least) or the pressure has built up (it lags behind)."""
    out = np.zeros(len(run.time), dtype=bool)
    at = np.flatnonzero(usable)
    if len(at) < 10:
        return out
    resistance = run.resistance[at]
    early = int(np.searchsorted(run.loading[at], START_SHARE * float(run.loading[at].max())))
    early = min(max(early, 1), len(at) // 3)
    least = int(np.argmin(resistance[: early + 3]))
    for index in range(early):
        following = float(np.median(resistance[index + 1 : index + 6]))
        purging = index < least and resistance[index] > START_EXCESS * resistance[least]
        lagging = resistance[index] < START_LACK * following and resistance[index] < resistance[index + 1]
        if not (purging or lagging):
            break
        out[at[index]] = True
    return out
