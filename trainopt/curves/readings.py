"""From reduced runs to what a fit sees: logarithms, weights, lots.

A run at constant flow gives ln(ΔP/J) at each loading. A run at constant pressure, or of any other flow
history, gives ln ∫ΔP dt = ln S(l): the pressure is summed over time, and no noisy volume is ever
differentiated (model.md, section 1).
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from trainopt.bench.run import Floats, ReducedRun
from trainopt.curves.fit import Readings

READING_ERROR = 0.01
"""Relative error of a pressure reading beside the gauge's resolution, for weights (common practice, no source)."""

LEAST_STEP = 1e-4
"""Volume error of a run whose volumes show no resolution, as part of its filtrate."""


def fit_readings(runs: Sequence[ReducedRun]) -> Readings:
    """The kept readings of all runs, sorted so that the order of entries cannot matter."""
    lots = tuple(sorted({run.lot for run in runs}))
    ordered = sorted(runs, key=lambda run: (run.lot, run.name))
    sizes = [int(run.used.sum()) for run in ordered]
    return Readings(
        loading=np.concatenate([run.loading[run.used] for run in ordered]),
        log=np.concatenate([_log(run) for run in ordered]),
        integral=np.repeat([is_integral(run) for run in ordered], sizes),
        weight=np.concatenate([_weight(run) for run in ordered]),
        lot=np.repeat([lots.index(run.lot) for run in ordered], sizes),
        run=np.repeat(np.arange(len(ordered)), sizes),
        resistance=np.concatenate([_local(run) for run in ordered]),
        walk=np.concatenate([_walk(run) for run in ordered]),
        row=np.concatenate([run.rows[run.used] for run in ordered]),
        lots=lots,
        runs=tuple(run.name for run in ordered),
    )


def is_integral(run: ReducedRun) -> bool:
    """Whether a run is fitted by ∫ΔP dt rather than by ΔP/J."""
    return run.operation != "constant-flow"


def _log(run: ReducedRun) -> Floats:
    value = run.pressure_time if is_integral(run) else run.resistance
    return np.log(value[run.used])


def _local(run: ReducedRun) -> Floats:
    """Local resistance, for starting values; where a noisy volume gives none, the mean resistance up to there."""
    resistance, used = run.resistance[run.used], run.used
    known = np.isfinite(resistance) & (resistance > 0.0)
    mean = np.abs(run.pressure_time[used]) / np.maximum(run.loading[used], 1e-9)
    return np.where(known, resistance, mean)


def _walk(run: ReducedRun) -> Floats:
    """What the noise of one pressure reading adds to ∫ΔP dt, bar·h: its standard deviation times the time it stands
    for.

    The noise is told from second differences of the recorded pressure.
    """
    used = run.used
    if not is_integral(run) or used.sum() < 3:
        return np.zeros(int(used.sum()))
    time, pressure = run.time[used], run.pressure[used]
    off = pressure[1:-1] - 0.5 * (pressure[:-2] + pressure[2:])
    noise = 1.4826 * float(np.median(np.abs(off))) / np.sqrt(1.5)
    return np.asarray(noise * np.diff(time, prepend=0.0))


def _weight(run: ReducedRun) -> Floats:
    """Weight of each squared error: the less, the more of a reading is the step of a gauge, cylinder or clock."""
    if is_integral(run):
        return _integral_weight(run)
    coarse = run.pressure_step / np.sqrt(12.0) / run.pressure[run.used]
    return np.asarray(READING_ERROR**2 / (READING_ERROR**2 + coarse**2))


def _integral_weight(run: ReducedRun) -> Floats:
    """Inverse variance of ln ∫ΔP dt, mean 1: R times the error of the loading, and ΔP times that of the clock."""
    used = run.used
    loading, value = run.loading[used], run.pressure_time[used]
    volume_error = max(run.volume_step / np.sqrt(12.0), LEAST_STEP * float(run.volume[used].max()))
    clock_error = _clock_step(run) / np.sqrt(12.0)
    variance = (_smooth_slope(loading, value) * volume_error / run.area) ** 2
    variance += (run.pressure[used] * clock_error) ** 2
    weight = value**2 / variance
    return np.asarray(weight / weight.mean())


def _clock_step(run: ReducedRun) -> float:
    """Resolution of the clock in h; readings on a schedule show the schedule's step, not the clock's."""
    return 0.0 if run.time_step > 0.2 * float(np.min(np.diff(run.time))) else run.time_step


def _smooth_slope(loading: Floats, value: Floats) -> Floats:
    """dS/dl of a cubic through the origin; only weights depend on it."""
    z = loading / loading.max()
    powers = z[:, None] ** np.arange(1, 4)
    c = np.linalg.lstsq(powers, value, rcond=None)[0]
    slope = (c[0] + 2.0 * c[1] * z + 3.0 * c[2] * z**2) / loading.max()
    return np.asarray(np.maximum(slope, 0.2 * value / loading))
