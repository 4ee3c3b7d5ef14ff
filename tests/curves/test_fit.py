"""Known curves are found again from noisy readings, over several lots at once."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import least_squares as reference_least_squares

from tests.curves.plain import plain
from tests.curves.test_laws import PARAMETERS
from trainopt.curves.fit import Fit, Readings, _Model, contrasts, fit_law, fit_laws
from trainopt.curves.forms import forms
from trainopt.curves.laws import LAWS
from trainopt.curves.solver import least_squares

LOTS = {"a": (1.0, 1.0), "b": (1.2, 0.9), "c": (0.9, 1.15)}
FULL = {**PARAMETERS, "cubic": (1e-3, 3e-5, -3e-7, 2e-9), "hermia": (1e-3, 0.008, 1.3)}


def readings(
    name: str,
    seed: int,
    noise: float = 0.01,
    integral: bool = False,
    lots: dict[str, tuple[float, float]] = LOTS,
) -> tuple[Readings, np.ndarray, np.ndarray]:
    """60 readings per lot with relative noise, and the lots' true ln ρ and ln κ."""
    rng = np.random.default_rng(seed)
    law, p, n = LAWS[name], FULL[name], 60
    log_rho, log_kappa = (np.log([lot[i] for lot in lots.values()]) for i in (0, 1))
    log_rho, log_kappa = log_rho - log_rho.mean(), log_kappa - log_kappa.mean()
    loading = np.tile(np.linspace(2.0, 130.0, n), len(lots))
    lot = np.repeat(np.arange(len(lots)), n)
    rho, kappa = np.exp(log_rho)[lot], np.exp(log_kappa)[lot]
    resistance = rho * law.resistance(kappa * loading, *p)
    value = rho / kappa * law.integral(kappa * loading, *p) if integral else resistance
    log = np.log(value) + noise * rng.standard_normal(len(loading))
    return (
        plain(loading, log, resistance, integral, lot, tuple(lots)),
        log_rho,
        log_kappa,
    )


def off(fit: Fit, truth: np.ndarray) -> np.ndarray:
    """Distance of everything fitted from the truth, in standard errors."""
    fitted = np.concatenate([fit.parameters, fit.log_rho, fit.log_kappa])
    error = np.sqrt(np.diag(fit.covariance))
    return np.abs(fitted - truth) / error


@pytest.mark.parametrize("integral", [False, True], ids=["by-resistance", "by-integral"])
@pytest.mark.parametrize("name", sorted(LAWS))
def test_recovered_within_three_standard_errors(name: str, integral: bool) -> None:
    inside = 0
    for seed in range(100):
        data, log_rho, log_kappa = readings(name, seed, integral=integral)
        fit = fit_law(data, LAWS[name])
        truth = np.concatenate([FULL[name], log_rho, log_kappa])
        inside += bool(np.all(off(fit, truth) <= 3.0))
    assert inside >= 95


@pytest.mark.parametrize("name", sorted(set(LAWS) - {"cubic", "quadratic"}))
def test_least_squares_is_that_of_a_general_solver(name: str) -> None:
    """scipy.optimize.least_squares on the same residuals, from several starts, finds nothing lower."""
    data, _, _ = readings(name, 7, noise=0.03, lots={"a": (1.0, 1.0)})
    law = LAWS[name]
    fit = fit_law(data, law)

    def residuals(theta: np.ndarray) -> np.ndarray:
        p = (np.exp(theta[0]), *theta[1:])
        with np.errstate(all="ignore"):
            model = np.log(law.resistance(data.loading, *p))
        return np.where(np.isfinite(model), model, 50.0) - data.log

    count = len(law.parameters) - 1
    upper = [np.inf, *(2.0 if parameter == "n" else 1.0 for parameter in law.parameters[1:])]
    rng = np.random.default_rng(0)
    best = np.inf
    for _ in range(6):
        start = np.array([np.log(1e-3), *rng.uniform(0.0005, 0.006, count)])
        if "n" in law.parameters:
            start[-1] = rng.uniform(0.1, 1.5)
        found = reference_least_squares(
            residuals,
            start,
            bounds=([-np.inf, *[0.0] * count], upper),
            x_scale=np.abs(start) + 1e-3,
            xtol=1e-14,
            ftol=1e-14,
        )
        best = min(best, 2.0 * found.cost)
    assert fit.cost <= best * (1.0 + 1e-7)


@pytest.mark.parametrize("name", sorted(LAWS))
def test_auto_finds_the_law_or_one_that_fits_as_well(name: str) -> None:
    data, _, _ = readings(name, 11)
    fits = fit_laws(data)
    at = next(index for index, fit in enumerate(fits) if fit.law == name)
    assert fits[at].aicc - fits[0].aicc < 6.0
    assert fits[0].error < 0.0115


def dipping(seed: int) -> Readings:
    """A resistance that falls at first and then rises: what a curve may not follow."""
    rng = np.random.default_rng(seed)
    loading = np.linspace(1.0, 100.0, 80)
    z = loading / 100.0
    resistance = 1e-3 * (1.0 - 0.8 * z + 2.2 * z**2) * np.exp(0.01 * rng.standard_normal(80))
    return plain(loading, np.log(resistance), resistance)


def wavy(seed: int, sag: float) -> Readings:
    """A resistance with a sag in the middle: the slope of a free cubic is negative inside the range."""
    rng = np.random.default_rng(seed)
    z = np.linspace(0.01, 1.0, 80)
    resistance = 1e-3 * (1.0 + 4.0 * z - sag * z**2 + sag * z**3 / 1.5) * np.exp(0.005 * rng.standard_normal(80))
    return plain(100.0 * z, np.log(resistance), resistance)


@pytest.mark.parametrize(
    "data", [dipping(1), dipping(2), wavy(3, 9.0), wavy(4, 10.0)], ids=["dip", "dip", "sag", "sag"]
)
@pytest.mark.parametrize("name", ["quadratic", "cubic"])
def test_polynomials_never_fall_on_the_tested_range(name: str, data: Readings) -> None:
    fit = fit_law(data, LAWS[name])
    l = np.linspace(0.0, 100.0, 5001)
    resistance = LAWS[name].resistance(l, *fit.parameters)
    assert np.all(resistance > 0.0)
    assert np.all(np.diff(resistance) >= -1e-12 * resistance[1:])


@pytest.mark.parametrize("data", [dipping(1), wavy(3, 9.0), wavy(4, 10.0)], ids=["dip", "sag", "sag"])
def test_constrained_cubic_is_the_best_allowed_one(data: Readings) -> None:
    """scipy's SLSQP, held non-decreasing on a dense grid, finds the same least sum of squares."""
    from scipy.optimize import LinearConstraint, minimize

    z = data.loading / 100.0
    powers = z[:, None] ** np.arange(4)

    def cost(c: np.ndarray) -> float:
        r = np.log(np.maximum(powers @ c, 1e-9)) - data.log - np.log(1e3)
        return float(r @ r)

    def slope(c: np.ndarray) -> np.ndarray:
        model = np.maximum(powers @ c, 1e-9)
        r = np.log(model) - data.log - np.log(1e3)
        return 2.0 * (r / model) @ powers

    grid = np.linspace(0.0, 1.0, 401)[:, None]
    rows = np.hstack([np.zeros_like(grid), np.ones_like(grid), 2.0 * grid, 3.0 * grid**2])
    found = minimize(
        cost, [1.0, 0.5, 0.2, 0.1], jac=slope, method="SLSQP",
        constraints=[LinearConstraint(rows, 0.0, np.inf)],
        options={"maxiter": 500, "ftol": 1e-14},
    )  # fmt: skip
    fit = fit_law(data, LAWS["cubic"])
    free = np.linalg.lstsq(powers / np.exp(data.log + np.log(1e3))[:, None], np.ones(80), rcond=None)[0]
    assert np.any(rows @ free < 0.0), "the case must need the constraint"
    assert fit.cost == pytest.approx(found.fun, rel=1e-4)
    assert fit.cost <= found.fun * (1.0 + 1e-5)  # the grid lets the reference fall a little between its points


def test_exact_readings_give_exact_parameters() -> None:
    for name in LAWS:
        data, log_rho, _ = readings(name, 0, noise=0.0)
        fit = fit_law(data, LAWS[name])
        np.testing.assert_allclose(fit.parameters, FULL[name], rtol=1e-5)
        np.testing.assert_allclose(fit.log_rho, log_rho, atol=1e-7)


def test_lots_are_relative_to_their_geometric_mean() -> None:
    data, _, _ = readings("intermediate", 3)
    fit = fit_law(data, LAWS["intermediate"])
    assert fit.log_rho.sum() == pytest.approx(0.0, abs=1e-12)
    assert fit.log_kappa.sum() == pytest.approx(0.0, abs=1e-12)
    np.testing.assert_allclose(contrasts(4).T @ contrasts(4), np.eye(3), atol=1e-15)


def test_a_medium_that_does_not_foul_leaves_the_fouling_of_lots_open() -> None:
    rng = np.random.default_rng(5)
    loading = np.tile(np.linspace(1.0, 100.0, 40), 2)
    lot = np.repeat([0, 1], 40)
    log = np.log(1e-3 * np.array([1.0, 1.1])[lot]) + 0.01 * rng.standard_normal(80)
    data = plain(loading, log, np.exp(log), lot=lot, lots=("a", "b"))
    fit = fit_law(data, LAWS["intermediate"])
    assert np.exp(fit.log_rho[1] - fit.log_rho[0]) == pytest.approx(1.1, rel=0.02)
    assert np.all(np.isfinite(fit.parameters))


@pytest.mark.parametrize("name", sorted(set(LAWS) - {"cubic", "quadratic"}))
def test_no_start_leads_lower(name: str) -> None:
    """Three lots that follow some other law, steep or flat: twelve random starts find nothing better."""
    rng = np.random.default_rng(5)
    law = LAWS[name]
    loading, lot = np.tile(np.linspace(2.0, 130.0, 40), 3), np.repeat([0, 1, 2], 40)
    rho, kappa = np.array([0.9, 1.0, 1.1])[lot], np.array([1.1, 1.0, 0.9])[lot]
    for _ in range(8):
        source = LAWS[str(rng.choice(sorted(set(LAWS) - {"cubic", "quadratic"})))]
        p = [1e-3, *rng.uniform(0.0005, 0.02, len(source.parameters) - 1)]
        while source.pole(*p) < 200.0:
            p[1:] = [0.7 * value for value in p[1:]]
        resistance = rho * source.resistance(kappa * loading, *p) * np.exp(0.03 * rng.standard_normal(120))
        data = plain(loading, np.log(resistance), resistance, lot=lot, lots=("a", "b", "c"))
        fit = fit_law(data, law)
        form = next(iter(forms(law, 130.0, data.loading, data.resistance)))
        model = _Model(data, law, form, 0.0)
        lower, upper = np.append(form.lower, [-5.0] * 4), np.append(form.upper, [5.0] * 4)
        for _ in range(12):
            scale = rng.choice([0.1, 0.5, 1.0, 3.0])
            start = np.concatenate(
                [[np.log(1e-3)], scale * rng.uniform(0.0, 1.0, form.size - 1), 0.1 * rng.standard_normal(4)]
            )
            with np.errstate(all="ignore"):
                other = least_squares(model.residuals, start, lower, upper)
            assert not other.cost < fit.cost * (1.0 - 1e-6)
