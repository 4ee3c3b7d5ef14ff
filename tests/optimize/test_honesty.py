"""What a user is told when there is no design, or none of the kind asked for."""

from __future__ import annotations

from pathlib import Path

import pytest
from factory import block, flat, problem, random_problem, stage

import trainopt
from trainopt.optimize.design import design
from trainopt.optimize.recheck import march_stages
from trainopt.optimize.restate import route_of_picks
from trainopt.train.march import constant_pressure

ROOT = Path(__file__).parent.parent.parent


def demo(tmp_path: Path, old: str, new: str) -> trainopt.Case:
    """The demo's harvest with one line changed, in a copy of the workspace."""
    (tmp_path / "models").symlink_to(ROOT / "models")
    (tmp_path / "scenarios").mkdir(exist_ok=True)
    text = (ROOT / "scenarios" / "harvest.yaml").read_text(encoding="utf-8")
    assert old in text
    path = tmp_path / "scenarios" / "harvest.yaml"
    path.write_text(text.replace(old, new), encoding="utf-8")
    return trainopt.load_case(path)


def test_a_time_that_is_named_works_when_it_is_typed_back(tmp_path: Path) -> None:
    (tmp_path / "a").mkdir()
    (tmp_path / "b").mkdir()
    impossible = trainopt.design(demo(tmp_path / "a", "time: 6 h", "time: 1.2 h"))
    assert impossible.status == "infeasible"
    needed = {k: v for reason in impossible.reasons for k, v in reason.needs.items()}["batch.time_h"]
    assert needed is not None
    assert trainopt.design(demo(tmp_path / "b", "time: 6 h", f"time: {needed!r} h")).status == "optimal"


def test_a_hair_too_little_time_still_has_its_reasons(tmp_path: Path) -> None:
    # The least time is 10/3 h: the solver's tolerance and the closed form disagree only about its last digits.
    result = trainopt.design(demo(tmp_path, "time: 6 h", "time: 3.33333333 h"))
    assert result.status == "optimal" or result.reasons


def test_the_starting_flow_is_that_of_the_march() -> None:
    seen = 0
    for seed in range(60):
        found = design(p := random_problem(seed, most=4, pressure=True))
        route = route_of_picks(p, found.picks)
        for b, (one, shown) in enumerate(zip(p.blocks, found.blocks, strict=False)):
            if one.operation != "constant-pressure" or route is None or not route[b]:
                assert shown.starting_flow is None
                continue
            courses = [
                constant_pressure(march_stages(route[b], lot, 1.0), p.volume, one.pressure, one.line, one.static)
                for lot in range(len(p.lots))
            ]
            assert shown.starting_flow == pytest.approx(max(float(course.flow[0]) for course in courses))
            seen += 1
    assert seen > 10


def test_a_clean_train_at_constant_pressure_that_starts_too_fast_is_said() -> None:
    # 40 m2 at 0.01 bar/LMH under 2 bar starts at 8000 L/h, 200 LMH.
    guard = flat("m", 0.01, flux=150.0, sizes=(("m", 40.0, 1.0, 1),))
    for most, said in ((9000.0, 1), (5000.0, 2)):
        one = block("b", stage("s", guard), pressure=2.0, operation="constant-pressure", max_flow=most)
        codes = [notice.code for notice in design(problem(one, volume=1000.0, time=5.0)).warnings]
        assert codes == ["starting-flow"] * said


def test_a_block_that_is_not_used_is_said_with_the_time_that_it_takes() -> None:
    needed = block("first", stage("s", flat("m", 0.01)), setup=0.25)
    skipped = block("guard", stage("g", flat("n", 0.01), optional=True), setup=0.5, max_flow=1000.0)
    found = design(problem(needed, skipped, volume=1000.0, time=5.0))
    assert [b.block for b in found.blocks if not b.stages] == ["guard"]
    (optimum, even) = [notice.text for notice in found.warnings if notice.code == "block-not-used"]
    said = "no stage of this block is used, since all are optional; its setup of 0.5 h and"
    # 1000 L pass at 1000 L/h at most; the even split halves what setups leave of 5 h.
    assert found.blocks[1].time == pytest.approx(1.0)
    assert optimum == f"guard: {said} its time of 1 h still count, which leaving the block out would save"
    assert even == (
        f"guard, even split: {said} its even share of the time of 2.125 h still count, "
        "which leaving the block out would save"
    )
    assert found.even_split is not None
    assert found.even_split.blocks[1].time == pytest.approx((5.0 - 0.75) / 2.0)


def test_a_block_that_is_not_used_and_takes_nothing_is_said_too_and_one_that_is_used_is_not() -> None:
    needed = block("first", stage("s", flat("m", 0.01)))
    skipped = block("guard", stage("g", flat("n", 0.01), optional=True))
    found = design(problem(needed, skipped, volume=1000.0, time=5.0))
    texts = [notice.text for notice in found.warnings if notice.code == "block-not-used"]
    assert texts[0] == "guard: no stage of this block is used, since all are optional; it takes no time"
    assert len(texts) == 2
    used = design(problem(needed, block("guard", stage("g", flat("n", 0.01))), volume=1000.0, time=5.0))
    assert "block-not-used" not in [notice.code for notice in used.warnings]
