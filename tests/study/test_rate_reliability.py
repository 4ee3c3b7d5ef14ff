"""The chance of finishing, and ratings on a reliability basis."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

import trainopt
from tests.study.trains import random_case
from trainopt.files import FeedVariability, ReliabilityBasis
from trainopt.optimize.design import fit_curves
from trainopt.study.audit import audit_case
from trainopt.study.installed import fixed_train
from trainopt.study.rate import chance_of_finishing, sampled_train, train_of


def varied(case: trainopt.Case, basis: object, fouling: float = 0.25, factor: float = 1.0) -> trainopt.Case:
    update = {"basis": basis, "feed_variability": FeedVariability(fouling=fouling), "safety_factor": factor}
    scenario = case.scenario.model_copy(update=update)
    scenario.__pydantic_private__ = case.scenario.__pydantic_private__
    return replace(case, scenario=scenario)


def test_the_chance_is_the_share_of_lots_that_pass_alone(harvest: trainopt.Case):
    case = varied(harvest, "worst-lot")
    curves = fit_curves(case)
    bought, _ = train_of(case, True)
    sampled = sampled_train(case, curves, bought, 1.0)
    assert sampled is not None
    few = sampled.with_curves(lambda one: one.curves[:60], sampled.problem.lots[:60])
    for volume in (2000.0, 2400.0, 2600.0):
        alone = [bool(few.for_lot(lot).passes(np.array([volume]))[0]) for lot in range(60)]
        assert chance_of_finishing(few, volume).share == pytest.approx(np.mean(alone))
    shares = [chance_of_finishing(sampled, volume).share for volume in (1500.0, 2200.0, 2600.0, 3200.0)]
    assert shares == sorted(shares, reverse=True)
    assert shares[0] > 0.9 > 0.5 > shares[-1]


def test_the_design_for_a_reliability_rates_at_its_batch(harvest: trainopt.Case):
    case = varied(harvest, ReliabilityBasis(reliability=0.9, samples=100, seed=4))
    rating = trainopt.rate(case, designed=True)
    assert rating.status == "passes"
    assert rating.lots == ()
    assert rating.chance is not None
    assert rating.chance.share > 0.8
    assert rating.largest_volume >= rating.volume
    bought, _ = train_of(case, True)
    train = fixed_train(case, fit_curves(case), bought, 1.0)
    at = np.array([rating.largest_volume, rating.largest_volume * 1.0001])
    assert train.passes(at).tolist() == [True, False]
    # The number of lots that pass is the one that the basis asks for.
    passing = train.lots_passing(at).sum(axis=0)
    assert passing[0] >= 90 > passing[1] or not train.inside_caps(at)[1]


def test_where_nothing_varies_there_is_no_chance_to_give(harvest: trainopt.Case):
    rating = trainopt.rate(random_case(3), designed=True)
    assert rating.chance is None or 0.0 <= rating.chance.share <= 1.0
    assert trainopt.rate(varied(harvest, "worst-lot"), designed=True).chance is not None


def test_courses_on_a_reliability_basis_are_of_lots_that_hold(harvest: trainopt.Case):
    case = varied(harvest, ReliabilityBasis(reliability=0.9, samples=60, seed=4))
    course = trainopt.simulate(case, designed=True)
    assert course.over_run == 0.0
    for block in course.blocks:
        assert 2 <= len(block.lots) <= 6
        for lot in block.lots:
            assert lot.course.total.max() <= block.limit * (1.0 + 1e-6)


def test_audit_works_on_a_reliability_basis(harvest: trainopt.Case):
    case = varied(harvest, ReliabilityBasis(reliability=0.9, samples=40, seed=4))
    audited = audit_case(case)
    assert audited.verdict
    assert audited.waste is None
