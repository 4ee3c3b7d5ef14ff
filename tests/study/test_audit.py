"""Audits: the saving, the most a split could waste, the lever, over cases and folders."""

from __future__ import annotations

import shutil
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

import trainopt
from tests.study.trains import random_case
from trainopt.errors import InputError
from trainopt.files import Case, Workspace, set_field
from trainopt.files.catalog import Catalog
from trainopt.files.medium import Medium
from trainopt.files.scenario import Scenario
from trainopt.optimize.design import prepare
from trainopt.optimize.restate import route_of_picks
from trainopt.report.picture import picture_bytes
from trainopt.report.study_figures import audit_figure
from trainopt.report.study_json import audit_document
from trainopt.report.study_text import audit_text
from trainopt.study.audit import audit_case
from trainopt.study.waste import most_waste

ROOT = Path(__file__).parents[2]


def two_stages(first: float, second: float, tested: float = 1e6) -> trainopt.Case:
    """Two stages that do not foul, of these resistances, in fine modules; `tested` L/m2."""
    media, modules = {}, {}
    for name, resistance in (("one", first), ("two", second)):
        media[name] = Medium.model_validate(
            {
                "medium": name,
                "curve": {"law": "cake", "parameters": {"R0": resistance, "k": 0.0},
                          "tested": {"loading": tested, "flux": 1e6}},
                "limits": {},
            }
        )  # fmt: skip
        modules[f"m-{name}"] = {"medium": name, "area": 0.1, "price": 1.0, "max_count": 500}
    scenario = Scenario.model_validate(
        {
            "scenario": "two stages",
            "batch": {"volume": 1000.0, "time": 5.0},
            "blocks": (
                {"block": "b", "pressure": 1.0,
                 "stages": ({"stage": "s1", "media": ("one",)}, {"stage": "s2", "media": ("two",)})},
            ),
        }
    )  # fmt: skip
    return Case(Workspace(Path(), Catalog.model_validate({"modules": modules}), media), scenario)


@pytest.mark.parametrize(("ratio", "factor"), [(1.0, 1.0), (4.0, 10.0 / 9.0), (1e4, 2 * 10001 / 101**2)])
def test_the_bound_is_the_closed_form_for_stages_that_do_not_foul(ratio: float, factor: float):
    # n·ΣR/(Σ√R)², by Cauchy–Schwarz at most n (derived; equal-marginal split).
    found = audit_case(two_stages(0.1 / (1.0 + ratio), 0.1 * ratio / (1.0 + ratio)))
    assert found.waste is not None
    assert found.waste.even / found.waste.ideal == pytest.approx(factor, rel=1e-4)
    assert found.waste.percent == pytest.approx(100.0 * (1.0 - 1.0 / factor), abs=0.01)
    assert found.waste.factor == 2.0
    assert factor <= found.waste.factor
    # In small modules the real saving is nearly that of any size.
    assert found.design.saving is not None
    assert found.design.saving.area_percent == pytest.approx(found.waste.percent, abs=0.4)
    assert (found.lever == "split") == (ratio > 1.0)


@settings(max_examples=40, deadline=None, derandomize=True)
@given(seed=st.integers(0, 10**6))
def test_the_ideal_split_never_loses_to_the_even_one(seed: int):
    case = random_case(seed)
    prepared = prepare(case)
    design = trainopt.design(prepared)
    assume(bool(design.picks))
    route = route_of_picks(prepared.problem, design.picks)
    assert route is not None
    waste = most_waste(prepared.problem, route)
    assume(waste is not None)
    assert 0.0 <= waste.percent < 100.0
    assert waste.ideal <= waste.even
    # No catalog: at most what the whole modules of the optimum take (hours and setups aside).
    if design.objective.kind == "area":
        assert waste.ideal <= design.area * (1 + 1e-3)


def test_the_demo_folder():
    found = trainopt.audit([ROOT])
    names = [case.file for case in found.cases]
    assert names == sorted(names)
    assert {"scenarios/harvest.yaml", "scenarios/redundant-guard.yaml"} <= {"/".join(Path(n).parts[-2:]) for n in names}
    assert found.failures == ()
    for case in found.cases:
        design = trainopt.design(trainopt.load_case(ROOT / "scenarios" / Path(case.file).name))
        assert case.design.picks == design.picks
        assert case.modules[0] == sum(pick.count for pick in design.picks)
        assert case.verdict.endswith(".")
    by_name = {Path(case.file).stem: case for case in found.cases}
    harvest = by_name["harvest"]
    assert harvest.lever == "split"
    assert f"{harvest.design.saving.area:.3g} m²" in harvest.verdict
    shift = {s.stage: s.optimum - s.even for s in harvest.shifts}
    assert "'secondary' should have had" in harvest.verdict
    assert max(shift, key=shift.__getitem__) == "secondary"
    guard = by_name["redundant-guard"]
    assert guard.lever not in ("split", "time")
    assert "wastes nothing" in guard.verdict
    text = audit_text(found)
    assert max(map(len, text.splitlines())) <= 100
    assert all(case.verdict.split(":")[0][:30] in text for case in found.cases)
    figure = picture_bytes(audit_figure(found), ".svg").decode()
    assert "even split" in figure
    document = audit_document(found)
    assert document["schema"] == "trainopt.audit/1"
    assert document["cases"][0]["design"]["schema"] == "trainopt.design/1"


def test_no_design_is_a_verdict(harvest: trainopt.Case):
    found = audit_case(set_field(harvest, "batch.volume", 9000.0))
    assert found.lever == "no-design"
    assert found.verdict.startswith("No design meets every limit")
    assert found.waste is None
    picture_bytes(audit_figure(trainopt.audit([ROOT / "scenarios" / "harvest.yaml"])), ".png")


def test_an_even_split_without_a_design_is_a_verdict(harvest: trainopt.Case):
    found = audit_case(set_field(harvest, "batch.volume", 3900.0))
    assert found.design.status == "optimal"
    assert found.design.even_split.status == "infeasible"
    assert found.lever == "split"
    assert "yields no design" in found.verdict
    assert found.modules[1] is None


def test_a_broken_case_does_not_stop_the_others(tmp_path: Path):
    for name in ("models", "scenarios"):
        shutil.copytree(ROOT / name, tmp_path / name)
    (tmp_path / "scenarios" / "a-broken.yaml").write_text("scenario: x\n")
    found = trainopt.audit([tmp_path])
    assert len(found.cases) == len(list((ROOT / "scenarios").glob("*.yaml")))
    assert any("batch" in problem.text for problem in found.failures)
    assert "Not audited" in audit_text(found)


def test_paths_that_hold_nothing(tmp_path: Path):
    with pytest.raises(InputError, match="no such file or folder"):
        trainopt.audit([tmp_path / "none.yaml"])
    with pytest.raises(InputError, match="holds no scenario"):
        trainopt.audit([tmp_path])


def test_the_same_file_named_twice_is_audited_once():
    path = ROOT / "scenarios" / "harvest.yaml"
    assert len(trainopt.audit([path, path]).cases) == 1


def test_hours_that_cost_are_told_as_time(harvest_cost: trainopt.Case):
    found = audit_case(replace(harvest_cost))
    assert found.design.saving is not None
    assert found.design.saving.cost > 0.0
    assert "are enough" in found.verdict


def test_the_verdict_names_the_change_that_gives_most_for_its_size():
    case = trainopt.load_case(ROOT / "scenarios" / "redundant-guard.yaml")
    found = audit_case(case)
    limits = trainopt.what_limits(case)
    assert limits is not None
    assert limits.longer_runs == ()
    best = max(limits.gains, key=lambda gain: gain.saves / (gain.needs / gain.now - 1.0))
    assert best.field == "batch.time_h"
    assert found.verdict.endswith(f"; of all limits, the change that gives most for its size: {best.text}.")
    assert found.lever == "safety-factor"  # the largest part of the area stays the lever
    # The change does what is said of it.
    assert found.design.area is not None
    moved = trainopt.design(set_field(case, "batch.time", best.needs * (1.0 + 1e-9)))
    assert moved.area == pytest.approx(found.design.area - best.saves, abs=1e-9)
    document = audit_document(trainopt.audit([ROOT / "scenarios" / "redundant-guard.yaml"]))
    assert [gain["text"] for gain in document["cases"][0]["limits"]["gains"]] == [gain.text for gain in limits.gains]


def test_where_no_part_of_the_area_is_large_the_best_change_is_the_lever():
    found = audit_case(two_stages(0.05, 0.05))
    assert found.lever == "pressure-or-time"
    assert "here, and could waste at most 0 % with these curves and modules of any size; of all limits" in found.verdict
    assert " saves 0.1 m2: 1 × m-" in found.verdict


def test_a_longer_bench_run_is_the_change_where_the_loading_tested_holds():
    found = audit_case(two_stages(0.005, 0.005, tested=20.0))
    assert found.lever == "limits"
    assert "look at a longer bench run or a higher rating; of all limits" in found.verdict
    assert "for its size: run " in found.verdict
    assert " (so far 20)" in found.verdict


def test_large_trains_and_split_cases_are_not_asked_for_gains(harvest: trainopt.Case, monkeypatch: pytest.MonkeyPatch):
    assert audit_case(harvest).limits is None  # the split is to blame
    case = two_stages(0.05, 0.05)
    small = audit_case(case)
    monkeypatch.setattr("trainopt.study.audit.MOST_STAGES", 1)
    large = audit_case(case)
    assert small.limits is not None
    assert large.limits is None
    assert large.lever == "pressure-or-time"
    assert "would save, for pressure is what limits" in large.verdict
