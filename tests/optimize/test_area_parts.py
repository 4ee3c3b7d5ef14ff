"""Where the area goes: the parts add up exactly, in closed form where there is one, and limits never take area off."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from factory import Medium, block, flat, problem, random_problem, stage

import trainopt
from trainopt.optimize.area_parts import WHOLE, area_parts
from trainopt.optimize.design import design
from trainopt.train.problem import DesignProblem
from trainopt.train.results import AreaParts, Design

SCENARIOS = Path(__file__).parents[2] / "scenarios"
NAMES = ["ideal split", "loading caps, flux limits and ratings", "lots", "safety factor", WHOLE]


def split(p: DesignProblem) -> tuple[Design, AreaParts]:
    found = design(p)
    parts = area_parts(p, found)
    assert parts is not None
    return found, parts


def areas(parts: AreaParts) -> dict[str, float]:
    return {part.name: part.area for part in parts.parts}


def test_parts_of_random_trains_add_up_to_what_is_installed() -> None:
    seen = 0
    for seed in range(60):
        p = random_problem(seed, pressure=True)
        found = design(p)
        parts = area_parts(p, found)
        if parts is None:
            assert found.status == "infeasible" or not found.picks, seed
            continue
        seen += 1
        assert found.area is not None and found.cost is not None
        assert math.fsum(part.area for part in parts.parts) == pytest.approx(found.area, rel=1e-13), seed
        assert math.fsum(part.cost for part in parts.parts) == pytest.approx(found.cost, rel=1e-12), seed
        assert [part.name for part in parts.parts] == NAMES, seed
        # In the objective's own measure every rung but the lots' only adds limits to the one before.
        for part in parts.parts:
            own = part.area if p.objective == "area" else part.cost
            if part.name != "lots":
                assert own >= -1e-6 * (found.area if p.objective == "area" else found.cost), (seed, part.name)
    assert seen > 30


def test_flat_stages_in_closed_form() -> None:
    """V·(Σ√R)²/B, then a cap, then two lots, then F, then whole modules."""
    V, B, F = 1000.0, 2.0, 1.5
    R = np.array([4e-2, 1e-2])
    lots = ((1.0, 1.0), (1.2, 1.0))
    sizes = (("x", 1.0, 100.0, 200),)
    media = [Medium(name, "cake", (r, 0.0), lots, sizes, cap=60.0) for name, r in zip("uv", R, strict=True)]
    p = problem(block("b", stage("s", media[0]), stage("t", media[1]), pressure=B), volume=V, time=1.0, safety_factor=F)
    found, parts = split(p)
    got = areas(parts)
    ideal = V * float(np.sqrt(R).sum()) ** 2 / B
    assert got["ideal split"] == pytest.approx(ideal, rel=1e-7)
    # The ideal loads the second stage to 66.7 L/m2; capped at 60 it spends 0.6 and leaves 1.4 bar·h to the first.
    second = V / 60.0
    capped = second + V * R[0] / (B - 60.0 * R[1])
    assert got[NAMES[1]] == pytest.approx(capped - ideal, rel=1e-5)
    # Resistance 1.2 times: the ideal again, both inside the cap.
    worst = 1.2 * ideal
    assert got["lots"] == pytest.approx(worst - capped, rel=1e-5)
    assert got["safety factor"] == pytest.approx((F - 1.0) * worst, rel=1e-6)
    assert found.area is not None
    assert got[WHOLE] == pytest.approx(found.area - F * worst, rel=1e-5)


def test_cost_parts_count_prices_hours_and_the_even_split_beside_it() -> None:
    sizes = (("x", 0.5, 100.0, 400),)
    one = block("b", stage("s", flat("u", 4e-2, sizes=sizes)), stage("t", flat("v", 1e-2, sizes=sizes)), pressure=2.0)
    p = problem(one, volume=1000.0, time=1.0, objective="cost", hour_rate=50.0)
    found, parts = split(p)
    assert found.cost is not None and found.even_split is not None and found.even_split.cost is not None
    # Hours are worth less than area here, so that all the time is used: 200 per m2 and 50 for the hour.
    assert parts.parts[0].cost == pytest.approx(200.0 * 1000.0 * 0.09 / 2.0 + 50.0, rel=1e-6)
    assert parts.even_split_cost == pytest.approx(found.even_split.cost - found.cost)
    assert parts.even_split_area is not None and parts.even_split_area > 0.0


def test_a_train_with_nothing_in_its_way_has_only_the_ideal_and_whole_modules() -> None:
    _, parts = split(problem(block("b", stage("s", flat("m", 2e-2))), volume=1000.0, time=1.0))
    assert [part.area for part in parts.parts[1:4]] == pytest.approx([0.0, 0.0, 0.0], abs=1e-6)
    assert parts.even_split_area == pytest.approx(0.0)


def test_no_design_has_no_parts() -> None:
    p = problem(block("b", stage("s", flat("m", 0.1)), pressure=2.0), volume=1000.0, time=1.0)
    assert area_parts(p, design(p)) is None


@pytest.mark.parametrize("name", ["harvest", "harvest-cost", "redundant-guard"])
def test_demo_documents_hold_parts_that_add_up(name: str) -> None:
    found = trainopt.design(trainopt.load_case(SCENARIOS / f"{name}.yaml"), parts=True)
    document = trainopt.design_document(found)
    listed = document["area_parts"]
    assert math.fsum(part["m2"] for part in listed) == pytest.approx(document["area_m2"], rel=1e-12)
    assert math.fsum(part["cost"] for part in listed) == pytest.approx(document["cost"], rel=1e-12)
    assert "area_parts" not in trainopt.design_document(trainopt.design(trainopt.load_case(SCENARIOS / f"{name}.yaml")))
