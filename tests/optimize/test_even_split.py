"""The even split against closed forms, against the rule written again on scalars, and never better than the optimum."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable

import pytest
from factory import Medium, block, flat, problem, random_problem, shortest_time, stage
from scipy.optimize import brentq
from scipy.special import lambertw

from trainopt.optimize.design import design
from trainopt.optimize.even_split import EvenPick, even_split, even_times, least_area
from trainopt.optimize.index import index_problem
from trainopt.optimize.times import block_bounds
from trainopt.train.problem import Block, Candidate, DesignProblem

SIZES = (("x", 0.01, 1.0, 5000),)


def counts(pick: EvenPick) -> list[int]:
    assert pick.route is not None, pick.text
    return [int(c.candidate.options.count[c.option]) for choices in pick.route for c in choices]


def area_min(medium: Medium, budget: float, time: float = 1.0, **keys: float) -> float:
    p = problem(block("b", stage("s", medium)), volume=1000.0, time=time, **keys)  # type: ignore[arg-type]
    return least_area(p, index_problem(p).nodes[0], budget, time)


# --- A_min in closed form: D(L) = budget solved for L, A = V/L ---


def test_least_area_of_a_flat_medium() -> None:
    assert area_min(flat("m", 2e-3), 0.5) == pytest.approx(1000 * 2e-3 / 0.5, rel=1e-12)


def test_least_area_of_a_cake() -> None:
    R0, k, B = 1e-3, 0.02, 0.8
    L = (math.sqrt(1 + 4 * k * B / R0) - 1) / (2 * k)
    assert area_min(Medium("m", "cake", (R0, k)), B) == pytest.approx(1000 / L, rel=1e-12)


def test_least_area_of_intermediate_blocking_by_lambert_w() -> None:
    R0, k, B = 1e-3, 0.01, 0.8
    L = float(lambertw(k * B / R0).real) / k
    assert area_min(Medium("m", "intermediate", (R0, k)), B) == pytest.approx(1000 / L, rel=1e-12)


@pytest.mark.parametrize("budget", [1e-6, 0.3, 50.0, 1e6])
def test_least_area_at_any_distance_from_a_pole(budget: float) -> None:
    R0, k = 1e-3, 0.004
    assert area_min(Medium("m", "complete", (R0, k)), budget) == pytest.approx(1000 * (R0 / budget + k), rel=1e-12)


def test_least_area_where_the_curve_dips_counts_the_highest_resistance() -> None:
    # R falls from 1e-3 and is back at 1e-3 only at 200 L/m2: up to there D = L·1e-3.
    dips = Medium("m", "quadratic", (1e-3, -4e-6, 2e-8))
    assert area_min(dips, 0.15) == pytest.approx(1000 * 1e-3 / 0.15, rel=1e-12)


def test_least_area_is_held_by_cap_rating_and_the_worst_lot() -> None:
    assert area_min(flat("m", 1e-4, cap=100.0), 0.5) == pytest.approx(10.0, rel=1e-12)
    rated = flat("m", 1e-3, differential_pressure=0.2)
    assert area_min(rated, 0.5, time=2.0) == pytest.approx(1000 * 1e-3 / 0.4, rel=1e-12)
    lots = Medium("m", "cake", (1e-3, 0.02), lots=((1.0, 1.0), (1.3, 0.9), (0.9, 1.2)))
    worst = max(area_min(Medium("m", "cake", (rho * 1e-3, kappa * 0.02)), 0.8) for rho, kappa in lots.lots)
    assert area_min(lots, 0.8) == pytest.approx(worst, rel=1e-12)


# --- the rule ---


def test_two_flat_stages_share_the_pressure_evenly() -> None:
    one = block("b", stage("s", flat("u", 1e-3, sizes=SIZES)), stage("t", flat("v", 4e-3, sizes=SIZES)),
                pressure=2.0, static=0.2, line=1e-4)  # fmt: skip
    p = problem(one, volume=1000.0, time=4.0, safety_factor=1.5)
    budget = 1.8 * 4.0 - 1e-4 * 1000.0
    needed = [1.5 * 1000 * R / (budget / 2) for R in (1e-3, 4e-3)]
    assert counts(even_split(p)) == [math.ceil(a / 0.01) for a in needed]


def test_time_is_shared_evenly_after_setups_and_whole_side_by_side() -> None:
    setups = (("a", 0.5), ("b", 1.5))
    blocks = [block(name, stage(f"s{name}", flat(f"m{name}", 1e-3)), setup=setup) for name, setup in setups]
    assert even_times(problem(*blocks, time=6.0)) == (2.0, 2.0)
    assert even_times(problem(*blocks, time=6.0, schedule="side-by-side")) == (5.5, 4.5)


def test_flux_limit_is_on_the_installed_area() -> None:
    one = block("b", stage("s", flat("m", 1e-6, sizes=SIZES, flux=100.0)))
    p = problem(one, volume=1000.0, time=4.0, safety_factor=2.0)
    assert counts(even_split(p)) == [250]


def test_loading_cap_is_met_with_the_safety_factor() -> None:
    one = block("b", stage("s", flat("m", 1e-6, sizes=SIZES, cap=200.0)))
    p = problem(one, volume=1000.0, time=4.0, safety_factor=1.5)
    assert counts(even_split(p)) == [750]


def test_optional_stages_and_after_are_honored() -> None:
    late = flat("late", 1e-3, after=("first",), sizes=SIZES)
    first, other = flat("first", 2e-2, sizes=SIZES), flat("other", 1e-3, sizes=SIZES)
    free = problem(block("b", stage("s", first, other), stage("t", late)))
    pick = even_split(free)
    assert pick.route is not None
    assert [c.candidate.medium for c in pick.route[0]] == ["first", "late"]
    skipping = problem(block("b", stage("s", other), stage("t", flat("late", 1e-3, sizes=SIZES), optional=True)))
    pick = even_split(skipping)
    assert pick.route is not None
    assert [c.candidate.medium for c in pick.route[0]] == ["other"]


def test_a_failing_inlet_rating_pump_or_size_says_so() -> None:
    weak = flat("v", 1e-3, sizes=SIZES, inlet_pressure=0.5)
    inlet = even_split(problem(block("b", stage("s", flat("u", 1e-3, sizes=SIZES)), stage("t", weak), pressure=2.0)))
    assert inlet.route is None and "stage 't'" in inlet.text and "inlet rating" in inlet.text
    pump = even_split(problem(block("b", stage("s", flat("u", 1e-3)), max_flow=100.0), volume=1000.0, time=5.0))
    assert pump.route is None and "200 L/h, more than the pump gives" in pump.text
    small = even_split(problem(block("b", stage("s", flat("u", 1e-1, sizes=(("x", 1.0, 1.0, 3),))))))
    assert small.route is None and "'u' in block 'b' is too small" in small.text
    late = problem(block("b", stage("s", flat("u", 1e-3)), setup=6.0), time=5.0)
    assert even_split(late).text == "the setups leave no time"


# --- random trains ---


def rule(p: DesignProblem) -> float:
    """The rule written again on scalars: the least objective over the allowed routes, infinite where it yields none."""
    setups = sum(b.setup for b in p.blocks)
    times = [(p.time - setups) / len(p.blocks) if p.schedule == "sequential" else p.time - b.setup for b in p.blocks]
    for t, b in zip(times, p.blocks, strict=True):
        if t <= 0 or p.volume / t > b.max_flow or p.volume / t < b.min_flow:
            return math.inf
    paid = p.hour_rate * (sum(times) + setups) if p.objective == "cost" else 0.0
    flat_stages = [(b, s) for b, one in enumerate(p.blocks) for s in one.stages]
    best = math.inf
    for media in itertools.product(*[[*s.candidates, None] if s.optional else s.candidates for _, s in flat_stages]):
        used = [(b, c) for (b, _), c in zip(flat_stages, media, strict=True) if c is not None]
        before = [None, *(c.medium for _, c in used)]
        if any(c.after is not None and one not in c.after for one, (_, c) in zip(before, used, strict=False)):
            continue
        total = paid
        for b, one in enumerate(p.blocks):
            here = [c for k, c in used if k == b]
            picks = [(c, _sized(p, one, c, times[b], len(here))) for c in here]
            if any(option is None for _, option in picks):
                total = math.inf
                break
            chosen = [(c, option) for c, option in picks if option is not None]
            if shortest_time(p, one, chosen) > times[b] * (1 + 1e-9):
                total = math.inf
            total += sum(float(c.options.weight[option]) for c, option in chosen)
        best = min(best, total)
    return best


def _sized(p: DesignProblem, one: Block, c: Candidate, time: float, stages: int) -> int | None:
    flows = one.operation == "constant-flow"
    share = ((one.pressure - one.static) * time - one.line * p.volume) / stages
    room = min(share, c.differential_pressure * time) if flows else share
    if room <= 0.0:
        return None
    loading = c.loading_cap
    for curve in c.curves:
        spent = curve.demand_constant_flow if flows else curve.demand_constant_pressure

        def over(l: float, spent: Callable[[float], float] = spent) -> float:
            return spent(l) - room

        top = min(loading, curve.pole * (1.0 - 1e-12))
        loading = top if over(top) <= 0.0 else brentq(over, 0.0, top, xtol=1e-13, rtol=1e-14)
    needed = max(p.safety_factor * p.volume / (c.scale_up * loading), p.volume / (c.flux_limit * time)) * (1 - 1e-12)
    fit = [k for k in range(len(c.options)) if c.options.area[k] >= needed]
    return min(fit, key=lambda k: (c.options.weight[k], -c.options.area[k])) if fit else None


def test_random_trains_follow_the_rule_and_never_beat_the_optimum() -> None:
    sized = 0
    for seed in range(150):
        p = random_problem(seed, pressure=True)
        pick = even_split(p)
        expected = rule(p)
        if pick.route is None:
            assert math.isinf(expected) and pick.text, seed
            continue
        sized += 1
        for one, choices, time in zip(p.blocks, pick.route, pick.times, strict=True):
            bounds = block_bounds(one, choices, p.volume)
            assert bounds.least <= time * (1 + 1e-9) and time <= bounds.most * (1 + 1e-9), seed
        result = design(p)
        value = sum(c.weight for choices in pick.route for c in choices)
        if p.objective == "cost":
            value += p.hour_rate * sum(t + b.setup for t, b in zip(pick.times, p.blocks, strict=True))
        assert value == pytest.approx(expected, rel=1e-9), seed
        assert result.objective is not None and result.objective.value <= value * (1 + 1e-9), seed
    assert sized > 40
