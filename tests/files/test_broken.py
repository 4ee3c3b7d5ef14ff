"""Every way to break a workspace is found, at its file and line, in words that say what was expected."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.files.broken_cases import BROKEN, CASE_FILE, SOUND, Broken, write_workspace
from trainopt.errors import InputError
from trainopt.files import check, load_case


def test_the_workspace_is_sound_before_it_is_broken(tmp_path: Path) -> None:
    case = load_case(write_workspace(tmp_path))
    assert case.warnings == ()
    assert check([tmp_path]) == ((), ())


def test_there_are_at_least_sixty_cases_with_names_of_their_own() -> None:
    names = [case.name for case in BROKEN]
    assert len(names) >= 60
    assert len(set(names)) == len(names)


@pytest.mark.parametrize("case", BROKEN, ids=lambda case: case.name)
def test_each_fault_is_found_where_it_stands(case: Broken, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    scenario = write_workspace(tmp_path, case)
    if case.name == "case-rating-inlet":
        scenario.write_text(SOUND[CASE_FILE].replace("operation: constant-flow", "operation: constant-pressure"))
    with pytest.raises(InputError) as raised:
        load_case(scenario)
    problems = raised.value.problems
    found = [p for p in problems if p.file == case.at and (case.mark is None or p.line == case.line())]
    assert found, f"expected at {case.at}:{case.line()}: {raised.value}"
    assert case.follows or len({(p.file, p.line) for p in problems}) == 1, f"one fault, one place: {raised.value}"
    text = "\n".join(problem.text for problem in found)
    for word in case.words:
        assert word in text
    assert check([tmp_path])[0] == problems
