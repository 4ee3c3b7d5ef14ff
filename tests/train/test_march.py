"""The march through a batch against a general integrator, and its hand-over from constant flow to constant pressure."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from trainopt.curves.curve import LotCurve
from trainopt.train.march import MarchStage, constant_flow, constant_pressure, end_pressures, flow_then_pressure

STAGES = [
    MarchStage("primary", LotCurve("intermediate", (0.001, 0.008), 1.1, 1.2), 8.0),
    MarchStage("secondary", LotCurve("standard", (0.002, 0.004)), 10.0),
]
VOLUME, FLOW, PRESSURE, LINE, STATIC = 1000.0, 1800.0, 1.2, 2e-5, 0.05


def resistance(volume: float) -> float:
    """R of the whole train, bar/(L/h), written from the laws."""
    coarse = 1.1 * 0.001 * math.exp(0.008 * 1.2 * volume / 8.0) / 8.0
    fine = 0.002 * (1.0 - 0.002 * volume / 10.0) ** -2 / 10.0
    return coarse + fine + LINE


def test_constant_pressure_equals_a_general_integrator() -> None:
    course = constant_pressure(STAGES, VOLUME, PRESSURE, LINE, STATIC)
    end = float(course.time[-1])
    reference = solve_ivp(
        lambda _, v: [(PRESSURE - STATIC) / resistance(float(v[0]))], (0.0, end), [0.0], rtol=1e-11, atol=1e-9
    )
    assert reference.y[0, -1] == pytest.approx(VOLUME, rel=1e-9)
    assert course.total == pytest.approx(np.full(len(course.total), PRESSURE), rel=1e-12)


def test_constant_flow_pressures_follow_from_the_laws() -> None:
    course = constant_flow(STAGES, VOLUME, FLOW, LINE, STATIC)
    expected = [resistance(float(v)) * FLOW + STATIC for v in course.volume]
    assert course.total == pytest.approx(expected, rel=1e-12)
    assert course.inlet[0] == pytest.approx(course.total, rel=1e-12)
    assert course.inlet[1] == pytest.approx(course.total - course.pressure[0], rel=1e-12)


def test_hand_over_keeps_volume_and_pressure_continuous() -> None:
    course = flow_then_pressure(STAGES, VOLUME, FLOW, PRESSURE, LINE, STATIC)
    assert course.handover is not None
    assert resistance(course.handover) * FLOW + STATIC == pytest.approx(PRESSURE, rel=1e-9)
    assert np.diff(course.volume).min() > 0.0
    assert np.abs(np.diff(course.flow)).max() < 30.0
    assert course.total.max() <= PRESSURE * (1.0 + 1e-9)
    # What flowed is what was filtered.
    after = course.volume >= course.handover
    assert course.time[~after][-1] == pytest.approx(course.volume[~after][-1] / FLOW, rel=1e-9)


def test_the_limit_is_never_met_where_pressure_is_plenty() -> None:
    assert flow_then_pressure(STAGES, VOLUME, FLOW, 50.0, LINE, STATIC).handover is None


def test_end_pressures_share_the_total() -> None:
    shares = end_pressures(STAGES, VOLUME, PRESSURE, LINE, STATIC)
    flow = (PRESSURE - STATIC) / resistance(VOLUME)
    assert float(shares.sum()) + LINE * flow == pytest.approx(PRESSURE - STATIC, rel=1e-12)
