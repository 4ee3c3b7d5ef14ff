"""The course of a batch against an integrator of ordinary differential equations, and what must stay continuous."""

from __future__ import annotations

import json
import math

import numpy as np
import pytest
from scipy.integrate import quad, solve_ivp

import trainopt
from tests.study.trains import random_case
from trainopt.curves.curve import LotCurve
from trainopt.optimize.design import fit_curves
from trainopt.report.json import dumps
from trainopt.report.study_csv import simulate_csv
from trainopt.report.study_json import simulate_document
from trainopt.report.study_text import simulate_text
from trainopt.study.installed import fixed_train
from trainopt.study.rate import train_of
from trainopt.study.simulate import MODES, march_stages
from trainopt.train.march import MarchStage, constant_pressure, flow_then_pressure

STAGES = [
    MarchStage("first", LotCurve("intermediate", (0.0008, 0.012)), 12.0),
    MarchStage("second", LotCurve("cake-complete", (0.0011, 0.004, 0.0035), 1.1, 1.2), 15.0),
    MarchStage("third", LotCurve("standard", (0.0006, 0.002)), 6.0),
]
LINE, STATIC = 0.00002, 0.05


def resistance(volume: float) -> float:
    """bar/(L/h) of all stages and the line, in series."""
    return sum(float(s.curve.resistance(volume / s.area)) / s.area for s in STAGES) + LINE


def test_constant_pressure_is_the_ode():
    pressure, volume = 1.5, 2000.0
    course = constant_pressure(STAGES, volume, pressure, LINE, STATIC)
    end = float(course.time[-1])
    ode = solve_ivp(
        lambda _, v: [(pressure - STATIC) / resistance(v[0])],
        (0.0, end),
        [0.0],
        rtol=1e-11,
        atol=1e-9,
        t_eval=course.time,
    )
    assert ode.y[0] == pytest.approx(course.volume, rel=1e-8, abs=1e-6)
    assert course.total == pytest.approx(np.full(len(course.time), pressure), rel=1e-12)


def test_flow_then_pressure_is_the_ode_and_continuous():
    pressure, volume, flow = 1.2, 2000.0, 1500.0

    def rate(_: float, v: list[float]) -> list[float]:
        return [min(flow, (pressure - STATIC) / resistance(v[0]))]

    course = flow_then_pressure(STAGES, volume, flow, pressure, LINE, STATIC)
    met = course.handover
    assert met is not None
    assert 0.0 < met < volume
    ode = solve_ivp(
        rate, (0.0, float(course.time[-1])), [0.0], rtol=1e-10, atol=1e-8, max_step=0.002, t_eval=course.time
    )
    assert ode.y[0] == pytest.approx(course.volume, rel=1e-6, abs=1e-4)
    # At the hand-over: one volume, the pressure just at its limit, the flow unbroken.
    place = int(np.searchsorted(course.volume, met))
    assert course.volume[place] == pytest.approx(met, rel=1e-12)
    assert course.total[place] == pytest.approx(pressure, rel=1e-9)
    assert course.flow[place] == pytest.approx(flow, rel=1e-9)
    assert np.all(np.diff(course.time) > 0.0)
    assert np.all(np.diff(course.volume) > 0.0)
    assert np.abs(np.diff(course.total)).max() < 0.05


def test_volume_balance():
    # What has flowed by any point, ∫ Q dt = ∫ Q·(dt/dV) dV, is the volume there: with dt/dV from the resistances alone.
    pressure, volume, flow = 1.2, 2000.0, 1500.0
    course = flow_then_pressure(STAGES, volume, flow, pressure, LINE, STATIC)
    met = course.handover
    after = met / flow + quad(lambda v: resistance(v) / (pressure - STATIC), met, volume, epsabs=0.0, epsrel=1e-12)[0]
    assert course.time[-1] == pytest.approx(after, rel=1e-9)
    assert course.volume[-1] == pytest.approx(volume, rel=1e-12)
    first = course.volume <= met
    assert course.volume[first] == pytest.approx(flow * course.time[first], rel=1e-9)
    for k, stage in enumerate(STAGES):
        assert course.loading[k] * stage.area == pytest.approx(course.volume, rel=1e-12)


@pytest.mark.parametrize("mode", MODES)
def test_the_demo_in_every_mode(harvest: trainopt.Case, mode: str):
    found = trainopt.simulate(harvest, mode, designed=True, safety_factor=1.6)
    assert [block.mode for block in found.blocks] == [mode] * 2
    curves = fit_curves(harvest)
    bought, _ = train_of(harvest, True)
    train = fixed_train(harvest, curves, bought, 1.6)
    for b, block in enumerate(found.blocks):
        for k, lot in enumerate(block.lots):
            course, stages = lot.course, march_stages(train, b, k)
            own = [float(s.curve.resistance(2000.0 / s.area)) / s.area * course.flow[-1] for s in stages]
            assert course.pressure[:, -1] == pytest.approx(own, rel=1e-12)
            assert course.total[-1] == pytest.approx(sum(own) + course.line[-1] + block.static, rel=1e-12)
            if mode != "constant-flow":
                assert course.total.max() <= block.limit * (1 + 1e-9)
            assert lot.needed == pytest.approx(float(course.time[-1]))
            assert lot.over_run == pytest.approx(max(0.0, lot.needed - block.time), abs=1e-9)


def test_the_pressure_limit_is_met_where_it_is_said(harvest: trainopt.Case):
    flow = trainopt.simulate(harvest, "constant-flow", designed=True, safety_factor=1.6)
    held = trainopt.simulate(harvest, "flow-then-pressure", designed=True, safety_factor=1.6)
    for one, other in zip(flow.blocks, held.blocks, strict=True):
        for a, b in zip(one.lots, other.lots, strict=True):
            assert a.limit_volume == b.limit_volume
            if a.limit_volume is None:
                assert a.course.total.max() <= one.limit
                assert b.over_run == 0.0
            else:
                at = np.interp(a.limit_volume, a.course.volume, a.course.total)
                assert at == pytest.approx(one.limit, rel=1e-3)
                assert b.over_run > 0.0
    assert flow.over_run == 0.0
    assert held.over_run > 0.0
    assert held.needed > held.time
    assert "more than allowed" in simulate_text(held)


def test_a_designed_train_keeps_its_limits_at_its_own_derating(harvest: trainopt.Case, harvest_cost: trainopt.Case):
    for case in (harvest, harvest_cost):
        found = trainopt.simulate(case, designed=True, safety_factor=case.scenario.safety_factor)
        for block in found.blocks:
            assert all(lot.limit_volume is None for lot in block.lots)


def test_a_train_far_too_small_still_has_a_course(harvest: trainopt.Case):
    found = trainopt.simulate(harvest, "constant-pressure", designed=True, volume=60_000.0)
    assert found.volume == 60_000.0
    assert found.needed > found.time
    document = json.loads(dumps(simulate_document(found)))
    assert document["schema"] == "trainopt.simulate/1"
    assert document["volume_L"] == 60_000.0


def test_turbidity_is_what_bench_runs_read(harvest: trainopt.Case):
    found = trainopt.simulate(harvest, designed=True)
    curve = fit_curves(harvest)["oat-coarse"]
    readings = [p for p in curve.points if p.turbidity is not None and p.excluded is None]
    (primary,) = [lot.turbidity["primary"] for lot in found.blocks[0].lots[:1]]
    loading = found.blocks[0].lots[0].course.loading[0]
    known = np.isfinite(primary)
    assert known.any()
    assert loading[known].max() <= max(p.loading for p in readings)
    assert np.nanmax(primary) <= max(p.turbidity for p in readings)


def test_csv_holds_every_reading(harvest: trainopt.Case):
    found = trainopt.simulate(harvest, designed=True, points=11)
    lines = simulate_csv(found).splitlines()
    assert len(lines) == 1 + 2 * 3 * 11
    heading, first = lines[0].split(","), lines[1].split(",")
    assert len(first) == len(heading)
    row = dict(zip(heading, lines[11].split(","), strict=True))
    assert float(row["volume (L)"]) == pytest.approx(2000.0)
    assert float(row["primary loading (L/m2)"]) == pytest.approx(found.blocks[0].lots[0].course.loading[0, -1])
    assert row["membrane pressure (bar)"] == ""


def test_an_unknown_mode(harvest: trainopt.Case):
    with pytest.raises(ValueError, match="expected one of constant-flow"):
        trainopt.simulate(harvest, "constant-speed", designed=True)


def test_a_batch_that_plugs_is_said():
    # Curves with a pole: past it nothing flows, and no time is long enough.
    found = trainopt.simulate(random_case(23), "constant-pressure", designed=True, volume=20_000.0)
    assert math.isinf(found.needed)
    assert "plugs" in simulate_text(found)
    document = json.loads(dumps(simulate_document(found)))
    assert document["needed_h"] is None
    assert "inf" not in simulate_csv(found)
