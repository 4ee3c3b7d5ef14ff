"""Scenarios that extend another: what is merged, what is replaced, and whose line a problem names."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.files.broken_cases import CASE, write_workspace
from trainopt.errors import InputError
from trainopt.files import Case, check, load_case


def extending(folder: Path, text: str, base: str = CASE) -> Path:
    """A scenario beside the sound one, with that text."""
    write_workspace(folder)
    (folder / "scenarios/case.yaml").write_text(base)
    path = folder / "scenarios/more.yaml"
    path.write_text(text)
    return path


def problems(path: Path) -> list[str]:
    with pytest.raises(InputError) as raised:
        load_case(path)
    return [str(problem) for problem in raised.value.problems]


def test_only_what_differs_is_written(tmp_path: Path) -> None:
    text = "extends: case.yaml\nscenario: twice as much\nbatch: {volume: 1000 L}\nsafety_factor: 1.6\n"
    case = load_case(extending(tmp_path, text))
    base = load_case(tmp_path / "scenarios/case.yaml")
    assert case.scenario.scenario == "twice as much"
    assert case.scenario.extends == "case.yaml"
    assert (case.scenario.batch.volume, case.scenario.batch.time) == (1000.0, base.scenario.batch.time)
    assert case.scenario.safety_factor == 1.6
    assert case.scenario.blocks == base.scenario.blocks
    assert case.scenario.costs == base.scenario.costs


def test_blocks_and_stages_merge_by_name_and_further_ones_follow(tmp_path: Path) -> None:
    text = """\
extends: case.yaml
blocks:
  - block: second
    pressure: 1 bar
    stages: [{stage: last, media: [rye]}]
  - block: clarification
    pressure: 1.8 bar
    stages:
      - stage: polish
        optional: true
installed:
  last: {module: rye-05, count: 3}
"""
    case = load_case(extending(tmp_path, text))
    first, second = case.scenario.blocks
    assert (first.block, first.pressure, first.static) == ("clarification", 1.8, 0.05)
    assert [(s.stage, s.optional) for s in first.stages] == [("primary", False), ("polish", True)]
    assert first.stages[1].media[0].after == ("oat",)
    assert [stage.stage for stage in second.stages] == ["last"]


def test_other_lists_are_replaced_and_nothing_takes_a_value_away(tmp_path: Path) -> None:
    text = """\
extends: case.yaml
blocks:
  - block: clarification
    pump:
    stages: [{stage: primary, media: [rye]}, {stage: polish, media: [oat]}]
installed:
"""
    scenario = load_case(extending(tmp_path, text)).scenario
    assert scenario.blocks[0].pump is None
    assert scenario.installed is None
    assert [[choice.medium for choice in stage.media] for stage in scenario.stages] == [["rye"], ["oat"]]


def test_a_chain_of_files_each_one_level(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    path = extending(tmp_path, "extends: middle/middle.yaml\nbatch: {time: 4 h}\n")
    (tmp_path / "scenarios/middle").mkdir()
    (tmp_path / "scenarios/middle/middle.yaml").write_text("extends: ../case.yaml\nbatch: {volume: 800 L, time: 5 h}\n")
    case = load_case(path)
    assert (case.scenario.batch.volume, case.scenario.batch.time, case.scenario.batch.temperature) == (800.0, 4.0, 18.0)
    assert [s.shown for s in case.scenario.source.parents] == ["scenarios/middle/middle.yaml", "scenarios/case.yaml"]
    assert {"scenarios/more.yaml", "scenarios/middle/middle.yaml", "scenarios/case.yaml"} <= set(case.inputs())


def test_each_problem_names_the_file_and_line_it_stands_in(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    text = """\
extends: case.yaml
# a comment
blocks:
  - block: clarification
    stages:
      - stage: polish
        media: [{medium: rye, after: [barley]}]
batch: {volume: 0 L}
"""
    base = CASE.replace("setup: 30 min", "setup: -30 min").replace("media: [oat]", "media: [oad]")
    found = problems(extending(tmp_path, text, base))
    assert [line.split(": ")[0] for line in found] == ["scenarios/case.yaml:14", "scenarios/more.yaml:8"]
    found = problems(extending(tmp_path, text.replace("0 L", "9 L"), base.replace("-30 min", "30 min")))
    places = [line.split(": ")[0] for line in found]
    assert "scenarios/case.yaml:22" in places
    assert "scenarios/more.yaml:7" in places


def test_what_is_missing_in_all_of_them_is_told_where_the_part_stands(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    text = "extends: case.yaml\nblocks:\n  - block: second\n    stages: [{stage: last, media: [rye]}]\n"
    found = problems(extending(tmp_path, text))
    assert found[0].startswith("scenarios/more.yaml:3: block 'second': 'pressure' is missing")


CIRCLES = [
    ("extends: more.yaml\n", "more.yaml → more.yaml"),
    ("extends: ./../scenarios/more.yaml\n", "more.yaml → more.yaml"),
    ("extends: back.yaml\n", "more.yaml → back.yaml → more.yaml"),
]


@pytest.mark.parametrize(("text", "words"), CIRCLES)
def test_circles_are_refused(tmp_path: Path, text: str, words: str) -> None:
    path = extending(tmp_path, text)
    (path.parent / "back.yaml").write_text("extends: more.yaml\n")
    assert any(words in line and ".yaml:1: extends" in line for line in problems(path))


def test_a_file_that_is_not_there(tmp_path: Path) -> None:
    found = problems(extending(tmp_path, "scenario: x\nextends: cas.yaml\n"))
    assert any("more.yaml:2: extends: no such file 'cas.yaml'" in line for line in found)


def test_a_broken_parent_is_told(tmp_path: Path) -> None:
    path = extending(tmp_path, "extends: case.yaml\n", "batch: [\n")
    assert any("case.yaml" in line and "cannot be read as YAML" in line for line in problems(path))


def test_extends_must_be_text(tmp_path: Path) -> None:
    assert any("extends: a list is not text" in line for line in problems(extending(tmp_path, "extends: [a]\n")))


def test_a_folder_of_them_is_checked(tmp_path: Path) -> None:
    extending(tmp_path, "extends: case.yaml\nbatch: {volume: 9 bar}\n")
    assert [p.file.rsplit("/", 1)[1] for p in check([tmp_path])[0]] == ["more.yaml"]


def test_the_same_as_written_out(tmp_path: Path) -> None:
    def plain(case: Case) -> dict[str, object]:
        return case.scenario.model_dump(exclude={"extends"})

    path = extending(tmp_path, "extends: case.yaml\nschedule: side-by-side\ncosts: {product: {recovered: 0.5}}\n")
    inherited = load_case(path)
    path.write_text(CASE.replace("sequential", "side-by-side").replace("recovered: 0.8", "recovered: 0.5"))
    assert plain(inherited) == plain(load_case(path))
