"""Rating: the inverse of a design, by lot and by batch, with what limits it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

import trainopt
from tests.study.trains import random_case
from trainopt.errors import InputError
from trainopt.files import Installed, set_field
from trainopt.optimize.design import fit_curves
from trainopt.report.study_json import rate_document
from trainopt.report.study_text import rate_text
from trainopt.study.installed import fixed_train
from trainopt.study.rate import rate_train
from trainopt.train import march


def standing(case: trainopt.Case, picks, **fields: object) -> trainopt.Case:
    """The case with picks installed."""
    installed = {pick.stage: Installed(module=pick.module, count=pick.count) for pick in picks}
    scenario = case.scenario.model_copy(update={"installed": installed, **fields})
    scenario.__pydantic_private__ = case.scenario.__pydantic_private__
    return replace(case, scenario=scenario)


@settings(max_examples=60, deadline=None, derandomize=True)
@given(seed=st.integers(0, 10**6))
def test_rate_and_design_are_inverse(seed: int):
    case = random_case(seed)
    design = trainopt.design(case)
    assume(design.status == "optimal" and bool(design.picks))
    case = standing(case, design.picks)
    factor = case.scenario.safety_factor
    rating = trainopt.rate(case, safety_factor=factor)
    volume = case.scenario.batch.volume
    assert rating.status == "passes"
    assert rating.largest_volume >= volume * (1 - 1e-9)
    assert rating.safety_factor >= factor * (1 - 1e-9)
    assert rating.shortest_time <= case.scenario.batch.time * (1 + 1e-9)
    # One part in ten thousand more than the largest batch does not pass; the largest itself does.
    curves = fit_curves(case)
    train = fixed_train(case, curves, {p.stage: (p.module, p.count) for p in design.picks}, factor)
    largest = rating.largest_volume
    assert train.passes(np.array([largest * (1 - 1e-9), largest * 1.0001])).tolist() == [True, False]
    # And a design for the largest batch needs no more than this train: it is one of the picks that pass.
    more = trainopt.design(set_field(case, "batch.volume", largest * (1 - 1e-9)))
    assert more.status == "optimal"
    if more.objective.kind == "area":
        assert more.area <= design.area * (1 + 1e-9) or more.picks == design.picks


@settings(max_examples=25, deadline=None, derandomize=True)
@given(seed=st.integers(0, 10**6))
def test_the_shortest_time_is_a_batch_time_that_just_passes(seed: int):
    case = random_case(seed)
    design = trainopt.design(case)
    assume(design.status == "optimal" and bool(design.picks))
    case = standing(case, design.picks)
    shortest = trainopt.rate(case).shortest_time
    assert trainopt.rate(set_field(case, "batch.time", shortest * (1 + 1e-9))).status == "passes"
    assert trainopt.rate(set_field(case, "batch.time", shortest * (1 - 1e-6))).status == "fails"


def test_the_designed_demo(harvest: trainopt.Case):
    rating = trainopt.rate(harvest, [1000.0, 2000.0, 3000.0], designed=True)
    design = trainopt.design(harvest)
    assert rating.picks == design.picks
    assert rating.derated_by == harvest.scenario.safety_factor
    for ours, theirs in zip(rating.blocks, design.blocks, strict=True):
        assert ours.time == pytest.approx(theirs.time, rel=1e-9)
        assert ours.pressure.spare == pytest.approx(theirs.pressure.spare, abs=1e-9)
    assert [batch.passes for batch in rating.batches] == [True, True, False]
    assert rating.batches[1].shortest_time == rating.shortest_time
    assert rating.batches[1].safety_factor == rating.safety_factor
    # The worst lot is what the rating is held to; no other may do less.
    assert min(lot.largest_volume for lot in rating.lots) == pytest.approx(rating.largest_volume, rel=1e-9)
    assert max(lot.shortest_time for lot in rating.lots) >= rating.shortest_time * (1 - 1e-9)
    text = rate_text(rating, "psi")
    assert "The train passes" in text
    assert max(map(len, text.splitlines())) <= 100


def test_pressures_by_lot_are_those_of_the_march(harvest: trainopt.Case):
    rating = trainopt.rate(harvest, designed=True)
    curves = fit_curves(harvest)
    train = fixed_train(harvest, curves, {p.stage: (p.module, p.count) for p in rating.picks}, rating.derated_by)
    for lot, rated in enumerate(rating.lots):
        for b, block in enumerate(train.problem.blocks):
            stages = [
                march.MarchStage(c.stage.name, c.candidate.curves[lot], float(c.candidate.options.area[0]) / 1.5)
                for c in train.route[b]
            ]
            flow = rating.volume / rating.blocks[b].time
            course = march.constant_flow(stages, rating.volume, flow, block.line, block.static)
            assert rated.pressures[b] == pytest.approx(float(course.total[-1]), rel=1e-9)


def test_as_installed_nothing_is_derated(harvest: trainopt.Case):
    design = trainopt.design(harvest)
    case = standing(harvest, design.picks)
    bare, derated = trainopt.rate(case), trainopt.rate(case, safety_factor=1.5)
    assert (bare.derated_by, derated.derated_by) == (1.0, 1.5)
    assert bare.largest_volume > derated.largest_volume
    assert bare.safety_factor == pytest.approx(derated.safety_factor, rel=1e-9)


def test_a_train_that_fails_is_an_answer(harvest: trainopt.Case):
    design = trainopt.design(harvest)
    fewer = [replace(pick, count=max(1, pick.count // 2)) for pick in design.picks]
    rating = trainopt.rate(standing(harvest, fewer), safety_factor=1.5)
    assert rating.status == "fails"
    assert rating.largest_volume < 2000.0
    assert "The train fails" in rate_text(rating)
    document = rate_document(rating)
    assert document["status"] == "fails"


@pytest.mark.parametrize(
    ("path", "value", "limit"),
    [
        ("media.quill-02.limits.flux", 20.0, "membrane: flux"),
        ("media.quill-02.limits.differential_pressure", 0.2, "membrane: differential-pressure"),
        ("media.rye-fine.limits.loading", 20.0, "secondary: loading-limit"),
        ("guard.pump.max_flow", 300.0, "guard: pump"),
        ("guard.pump.min_flow", 1500.0, "guard: pump-least-flow"),
    ],
)
def test_what_limits_the_largest_batch(harvest: trainopt.Case, path: str, value: float, limit: str):
    design = trainopt.design(harvest)
    case = set_field(standing(harvest, design.picks), path, value)
    assert trainopt.rate(case, safety_factor=1.5).limited_by == limit


def test_the_document_is_the_contracts(harvest: trainopt.Case):
    document = rate_document(trainopt.rate(harvest, designed=True))
    wanted = {"schema", "status", "volume_L", "time_h", "largest_volume_L", "shortest_time_h", "safety_factor",
              "limited_by", "blocks", "lots"}  # fmt: skip
    assert wanted <= set(document)
    assert document["schema"] == "trainopt.rate/1"
    assert {"lot", "largest_volume_L", "shortest_time_h"} <= set(document["lots"][0])
    assert document["blocks"][0]["stages"][0]["module"] == "oat-coarse-09"


def test_nothing_installed_is_said(harvest: trainopt.Case):
    with pytest.raises(InputError, match="'installed' is missing"):
        trainopt.rate(harvest)


def test_no_design_to_rate_is_said(harvest: trainopt.Case):
    with pytest.raises(InputError, match="no design exists"):
        trainopt.rate(set_field(harvest, "batch.volume", 9000.0), designed=True)


def test_derating_alone_is_what_rate_data_say(harvest: trainopt.Case):
    # The largest derating is where the train just passes.
    case = standing(harvest, trainopt.design(harvest).picks)
    curves = fit_curves(case)
    bought = {p.stage: (p.module, p.count) for p in trainopt.design(harvest).picks}
    most = rate_train(case, curves, fixed_train(case, curves, bought, 1.0)).safety_factor
    assert rate_train(case, curves, fixed_train(case, curves, bought, most * (1 - 1e-9))).status == "passes"
    assert rate_train(case, curves, fixed_train(case, curves, bought, most * (1 + 1e-6))).status == "fails"
