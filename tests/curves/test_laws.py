"""Every resistance law: its differential equation, integral, pole, slopes, and scalar against array."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad, solve_ivp

from trainopt.curves.curve import LotCurve
from trainopt.curves.laws import LAWS, Law

PARAMETERS: dict[str, tuple[float, ...]] = {
    "cake": (1e-3, 0.02),
    "intermediate": (1e-3, 0.02),
    "standard": (1e-3, 0.01),
    "complete": (1e-3, 0.005),
    "hermia": (1e-3, 0.01, 1.3),
    "cake-complete": (1e-3, 0.03, 0.004),
    "cake-intermediate": (1e-3, 0.03, 0.004),
    "cake-standard": (1e-3, 0.03, 0.006),
    "complete-standard": (1e-3, 0.003, 0.005),
    "intermediate-standard": (1e-3, 0.003, 0.005),
    "quadratic": (1e-3, 1e-5, 1e-7),
    "cubic": (1e-3, 3e-5, -4e-7, 2e-9),
}
LOADINGS = np.linspace(0.0, 150.0, 31)
HERMIA_ORDER = {"cake": 0.0, "intermediate": 1.0, "standard": 1.5, "complete": 2.0}


@pytest.fixture(params=sorted(LAWS))
def law(request: pytest.FixtureRequest) -> Law:
    return LAWS[request.param]


def test_every_law_is_tried_here() -> None:
    assert set(PARAMETERS) == set(LAWS)


def test_scalar_and_array_agree(law: Law) -> None:
    p = PARAMETERS[law.name]
    for function in (law.resistance, law.integral, law.peak):
        array = function(LOADINGS, *p)
        scalars = [function(float(l), *p) for l in LOADINGS]
        assert all(isinstance(value, float) for value in scalars)
        np.testing.assert_allclose(array, scalars, rtol=1e-15, atol=0.0)


def test_starts_at_the_clean_resistance(law: Law) -> None:
    p = PARAMETERS[law.name]
    assert law.resistance(0.0, *p) == p[0]
    assert law.integral(0.0, *p) == 0.0


def test_integral_is_the_area_under_the_curve(law: Law) -> None:
    p = PARAMETERS[law.name]
    for l in (0.01, 1.0, 40.0, 150.0):
        area = quad(lambda x: law.resistance(x, *p), 0.0, l, epsabs=0.0, epsrel=1e-13, limit=200)[0]
        assert law.integral(l, *p) == pytest.approx(area, rel=1e-12)


@pytest.mark.parametrize(("name", "n"), [*HERMIA_ORDER.items(), *(("hermia", n) for n in (0, 0.4, 1, 1.2, 1.5, 2))])
def test_differential_equation(name: str, n: float) -> None:
    """dR/dl = k·R0·(R/R0)ⁿ, Hermia, Trans. IChemE 60 (1982) 183 (memory), both ways."""
    p = (1e-3, 0.005, n) if name == "hermia" else PARAMETERS[name]
    law, r0, k = LAWS[name], p[0], p[1]
    l = np.linspace(1.0, 120.0, 25)
    step = 1e-3
    slope = (law.resistance(l + step, *p) - law.resistance(l - step, *p)) / (2.0 * step)
    np.testing.assert_allclose(slope, k * r0 * (law.resistance(l, *p) / r0) ** n, rtol=1e-7)
    grown = solve_ivp(
        lambda _, r: k * r0 * (r / r0) ** n,
        (0.0, 120.0),
        [r0],
        method="DOP853",
        rtol=1e-12,
        atol=1e-18,
        t_eval=l,
    )
    np.testing.assert_allclose(law.resistance(l, *p), grown.y[0], rtol=1e-9)


@pytest.mark.parametrize(("name", "n"), HERMIA_ORDER.items())
def test_general_law_holds_the_four(name: str, n: float) -> None:
    p = PARAMETERS[name]
    np.testing.assert_allclose(
        LAWS["hermia"].resistance(LOADINGS, *p, n), LAWS[name].resistance(LOADINGS, *p), rtol=1e-13
    )
    np.testing.assert_allclose(LAWS["hermia"].integral(LOADINGS, *p, n), LAWS[name].integral(LOADINGS, *p), rtol=1e-13)
    assert LAWS["hermia"].pole(*p, n) == pytest.approx(LAWS[name].pole(*p))


@pytest.mark.parametrize("n", [1.0 - 1e-9, 1.0 + 1e-9, 2.0 - 1e-9])
def test_general_law_is_smooth_at_its_special_orders(n: float) -> None:
    near, at = (LAWS["hermia"].resistance(LOADINGS, 1e-3, 0.004, order) for order in (n, round(n)))
    np.testing.assert_allclose(near, at, rtol=1e-8)
    near, at = (LAWS["hermia"].integral(LOADINGS[1:], 1e-3, 0.004, order) for order in (n, round(n)))
    np.testing.assert_allclose(near, at, rtol=1e-8)


COMBINED = {
    # The closed forms as published, Bolton and others 2006 (memory).
    "cake-complete": lambda l, kc, kb: (1.0 - kc / kb * np.log(1.0 - kb * l)) / (1.0 - kb * l),
    "cake-intermediate": lambda l, kc, ki: np.exp(ki * l) * (1.0 + kc / ki * (np.exp(ki * l) - 1.0)),
    "cake-standard": lambda l, kc, ks: (1.0 - ks * l / 2.0) ** -2 + kc * l,
    "complete-standard": lambda l, kb, ks: 1.0 / ((1.0 - kb * l) * (1.0 + ks / (2.0 * kb) * np.log(1.0 - kb * l)) ** 2),
    "intermediate-standard": lambda l, ki, ks: np.exp(ki * l) / (1.0 - ks / (2.0 * ki) * (np.exp(ki * l) - 1.0)) ** 2,
}


@pytest.mark.parametrize("name", COMBINED)
def test_combined_laws_are_the_published_forms(name: str) -> None:
    p = PARAMETERS[name]
    np.testing.assert_allclose(LAWS[name].resistance(LOADINGS, *p), p[0] * COMBINED[name](LOADINGS, *p[1:]), rtol=1e-12)


@pytest.mark.parametrize("name", COMBINED)
def test_combined_law_without_one_mechanism_is_the_other(name: str) -> None:
    first, second = name.split("-")
    for k, alone in (((0.004, 0.0), first), ((0.0, 0.004), second)):
        expected = LAWS[alone].resistance(LOADINGS, 1e-3, 0.004)
        np.testing.assert_allclose(LAWS[name].resistance(LOADINGS, 1e-3, *k), expected, rtol=1e-12)
        assert LAWS[name].pole(1e-3, *k) == pytest.approx(LAWS[alone].pole(1e-3, 0.004))


def test_infinite_at_and_past_the_pole_without_a_warning(law: Law) -> None:
    p = PARAMETERS[law.name]
    pole = law.pole(*p)
    if np.isinf(pole):
        assert law.resistance(1e7, *p) > law.resistance(1e3, *p)
        return
    for function in (law.resistance, law.integral, law.peak):
        assert function(pole, *p) == np.inf
        assert np.all(np.isinf(function(np.array([pole, 2.0 * pole, 1e9]), *p)))
    assert 1e3 * p[0] < law.resistance(pole * (1.0 - 1e-8), *p) < np.inf


def test_slopes_are_the_derivatives(law: Law) -> None:
    p = PARAMETERS[law.name]
    k = p if law.polynomial else p[1:]
    l = LOADINGS[1:]

    def moved(function: object, index: int, by: float) -> np.ndarray:
        return function(l, *(value + by * (place == index) for place, value in enumerate(k)))  # type: ignore[operator]

    for index, value in enumerate(k):
        h = 1e-5 * abs(value)
        by_k = (np.log(moved(law.shape, index, h)) - np.log(moved(law.shape, index, -h))) / (2.0 * h)
        np.testing.assert_allclose(law.slopes(l, *k)[index], by_k, rtol=2e-6, atol=1e-7 * np.abs(by_k).max())
        area = (moved(law.area, index, h) - moved(law.area, index, -h)) / (2.0 * h)
        np.testing.assert_allclose(law.area_slopes(l, *k)[index], area, rtol=2e-6, atol=1e-7 * np.abs(area).max())
    by_l = (np.log(law.shape(l + 1e-4, *k)) - np.log(law.shape(l - 1e-4, *k))) / 2e-4
    np.testing.assert_allclose(law.slopes(l, *k)[-1], by_l, rtol=1e-6, atol=1e-10)


coefficient = st.floats(-1.0, 1.0)


@given(c1=coefficient, c2=coefficient, c3=coefficient, l=st.floats(0.0, 3.0))
def test_peak_of_a_cubic_is_its_highest_value(c1: float, c2: float, c3: float, l: float) -> None:
    p = (1.0, c1, c2, c3)
    law = LAWS["cubic"]
    if l >= law.pole(*p):
        assert law.peak(l, *p) == np.inf
        return
    on_the_way = law.resistance(np.linspace(0.0, l, 2001), *p)
    assert law.peak(l, *p) >= on_the_way.max() * (1.0 - 1e-12)
    assert law.peak(l, *p) <= on_the_way.max() + 1e-5


def test_a_dip_does_not_lower_the_peak() -> None:
    p = (1.0, 1.0, -1.0, 0.2)  # rises to 1.26, dips, rises again
    peaks = LAWS["cubic"].peak(np.linspace(0.0, 4.0, 401), *p)
    assert np.all(np.diff(peaks) >= 0.0)
    assert peaks[200] > LAWS["cubic"].resistance(2.0, *p)


@pytest.mark.parametrize("name", sorted(PARAMETERS))
def test_lot_curve_stretches_and_scales(name: str) -> None:
    p = PARAMETERS[name]
    law, lot = LAWS[name], LotCurve(name, p, resistance_factor=1.3, fouling_factor=0.8)
    l = np.array([0.0, 10.0, 90.0])
    np.testing.assert_allclose(lot.resistance(l), 1.3 * law.resistance(0.8 * l, *p))
    np.testing.assert_allclose(lot.demand_constant_flow(l), l * 1.3 * law.peak(0.8 * l, *p))
    area = [quad(lambda x: lot.resistance(x), 0.0, end, epsabs=0.0, epsrel=1e-12)[0] for end in l[1:]]
    np.testing.assert_allclose(lot.demand_constant_pressure(l)[1:], area, rtol=1e-11)
    assert lot.pole == law.pole(*p) / 0.8
    assert isinstance(lot.demand_constant_flow(10.0), float)


def test_demand_past_the_pole_is_infinite_even_at_once() -> None:
    lot = LotCurve("complete", (1e-3, 0.01))
    assert list(np.isinf(lot.demand_constant_flow(np.array([99.0, 100.0, 500.0])))) == [False, True, True]
    assert lot.demand_constant_pressure(100.0) == np.inf
