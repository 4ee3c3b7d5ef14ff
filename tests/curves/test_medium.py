"""The curve of a medium, from files: law, lots, tested range, turbidity endpoint, temperature, refusals."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import brentq

from tests.bench.lab import AREA, Lab, Limits, MediumEntry, RunEntry, Spec, fitted, write_rows
from trainopt.curves.laws import LAWS
from trainopt.curves.medium import fit_curve
from trainopt.curves.viscosity import water_viscosity
from trainopt.errors import InputError

LOTS = {"a": (0.95, 0.93), "b": (1.05, 1.12), "c": (1.0, 0.96)}


def three_lots(tmp_path: Path, **settings: object) -> tuple[RunEntry, ...]:
    entries = []
    for seed, (lot, (rho, kappa)) in enumerate(LOTS.items()):
        lab = Lab(rho=rho, kappa=kappa, noise=0.01, seed=seed, **settings)  # type: ignore[arg-type]
        entries.append(RunEntry(lab.write(tmp_path / f"{lot}.csv"), lot=lot))
    return tuple(entries)


def pressure_run(path: Path, law: str, p: tuple[float, ...], pressure: float, reach: float, n: int = 40) -> Path:
    """A constant-pressure run of known law: minutes and grams of water."""
    end = LAWS[law].integral(reach, *p) / pressure
    rows = [["time (min)", "mass (g)"]]
    for time in np.linspace(0.0, end, n):
        target = pressure * time
        loading = brentq(lambda l, y=target: LAWS[law].integral(l, *p) - y, 0.0, reach * 1.001) if time else 0.0
        rows.append([f"{time * 60.0:.8f}", f"{loading * AREA * 1000.0:.7f}"])
    return write_rows(path, rows)


def test_known_curve_is_found_from_files(tmp_path: Path) -> None:
    curve = fitted(*three_lots(tmp_path))
    assert curve.law == "intermediate"
    assert list(curve.parameters) == ["R0", "k"]
    mean = np.exp(np.mean(np.log(list(LOTS.values())), axis=0))
    for name, value in (("R0", 1e-3 * mean[0]), ("k", 0.012 * mean[1])):
        estimate = curve.parameters[name]
        assert estimate.se is not None
        assert abs(estimate.value - value) < 3.0 * estimate.se
    for lot, (rho, kappa) in LOTS.items():
        assert curve.lots[lot].resistance == pytest.approx(rho / mean[0], rel=0.01)
        assert curve.lots[lot].fouling == pytest.approx(kappa / mean[1], rel=0.01)
    assert curve.alternatives[0].law == "intermediate"
    assert sum(one.weight for one in curve.alternatives) == pytest.approx(1.0)
    assert curve.tested_flux == pytest.approx(150.0, rel=1e-3)
    assert curve.source == "runs"
    assert len(curve.points) == 3 * 61


def test_order_of_runs_does_not_matter(tmp_path: Path) -> None:
    runs = three_lots(tmp_path)
    one, other = fitted(*runs), fitted(*runs[::-1])
    assert one.parameters == other.parameters
    assert one.lots == other.lots


def test_tested_loading_is_never_beyond_what_was_run_or_seen(tmp_path: Path) -> None:
    """The slow-fouling lot went to 150 L/m², which is κ·150 of the shared shape."""
    runs = (
        RunEntry(Lab(kappa=0.8, noise=0.01).write(tmp_path / "a.csv"), lot="a"),
        RunEntry(Lab(kappa=1.25, reach=90.0, noise=0.01, seed=1).write(tmp_path / "b.csv"), lot="b"),
    )
    curve = fitted(*runs, law="intermediate")
    seen = max(curve.lots["a"].fouling * 150.0, curve.lots["b"].fouling * 90.0)
    assert curve.tested_loading == pytest.approx(min(150.0, seen))
    assert curve.tested_loading < 130.0


def test_a_slow_lot_may_run_past_the_pole_of_the_pooled_curve(tmp_path: Path) -> None:
    """It is loaded to 190 L/m², the pooled complete law ends at 182: both stay finite where they are used."""
    law = {"law": "complete", "parameters": (1e-3, 0.0055), "noise": 0.01}
    slow, fast = Lab(kappa=0.8, reach=190.0, **law), Lab(kappa=1.25, reach=120.0, seed=1, **law)  # type: ignore[arg-type]
    runs = [RunEntry(lab.write(tmp_path / f"{lot}.csv"), lot=lot) for lab, lot in ((slow, "a"), (fast, "b"))]
    curve = fitted(*runs)
    assert curve.law == "complete"
    assert curve.tested_loading == pytest.approx(0.8 * 190.0, rel=0.02)
    assert np.isfinite(curve.lot_curve().resistance(curve.tested_loading))
    assert curve.lot_curve().pole < 190.0


def test_a_lot_that_was_not_run_gets_the_worst_of_both(tmp_path: Path) -> None:
    curve = fitted(*three_lots(tmp_path))
    unknown = curve.lot_curve("z")
    assert unknown.resistance_factor == max(lot.resistance for lot in curve.lots.values())
    assert unknown.fouling_factor == max(lot.fouling for lot in curve.lots.values())
    pooled = curve.lot_curve(None, viscosity_ratio=1.2)
    assert (pooled.resistance_factor, pooled.fouling_factor) == (1.2, 1.0)


def test_turbidity_limit_is_interpolated_and_the_least_over_runs(tmp_path: Path) -> None:
    runs = three_lots(tmp_path)
    # 1 + 8·(l/150)³ reaches 4 NTU where (l/150)³ = 3/8; readings are 15 L/m² apart.
    exact = 150.0 * (3.0 / 8.0) ** (1.0 / 3.0)
    loading = fitted(*runs, limits=Limits(turbidity=4.0)).turbidity_loading
    assert loading == pytest.approx(exact, abs=1.0)
    assert fitted(*runs, limits=Limits(turbidity=40.0)).turbidity_loading is None
    assert fitted(*runs).turbidity_loading is None
    # The pool's turbidity, 1 + 2·(l/150)³, reaches 2 NTU where (l/150)³ = 1/2.
    pooled = fitted(*runs, limits=Limits(pool_turbidity=2.0)).turbidity_loading
    assert pooled == pytest.approx(150.0 * 0.5 ** (1.0 / 3.0), abs=1.5)


def test_runs_at_two_temperatures_meet_at_one(tmp_path: Path) -> None:
    """The cold run resists more in proportion to the viscosity of water; at one temperature both agree."""
    ratio = water_viscosity(8.0) / water_viscosity(20.0)
    warm, cold = Lab(), Lab(rho=ratio)
    runs = (
        RunEntry(warm.write(tmp_path / "warm.csv"), lot="a", temperature=20.0),
        RunEntry(cold.write(tmp_path / "cold.csv"), lot="a", temperature=8.0),
    )
    curve = fitted(*runs, law="intermediate")
    assert curve.tested_temperature == 14.0
    expected = 1e-3 * water_viscosity(14.0) / water_viscosity(20.0)
    assert curve.parameters["R0"].value == pytest.approx(expected, rel=1e-5)
    missing = fitted(runs[0], replace(runs[1], temperature=None), law="intermediate")
    assert "temperature-missing" in [flag.code for flag in missing.flags]


@pytest.mark.parametrize("law", ["cake", "intermediate", "standard", "complete", "cake-complete"])
def test_both_kinds_of_run_in_one_fit(tmp_path: Path, law: str) -> None:
    p = (1e-3, 0.006) if law != "cake-complete" else (1e-3, 0.01, 0.004)
    flow = RunEntry(Lab(law=law, parameters=p, reach=110.0).write(tmp_path / "flow.csv"), lot="a")
    pressure = RunEntry(
        pressure_run(tmp_path / "pressure.csv", law, p, 0.4, 120.0),
        lot="a", operation="constant-pressure", pressure=0.4, density=1.0,
    )  # fmt: skip
    alone = fitted(pressure, law=law)
    both = fitted(flow, pressure, law=law)
    for curve in (alone, both):
        np.testing.assert_allclose([e.value for e in curve.parameters.values()], p, rtol=1e-3)


def test_any_flow_history_by_the_integral(tmp_path: Path) -> None:
    """Pressure and flow both wander; ∫ΔP dt = S(l) holds all the same."""
    p = (1e-3, 0.02)
    time = np.linspace(0.0, 1.0, 401)
    flux = 120.0 * (1.0 + 0.5 * np.sin(9.0 * time))
    loading = np.concatenate([[0.0], np.cumsum(0.5 * (flux[1:] + flux[:-1]) * np.diff(time))])
    pressure = LAWS["cake"].resistance(loading, *p) * flux
    rows = [["t (h)", "V (mL)", "P (bar)"]]
    rows += [[f"{t:.8f}", f"{l * AREA * 1e3:.8f}", f"{q:.9f}"] for t, l, q in zip(time, loading, pressure, strict=True)]
    curve = fitted(RunEntry(write_rows(tmp_path / "a.csv", rows), operation="constant-pressure"), law="cake")
    np.testing.assert_allclose([e.value for e in curve.parameters.values()], p, rtol=1e-4)


def test_hold_up_shifts_the_start_of_the_integral(tmp_path: Path) -> None:
    """12 mL of buffer leave first, against the clean filter; feed and the integral start after them."""
    p, pressure = (1e-3, 0.006), 0.4
    path = pressure_run(tmp_path / "a.csv", "complete", p, pressure, 110.0, n=200)
    lines = path.read_text().splitlines()
    delay = 0.012 / AREA * p[0] / pressure * 60.0
    body = [line.split(",") for line in lines[1:]]
    shifted = [["0", "0"], *([f"{float(t) + delay:.8f}", f"{float(m) + 12.0:.7f}"] for t, m in body)]
    write_rows(path, [lines[0].split(","), *shifted])
    run = RunEntry(path, operation="constant-pressure", pressure=pressure, density=1.0, hold_up=0.012)
    np.testing.assert_allclose([e.value for e in fitted(run, law="complete").parameters.values()], p, rtol=1e-4)


def test_an_outlier_pulls_little(tmp_path: Path) -> None:
    rows = Lab(noise=0.01, n=61).table()
    clean = fitted(RunEntry(write_rows(tmp_path / "a.csv", rows)), law="intermediate")
    rows[50][2] = f"{float(rows[50][2]) * 3.0:.6f}"
    dirty = fitted(RunEntry(write_rows(tmp_path / "b.csv", rows)), law="intermediate")
    for name, estimate in clean.parameters.items():
        assert estimate.se is not None
        assert abs(dirty.parameters[name].value - estimate.value) < 1.5 * estimate.se
    assert all(point.excluded is None for point in dirty.points)
    [flag] = [flag for flag in dirty.flags if flag.code == "outlier"]
    assert (flag.run, flag.rows) == ("b.csv", (51, 51))
    assert "off the curve; kept, its pull on the fit bounded to" in flag.text
    assert "outlier" not in [flag.code for flag in clean.flags]


def test_a_misread_volume_of_a_pressure_run_is_said(tmp_path: Path) -> None:
    path = pressure_run(tmp_path / "a.csv", "cake", (1e-3, 0.02), 0.4, 110.0)
    lines = path.read_text().splitlines()
    time, mass = lines[20].split(",")
    lines[20] = f"{time},{float(mass) * 1.05:.3f}"
    rng = np.random.default_rng(0)
    noisy = [line.split(",") for line in lines[1:]]
    noisy = [[t, f"{float(m) * (1.0 + 0.001 * rng.standard_normal()):.4f}"] for t, m in noisy]
    write_rows(path, [lines[0].split(","), *noisy])
    run = RunEntry(path, operation="constant-pressure", pressure=0.4, density=1.0)
    [flag] = [flag for flag in fitted(run, law="cake").flags if flag.code == "outlier"]
    assert flag.rows == (21, 21)


def test_auto_refuses_where_laws_fit_alike_but_differ(tmp_path: Path) -> None:
    """A few noisy readings of a filter that hardly fouls say nothing about how it will."""
    refused, decided = 0, 0
    for seed in range(20):
        lab = Lab(noise=0.25, n=8, reach=150.0, seed=seed, turbidity=(1.0, 0.0))
        try:
            fitted(RunEntry(lab.write(tmp_path / f"{seed}.csv")))
            decided += 1
        except InputError as error:
            refused += 1
            text = str(error.problems[0])
            assert text.startswith("medium.yaml:3: curve.law: auto cannot tell between")
            assert "expected a longer run, more readings or a second lot, or one of these laws by name" in text
    assert refused >= 5
    for seed in range(5):
        fitted(RunEntry(Lab(noise=0.01, seed=seed).write(tmp_path / f"{seed}.csv")))


def test_little_fouling_and_early_end_are_said(tmp_path: Path) -> None:
    lab = Lab(parameters=(1e-3, 0.0008), noise=0.005, turbidity=(1.0, 0.0))
    codes = [flag.code for flag in fitted(RunEntry(lab.write(tmp_path / "a.csv"))).flags]
    assert "little-fouling" in codes
    assert "ended-early" in codes


def test_lots_of_a_medium_that_does_not_foul_stay_near_one(tmp_path: Path) -> None:
    """Without fouling nothing tells κ; noise must not make it wild, for a design leans on the worst lot's."""
    for seed in range(10):
        runs = []
        for index, rho in enumerate((0.9, 1.0, 1.1)):
            lab = Lab(parameters=(1e-3, 1e-6), rho=rho, noise=0.03, seed=10 * seed + index, turbidity=(1.0, 0.0))
            runs.append(RunEntry(lab.write(tmp_path / f"{index}.csv"), lot="abc"[index]))
        curve = fitted(*runs, law="intermediate")
        assert all(0.5 < lot.fouling < 2.0 for lot in curve.lots.values())
        assert curve.lots["c"].resistance / curve.lots["a"].resistance == pytest.approx(1.1 / 0.9, rel=0.05)
        assert "lot-fouling-open" in [flag.code for flag in curve.flags]
    assert "lot-fouling-open" not in [flag.code for flag in fitted(*three_lots(tmp_path)).flags]


def test_order_and_constant_trade_off_is_said(tmp_path: Path) -> None:
    curve = fitted(RunEntry(Lab(noise=0.02, n=31).write(tmp_path / "a.csv")), law="hermia")
    [flag] = [flag for flag in curve.flags if flag.code == "n-and-k"]
    assert "n and k trade off" in flag.text


def test_feed_loading_is_carried(tmp_path: Path) -> None:
    runs = [
        replace(run, feed_loading=value) for run, value in zip(three_lots(tmp_path), (120.0, 90.0, None), strict=True)
    ]
    assert fitted(*runs).feed_loading == 90.0
    assert fitted(*three_lots(tmp_path)).feed_loading is None


def test_every_problem_of_every_run_at_once(tmp_path: Path) -> None:
    one = write_rows(tmp_path / "a.csv", [["time (min)", "volume (mL)"], *([str(i), str(i)] for i in range(8))])
    with pytest.raises(InputError) as caught:
        fitted(RunEntry(one), RunEntry(tmp_path / "b.csv"))
    texts = [str(problem) for problem in caught.value.problems]
    assert any("no such file" in text for text in texts)
    assert any("curve.runs.0.file" in text and "no pressure column" in text for text in texts)


def test_too_few_readings_for_a_law(tmp_path: Path) -> None:
    lab = Lab(n=5)
    with pytest.raises(InputError, match="usable readings are too few for law 'cubic'"):
        fitted(RunEntry(lab.write(tmp_path / "a.csv")), law="cubic")


class Tested:
    loading, flux, temperature = 120.0, 180.0, 21.0


class Lot:
    resistance, fouling = 1.1, 1.25


def given(law: str, lots: object = None, **values: object) -> MediumEntry:
    return MediumEntry(Spec(law=law, tested=Tested(), lots=lots, **values))  # type: ignore[arg-type]


def test_a_curve_by_its_parameters() -> None:
    curve = fit_curve(given("intermediate", {"b": Lot()}, parameters={"k": 0.012, "R0": 8e-4}))  # type: ignore[arg-type]
    assert [(name, e.value, e.se) for name, e in curve.parameters.items()] == [
        ("R0", 8e-4, None),
        ("k", 0.012, None),
    ]
    assert (curve.tested_loading, curve.tested_flux, curve.tested_temperature) == (120.0, 180.0, 21.0)
    assert curve.lot_curve("b").resistance(10.0) == pytest.approx(1.1 * 8e-4 * np.exp(0.012 * 12.5))
    assert (curve.source, curve.alternatives, curve.points) == ("parameters", (), ())
    cubic = fit_curve(given("cubic", coefficients=(1e-3, 1e-6, 1e-8, 1e-10)))  # type: ignore[arg-type]
    assert list(cubic.parameters) == ["c0", "c1", "c2", "c3"]


def test_a_given_curve_must_be_finite_on_its_tested_range() -> None:
    with pytest.raises(InputError, match="expected `tested: loading` below 100 L/m2"):
        fit_curve(given("complete", parameters={"R0": 8e-4, "k": 0.01}))  # type: ignore[arg-type]
    with pytest.raises(InputError, match="is not finite and positive up to the tested loading"):
        fit_curve(given("quadratic", coefficients=(1e-3, -2e-5, 0.0)))  # type: ignore[arg-type]
