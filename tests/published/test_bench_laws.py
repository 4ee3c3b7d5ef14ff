"""The resistance laws and the fits against values from outside the project."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq

from tests.curves.plain import plain
from trainopt.curves.fit import Readings, fit_law
from trainopt.curves.laws import LAWS
from trainopt.curves.solver import covariance, least_squares

# NIST Statistical Reference Datasets, nonlinear regression, Misra1a to Misra1d: volume adsorbed against
# pressure (D. Misra, 1978). Data and certified values retyped from the files of a general fitting library.
Y = np.array([10.07, 14.73, 17.94, 23.93, 29.61, 35.18, 40.02, 44.82, 50.76, 55.05, 61.01, 66.40, 75.47, 81.78])
X = np.array([77.6, 114.9, 141.1, 190.8, 239.9, 289.0, 332.8, 378.4, 434.8, 477.3, 536.8, 593.1, 689.1, 760.0])

# Each model is filtrate volume against time at constant pressure for one order n of the general law: with
# R/R0 = (1 − V/b1)^(−1/(n − 1)) and J0 = b1·b2, the volume at time x is
#   n = 2    b1·(1 − exp(−b2·x))            Misra1a, complete
#   n = 5/3  b1·(1 − (1 + b2·x/2)^−2)       Misra1b
#   n = 4/3  b1·(1 − (1 + 2·b2·x)^−½)       Misra1c
#   n = 3/2  b1·b2·x/(1 + b2·x)             Misra1d, standard
CERTIFIED = {
    "Misra1a": (2.0, (2.3894212918e2, 2.7070075241), (5.5015643181e-4, 7.2668688436e-6), 1.2455138894e-1),
    "Misra1b": (5 / 3, (3.3799746163e2, 3.1643950207), (3.9039091287e-4, 4.2547321834e-6), 7.5464681533e-2),
    "Misra1c": (4 / 3, (6.3642725809e2, 4.6638326572), (2.0813627256e-4, 1.7728423155e-6), 4.0966836971e-2),
    "Misra1d": (3 / 2, (4.3736970754e2, 3.6489174345), (3.0227324449e-4, 2.9334354479e-6), 5.6419295283e-2),
}


def volume_at(time: float, p: tuple[float, ...]) -> float:
    """Filtrate at `time` under a pressure of 1: where the integral of the resistance has reached it."""
    law = LAWS["hermia"]
    top = min(law.pole(*p) * (1.0 - 1e-14), 1e6)
    return float(brentq(lambda v: law.integral(v, *p) - time, 0.0, top, xtol=1e-13, rtol=1e-14))


@pytest.mark.parametrize("name", CERTIFIED)
@pytest.mark.parametrize("start", [(500.0, 1e-4), (300.0, 3e-4)])
def test_certified_regressions_are_the_general_law_at_constant_pressure(name: str, start: tuple[float, float]) -> None:
    """Least squares on the volumes, with the law's integral, its slopes and our solver: ten digits."""
    n, (b1, b1_error), (b2, b2_error), rss = CERTIFIED[name]
    law = LAWS["hermia"]

    def residuals(b: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        r0, k = 1.0 / (b[0] * b[1]), 1.0 / (b[0] * (n - 1.0))
        volume = np.array([volume_at(time, (r0, k, n)) for time in X])
        resistance = law.resistance(volume, r0, k, n)
        by_r0 = -law.integral(volume, r0, k, n) / r0 / resistance
        by_k = -r0 * law.area_slopes(volume, k, n)[0] / resistance
        natural = np.stack([by_r0, by_k], axis=1)
        by_b = np.array([[-r0 / b[0], -r0 / b[1]], [-k / b[0], 0.0]])
        return volume - Y, natural @ by_b

    found = least_squares(residuals, np.array(start), np.zeros(2) + 1e-9, np.full(2, np.inf), tolerance=1e-13)
    error = np.sqrt(np.diag(covariance(found.jacobian, found.cost / 12.0)))
    assert found.converged
    assert found.cost == pytest.approx(rss, rel=1e-10)
    np.testing.assert_allclose(found.x, [b1, b2], rtol=1e-9)
    np.testing.assert_allclose(error, [b1_error, b2_error], rtol=1e-8)


def exact(loading: np.ndarray, value: np.ndarray, integral: bool) -> Readings:
    local = value if not integral else np.gradient(value, loading)
    return plain(loading, np.log(value), local, integral)


def test_constant_flow_on_an_incompressible_cake() -> None:
    """Brasch & Whyman, Problems in Fluid Flow, Ex. 8.1: 3.23 kPa at 120 s, 6.53 kPa at 300 s, 34.03 kPa at
    1800 s.

    At constant flow the loading is proportional to time and the pressure to the resistance.
    """
    times = np.array([120.0, 300.0])
    fit = fit_law(exact(times, np.array([3.23, 6.53]), integral=False), LAWS["cake"])
    assert LAWS["cake"].resistance(1800.0, *fit.parameters) == pytest.approx(34.03, abs=0.005)


# Constant-pressure forms of the four laws: volume per area V(t) with initial flux J0 (Hermia 1982; Bolton,
# LaCasse
# & Kuriyel 2006; both from memory). Constants per loading are those of model.md, k.
CONSTANT_PRESSURE = {
    "cake": lambda t, j0, k: (np.sqrt(1.0 + 2.0 * k * j0 * t) - 1.0) / k,
    "intermediate": lambda t, j0, k: np.log(1.0 + k * j0 * t) / k,
    "standard": lambda t, j0, k: t / (t * k / 2.0 + 1.0 / j0),
    "complete": lambda t, j0, k: (1.0 - np.exp(-k * j0 * t)) / k,
}


@pytest.mark.parametrize("name", CONSTANT_PRESSURE)
def test_one_curve_serves_both_kinds_of_run(name: str) -> None:
    """A run at constant pressure and one at constant flow give the same R0 and k."""
    k, pressure, r0 = 0.01, 1.2, 0.004
    j0 = pressure / r0
    time = np.linspace(0.02, 0.9, 40)
    volume = CONSTANT_PRESSURE[name](time, j0, k)
    at_pressure = fit_law(exact(volume, pressure * time, integral=True), LAWS[name])
    np.testing.assert_allclose(at_pressure.parameters, (r0, k), rtol=1e-8)
    loading = np.linspace(0.5, 80.0, 40)
    flux = 150.0
    drop = flux * LAWS[name].resistance(loading, r0, k)
    at_flow = fit_law(exact(loading, drop / flux, integral=False), LAWS[name])
    np.testing.assert_allclose(at_flow.parameters, at_pressure.parameters, rtol=1e-8)


def test_auto_offers_polynomials_and_the_combined_cake_law() -> None:
    """A study of depth filtration of harvested cell culture (BioPharm International 22(3), March 2009,
    abstract) found polynomials of 2nd and 3rd order best and the cake-complete law best of the mechanistic
    ones."""
    assert {"quadratic", "cubic", "cake-complete"} <= set(LAWS)
