"""How sure a fitted curve is: a seeded bootstrap, bands, the loading at a given resistance, error on runs
left out.

Nothing here is computed unless asked for. The bootstrap (Efron & Tibshirani 1993; blocks after Künsch, Ann.
Stat. 17 (1989) 1217; both memory) draws runs anew within each lot that has several, and within each run
lays blocks of neighboring errors over the fitted curve, since the errors of neighboring readings hang
together.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from trainopt.bench.run import Floats
from trainopt.curves.curve import Curve, LotCurve
from trainopt.curves.evidence import Evidence
from trainopt.curves.fit import COARSE, Fit, Readings, fit_law
from trainopt.curves.laws import LAWS, Law

DRAWS = 300


@dataclass(frozen=True, eq=False)
class Draws:
    """Refits of the chosen law: parameters (draws, k), ln ρ and ln κ (draws, lots)."""

    law: str
    lots: tuple[str, ...]
    parameters: Floats
    log_rho: Floats
    log_kappa: Floats

    def resistance(self, loading: Floats, lot: str | None = None) -> Floats:
        """R in bar/LMH of every draw, (draws, n), pooled or as `lot` sees it."""
        law = LAWS[self.law]
        rho, kappa = self.multipliers(lot)
        rows = zip(self.parameters, rho, kappa, strict=True)
        return np.stack([r * law.resistance(k * loading, *map(float, p)) for p, r, k in rows])

    def multipliers(self, lot: str | None) -> tuple[Floats, Floats]:
        """ρ and κ of every draw, (draws,) each; ones for the pooled curve."""
        if lot is None:
            ones = np.ones(len(self.parameters))
            return ones, ones
        at = self.lots.index(lot)
        return np.exp(self.log_rho[:, at]), np.exp(self.log_kappa[:, at])


@dataclass(frozen=True)
class Interval:
    """A value with the ends of its interval; infinite where the curve never gets there."""

    value: float
    low: float
    high: float


def bootstrap(curve: Curve, draws: int = DRAWS, seed: int = 1) -> Draws:
    """Refits of a curve fitted to runs; the same seed gives the same draws."""
    if curve.evidence is None:
        raise ValueError(f"curve of '{curve.medium}' was given by its parameters; there is nothing to draw from")
    return _bootstrap(curve.evidence, draws, seed)


@lru_cache(maxsize=32)
def _bootstrap(evidence: Evidence, draws: int, seed: int) -> Draws:
    readings, fit = evidence.readings, evidence.chosen
    rng = np.random.default_rng(seed)
    runs = [np.flatnonzero(readings.run == run) for run in range(int(readings.run.max()) + 1)]
    errors = _inflated(readings, fit)
    model = readings.log + fit.residuals / np.sqrt(readings.weight)
    refits = [_refit(evidence, _drawn_runs(readings, runs, rng), errors, model, rng) for _ in range(draws)]
    return Draws(
        fit.law,
        readings.lots,
        np.array([refit.parameters for refit in refits]),
        np.array([refit.log_rho for refit in refits]),
        np.array([refit.log_kappa for refit in refits]),
    )


def _inflated(readings: Readings, fit: Fit) -> Floats:
    """Weighted errors about the fit, widened for the freedom that the fit took; sign as in data minus model."""
    n = len(readings)
    return np.asarray(-fit.residuals * np.sqrt(n / max(n - fit.count + 1, 1)))


def _drawn_runs(readings: Readings, runs: list[NDArray[np.intp]], rng: np.random.Generator) -> list[NDArray[np.intp]]:
    """Runs drawn with replacement within each lot."""
    out: list[NDArray[np.intp]] = []
    for lot in range(len(readings.lots)):
        own = [run for run in runs if readings.lot[run[0]] == lot]
        out.extend(own[at] for at in (rng.integers(len(own), size=len(own)) if len(own) > 1 else [0]))
    return out


def _refit(
    evidence: Evidence, runs: list[NDArray[np.intp]], errors: Floats, model: Floats, rng: np.random.Generator
) -> Fit:
    """The law fitted again to new errors laid over the fitted curve; each run keeps the mean error it had."""
    readings, fit = evidence.readings, evidence.chosen
    chosen = np.concatenate(runs)
    places = rng.random(len(chosen))
    noise = np.concatenate([_blocks(errors[run], places) for run in runs])
    walk = np.concatenate([_walk(readings, run, rng) for run in runs])
    log = model[chosen] + noise / np.sqrt(readings.weight[chosen]) + walk
    part = replace(readings.at(chosen), log=log)
    return fit_law(part, LAWS[fit.law], COARSE, near=fit, prior=evidence.prior)


def _walk(readings: Readings, run: NDArray[np.intp], rng: np.random.Generator) -> Floats:
    """What the noise of the pressure may have added to ln ∫ΔP dt; it hides in the fit, so errors do not show it."""
    steps = readings.walk[run]
    if not steps.any():
        return np.zeros(len(run))
    return np.asarray(np.cumsum(steps * rng.standard_normal(len(run))) / np.exp(readings.log[run]))


def _blocks(errors: Floats, places: Floats) -> Floats:
    """Errors of a run laid anew in blocks of neighbors, cut from a circle at `places` (0 to 1), the mean
    kept.

    All runs are cut at the same places, so that errors which runs share (the steps of a gauge) stay shared.
    """
    n, mean = len(errors), errors.mean()
    size = _memory(errors - mean)
    starts = (places[: -(-n // size)] * n).astype(int)
    at = (starts[:, None] + np.arange(size)).ravel()[:n] % n
    drawn = errors[at]
    return np.asarray(drawn - drawn.mean() + mean) if size >= n else np.asarray(drawn)


def _memory(errors: Floats) -> int:
    """How many neighbors hang together: twice the first lag at which their correlation is below 0.2, n/4 at most."""
    n = len(errors)
    power = float(errors @ errors)
    for lag in range(1, n // 8):
        if float(errors[lag:] @ errors[:-lag]) < 0.2 * power:
            return max(min(2 * lag, n // 4), 1)
    return max(n // 4, 1)


def band(
    curve: Curve,
    loading: Floats,
    lot: str | None = None,
    level: float = 0.9,
    draws: int = DRAWS,
    seed: int = 1,
) -> tuple[Floats, Floats]:
    """Lower and upper end of the band on R in bar/LMH at each loading, (n,) each; pointwise at `level`."""
    values = bootstrap(curve, draws, seed).resistance(loading, lot)
    tail = 50.0 * (1.0 - level)
    low, high = np.percentile(values, [tail, 100.0 - tail], axis=0)
    return low, high


def loading_at(
    curve: Curve,
    resistance: float,
    lot: str | None = None,
    level: float = 0.9,
    draws: int = DRAWS,
    seed: int = 1,
) -> Interval:
    """Loading in L/m² at which the curve reaches `resistance` bar/LMH, with its bootstrap interval.

    It may lie beyond what was tested; compare with `curve.tested_loading`.
    """
    best = reach(curve.lot_curve(lot), resistance)
    sample = bootstrap(curve, draws, seed)
    rho, kappa = sample.multipliers(lot)
    reached = [
        _reach(sample.law, tuple(map(float, p)), resistance / r) / k
        for p, r, k in zip(sample.parameters, rho, kappa, strict=True)
    ]
    tail = 50.0 * (1.0 - level)
    low, high = np.percentile(reached, [tail, 100.0 - tail], method="inverted_cdf")
    return Interval(best, float(low), float(high))


def reach(curve: LotCurve, resistance: float) -> float:
    """Smallest loading in L/m² at which a lot's curve reaches `resistance` bar/LMH; infinite where it never does."""
    return _reach(curve.law, curve.parameters, resistance / curve.resistance_factor) / curve.fouling_factor


def _reach(name: str, parameters: tuple[float, ...], resistance: float) -> float:
    """Smallest loading where the law reaches a resistance, by bisection; 0 where it starts above."""
    law = LAWS[name]
    if law.resistance(0.0, *parameters) >= resistance:
        return 0.0
    low, high = 0.0, 1.0
    while law.peak(high, *parameters) < resistance:
        low, high = high, 2.0 * high
        if high > 1e9:
            return float("inf")
    for _ in range(200):
        middle = 0.5 * (low + high)
        if middle in {low, high}:
            break
        low, high = (middle, high) if law.peak(middle, *parameters) < resistance else (low, middle)
    return high


@dataclass(frozen=True)
class LotSpread:
    """Standard deviations of ln ρ and ln κ between lots, less what the fit's own errors explain (0 at least)."""

    lots: int
    log_resistance: float
    log_fouling: float


def lot_spread(curve: Curve) -> LotSpread | None:
    """Between-lot spread where three or more lots were run; None with fewer."""
    if curve.evidence is None or len(curve.lots) < 3:
        return None
    fit, count = curve.evidence.chosen, len(curve.lots)
    k = len(fit.parameters)
    variances: Floats = np.diag(fit.covariance)
    own = (variances[k : k + count], variances[k + count :])
    values = (fit.log_rho, fit.log_kappa)
    spread: list[float] = [
        float(np.sqrt(max(float(np.var(value, ddof=1)) - float(np.mean(error)), 0.0)))
        if np.all(np.isfinite(error))
        else 0.0
        for value, error in zip(values, own, strict=True)
    ]
    return LotSpread(count, spread[0], spread[1])


def left_out_errors(curve: Curve) -> dict[str, float]:
    """Root mean square relative error with which each law, fitted to the other runs, foretells a run left
    out.

    A run whose lot no other run has is foretold by the pooled curve. Empty with fewer than three runs.
    """
    evidence = curve.evidence
    if evidence is None or int(evidence.readings.run.max()) < 2:
        return {}
    return {fit.law: _left_out_error(evidence.readings, fit) for fit in evidence.fits}


def _left_out_error(readings: Readings, fit: Fit) -> float:
    squares, count, law = 0.0, 0, LAWS[fit.law]
    for run in range(int(readings.run.max()) + 1):
        out = readings.run == run
        rest, lots = _without_lot_gaps(readings.at(np.flatnonzero(~out)))
        refit = fit_law(rest, law, COARSE)
        held = readings.at(np.flatnonzero(out))
        lot = readings.lots[int(held.lot[0])]
        log_rho, log_kappa = (
            (float(part[lots.index(lot)]) if lot in lots else 0.0) for part in (refit.log_rho, refit.log_kappa)
        )
        errors = _foretold(law, refit.parameters, log_rho, log_kappa, held) - held.log
        errors = np.clip(errors, -5.0, 5.0)
        squares, count = squares + float(errors @ errors), count + len(errors)
    return float(np.sqrt(squares / count))


def _without_lot_gaps(readings: Readings) -> tuple[Readings, tuple[str, ...]]:
    """Readings with only the lots that they hold."""
    present = np.unique(readings.lot)
    lots = tuple(readings.lots[at] for at in present)
    return replace(readings, lot=np.searchsorted(present, readings.lot), lots=lots), lots


def _foretold(law: Law, parameters: tuple[float, ...], log_rho: float, log_kappa: float, held: Readings) -> Floats:
    x = np.exp(log_kappa) * held.loading
    with np.errstate(divide="ignore"):
        resistance = log_rho + np.log(law.resistance(x, *parameters))
        area = log_rho - log_kappa + np.log(law.integral(x, *parameters))
    return np.asarray(np.where(held.integral, area, resistance))
