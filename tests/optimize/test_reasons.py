"""Why no design exists: each value named makes one possible, a little less does not, and what is no help is none."""

from __future__ import annotations

import itertools
import math
import re
from dataclasses import replace

import numpy as np
import pytest
from factory import Medium, block, enumerated, flat, problem, random_problem, stage

from trainopt.optimize import reasons as module
from trainopt.optimize.design import design
from trainopt.optimize.levers import Levers
from trainopt.optimize.reasons import reasons, rounded
from trainopt.optimize.restate import Move, refilled, restated
from trainopt.train.problem import Candidate, DesignProblem
from trainopt.train.results import Reason

INSIDE = 1e-7
"""A named value lies this little on the working side, so that it also works when it is typed back."""


def needs(found: tuple[Reason, ...]) -> dict[str, float | None]:
    return {field: value for reason in found for field, value in reason.needs.items()}


def moved(p: DesignProblem, field: str, value: float) -> DesignProblem:
    """The problem with one field set, by other means than the levers use."""
    place, _, limit = field.rpartition(".")
    keys = [(s.name, c.medium, c) for b in p.blocks for s in b.stages for c in s.candidates if s.name == place]
    if field == "batch.time_h":
        return restated(p, Move(time=value))
    if field == "batch.volume_L":
        return restated(p, Move(volume=value))
    if field == "safety_factor":
        return restated(p, Move(safety_factor=value))
    if limit == "pressure_bar":
        return restated(p, Move(pressure={place: value}))
    if limit == "loading_limit_L_m2":
        return restated(p, Move(cap={(s, m): max(value, c.loading_cap) for s, m, c in keys}))
    assert limit == "flux_limit_LMH", field
    return restated(p, Move(flux={(s, m): max(value, c.flux_limit) for s, m, c in keys}))


def with_count(p: DesignProblem, name: str, module_name: str | None, count: int) -> DesignProblem:
    """The problem with so many of a module type on offer in one stage (None: of every type)."""

    def candidate(b: object, c: Candidate) -> Candidate:
        offer = c.on_offer
        assert offer is not None
        first = {m: k for k, m in reversed(list(enumerate(offer.module)))}
        rows = [(m, k + 1, first[m]) for m in dict.fromkeys(offer.module)
                for k in range(count if module_name in (None, m) else offer.module.count(m))]  # fmt: skip
        n = np.array([row[1] for row in rows])
        at = np.array([row[2] for row in rows])
        wide = replace(
            offer, module=tuple(row[0] for row in rows), count=n, holders=(None,) * len(rows), area=offer.area[at] * n,
            modules_cost=offer.modules_cost[at] * n, weight=offer.weight[at] * n, holders_cost=0.0 * n,
            flush_cost=0.0 * n, product_cost=0.0 * n, shortest_time=0.0 * n, loading=0.0 * n,
            demand=np.zeros((0, len(rows))),
        )  # fmt: skip
        return refilled(p, b, replace(c, on_offer=wide))  # type: ignore[arg-type]

    return replace(p, blocks=tuple(
        replace(b, stages=tuple(
            replace(s, candidates=tuple(candidate(b, c) for c in s.candidates)) if s.name == name else s
            for s in b.stages)) for b in p.blocks))  # fmt: skip


def possible(p: DesignProblem) -> bool:
    return math.isfinite(enumerated(p))


def test_there_are_reasons_exactly_where_no_design_exists() -> None:
    seen = {True: 0, False: 0}
    for seed in range(150):
        p = random_problem(seed, pressure=True)
        seen[possible(p)] += 1
        assert bool(reasons(p)) is not possible(p), seed
    assert min(seen.values()) > 20


def test_each_value_makes_a_design_possible_and_a_little_less_does_not() -> None:
    checked: dict[str, int] = {}
    for seed in range(120):
        p = random_problem(seed, most=3, pressure=seed % 4 == 0)
        if seed % 2:
            p = replace(p, time=0.4 * p.time)
        elif seed % 3:
            p = replace(p, blocks=tuple(replace(b, pressure=0.3 * b.pressure) for b in p.blocks))
        if possible(p):
            continue
        for field, value in needs(reasons(p)).items():
            kind = field.rpartition(".")[2]
            if kind == "max_count":
                continue
            if value is None:
                nearest = {"batch.volume_L": p.volume, "safety_factor": 1e9}.get(field)  # below 1: none
                extreme = 1e9 if nearest is None else nearest * 1e-9
                assert not possible(moved(p, field, extreme)), (seed, field)
                continue
            up = kind not in ("volume_L", "safety_factor")
            works, short = (1 + 1e-8, 0.999) if up else (1 - 1e-8, 1.001)
            assert possible(moved(p, field, value * works)), (seed, field)
            assert not possible(moved(p, field, value * short)), (seed, field)
            checked[kind] = checked.get(kind, 0) + 1
    assert {
        "time_h", "pressure_bar", "loading_limit_L_m2", "flux_limit_LMH", "safety_factor", "volume_L",
    } <= set(checked), checked  # fmt: skip


def test_module_counts_that_would_do_are_the_fewest() -> None:
    checked = 0
    for seed in range(120):
        p = random_problem(seed, most=3)
        if possible(p):
            continue
        for reason in reasons(p):
            for field, value in reason.needs.items():
                name, _, kind = field.rpartition(".")
                if kind != "max_count":
                    continue
                if value is None:
                    assert not possible(with_count(p, name, None, 60)), (seed, field)
                    continue
                named = re.search(r"would need \d+ × (\S+) on offer", reason.text)
                assert named is not None
                if value > 60:
                    continue
                assert possible(with_count(p, name, named[1], int(value))), (seed, field)
                assert not possible(with_count(p, name, named[1], int(value) - 1)), (seed, field)
                checked += 1
    assert checked > 10


def test_closed_forms_of_one_flat_stage() -> None:
    """40 modules of 1 m2 at R = 0.1 bar/LMH: D = 0.1·1000/40 = 2.5 bar·h, more than 2 bar × 1 h."""
    p = problem(block("b", stage("s", flat("m", 0.1)), pressure=2.0), volume=1000.0, time=1.0)
    found = needs(reasons(p))
    assert found["batch.time_h"] == pytest.approx(1.25, rel=INSIDE)
    assert found["b.pressure_bar"] == pytest.approx(2.5, rel=INSIDE)
    assert found["s.max_count"] == 50
    assert {reason.module for reason in reasons(p) if "s.max_count" in reason.needs} == {"m-m"}
    assert {reason.module for reason in reasons(p) if "s.max_count" not in reason.needs} == {None}
    assert found["safety_factor"] is None  # 0.8 would do, but a factor below 1 is none
    assert found["batch.volume_L"] == pytest.approx(800.0, rel=INSIDE)
    assert found["s.loading_limit_L_m2"] is None


def test_texts_name_the_limit_the_amount_and_the_unit() -> None:
    p = problem(block("b", stage("s", flat("m", 0.1)), pressure=2.0), volume=1000.0, time=1.0)
    texts = [reason.text for reason in design(p).reasons]
    assert "the time (1 h) would have to be at least 1.25 h, all else as it is" in texts
    assert "the pressure of 'b' (2 bar) would have to be at least 2.5 bar, all else as it is" in texts
    assert "stage 's' would need 50 × m-m on offer (max_count), all else as it is" in texts
    assert "the safety factor (1): no value of it alone makes a design possible" in texts
    assert "the batch (1000 L) could be at most 800 L, all else as it is" in texts
    conflict = "the module counts of 's'; the pressure of 'b', 2 bar; the time, 1 h"
    assert f"these limits together admit no design: {conflict}" in texts


def test_plain_faults_are_said_before_anything_is_combined() -> None:
    slow = problem(block("b", stage("s", flat("m", 1e-3)), max_flow=100.0), volume=1000.0, time=5.0)
    assert "1000 L in at most 5 h needs 200 L/h, more than the pump's 100 L/h" in reasons(slow)[0].text
    setups = problem(block("b", stage("s", flat("m", 1e-3)), setup=6.0), time=5.0)
    assert reasons(setups)[0].text == "the setups take 6 h of the 5 h allowed"
    heavy = problem(block("b", stage("s", flat("m", 1e-3, cap=20.0))), volume=1000.0)
    assert reasons(heavy)[0].text == (
        "stage 's': the most on offer of 'm', 40 m2, is loaded to 25 L/m2, above 20 L/m2 (its loading limit)"
    )
    lost = problem(block("b", stage("s", flat("m", 1e-3)), stage("t", flat("n", 1e-3, after=("other",)))))
    assert reasons(lost)[0].text == "no allowed sequence of media leads through the stages"


def test_a_constant_pressure_block_is_raised_no_further_than_its_media_bear() -> None:
    medium = Medium("m", "cake", (0.1, 0.0), differential_pressure=2.2)
    p = problem(block("b", stage("s", medium), pressure=2.0, operation="constant-pressure"), volume=1000.0, time=1.0)
    assert needs(reasons(p))["b.pressure_bar"] is None
    sturdy = replace(medium, differential_pressure=2.6)
    p = problem(block("b", stage("s", sturdy), pressure=2.0, operation="constant-pressure"), volume=1000.0, time=1.0)
    assert needs(reasons(p))["b.pressure_bar"] == pytest.approx(2.5, rel=INSIDE)


def test_the_conflict_named_is_the_smallest() -> None:
    """Lifting all other limits leaves no design, and no smaller set of limits does that."""
    sizes: dict[int, int] = {}
    for seed in range(100):
        p = random_problem(seed, stages=1)
        if possible(p):
            continue
        levers = Levers(p)
        limits = list(module._limits(levers))
        (text,) = (r.text for r in reasons(p) if "admit" in r.text) if limits else ("",)
        named = [k for k, (words, _) in enumerate(limits) if words in text]

        def holds(alone: tuple[int, ...], levers: Levers = levers, limits: list = limits) -> bool:  # type: ignore[type-arg]
            setting = levers.setting
            for k, (_, lift) in enumerate(limits):
                setting = setting if k in alone else lift(setting)
            return levers.possible(setting)

        assert not holds(tuple(named)), seed
        for size in range(len(named)):
            assert all(holds(alone) for alone in itertools.combinations(range(len(limits)), size)), seed
        sizes[len(named)] = sizes.get(len(named), 0) + 1
    assert len(sizes) > 1


@pytest.mark.parametrize(
    ("value", "direction", "digits", "text"),
    [(1.23456, 1, 4, "1.235"), (1.23456, -1, 4, "1.234"), (0.0598, 1, 2, "0.06"), (2345.6, 1, 4, "2346")],
)
def test_values_are_rounded_to_the_side_that_works(value: float, direction: int, digits: int, text: str) -> None:
    assert rounded(value, direction, digits) == text
