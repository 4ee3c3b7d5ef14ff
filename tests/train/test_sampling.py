"""Sampled lots: their spread, what they share, and that only what concerns them changes them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from trainopt.curves.curve import Curve, Estimate, LotEffect
from trainopt.curves.laws import LAWS
from trainopt.curves.sampled import SampledCurves
from trainopt.train.sampling import FRESH, LogNormal, Sampler, drawn_parameters, root_covariance, spreads

from trainopt.files import Medium  # isort: skip

LOTS = 40_000


def curve(medium: str = "oat", **changes: object) -> Curve:
    base = Curve(
        medium=medium, law="intermediate",
        parameters={"R0": Estimate(1e-3, 1e-5, "bar/LMH"), "k": Estimate(5e-3, 1e-4, "m2/L")}, covariance=None,
        tested_loading=200.0, tested_flux=150.0, tested_temperature=None, turbidity_loading=None, feed_loading=None,
        lots={}, alternatives=(), points=(), flags=(), source="parameters",
    )  # fmt: skip
    return replace(base, **changes)  # type: ignore[arg-type]


def draws(stage: str = "primary", medium: str = "oat", **changes: object) -> Sampler:
    base = Sampler(
        seed=1, stage=stage, curve=curve(medium), ratio=1.0, known=200.0, resistance=LogNormal.of_variation(0.1),
        fouling=LogNormal.of_variation(0.2), feed=LogNormal(),
    )  # fmt: skip
    return replace(base, **changes)  # type: ignore[arg-type]


def test_multipliers_have_mean_one_and_the_variation_given() -> None:
    sample = draws().curves(LOTS)
    for values, cv in ((sample.resistance_factor, 0.1), (sample.fouling_factor, 0.2)):
        assert values.mean() == pytest.approx(1.0, abs=4.0 * cv / np.sqrt(LOTS))
        assert values.std() / values.mean() == pytest.approx(cv, rel=0.03)
        # Log-normal: the logarithm is symmetric.
        logs = np.log(values)
        assert abs(np.mean(((logs - logs.mean()) / logs.std()) ** 3)) < 0.06


def test_resistance_and_fouling_and_stages_are_drawn_apart() -> None:
    one, other = draws("primary").curves(LOTS), draws("secondary").curves(LOTS)
    pairs = [
        (one.resistance_factor, one.fouling_factor),
        (one.fouling_factor, other.fouling_factor),
        (one.fouling_factor, draws("primary", "rye").curves(LOTS).fouling_factor),
        (one.fouling_factor, draws().curves(LOTS, FRESH).fouling_factor),
        (one.fouling_factor, draws(seed=2).curves(LOTS).fouling_factor),
    ]
    for a, b in pairs:
        assert abs(np.corrcoef(np.log(a), np.log(b))[0, 1]) < 0.03


def test_the_feed_is_shared_by_all_stages() -> None:
    only_feed = {"resistance": LogNormal(), "fouling": LogNormal(), "feed": LogNormal.of_variation(0.3)}
    one, other = draws("primary", **only_feed).curves(100), draws("secondary", "rye", **only_feed).curves(100)
    assert np.array_equal(one.fouling_factor, other.fouling_factor)
    assert np.array_equal(one.resistance_factor, np.ones(100))


def test_more_samples_begin_with_the_fewer() -> None:
    few, many = draws().curves(50), draws().curves(500)
    assert np.array_equal(few.fouling_factor, many.fouling_factor[:50])
    assert np.array_equal(few.resistance_factor, many.resistance_factor[:50])


def test_parameters_are_drawn_within_what_the_fit_leaves_open() -> None:
    covariance = np.array([[1e-10, -4e-10], [-4e-10, 4e-8]])
    fitted = curve(covariance=tuple(map(tuple, covariance.tolist())), source="runs")
    drawn = drawn_parameters(fitted, 1, LOTS, "design")
    assert np.allclose(drawn.mean(axis=0), [1e-3, 5e-3], rtol=2e-3)
    assert np.allclose(np.cov(drawn.T), covariance, rtol=0.05)
    root = root_covariance(fitted)
    assert root is not None
    assert np.allclose(root @ root.T, covariance)
    # The same medium in two stages has one curve.
    assert np.array_equal(draws("a", curve=fitted).curves(9).parameters, draws("b", curve=fitted).curves(9).parameters)


def test_constants_stay_what_they_can_be() -> None:
    wide = curve(covariance=((1e-6, 0.0), (0.0, 1e-4)), source="runs")
    drawn = drawn_parameters(wide, 1, 2000, "design")
    assert (drawn[:, 0] > 0.0).all()
    assert (drawn[:, 1] >= 0.0).all()


def test_three_lots_give_the_spread_unless_it_is_given() -> None:
    lots = {
        name: LotEffect(rho, None, kappa, None)
        for name, rho, kappa in [("a", 0.9, 0.8), ("b", 1.0, 1.0), ("c", 1.2, 1.3)]
    }
    medium = Medium.model_construct(variability=None)
    resistance, fouling = spreads(medium, curve(lots=lots))
    assert fouling.deviation == pytest.approx(np.std(np.log([0.8, 1.0, 1.3]), ddof=1))
    assert resistance.mean == pytest.approx(np.mean(np.log([0.9, 1.0, 1.2])))
    two = dict(list(lots.items())[:2])
    assert spreads(medium, curve(lots=two)) == (LogNormal(), LogNormal())


@pytest.mark.parametrize("operation", ["constant-flow", "constant-pressure"])
@pytest.mark.parametrize("spread", [False, True])
@pytest.mark.parametrize("law", sorted(LAWS))
def test_sampled_curves_equal_single_ones(law: str, spread: bool, operation: str) -> None:
    rng = np.random.default_rng(5)
    names = LAWS[law].parameters
    start = {"R0": 1e-3, "k": 4e-3, "n": 1.3, "k_c": 3e-3, "k_b": 2e-3, "k_i": 4e-3, "k_s": 3e-3,
             "c0": 1e-3, "c1": -2e-6, "c2": 3e-8, "c3": 1e-11}  # fmt: skip
    rows = np.array([[start[name] for name in names]])
    if spread:
        rows = rows * rng.uniform(0.8, 1.2, (30, len(names)))
    curves = SampledCurves(law, rows, rng.uniform(0.8, 1.3, 30), rng.uniform(0.7, 1.6, 30), 700.0)
    loading = np.linspace(1.0, 900.0, 23)
    found = curves.demand(operation, loading)
    for row, one in zip(found, curves, strict=True):
        single = one.demand_constant_flow if operation == "constant-flow" else one.demand_constant_pressure
        expected = np.where(one.fouling_factor * loading > 700.0 * (1.0 + 1e-12), np.inf, single(loading))
        assert np.allclose(row, expected, rtol=1e-12)
    assert np.allclose(curves.poles, [one.pole for one in curves])
    part = curves.at(np.array([3, 1]))
    assert part[0] == curves[3]
