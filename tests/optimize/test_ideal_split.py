"""The ideal split against closed forms (models/README.md), a general minimizer, and its own optimality condition."""

from __future__ import annotations

import math
from random import Random

import numpy as np
import pytest
from factory import block, flat, problem, random_law, random_problem, stage
from scipy.optimize import minimize

from trainopt.curves.curve import LotCurve
from trainopt.optimize.describe import block_ideal
from trainopt.optimize.even_split import least_area
from trainopt.optimize.ideal_split import IdealStage, ideal_areas, loading_limit
from trainopt.optimize.ideal_train import ideal_train
from trainopt.optimize.index import index_problem
from trainopt.optimize.search import best_route
from trainopt.optimize.times import Choice

FLAT = "cake"


def flat_stage(resistance: float, weight: float = 1.0, volume: float = 1000.0, most: float = 1e7) -> IdealStage:
    return IdealStage((LotCurve(FLAT, (resistance, 0.0)),), "constant-flow", volume, most, weight)


# --- stages that do not foul: A_i ∝ √(R_i/w_i), total V·(Σ√(R_i·w_i))²/B ---


@pytest.mark.parametrize("weights", [(1.0, 1.0, 1.0), (1.0, 3.0, 0.4)])
def test_flat_stages_follow_the_closed_form(weights: tuple[float, ...]) -> None:
    R, B, V = np.array([1e-3, 4e-3, 2.5e-4]), 3.0, 1000.0
    w = np.array(weights)
    areas = ideal_areas([flat_stage(r, x) for r, x in zip(R, w, strict=True)], B)
    assert areas is not None
    expected = V * math.fsum(np.sqrt(R * w)) / B * np.sqrt(R / w)
    assert np.allclose(areas, expected, rtol=1e-7)
    assert float(w @ np.array(areas)) == pytest.approx(V * math.fsum(np.sqrt(R * w)) ** 2 / B, rel=1e-9)


def test_two_stages_of_one_to_four_waste_a_ninth_by_the_even_split() -> None:
    """n·ΣR/(Σ√R)² = 2·5/9 = 10/9 (Cauchy–Schwarz; derived in models/README.md)."""
    p = problem(block("b", stage("s", flat("u", 1e-3)), stage("t", flat("v", 4e-3))), volume=1000.0, time=4.0)
    even = sum(least_area(p, node, 4.0, 4.0) for node in index_problem(p).nodes)
    best = ideal_areas([flat_stage(1e-3), flat_stage(4e-3)], 8.0)
    assert best is not None
    assert even / sum(best) == pytest.approx(10.0 / 9.0, rel=1e-9)


@pytest.mark.parametrize("n", [2, 3, 5])
def test_one_dominating_stage_wastes_up_to_n(n: int) -> None:
    R = [1.0, *[1e-10] * (n - 1)]
    best = ideal_areas([flat_stage(r) for r in R], 1.0)
    assert best is not None
    even = sum(1000.0 * r * n for r in R)
    assert n * (1 - 1e-4) < even / sum(best) <= n


# --- fouling laws against a general minimizer ---


def test_fouling_stages_match_a_general_minimizer() -> None:
    for seed in range(40):
        r = Random(seed)
        stages = [_random_stage(r, lots=1) for _ in range(r.randint(2, 4))]
        budget = r.uniform(0.1, 3.0)
        areas = ideal_areas(stages, budget)
        assert areas is not None, seed
        assert _spent(stages, np.array(areas)) <= budget * (1 + 1e-9), seed
        value = sum(s.weight * a for s, a in zip(stages, areas, strict=True))
        assert value == pytest.approx(_minimized(stages, budget, np.array(areas)), rel=2e-6), seed


def test_stages_that_no_limit_holds_have_one_marginal() -> None:
    for seed in range(40):
        r = Random(100 + seed)
        stages = [_random_stage(r, lots=1) for _ in range(3)]
        areas = ideal_areas(stages, r.uniform(0.1, 1.5))
        assert areas is not None
        marginals = []
        for s, a in zip(stages, areas, strict=True):
            if s.loading_area / a > s.most * (1 - 1e-6):
                continue
            curve, h = s.curves[0], 1e-5
            low, high = (curve.demand_constant_flow(s.loading_area / (a * f)) for f in (1 + h, 1 - h))
            marginals.append((high - low) / (2 * h * a) / s.weight)
        assert marginals == pytest.approx([marginals[0]] * len(marginals), rel=1e-4) if marginals else True, seed


def test_several_lots_match_a_general_minimizer() -> None:
    mixed = 0
    for seed in range(30):
        r = Random(200 + seed)
        stages = [_random_stage(r, lots=3) for _ in range(r.randint(2, 3))]
        budget = r.uniform(0.1, 0.7) * _spent(stages, np.array([s.loading_area / s.most for s in stages]))
        areas = ideal_areas(stages, budget)
        assert areas is not None, seed
        spent = _each(stages, np.array(areas))
        assert spent.max() <= budget * (1 + 1e-7), seed
        mixed += int((spent > budget * (1 - 1e-4)).sum() > 1)
        value = sum(s.weight * a for s, a in zip(stages, areas, strict=True))
        assert value == pytest.approx(_minimized(stages, budget, np.array(areas)), rel=1e-5), seed
    assert mixed > 3


def test_two_lots_that_each_favor_another_stage_bind_together() -> None:
    """Lot a doubles the first stage's R, lot b the second's: by symmetry both areas are 3·R·V/B."""
    R, V, B = 1e-3, 1000.0, 2.0
    lots = ((2.0, 1.0), (1.0, 2.0))
    curves = [tuple(LotCurve(FLAT, (R, 0.0), rho) for rho in factors) for factors in lots]
    stages = [IdealStage(one, "constant-flow", V, 1e6) for one in curves]
    assert ideal_areas(stages, B) == pytest.approx((3 * R * V / B, 3 * R * V / B), rel=1e-5)


def _random_stage(r: Random, lots: int) -> IdealStage:
    tested = r.uniform(100, 500)
    law, parameters = random_law(r, tested)
    if law == "quadratic":
        parameters = (parameters[0], abs(parameters[1]), parameters[2])  # smooth, for the gradient of the reference
    curves = tuple(
        LotCurve(law, parameters, *((10 ** r.uniform(-0.8, 0.8), r.uniform(0.9, 1.1)) if lots > 1 else ()))
        for _ in range(lots)
    )
    return IdealStage(curves, "constant-flow", r.uniform(300, 2000), tested, r.choice([1.0, r.uniform(0.3, 3.0)]))


def _each(stages: list[IdealStage], areas: np.ndarray) -> np.ndarray:
    return np.array([
        sum(s.curves[k].demand_constant_flow(s.loading_area / a) for s, a in zip(stages, areas.tolist(), strict=True))
        for k in range(len(stages[0].curves))
    ])  # fmt: skip


def _spent(stages: list[IdealStage], areas: np.ndarray) -> float:
    return float(_each(stages, areas).max())


def _minimized(stages: list[IdealStage], budget: float, near: np.ndarray) -> float:
    """The least Σ w·A that SLSQP finds, from three starts away from the answer at hand."""
    w = np.array([s.weight for s in stages])
    least = np.array([s.loading_area / s.most for s in stages])
    best = math.inf
    for factor in (1.02, 1.3, 2.5):
        scale = np.maximum(near * factor, least)
        answer = minimize(
            lambda y, scale=scale: float(w @ (y * scale)) / float(w @ near), np.ones(len(near)), method="SLSQP",
            bounds=[(low, None) for low in (least / scale)],
            constraints=[{"type": "ineq", "fun": lambda y, scale=scale: 1.0 - _each(stages, y * scale) / budget}],
            options={"ftol": 1e-13, "maxiter": 500},
        )  # fmt: skip
        areas = np.maximum(answer.x * scale, least)
        if _spent(stages, areas) <= budget * (1 + 1e-7):
            best = min(best, float(w @ areas))
    return best


# --- limits as lower bounds on the area ---


def test_a_stage_held_by_its_cap_leaves_the_rest_to_the_others() -> None:
    R, B, V = 1e-3, 2.0, 1000.0
    areas = ideal_areas([flat_stage(R, most=100.0), flat_stage(R)], B)
    assert areas is not None
    assert areas == pytest.approx((V / 100.0, V * R / (B - 100.0 * R)), rel=1e-7)


def test_nothing_holds_where_the_budget_is_ample() -> None:
    assert ideal_areas([flat_stage(1e-3, most=50.0), flat_stage(2e-3, most=80.0)], 1e3) == pytest.approx((20.0, 12.5))


def test_no_areas_without_a_budget() -> None:
    assert ideal_areas([flat_stage(1e-3)], 0.0) is None
    assert ideal_areas([], 1.0) is None


def test_rating_bounds_the_loading() -> None:
    assert loading_limit((LotCurve(FLAT, (1e-3, 0.0)),), "constant-flow", 1e6, 0.2) == pytest.approx(200.0, rel=1e-12)


def test_inlet_rating_is_a_budget_of_the_stages_from_there_down() -> None:
    # 1.5 bar·h in all; the second and third stage may spend only 0.4 of it.
    R = (1e-3, 1e-3, 4e-3)
    one = block("b", stage("s", flat("a", R[0])), stage("t", flat("b", R[1], inlet_pressure=0.4)),
                stage("u", flat("c", R[2])), pressure=1.5)  # fmt: skip
    p = problem(one, volume=1000.0, time=1.0)
    chosen = tuple(Choice(s, s.candidates[0], len(s.candidates[0].options) - 1) for s in p.blocks[0].stages)
    areas = block_ideal(p, p.blocks[0], chosen, 1.0)
    assert areas is not None
    tail = 1000.0 * (math.sqrt(R[1]) + math.sqrt(R[2])) / 0.4
    assert areas[1:] == pytest.approx((tail * math.sqrt(R[1]), tail * math.sqrt(R[2])), rel=1e-6)
    assert areas[0] == pytest.approx(1000.0 * R[0] / 1.1, rel=1e-6)


# --- time shared between blocks ---


def test_flat_blocks_share_time_as_one_train() -> None:
    """With t_b = (ΣD + r·V)/P_b the train is one block of demands D/P_b and budget T − Σ r·V/P_b, in hours."""
    R, P, line, V = np.array([1e-3, 3e-3, 8e-4]), np.array([2.0, 2.0, 0.7]), (1e-4, 2e-4), 1000.0
    one = block("a", stage("s", flat("u", R[0])), stage("t", flat("v", R[1])), pressure=2.0, line=line[0], setup=0.4)
    p = problem(one, block("b", stage("w", flat("x", R[2])), pressure=0.7, line=line[1]), volume=V, time=5.0)
    route = tuple(tuple(Choice(s, s.candidates[0], 0) for s in one.stages) for one in p.blocks)
    ideal = ideal_train(p, route)
    assert ideal is not None
    hours = 5.0 - 0.4 - line[0] * V / 2.0 - line[1] * V / 0.7
    expected = V * math.fsum(np.sqrt(R / P)) / hours * np.sqrt(R / P)
    assert ideal.area == pytest.approx(float(expected.sum()), rel=1e-6)
    assert [a for areas in ideal.areas for a in areas] == pytest.approx(expected.tolist(), rel=2e-3)
    assert sum(ideal.times) == pytest.approx(4.6, rel=1e-12)


def test_the_ideal_train_is_never_above_the_optimum_of_whole_modules() -> None:
    seen = 0
    for seed in range(40):
        p = random_problem(seed)
        found = best_route(p)
        if found.route is None or not any(found.route):
            continue
        ideal = ideal_train(p, found.route)
        assert ideal is not None, seed
        picked = [c for choices in found.route for c in choices]
        areas = [a for block_areas in ideal.areas for a in block_areas]
        per_area = [c.weight / float(c.candidate.options.area[c.option]) for c in picked]
        value = sum(w * a for w, a in zip(per_area, areas, strict=True))
        if p.objective == "cost":
            value += p.hour_rate * sum(t + b.setup for t, b in zip(ideal.times, p.blocks, strict=True))
        assert value <= found.objective * (1 + 1e-6), seed
        seen += 1
    assert seen > 20
