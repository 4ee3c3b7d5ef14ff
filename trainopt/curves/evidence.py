"""Which law the readings speak for, and how strongly.

The loss is Huber's (Ann. Math. Stat. 35 (1964) 73, memory): errors count squared up to four robust standard
deviations and linearly beyond, so that a misread gauge bends no curve and no reading has to be dropped.
Laws are compared by AICc on the same weights; within two units the one with fewer parameters is taken
(Burnham & Anderson 2002, memory).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from trainopt.bench.run import Floats
from trainopt.curves.fit import SMALLEST_ERROR, Fit, Readings, fit_law, fit_laws
from trainopt.curves.laws import LAWS

INDISTINGUISHABLE = 2.0
"""AICc units within which two laws cannot be told apart."""

DIFFERENT = 0.1
"""Laws that cannot be told apart matter where their resistances inside the tested range differ by this part."""

BOUND = 4.0
"""Robust standard deviations beyond which an error counts linearly."""

UNSURE, LIKELY = 0.1, 0.5
"""Where ln κ of a lot is known to no better than the first, it is held near 0 as if by a standard deviation of the
second: lots of one feed rarely foul more than some two times as fast as another (common practice, no source)."""

ROUNDS = 100


@dataclass(frozen=True, eq=False)
class Evidence:
    """Readings with their final weights, every law's fit (best first), the chosen one, and laws that rival it.

    `pull` (n,) is the part of its full weight that each reading was left by the loss. `prior` holds the lots' ln κ
    near zero where the readings hardly tell them (see `fit_law`; 0: not needed). `spread` is the largest relative
    difference between the chosen law's resistance and a rival's on the tested range.
    """

    readings: Readings
    fits: tuple[Fit, ...]
    chosen: Fit
    rivals: tuple[Fit, ...]
    spread: float
    prior: float
    pull: Floats

    @property
    def decided(self) -> bool:
        """False where laws that fit equally well differ by more than 10 % inside the tested range."""
        return self.spread <= DIFFERENT


def weigh(readings: Readings, names: tuple[str, ...]) -> Evidence | None:
    """Fit the laws of `names` and choose; None where the readings are too few for any."""
    fits = fit_laws(readings, names)
    if not fits:
        return None
    weight = _weights(readings, fits[0], readings)
    if not np.array_equal(weight, readings.weight):
        fits = fit_laws(replace(readings, weight=weight), names)
    close = [fit for fit in fits if fit.aicc <= fits[0].aicc + INDISTINGUISHABLE]
    best = min(close, key=lambda fit: (fit.count, fit.aicc, fit.law))
    final, chosen = settle(readings, best.law)
    prior = _prior(chosen)
    if prior > 0.0:
        final, chosen = settle(readings, best.law, prior)
    chosen = replace(chosen, covariance=chosen.covariance * kinship(final, chosen) + _walked(final, chosen))
    rivals = tuple(fit for fit in close if fit.count == best.count and fit.law != best.law)
    spread = max((_difference(readings, chosen, rival) for rival in rivals), default=0.0)
    pull = _pull(readings, chosen, final)
    return Evidence(final, fits, chosen, rivals, spread, prior, pull)


def _prior(fit: Fit) -> float:
    """How firmly ln κ must be held: not at all where every lot's is known well enough."""
    lots = len(fit.log_kappa)
    variance = np.diag(fit.covariance)[-lots:]
    if lots < 2 or float(np.max(variance)) <= UNSURE**2:
        return 0.0
    return max(fit.error, SMALLEST_ERROR) / LIKELY


def settle(readings: Readings, law: str, prior: float = 0.0) -> tuple[Readings, Fit]:
    """One law fitted with Huber's loss, by reweighting until no weight moves; the weights are returned with it."""
    current, fit = readings, fit_law(readings, LAWS[law], prior=prior)
    for _ in range(ROUNDS):
        weight = _weights(readings, fit, current)
        if np.max(np.abs(weight - current.weight)) < 1e-12:
            break
        current = replace(readings, weight=weight)
        fit = fit_law(current, LAWS[law], prior=prior)
    return current, fit


def _weights(base: Readings, fit: Fit, fitted: Readings) -> Floats:
    """The base weights times Huber's, each kind of run scaled by its own spread about `fit` (made on `fitted`)."""
    errors = _errors(base, fit, fitted)
    weight, reference = base.weight * _pull(base, fit, fitted), 0.0
    for kind in (base.integral, ~base.integral):
        scale = _scale(errors[kind])
        if scale > SMALLEST_ERROR:
            reference = reference or scale
            weight[kind] *= (reference / scale) ** 2
    return weight


def _errors(base: Readings, fit: Fit, fitted: Readings) -> Floats:
    """Errors about a fit made on `fitted`, in the base weights."""
    return np.asarray(np.sqrt(base.weight) * fit.residuals / np.sqrt(fitted.weight))


def _scale(errors: Floats) -> float:
    """Robust standard deviation; 0 for none."""
    return 1.4826 * float(np.median(np.abs(errors))) if len(errors) else 0.0


def _pull(base: Readings, fit: Fit, fitted: Readings) -> Floats:
    """The part of its full weight that Huber's loss leaves each reading, (n,)."""
    errors = _errors(base, fit, fitted)
    out = np.ones(len(errors))
    for kind in (base.integral, ~base.integral):
        scale = _scale(errors[kind])
        if scale > SMALLEST_ERROR:
            with np.errstate(divide="ignore"):
                out[kind] = np.minimum(1.0, BOUND * scale / np.abs(errors[kind]))
    return out


def kinship(readings: Readings, fit: Fit) -> float:
    """Factor on variances for errors that hang together along a run: 1 + 2·Σ autocorrelation, at least 1.

    Summed up to the first lag below 0.2, each run counting by its squared errors. Steps of a gauge and sums of a noisy
    pressure make neighbors err alike, so that many readings say less than they seem to.
    """
    total = weighted = 0.0
    for run in range(int(readings.run.max()) + 1):
        errors = fit.residuals[readings.run == run]
        errors = errors - errors.mean()
        power = float(errors @ errors)
        if power <= len(errors) * SMALLEST_ERROR**2:
            continue
        factor = 1.0
        for lag in range(1, len(errors) // 4):
            correlation = float(errors[lag:] @ errors[:-lag]) / power
            if correlation < 0.2:
                break
            factor += 2.0 * correlation
        total, weighted = total + power, weighted + power * factor
    return weighted / total if total > 0.0 else 1.0


def _walked(readings: Readings, fit: Fit) -> Floats:
    """Covariance that the noise of the pressure adds by way of ∫ΔP dt, where it goes on summing up."""
    out = np.zeros_like(fit.covariance)
    for run in np.unique(readings.run[readings.walk > 0.0]):
        mine = np.flatnonzero(readings.run == run)
        by_integral = fit.influence[:, mine] / np.exp(readings.log[mine])
        later = np.cumsum(by_integral[:, ::-1], axis=1)[:, ::-1] * readings.walk[mine]
        out += later @ later.T
    return out


def seen(readings: Readings, fit: Fit) -> float:
    """Loading in L/m² up to which the shared shape was seen and a run was run: the pooled curve's tested range."""
    return float(min(readings.loading.max(), np.max(readings.loading * np.exp(fit.log_kappa)[readings.lot])))


def _difference(readings: Readings, chosen: Fit, rival: Fit) -> float:
    """Largest relative difference of two pooled resistances on the range that both saw."""
    loading = np.linspace(0.0, min(seen(readings, chosen), seen(readings, rival)), 101)
    one, other = (LAWS[fit.law].resistance(loading, *fit.parameters) for fit in (chosen, rival))
    return float(np.max(np.abs(one - other) / np.minimum(one, other)))
