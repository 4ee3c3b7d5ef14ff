"""Bootstrap, bands, the loading at a resistance, spread between lots, error on runs left out."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from tests.bench.lab import Lab, MediumEntry, RunEntry, Spec, fitted
from trainopt.curves.curve import Curve
from trainopt.curves.medium import fit_curve
from trainopt.curves.uncertainty import band, bootstrap, left_out_errors, loading_at, lot_spread

LOTS = {"a": (0.95, 0.93), "b": (1.05, 1.12), "c": (1.0, 0.96)}


@pytest.fixture(scope="module")
def curve(tmp_path_factory: pytest.TempPathFactory) -> Curve:
    folder = tmp_path_factory.mktemp("runs")
    runs = []
    for seed, (lot, (rho, kappa)) in enumerate(LOTS.items()):
        lab = Lab(rho=rho, kappa=kappa, noise=0.03, seed=seed)
        runs.append(RunEntry(lab.write(folder / f"{lot}.csv"), lot=lot))
    return fitted(*runs, law="intermediate")


def test_bootstrap_agrees_with_the_standard_errors(curve: Curve) -> None:
    draws = bootstrap(curve, draws=400, seed=3)
    for at, (name, estimate) in enumerate(curve.parameters.items()):
        assert estimate.se is not None, name
        assert draws.parameters[:, at].std() == pytest.approx(estimate.se, rel=0.3)
        assert draws.parameters[:, at].mean() == pytest.approx(estimate.value, abs=estimate.se)


def test_a_seed_gives_the_same_draws_and_another_others(curve: Curve) -> None:
    again = replace(curve, evidence=replace(curve.evidence))  # type: ignore[type-var]
    np.testing.assert_array_equal(bootstrap(curve, 20, 5).parameters, bootstrap(again, 20, 5).parameters)
    assert np.any(bootstrap(curve, 20, 5).parameters != bootstrap(curve, 20, 6).parameters)


def test_band_holds_the_curve_and_widens_with_level(curve: Curve) -> None:
    loading = np.linspace(0.0, 150.0, 31)
    low, high = band(curve, loading, level=0.9)
    wide_low, wide_high = band(curve, loading, level=0.99)
    middle = curve.lot_curve().resistance(loading)
    assert np.all((low < middle) & (middle < high))
    assert np.all((wide_low <= low) & (high <= wide_high))
    assert np.all(high / low < 1.1)
    lot_low, lot_high = band(curve, loading, lot="b")
    assert np.all(lot_low < lot_high)
    assert lot_low[-1] > high[-1]


def test_loading_at_a_resistance(curve: Curve) -> None:
    r0, k = (estimate.value for estimate in curve.parameters.values())
    found = loading_at(curve, 3e-3)
    assert found.value == pytest.approx(np.log(3e-3 / r0) / k, rel=1e-12)
    assert found.low < found.value < found.high
    assert found.high / found.low < 1.1
    faster = loading_at(curve, 3e-3, lot="b")
    assert faster.value < found.value
    assert loading_at(curve, 1e-4) == type(found)(0.0, 0.0, 0.0)


def test_bands_cover_the_truth(tmp_path: Path) -> None:
    """90 % bands at three loadings over 60 seeds: 85 to 95 % within the play of chance (the script has
    more).
    """
    loading = np.array([20.0, 80.0, 140.0])
    truth = 1e-3 * np.exp(0.012 * loading)
    inside = []
    for seed in range(60):
        lab = Lab(noise=0.03, seed=seed, n=31)
        curve = fitted(RunEntry(lab.write(tmp_path / "a.csv")), law="intermediate")
        low, high = band(curve, loading, draws=100)
        inside.append((low <= truth) & (truth <= high))
    assert 0.8 < np.mean(inside) < 0.99


def test_spread_between_lots(curve: Curve) -> None:
    spread = lot_spread(curve)
    assert spread is not None
    assert spread.lots == 3
    rho, kappa = np.log(list(LOTS.values())).T
    assert spread.log_resistance == pytest.approx(np.std(rho, ddof=1), abs=0.02)
    assert spread.log_fouling == pytest.approx(np.std(kappa, ddof=1), abs=0.02)


def test_runs_left_out_are_foretold_best_by_the_true_law(tmp_path: Path) -> None:
    runs = [RunEntry(Lab(noise=0.01, seed=seed).write(tmp_path / f"{seed}.csv"), lot="a") for seed in range(3)]
    errors = left_out_errors(fitted(*runs))
    assert errors["intermediate"] < 0.012
    assert errors["intermediate"] <= min(errors.values()) * 1.01
    assert errors["complete"] > 0.05
    assert left_out_errors(fitted(*runs[:2])) == {}


def test_a_given_curve_has_nothing_to_draw_from() -> None:
    class Tested:
        loading, flux, temperature = 120.0, 180.0, None

    spec = Spec(law="cake", parameters={"R0": 1e-3, "k": 0.01}, tested=Tested())
    curve = fit_curve(MediumEntry(spec))  # type: ignore[arg-type]
    with pytest.raises(ValueError, match="was given by its parameters"):
        bootstrap(curve)
    assert lot_spread(curve) is None
    assert left_out_errors(curve) == {}
