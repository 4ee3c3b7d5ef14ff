"""Rating a train against a published scale-up, and against common practice."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

import trainopt
from trainopt.files import Case, Installed, Workspace, set_field
from trainopt.files.catalog import Catalog
from trainopt.files.medium import Medium
from trainopt.files.scenario import Scenario
from trainopt.optimize.design import fit_curves
from trainopt.study.installed import fixed_train
from trainopt.study.rate import rate_train

# C. J. Geankoplis, Transport Processes and Unit Operations, Ex. 14.2-1 and 14.2-2 (read in a public copy): calcium
# carbonate slurry at 338 kPa on 0.0439 m2 of cloth obeys t = Kp/2·V² + B·V with the printed graphical constants below.
BENCH_AREA_M2 = 0.0439
PRESSURE_BAR = 3.38
KP_S_PER_M6 = 6.00e6
B_S_PER_M3 = 6400.0
FRAME_M2 = 0.873
BATCH_L = 3370.0
PRINTED_S = 269.7


def filter_press(frames: int, time_s: float) -> Case:
    """The plant filter of the example: frames of one size at constant pressure, a cake on a cloth."""
    resistance = PRESSURE_BAR * B_S_PER_M3 * BENCH_AREA_M2 / 3.6e6  # bar/LMH
    cake = PRESSURE_BAR * KP_S_PER_M6 * BENCH_AREA_M2**2 / 3.6e9  # bar/LMH per L/m2
    medium = Medium.model_validate(
        {
            "medium": "cloth",
            "curve": {"law": "cake", "parameters": {"R0": resistance, "k": cake / resistance},
                      "tested": {"loading": 400.0, "flux": 1e6}},
            "limits": {},
        }
    )  # fmt: skip
    frame = {"medium": "cloth", "area": FRAME_M2, "price": 1.0, "max_count": 60}
    catalog = Catalog.model_validate({"modules": {"frame": frame}})
    scenario = Scenario.model_validate(
        {
            "scenario": "plant filter",
            "batch": {"volume": BATCH_L, "time": time_s / 3600.0},
            "blocks": (
                {"block": "press", "pressure": PRESSURE_BAR, "operation": "constant-pressure",
                 "stages": ({"stage": "frames", "media": ("cloth",)},)},
            ),
            "installed": {"frames": Installed(module="frame", count=frames)},
        }
    )  # fmt: skip
    return Case(Workspace(Path(), catalog, {"cloth": medium}), scenario)


def test_twenty_frames_take_the_printed_time():
    # Printed 269.7 s with rounded constants (Kp 37.93, B 16.10); 269.6 s computed from them.
    rating = trainopt.rate(filter_press(20, 300.0))
    assert rating.shortest_time * 3600.0 == pytest.approx(PRINTED_S, abs=0.15)
    assert rating.status == "passes"


def test_the_largest_batch_in_the_printed_time_is_the_printed_volume():
    rating = trainopt.rate(filter_press(20, PRINTED_S))
    assert rating.largest_volume == pytest.approx(BATCH_L, rel=5e-4)
    assert rating.limited_by == "press: pressure"


def test_one_frame_fewer_misses_it():
    # Computed from the printed constants: 19 frames take 296 s.
    rating = trainopt.rate(filter_press(19, PRINTED_S))
    assert rating.status == "fails"
    assert rating.shortest_time * 3600.0 == pytest.approx(296.0, abs=0.6)


def test_the_course_ends_when_the_example_says():
    found = trainopt.simulate(filter_press(20, PRINTED_S))
    assert found.needed * 3600.0 == pytest.approx(PRINTED_S, abs=0.15)


def test_a_rating_scales_with_volume_and_area():
    # Twice the frames put twice the batch through in the same time.
    one, two = filter_press(20, PRINTED_S), filter_press(40, PRINTED_S)
    assert trainopt.rate(two).largest_volume == pytest.approx(2.0 * trainopt.rate(one).largest_volume, rel=1e-12)


@pytest.mark.parametrize("factor", [1.5, 1.6])
def test_derating_by_the_usual_factor_is_that_much_less_loading(factor: float):
    # Common practice, no source: a safety factor of 1.5 to 1.6 divides the area. A batch smaller by the factor on areas
    # divided by it is the same loading, so that the pressure is the same where no time is short.
    case = filter_press(20, PRINTED_S)
    curves = fit_curves(case)
    bought = {"frames": ("frame", 20)}
    plain = rate_train(case, curves, fixed_train(case, curves, bought, 1.0))
    smaller = set_field(case, "batch.volume", BATCH_L / factor)
    derated = rate_train(smaller, curves, fixed_train(smaller, curves, bought, factor))
    assert derated.largest_volume * factor == pytest.approx(plain.largest_volume, rel=1e-9)
    assert derated.safety_factor == pytest.approx(factor * plain.safety_factor, rel=1e-9)
    assert replace(derated, batches=()).derated_by == factor
