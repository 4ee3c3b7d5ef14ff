"""What limits a design: every gain against independent re-solves, at its value and just below it."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import pytest
from factory import Medium, block, enumerated, flat, problem, random_problem, stage

import trainopt
from trainopt.optimize.design import design, prepare
from trainopt.optimize.limits import changes, gains, limits, longer_runs
from trainopt.optimize.restate import Move, restated
from trainopt.optimize.staircase import staircase
from trainopt.train.build import prune
from trainopt.train.limit_words import block_words, gain_words, longer_run_words
from trainopt.train.problem import DesignProblem
from trainopt.train.results import Design, Gain, Pick

DEMO = Path(__file__).parents[2] / "scenarios" / "harvest.yaml"


def moved(p: DesignProblem, gain: Gain, value: float) -> DesignProblem:
    place, _, limit = gain.field.rpartition(".")
    used = {pick.stage: pick.medium for pick in design(p).picks}
    if gain.field == "batch.time_h":
        return restated(p, Move(time=value))
    if gain.field == "safety_factor":
        return restated(p, Move(safety_factor=value))
    if limit == "pressure_bar":
        return restated(p, Move(pressure={place: value}))
    key = (place, used[place])
    if limit == "max_count":
        return restated(p, Move(count={(place, gain.what.split(" ")[0]): value}))
    return {
        "loading_limit_L_m2": lambda: restated(p, Move(cap={key: value})),
        "flux_limit_LMH": lambda: restated(p, Move(flux={key: value})),
        "differential_pressure_bar": lambda: restated(p, Move(differential_pressure={key: value})),
        "inlet_pressure_bar": lambda: restated(p, Move(inlet_pressure={key: value})),
    }[limit]()


def solved(p: DesignProblem) -> Design:
    found = design(p)
    assert found.objective is not None
    return found


def test_gains_of_random_trains_are_exact() -> None:
    kinds: dict[str, int] = {}
    for seed in range(60):
        p = random_problem(seed, most=4, hours=False, pressure=seed % 3 == 0)
        base = enumerated(p)
        if math.isinf(base) or base == 0.0:
            continue
        for gain in gains(p, solved(p)):
            kind = gain.field.rpartition(".")[2]
            kinds[kind] = kinds.get(kind, 0) + 1
            # More of every limit, less of the safety factor.
            assert (gain.needs < gain.now) is (kind == "safety_factor"), (seed, gain.field)
            assert enumerated(moved(p, gain, gain.needs)) == pytest.approx(gain.objective, rel=1e-9), (seed, gain.field)
            assert gain.saves == pytest.approx(base - gain.objective, rel=1e-9, abs=1e-9), (seed, gain.field)
            just_below = gain.now + (gain.needs - gain.now) * (1.0 - 1e-4)
            if kind == "max_count":
                assert gain.needs == round(gain.needs)
                just_below = gain.needs - 1.0
            assert enumerated(moved(p, gain, just_below)) == pytest.approx(base, rel=1e-9), (seed, gain.field)
    assert len(kinds) >= 5, kinds


def test_a_limit_that_is_not_named_gains_nothing_however_high() -> None:
    for seed in range(30):
        p = random_problem(seed, most=4, hours=False, pressure=seed % 3 == 0)
        base = enumerated(p)
        if math.isinf(base):
            continue
        named = {gain.field for gain in gains(p, solved(p))}
        if "batch.time_h" not in named:
            assert enumerated(replace(p, time=90.0 * p.time)) == pytest.approx(base, rel=1e-9), seed
        for b in p.blocks:
            if f"{b.name}.pressure_bar" not in named:
                raised = restated(p, Move(pressure={b.name: 90.0 * b.pressure}))
                assert enumerated(raised) == pytest.approx(base, rel=1e-9), seed


def test_gain_in_time_is_the_next_step_of_the_staircase() -> None:
    checked = 0
    for seed in range(40):
        p = random_problem(seed, blocks=1, hours=False, most=8)
        whole = staircase(prune(p))
        if len(whole.weight) < 3:
            continue
        # A time between two steps, so that time is what binds.
        setups = sum(b.setup for b in p.blocks)
        p = replace(p, time=max(1.01 * float(sorted(whole.time)[1]), 1.01 * setups))
        found = design(p)
        if found.objective is None or not found.picks:
            continue
        stairs = staircase(prune(replace(p, time=100.0 * p.time)))
        lighter = stairs.weight < found.objective.value * (1.0 - 1e-7)
        named = [gain for gain in gains(p, found) if gain.field == "batch.time_h"]
        assert bool(named) is bool(lighter.any()), seed
        for gain in named:
            assert gain.needs == pytest.approx(float(stairs.time[lighter].min()), rel=1e-7), seed
            checked += 1
    assert checked > 10


def test_closed_form_of_one_flat_stage() -> None:
    """n modules of 1 m2 need P·t ≥ R·V/n: one fewer than 10 needs 10/9 of the pressure, or of the time."""
    p = problem(block("b", stage("s", flat("m", 0.02)), pressure=2.0), volume=1000.0, time=1.0)
    found = limits(p, solved(p))
    assert found is not None
    by_field = {gain.field: gain for gain in found.gains}
    assert by_field["b.pressure_bar"].needs == pytest.approx(20.0 / 9.0, rel=1e-7)
    assert by_field["batch.time_h"].needs == pytest.approx(10.0 / 9.0, rel=1e-7)
    assert by_field["b.pressure_bar"].text == ("0.23 bar more for 'b' (2.223 bar) saves 1 m2: 1 × m-m fewer in 's'")
    assert by_field["batch.time_h"].text == "6.7 min more for the batch (1.112 h) saves 1 m2: 1 × m-m fewer in 's'"
    assert (found.blocks[0].limited_by, found.blocks[0].used) == ("pressure", pytest.approx(1.0))


def test_paid_hours_gain_at_once_with_more_pressure() -> None:
    p = problem(block("b", stage("s", flat("m", 0.02)), pressure=2.0), volume=1000.0, time=5.0, objective="cost",
                hour_rate=100.0)  # fmt: skip
    base = solved(p)
    (gain,) = (one for one in gains(p, base) if one.field == "b.pressure_bar")
    assert gain.needs == pytest.approx(2.2)
    assert base.objective is not None
    assert gain.saves == pytest.approx(base.objective.value - enumerated(restated(p, Move(pressure={"b": 2.2}))))


def test_a_longer_run_is_worth_what_its_loading_allows() -> None:
    """Held at 100 L/m2 tested, D = 0.1 of 10 bar·h: pressure would let it go to 10,000 L/m2, the turbidity to 250."""
    medium = Medium("m", "cake", (1e-3, 0.0), cap=100.0, cap_reason="loading-tested", flux=300.0, further_cap=250.0)
    p = problem(block("b", stage("s", medium), pressure=2.0), volume=1000.0, time=5.0)
    base = solved(p)
    assert base.blocks[0].stages[0].limited_by == "loading-tested"
    found = limits(p, base)
    assert found is not None
    (run,) = found.longer_runs
    assert (run.tested, run.loading, run.objective, run.saves) == pytest.approx((100.0, 250.0, 4.0, 6.0))
    assert run.pressure == pytest.approx(1e-3 * 300.0)
    assert run.text == (
        "run m to 250 L/m2 (so far 100), about 0.3 bar at 300 LMH: up to 6 m2 less, if the fitted curve holds that far"
    )
    assert found.blocks[0].text == "'b' leaves 1.98 of 2 bar unused; held: 's' by the loading tested"


def test_longer_runs_of_random_trains_reach_just_far_enough() -> None:
    checked = 0
    for seed in range(80):
        p = random_problem(seed, most=6, hours=False)
        base = design(p)
        if base.objective is None or not base.picks:
            continue
        for run in longer_runs(p, base, {}):
            keys = {(s.name, c.medium): max(k.fouling_factor for k in c.curves)
                    for b in p.blocks for s in b.stages for c in s.candidates if c.medium == run.medium}  # fmt: skip
            enough = restated(p, Move(cap={key: run.loading / worst for key, worst in keys.items()}))
            assert enumerated(enough) == pytest.approx(run.objective, rel=1e-9), seed
            lifted = restated(p, Move(cap=dict.fromkeys(keys, 1e9)))
            assert enumerated(lifted) == pytest.approx(run.objective, rel=1e-9), seed
            assert run.loading > run.tested, seed
            checked += 1
    assert checked > 5


def test_no_design_has_no_limits() -> None:
    p = problem(block("b", stage("s", flat("m", 0.1)), pressure=2.0), volume=1000.0, time=1.0)
    assert limits(p, design(p)) is None


def test_what_limits_a_case() -> None:
    found = trainopt.what_limits(trainopt.load_case(DEMO))
    assert found is not None
    assert [one.block for one in found.blocks] == ["clarification", "guard"]
    assert {"batch.time_h", "clarification.pressure_bar"} <= {gain.field for gain in found.gains}
    assert all(gain.saves > 0.0 for gain in found.gains)
    assert all((gain.needs > gain.now) is (gain.field != "safety_factor") for gain in found.gains)


def test_changes_in_words() -> None:
    before = (Pick("a", "m", "m-1", 5), Pick("b", "n", "n-1", 2), Pick("c", "o", "o-1", 1))
    after = (Pick("a", "m", "m-1", 6), Pick("b", "k", "k-2", 3), Pick("d", "o", "o-1", 1))
    assert changes(before, after) == (
        "1 × m-1 more in 'a', 3 × k-2 in place of 2 × n-1 in 'b', 'c' is left out, 'd' with 1 × o-1"
    )
    assert changes(before, before) == "the same modules"


def test_demo_gains_agree_with_designs_of_changed_files(tmp_path: Path) -> None:
    """Through the scenario file: the time named makes the demo better, 0.1 % less of the step does not."""
    from trainopt.files import set_field

    case = trainopt.load_case(DEMO)
    prepared = prepare(case)
    base = solved(prepared.problem)
    assert base.objective is not None
    found = {gain.field: gain for gain in gains(prepared.problem, base)}
    gain = found["batch.time_h"]
    for part, better in ((1.0, True), (0.999, False)):
        time = gain.now + part * (gain.needs - gain.now)
        result = trainopt.design(set_field(case, "batch.time", time))
        assert result.objective is not None
        assert result.objective.value == pytest.approx(gain.objective if better else base.objective.value, rel=1e-9)


def test_sentences_speak_the_unit_asked_for() -> None:
    prepared = prepare(trainopt.load_case(DEMO))
    found = limits(prepared.problem, design(prepared), prepared.curves)
    assert found is not None
    for gain in found.gains:
        assert gain_words(gain) == gain.text
        if gain.unit == "bar":
            more = (gain.needs - gain.now) * 14.5038  # psi in a bar, from memory
            said = float(gain_words(gain, "psi").split(" psi more")[0])
            assert more <= said <= more * 1.1
    assert all("bar" not in block_words(block, "kPa") for block in found.blocks)
    for run in found.longer_runs:
        assert longer_run_words(run) == run.text
        assert " kPa at" in longer_run_words(run, "kPa")
    (factor,) = [gain for gain in found.gains if gain.field == "safety_factor"]
    assert factor.text.startswith("a safety factor of 1.")
    assert "in place of 1.5" in factor.text
