"""Printed bench examples through the reader and fit that a user's file goes through."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from tests.bench.lab import RunEntry, fitted, reduced

HERE = Path(__file__).parent
HOUR = 3600.0


def constants(run: RunEntry) -> tuple[float, float]:
    """Kp in s/m⁶ and B in s/m³ of t = Kp/2·V² + B·V, from the cake law fitted to the run.

    ∫ΔP dt = ΔP·t = R0·(l + k·l²/2) with l = V/A.
    """
    curve = fitted(run, law="cake")
    r0, k = (estimate.value for estimate in curve.parameters.values())
    per_cubic_meter = 1000.0 / run.area
    assert run.pressure is not None
    return r0 * k * per_cubic_meter**2 / run.pressure * HOUR, r0 * per_cubic_meter / run.pressure * HOUR


CALCIUM_CARBONATE = RunEntry(
    HERE / "test_bench_calcium_carbonate.csv", operation="constant-pressure", area=0.0439, pressure=3.38
)
"""Geankoplis, Transport Processes and Unit Operations, Ex. 14.2-1 to 14.2-3: data and answers as printed."""


def test_calcium_carbonate_slurry_at_constant_pressure() -> None:
    """Printed, by graph: Kp 6.00e6 s/m⁶ and B 6400 s/m³.

    Estimator here: ln ∫ΔP dt, weighted by the steps of the volume (1 mL) and the clock (0.1 s), with
    bounded pull.
    """
    kp, b = constants(CALCIUM_CARBONATE)
    assert kp == pytest.approx(6.00e6, rel=0.005)
    assert b == pytest.approx(6400.0, rel=0.005)


def test_specific_resistances_of_the_slurry() -> None:
    """Printed (memory): cake 1.863e11 m/kg, medium 10.63e10 1/m; with μ 8.937e-4 Pa·s, 23.47 kg/m³, 338
    kPa.
    """
    kp, b = constants(CALCIUM_CARBONATE)
    area, pressure, viscosity, solids = 0.0439, 338e3, 8.937e-4, 23.47
    assert kp * area**2 * pressure / (viscosity * solids) == pytest.approx(1.863e11, rel=0.005)
    assert b * area * pressure / viscosity == pytest.approx(10.63e10, rel=0.005)


def test_scale_up_of_the_slurry_to_a_plate_and_frame_press() -> None:
    """Printed: 20 frames of 0.873 m² pass 3.37 m³ in 269.7 s; 19 frames take 296 s (computed from the same
    constants).
    """
    curve = fitted(CALCIUM_CARBONATE, law="cake").lot_curve()

    def seconds(frames: int) -> float:
        return curve.demand_constant_pressure(3370.0 / (frames * 0.873)) / 3.38 * HOUR

    assert seconds(20) == pytest.approx(269.7, rel=0.003)
    assert seconds(19) == pytest.approx(296.0, rel=0.003)


def test_least_squares_of_the_slurry_on_the_times_that_the_reader_gives() -> None:
    """Computed elsewhere: least squares on t in V², V gives 6.001870e6 and 6361.742, t/V on V 5.769911e6
    and 6783.753.
    """
    run = reduced(CALCIUM_CARBONATE.file, operation="constant-pressure", area=0.0439, pressure=3.38)
    v, t = run.volume / 1000.0, run.time * HOUR
    kp, b = np.linalg.lstsq(np.stack([v**2 / 2.0, v], axis=1), t, rcond=None)[0]
    assert (kp, b) == (pytest.approx(6.001870e6, rel=1e-6), pytest.approx(6361.742, rel=1e-6))
    slope, intercept = np.polyfit(v, t / v, 1)
    assert (2.0 * slope, intercept) == (
        pytest.approx(5.769911e6, rel=1e-6),
        pytest.approx(6783.753, rel=1e-6),
    )


WORKSHEET = RunEntry(HERE / "test_bench_worksheet.csv", operation="constant-pressure", area=2.72, pressure=3.0)
"""A printed worksheet at 3 bar; equations of Rushton, Ward & Holdich, Solid–Liquid Filtration, ch. 2
(memory).
"""


def test_worksheet_regression_as_printed() -> None:
    """Printed, regression of t/V on V: slope 14714.417 s/m⁶, intercept 3506.6392 s/m³, R² 0.9943521; and from
    them 5.215e11 m/kg and 2.861e12 1/m with μ 1e-3 Pa·s and 125.24655 kg of dry cake per m³."""
    run = reduced(WORKSHEET.file, operation="constant-pressure", area=2.72, pressure=3.0)
    v, t = run.volume / 1000.0, run.time * HOUR
    slope, intercept = np.polyfit(v, t / v, 1)
    assert slope == pytest.approx(14714.417, abs=0.001)
    assert intercept == pytest.approx(3506.6392, abs=0.0001)
    assert np.corrcoef(v, t / v)[0, 1] ** 2 == pytest.approx(0.9943521, abs=1e-7)
    assert slope * 2.0 * 2.72**2 * 3e5 / (1e-3 * 125.24655) == pytest.approx(5.215e11, rel=1e-4)
    assert intercept * 2.72 * 3e5 / 1e-3 == pytest.approx(2.861e12, rel=2e-4)


def test_worksheet_fit_agrees_with_the_printed_regression() -> None:
    """Same data, our estimator (see above): half of Kp within 2 %, B within 1 %, inside two standard
    errors.
    """
    kp, b = constants(WORKSHEET)
    assert kp / 2.0 == pytest.approx(14714.417, rel=0.02)
    assert b == pytest.approx(3506.6392, rel=0.01)
