"""Designs on a reliability basis: against enumeration over picks and over lots to spare, and against fresh lots."""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import yaml
from independent import INFINITE, Option, Spec, demand, options_of, random_spec, routes, write
from scipy.stats import binomtest

import trainopt
from trainopt.optimize.design import Prepared, prepare
from trainopt.optimize.even_split import even_split
from trainopt.optimize.limits import limits
from trainopt.optimize.reliability import Bought, measured, wilson
from trainopt.optimize.restate import Move, restated
from trainopt.optimize.search import SolverOptions, best_route
from trainopt.optimize.sparing import spare_lots
from trainopt.train.build import prune
from trainopt.train.problem import DesignProblem

ROOT = Path(__file__).parent.parent.parent
Multipliers = dict[tuple[str, str], list[tuple[float, float]]]


def sampled_case(seed: int, folder: Path, reliability: float, samples: int) -> tuple[Spec, Path]:
    """A random workspace whose lots are samples of media and feed that vary."""
    spec = random_spec(seed, stages=3, counts=2, pressure=True)
    # Constant pressure asks for media that bear it.
    borne = {
        m for b in spec.blocks if b["operation"] == "constant-pressure" for s in b["stages"] for m, _ in s["media"]
    }
    for name in borne:
        spec.media[name].update(dp=None, inlet=None)
    path = write(spec, folder)
    for file in (folder / "models" / "media").iterdir():
        medium = yaml.safe_load(file.read_text(encoding="utf-8"))
        medium["curve"].pop("lots")
        medium["variability"] = {"resistance": 0.1 + 0.02 * (seed % 5), "fouling": 0.15}
        file.write_text(yaml.safe_dump(medium), encoding="utf-8")
    scenario = yaml.safe_load(path.read_text(encoding="utf-8"))
    scenario["basis"] = {"reliability": reliability, "samples": samples, "seed": seed}
    scenario["feed_variability"] = {"fouling": 0.1}
    path.write_text(yaml.safe_dump(scenario), encoding="utf-8")
    return spec, path


def multipliers(prepared: Prepared) -> Multipliers:
    """(ρ, κ) of every sampled lot by stage and medium."""
    return {
        (stage.name, one.medium): [(c.resistance_factor, c.fouling_factor) for c in one.curves]
        for block in prepared.problem.blocks
        for stage in block.stages
        for one in stage.candidates
    }


def sampled_options(spec: Spec, drawn: Multipliers, may_fail: int) -> Iterator[dict[str, Any]]:
    """The spec's stages with the demands of sampled lots: infinite beyond what was tested."""
    for block in spec.blocks:
        for stage in block["stages"]:
            free = replace(spec, basis="pooled", media={k: {**m, "tested": 1e9} for k, m in spec.media.items()})
            own = []
            for option in options_of(free, block, stage):
                m = spec.media[option.medium]
                lots = drawn[stage["stage"], option.medium]
                spent = tuple(
                    INFINITE if m["limit"] is None and lot[1] * option.loading > m["tested"] * (1 + 1e-12)
                    else demand(m, lot, option.loading, block["operation"])
                    for lot in lots
                )  # fmt: skip
                if sum(math.isinf(d) for d in spent) <= may_fail:
                    own.append(replace(option, demand=spent))
            yield {**stage, "options": own}


def needed_times(spec: Spec, block: dict[str, Any], picks: list[Option], lots: int) -> np.ndarray:
    """Each lot's shortest time of a block, h."""
    line, volume = block["line"] * spec.volume, spec.volume
    low, high = block["pump"] or (None, None)
    floor = max([volume / high if high else 0.0, *(p.tau for p in picks)])
    spent = np.array([p.demand for p in picks]).reshape(len(picks), lots)
    out = np.maximum((spent.sum(axis=0) + line) / (block["pressure"] - block["static"]), floor)
    if block["operation"] == "constant-flow":
        for k, p in enumerate(picks):
            m = spec.media[p.medium]
            if m["dp"] is not None:
                out = np.maximum(out, spent[k] / m["dp"])
            if m["inlet"] is not None and m["inlet"] < block["pressure"]:
                out = np.maximum(out, (spent[k:].sum(axis=0) + line) / (m["inlet"] - block["static"]))
    most = volume / low * (1 + 1e-9) if low else INFINITE
    return np.where(out <= most, out, INFINITE)


def best_by_enumeration(spec: Spec, drawn: Multipliers, lots: int, may_fail: int) -> float:
    """The least objective over every pick and every set of lots spared."""
    stages = {s["stage"]: s for s in sampled_options(spec, drawn, may_fail)}
    best = INFINITE
    kept = [[s for s in range(lots) if s not in out] for out in itertools.combinations(range(lots), may_fail)]
    setups = [block["setup"] for block in spec.blocks]
    for blocks in chosen(spec, stages):
        picks = [p for block in blocks for p in block]
        weight = sum(p.area if spec.objective == "area" else p.cost for p in picks)
        if weight >= best:
            continue
        times = np.array([needed_times(spec, b, p, lots) for b, p in zip(spec.blocks, blocks, strict=True)])
        for lots_kept in kept:
            own = times[:, lots_kept].max(axis=1)
            total = float(sum(own) + sum(setups)) if spec.schedule == "sequential" else float(max(own + setups))
            if total <= spec.time * (1 + 1e-9):
                hours = spec.hour * float(sum(own) + sum(setups)) if spec.objective == "cost" else 0.0
                best = min(best, weight + hours)
    return best


def chosen(spec: Spec, stages: dict[str, dict[str, Any]]) -> Iterator[list[list[Option]]]:
    """Every allowed combination, from options given by stage."""
    import independent

    original = independent.options_of
    try:
        independent.options_of = lambda _, __, stage: stages[stage["stage"]]["options"]  # type: ignore[assignment]
        yield from routes(spec)
    finally:
        independent.options_of = original


def assert_needs_are_exact(problem: DesignProblem, result: trainopt.Design) -> None:
    """The time and the safety factor named work, and just short of them nothing does."""
    needs = {name: value for reason in result.reasons for name, value in reason.needs.items()}
    time = needs["batch.time_h"]
    if time is not None:
        assert trainopt.design(replace(problem, time=time)).status == "optimal"
        assert trainopt.design(replace(problem, time=time * (1.0 - 1e-6))).status == "infeasible"
    factor = needs["safety_factor"]
    if factor is not None:
        assert trainopt.design(restated(problem, Move(safety_factor=factor))).status == "optimal"


@pytest.mark.parametrize("first", range(0, 60, 10))
def test_the_sampled_optimum_equals_enumeration(first: int, tmp_path: Path) -> None:
    seen = set()
    for seed in range(first, first + 10):
        reliability, samples = [(0.8, 10), (0.75, 8), (0.9, 10)][seed % 3]
        may_fail = {0.8: 2, 0.75: 2, 0.9: 1}[reliability]
        spec, path = sampled_case(seed, tmp_path / str(seed), reliability, samples)
        prepared = prepare(trainopt.load_case(path))
        assert prepared.problem.may_fail == may_fail
        expected = best_by_enumeration(spec, multipliers(prepared), samples, may_fail)
        result = trainopt.design(prepared)
        seen.add(result.status)
        if math.isinf(expected):
            assert result.status == "infeasible", seed
            assert_needs_are_exact(prepared.problem, result)
            continue
        assert result.objective is not None, (seed, expected)
        assert result.objective.value == pytest.approx(expected, rel=1e-9), seed
        assert result.reliability is not None
        assert result.reliability.in_sample >= 1.0 - may_fail / samples
    assert "optimal" in seen


def test_lots_are_spared_where_that_saves_most() -> None:
    rng = np.random.default_rng(7)
    for _ in range(300):
        blocks, lots = int(rng.integers(1, 4)), int(rng.integers(1, 8))
        may_fail = int(rng.integers(0, lots + 1))
        needed = np.round(rng.uniform(0.0, 10.0, (blocks, lots)), int(rng.integers(0, 3)))
        keep = spare_lots(needed, may_fail)
        assert (~keep).sum() <= may_fail
        least = min(
            needed[:, [s for s in range(lots) if s not in out]].max(axis=1, initial=0.0).sum()
            for count in range(may_fail + 1)
            for out in itertools.combinations(range(lots), count)
        )
        assert needed[:, keep].max(axis=1, initial=0.0).sum() == pytest.approx(least, abs=1e-12)


@pytest.mark.parametrize(("successes", "trials"), [(0, 10), (10, 10), (381, 400), (3901, 4000), (1, 3)])
def test_the_interval_is_wilsons(successes: int, trials: int) -> None:
    # scipy.stats is the reference implementation of the Wilson score interval.
    expected = binomtest(successes, trials).proportion_ci(0.95, method="wilson")
    found = wilson(successes, trials)
    assert (found.share, found.low, found.high) == pytest.approx((successes / trials, expected.low, expected.high))


def harvest(tmp_path: Path, basis: str, factor: str = "1.0", extra: str = "") -> Path:
    """The demo's harvest on another basis."""
    tmp_path.mkdir(exist_ok=True)
    (tmp_path / "models").symlink_to(ROOT / "models")
    (tmp_path / "scenarios").mkdir()
    text = (ROOT / "scenarios" / "harvest.yaml").read_text(encoding="utf-8")
    text = text.replace("basis: worst-lot", f"basis: {basis}").replace("safety_factor: 1.5", f"safety_factor: {factor}")
    path = tmp_path / "scenarios" / "harvest.yaml"
    path.write_text(text + extra, encoding="utf-8")
    return path


def test_fresh_lots_fall_inside_the_interval_claimed(tmp_path: Path) -> None:
    """In at least 93 of 100 seeds the 95 % interval holds the true share (of 400,000 other lots)."""
    path = harvest(tmp_path, "{reliability: 0.9, samples: 60, seed: 1}", extra="feed_variability: {fouling: 0.15}\n")
    prepared = prepare(trainopt.load_case(path))
    problem = prepared.problem
    found = best_route(prune(problem), SolverOptions())
    assert found.route is not None
    assert found.times is not None
    bought = Bought(found.route, found.times, 1.0)
    truth = measured(problem, bought, 400_000, "truth").share
    inside = 0
    for seed in range(100):
        route = tuple(tuple(replace(c, candidate=replace(c.candidate, sampler=replace(c.candidate.sampler, seed=seed)))
                            for c in choices if c.candidate.sampler is not None)
                      for choices in bought.route)  # fmt: skip
        claimed = measured(problem, replace(bought, route=route), 600)
        inside += claimed.low <= truth <= claimed.high
    assert inside >= 93


def test_what_a_reliability_design_says_of_itself(tmp_path: Path) -> None:
    path = harvest(tmp_path, "{reliability: 0.95, samples: 200, seed: 3}", extra="feed_variability: {fouling: 0.2}\n")
    prepared = prepare(trainopt.load_case(path))
    result = trainopt.design(prepared)
    sure, problem = result.reliability, prepared.problem
    assert sure is not None
    assert sure.in_sample >= 0.95
    assert (sure.samples, sure.fresh_samples) == (200, 2000)
    assert abs(sure.fresh.share - sure.in_sample) < 0.05
    # The even split is measured on the same fresh lots, at its own times.
    even = even_split(problem)
    assert even.route is not None
    assert sure.even_split == measured(problem, Bought(even.route, even.times, 1.0), 2000)
    # The safety-factor design: worst lot run, factor of the scenario.
    worst = trainopt.design(trainopt.load_case(harvest(tmp_path / "worst", "worst-lot")))
    assert sure.usual is not None
    assert (sure.usual.safety_factor, sure.usual.area) == (1.0, worst.area)
    assert sure.usual.fresh is not None
    assert sure.usual.fresh.share < sure.fresh.share
    # What the reliability amounts to: the pooled design with that factor just holds at these areas and times.
    assert sure.equivalent_safety_factor is not None
    assert sure.equivalent_safety_factor > 1.05
    assert result.safety_factor is not None
    assert 1.0 <= result.safety_factor < sure.equivalent_safety_factor


def test_more_reliability_never_needs_less(tmp_path: Path) -> None:
    areas = []
    for q in (0.5, 0.8, 0.9, 0.95, 0.99):
        extra = "feed_variability: {fouling: 0.15}\n"
        path = harvest(tmp_path / f"q{q}", f"{{reliability: {q}, samples: 100, seed: 1}}", extra=extra)
        areas.append(trainopt.design(trainopt.load_case(path)).area)
    assert areas == sorted(areas)  # type: ignore[type-var]
    assert areas[0] < areas[-1]  # type: ignore[operator]


def test_what_is_missing_for_a_reliability_is_said(tmp_path: Path) -> None:
    path = harvest(tmp_path, "{reliability: 0.9, samples: 50}", factor="1.5")
    codes = {notice.code for notice in trainopt.design(trainopt.load_case(path)).warnings}
    assert "two-margins" in codes
    few = harvest(tmp_path / "few", "{reliability: 0.95, samples: 10}")
    notices = [n for n in trainopt.design(trainopt.load_case(few)).warnings if n.code == "few-samples"]
    assert "20 samples and more would let one fail" in notices[0].text
    other = harvest(tmp_path / "other", "worst-lot", extra="feed_variability: {fouling: 0.1}\n")
    notices = [n for n in trainopt.design(trainopt.load_case(other)).warnings if n.code == "variability-not-used"]
    assert "the feed" in notices[0].text


def test_seed_and_threads_do_not_change_a_reliability_design(tmp_path: Path) -> None:
    path = harvest(tmp_path, "{reliability: 0.9, samples: 100, seed: 2}", extra="feed_variability: {fouling: 0.15}\n")
    prepared = prepare(trainopt.load_case(path))
    picks = {trainopt.design(prepared, solver=SolverOptions(seed=seed)).picks for seed in range(4)}
    assert len(picks) == 1


def test_what_a_little_more_gains_on_a_reliability_basis_is_exact(tmp_path: Path) -> None:
    path = harvest(tmp_path, "{reliability: 0.9, samples: 40, seed: 1}", extra="feed_variability: {fouling: 0.15}\n")
    prepared = prepare(trainopt.load_case(path))
    result = trainopt.design(prepared)
    found = limits(prepared.problem, result, prepared.curves)
    assert found is not None
    assert result.objective is not None
    # A loading limit given in place of what was tested is another rule, not a little more of the same.
    assert not any(gain.field.endswith("loading_limit_L_m2") for gain in found.gains)
    times = [gain for gain in found.gains if gain.field == "batch.time_h"]
    assert times
    for gain in times:
        better = trainopt.design(replace(prepared.problem, time=gain.needs))
        assert better.objective is not None
        assert better.objective.value == pytest.approx(gain.objective)
        assert gain.objective < result.objective.value
        short = trainopt.design(replace(prepared.problem, time=gain.needs * (1.0 - 1e-5)))
        assert short.objective is not None
        assert short.objective.value == pytest.approx(result.objective.value)
