"""Fit of one law to all readings of a medium: one shared shape, each lot with its own ρ and κ (model.md,
section 2).

A reading says ln R at its loading (constant flow), or ln ∫ΔP dt up to its loading (any flow history): in
logarithms, so that errors count relative to the value and a clean filter weighs as much as a fouled one.
R_s(l) = ρ_s·R(κ_s·l), with the logarithms of ρ and of κ summing to zero over the lots: the shared curve is
that of the geometric-mean lot.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from trainopt.curves.blocking import Floats
from trainopt.curves.forms import Form, forms
from trainopt.curves.laws import LAWS, Law
from trainopt.curves.solver import Solution, covariance, least_squares

SMALLEST_ERROR = 1e-8
"""Relative error below which a fit counts as exact; keeps AICc finite on noise-free data."""

FINE, COARSE = 1e-10, 1e-4
"""Steps relative to the parameters at which a search ends: for an answer, and for comparing laws.

The sum of squares is off by the square of that, far less than any evidence.
"""


@dataclass(frozen=True, eq=False)
class Readings:
    """What a fit sees, arrays of shape (n,): `loading` L/m²; `log` ln(bar/LMH), or ln(bar·h) where `integral`.

    `walk` bar·h is the standard deviation by which one noisy pressure reading shifts ∫ΔP dt from there on (0 where
    not `integral`). `lot` and `run` index `lots` and `runs`, `row` is the line in the run's file; `weight` multiplies
    squared errors; `resistance` bar/LMH is the local estimate, used for starting values only.
    """

    loading: Floats
    log: Floats
    integral: NDArray[np.bool_]
    weight: Floats
    lot: NDArray[np.intp]
    run: NDArray[np.intp]
    resistance: Floats
    walk: Floats
    row: NDArray[np.int64]
    lots: tuple[str, ...]
    runs: tuple[str, ...]

    def __len__(self) -> int:
        return len(self.loading)

    def at(self, index: NDArray[np.intp]) -> Readings:
        """The readings at these places, which may repeat; lots unchanged."""
        columns = ("loading", "log", "integral", "weight", "lot", "run", "resistance", "walk", "row")
        return replace(self, **{name: getattr(self, name)[index] for name in columns})


@dataclass(frozen=True, eq=False)
class Fit:
    """One law fitted: natural `parameters`, ln ρ and ln κ per lot (S,), weighted residuals (n,), and what
    they cost.

    `covariance` (k + 2S)² is that of (parameters, ln ρ, ln κ); `error` the relative standard deviation of a reading;
    `count` the number of fitted quantities, the error's own included; `coordinates` the search's own (see `forms.py`);
    `influence` (k + 2S, n) the derivatives of all of them by the logarithm of each reading.
    """

    law: str
    parameters: tuple[float, ...]
    log_rho: Floats
    log_kappa: Floats
    residuals: Floats
    covariance: Floats
    error: float
    count: int
    converged: bool
    coordinates: Floats
    influence: Floats

    @property
    def cost(self) -> float:
        """Weighted sum of squared relative errors."""
        return float(self.residuals @ self.residuals)

    @property
    def aicc(self) -> float:
        """Akaike's criterion corrected for small samples (Hurvich & Tsai 1989); infinite with too few."""
        n, k = len(self.residuals), self.count
        if n <= k + 1:
            return float("inf")
        variance = max(self.cost / n, SMALLEST_ERROR**2)
        return float(n * np.log(variance) + 2.0 * k + 2.0 * k * (k + 1.0) / (n - k - 1.0))


def contrasts(lots: int) -> Floats:
    """Orthonormal columns (lots, lots − 1) that sum to zero: the directions in which lots can differ."""
    out = np.zeros((lots, max(lots - 1, 0)))
    for column in range(lots - 1):
        out[: column + 1, column] = 1.0
        out[column + 1, column] = -(column + 1.0)
        out[:, column] /= np.sqrt((column + 1.0) * (column + 2.0))
    return out


def fit_law(readings: Readings, law: Law, tolerance: float = FINE, near: Fit | None = None, prior: float = 0.0) -> Fit:
    """The law's parameters and the lots' ρ and κ that make the sum of squared relative errors least.

    A polynomial comes out positive and non-decreasing over the loadings seen, κ·l included. `near` is a fit
    of the same law to much the same readings, to start from. `prior` holds the ln κ near zero: it counts as one reading
    of each whose relative error is 1/prior times that of a real one.
    """
    reach = float(np.max(readings.loading))
    best = _fit_within(readings, law, reach, tolerance, near, prior)
    for _ in range(4):
        stretched = _reach(readings, best)
        if not law.polynomial or stretched <= reach * (1.0 + 1e-6):
            break
        reach = stretched
        best = _fit_within(readings, law, reach, tolerance, near, prior)
    return best


def _reach(readings: Readings, fit: Fit) -> float:
    return float(np.max(readings.loading * np.exp(fit.log_kappa)[readings.lot]))


def _fit_within(readings: Readings, law: Law, reach: float, tolerance: float, near: Fit | None, prior: float) -> Fit:
    """Try the law's forms in turn; later ones only where an earlier answer is not allowed (see `forms`)."""
    best: tuple[float, Form, Solution] | None = None
    for form in forms(law, reach, readings.loading, readings.resistance):
        model = _Model(readings, law, form, prior)
        solution = model.solve(tolerance, None if near is None or law.polynomial else near.coordinates)
        if form.allows(solution.x[: form.size]):
            if best is None or solution.cost < best[0]:
                best = (solution.cost, form, solution)
            if form.final:
                break
    assert best is not None, "every law has a form whose answers are all allowed"
    return _Model(readings, law, best[1], prior).result(best[2])


class _Model:
    """Residuals of one form of a law and of the lots: θ = (the form's, contrasts of ln ρ, of ln κ)."""

    def __init__(self, readings: Readings, law: Law, form: Form, prior: float) -> None:
        self.readings, self.law, self.form, self.prior = readings, law, form, prior
        self.basis = contrasts(len(readings.lots))
        self.rows = self.basis[readings.lot]
        self.root = np.sqrt(readings.weight)
        self.mixed = bool(readings.integral.any())

    def solve(self, tolerance: float, near: Floats | None) -> Solution:
        """Search from the first start, and from the others only where the answer sits on a bound.

        On a bound a law of two mechanisms has lost one, which can be a local minimum.
        """
        free = 2 * self.basis.shape[1]
        lower = np.concatenate([self.form.lower, np.full(free, -5.0)])
        upper = np.concatenate([self.form.upper, np.full(free, 5.0)])
        best: Solution | None = None
        with np.errstate(all="ignore"):
            if near is not None:
                return least_squares(self.residuals, near, lower, upper, tolerance=tolerance)
            for start in self.form.starts:
                theta = self._inside(np.concatenate([start, np.zeros(free)]))
                found = least_squares(self.residuals, theta, lower, upper, tolerance=tolerance)
                if best is None or found.cost < best.cost:
                    best = found
                if not np.any((best.x <= lower + 1e-6) | (best.x >= upper - 1e-6)):
                    break
        assert best is not None, "a form has a start"
        return best

    def _inside(self, theta: Floats) -> Floats:
        """A start whose constants are made smaller until no reading lies past the law's pole."""
        if self.law.polynomial:
            return theta
        smaller = theta.copy()
        constants = np.array([name not in {"R0", "n"} for name in self.law.parameters])
        for _ in range(40):
            if float(np.max(self.readings.loading)) < self.law.pole(*self.form.natural(smaller[: self.form.size])):
                break
            smaller[: self.form.size][constants] *= 0.8
        return smaller

    def residuals(self, theta: Floats) -> tuple[Floats, Floats]:
        form, size = self.form, self.form.size
        parameters = form.natural(theta[:size])
        log_rho, log_kappa = self._lots(theta)
        x = self.readings.loading * np.exp(log_kappa)
        if not form.law.polynomial and not np.max(x) < form.law.pole(*parameters):
            return self._held(theta, np.full(len(x), np.inf), np.zeros((len(x), len(theta))))
        value, by_parameter, by_log_kappa = self._logs(x, parameters)
        value = value + log_rho - np.where(self.readings.integral, log_kappa, 0.0)
        jacobian = np.concatenate(
            [by_parameter @ form.slopes(theta[:size]), self.rows, by_log_kappa[:, None] * self.rows], axis=1
        )
        return self._held(theta, self.root * (value - self.readings.log), self.root[:, None] * jacobian)

    def _held(self, theta: Floats, residuals: Floats, jacobian: Floats) -> tuple[Floats, Floats]:
        """Residuals and Jacobian with those of the prior on ln κ below them, where there is one."""
        lots = self.basis.shape[1]
        if self.prior == 0.0 or lots == 0:
            return residuals, jacobian
        rows = np.zeros((lots, len(theta)))
        rows[:, len(theta) - lots :] = self.prior * np.eye(lots)
        off = self.prior * theta[len(theta) - lots :]
        return np.concatenate([residuals, off]), np.concatenate([jacobian, rows])

    def _lots(self, theta: Floats) -> tuple[Floats, Floats]:
        size, lots = self.form.size, self.basis.shape[1]
        return self.rows @ theta[size : size + lots], self.rows @ theta[size + lots :]

    def _logs(self, x: Floats, parameters: tuple[float, ...]) -> tuple[Floats, Floats, Floats]:
        """ln R or ln S at κ·l, its derivatives by the natural parameters (n, k) and by ln κ (n,)."""
        if not self.mixed:
            return _log_resistance(self.law, x, parameters)
        inside = self.readings.integral
        if inside.all():
            return _log_area(self.law, x, parameters)
        value, by_kappa = np.empty(len(x)), np.empty(len(x))
        by_parameter = np.empty((len(x), len(parameters)))
        for part, function in ((inside, _log_area), (~inside, _log_resistance)):
            value[part], by_parameter[part], by_kappa[part] = function(self.law, x[part], parameters)
        return value, by_parameter, by_kappa

    def result(self, solution: Solution) -> Fit:
        size, lots = self.form.size, self.basis.shape[1]
        theta = solution.x
        parameters = self.form.natural(theta[:size])
        count = len(parameters) + 2 * lots + 1
        n = len(self.readings)
        freedom = max(n - count + 1, 1)
        residuals = solution.residuals[:n]
        error = float(np.sqrt(residuals @ residuals / freedom))
        with np.errstate(all="ignore"):
            x = self.readings.loading * np.exp(self._lots(theta)[1])
            _, by_parameter, by_log_kappa = self._logs(x, parameters)
        jacobian = np.concatenate([by_parameter, self.rows, by_log_kappa[:, None] * self.rows], axis=1)
        natural = np.concatenate([parameters, theta[size:]])
        held = self._held(natural, residuals, self.root[:, None] * jacobian)[1]
        unit = covariance(held, 1.0)
        widen = np.zeros((len(parameters) + 2 * len(self.readings.lots), len(unit)))
        k = len(parameters)
        widen[:k, :k] = np.eye(k)
        widen[k : k + len(self.basis), k : k + lots] = self.basis
        widen[k + len(self.basis) :, k + lots :] = self.basis
        return Fit(
            self.law.name,
            parameters,
            self.basis @ theta[size : size + lots],
            self.basis @ theta[size + lots :],
            residuals,
            _spread(widen, unit) * error**2,
            error,
            count,
            solution.converged,
            theta,
            widen @ np.where(np.isfinite(unit), unit, 0.0) @ held[:n].T * self.root,
        )


def _spread(widen: Floats, spread: Floats) -> Floats:
    """widen·spread·widenᵀ where some variances may be infinite."""
    unknown = np.isinf(np.diag(spread))
    finite = np.where(np.isfinite(spread), spread, 0.0)
    out = widen @ finite @ widen.T
    touched = np.abs(widen[:, unknown]).sum(axis=1) > 0.0
    out[touched, touched] = np.inf
    return np.asarray(out)


def _log_resistance(law: Law, x: Floats, parameters: tuple[float, ...]) -> tuple[Floats, Floats, Floats]:
    factor, k = law.split(parameters)
    value = np.log(factor * law.shape(x, *k))
    *by_k, by_l = law.slopes(x, *k)
    return value, _columns(law, factor, by_k, len(x)), x * by_l


def _log_area(law: Law, x: Floats, parameters: tuple[float, ...]) -> tuple[Floats, Floats, Floats]:
    factor, k = law.split(parameters)
    area = law.area(x, *k)
    by_k = [slope / area for slope in law.area_slopes(x, *k)]
    return np.log(factor * area), _columns(law, factor, by_k, len(x)), x * law.shape(x, *k) / area - 1.0


def _columns(law: Law, factor: float, by_k: list[Floats], n: int) -> Floats:
    """Derivatives by the natural parameters (n, k): R0 first for the mechanistic laws."""
    columns = by_k if law.polynomial else [np.full(n, 1.0 / factor), *by_k]
    return np.stack(columns, axis=1)


def fit_laws(readings: Readings, names: tuple[str, ...] = tuple(LAWS)) -> tuple[Fit, ...]:
    """The laws of `names` that the readings suffice for, lowest AICc first; ties by name."""
    fits = [fit_law(readings, LAWS[name], COARSE if len(names) > 1 else FINE) for name in names]
    return tuple(sorted((fit for fit in fits if np.isfinite(fit.aicc)), key=lambda fit: (fit.aicc, fit.law)))
