"""What `check` finds: every problem that would stop a design, each at its own file and line."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.bench.lab import Lab
from tests.files.broken_cases import BROKEN
from tests.files.sound import CASE_FILE, OAT_FILE, RUN, RYE, RYE_FILE, SOUND, write_workspace
from trainopt.curves.check import check
from trainopt.errors import InputError
from trainopt.files import load_case
from trainopt.optimize.design import prepare


def test_a_column_that_a_run_lacks_is_told_at_the_line_of_the_medium(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    scenario = write_workspace(tmp_path)
    text = RYE.replace("volume: V [mL]", "volume: V [ml]").replace("pressure: P [psi]", "pressure: P1 [psi]")
    (tmp_path / RYE_FILE).write_text(text, encoding="utf-8")
    lines = {
        mark: number for number, line in enumerate(text.splitlines(), 1) for mark in ("[ml]", "P1") if mark in line
    }
    have = "models/bench/rye-a.csv; expected one of 't [min]', 'V [mL]', 'P [psi]', 'NTU'"
    told = [
        f"{RYE_FILE}:{lines['[ml]']}: run 1: columns.volume: no column is headed 'V [ml]' in {have}",
        f"{RYE_FILE}:{lines['P1']}: run 1: columns.pressure: no column is headed 'P1 [psi]' in {have}",
    ]
    assert [str(problem) for problem in check([tmp_path])[0]] == told
    with pytest.raises(InputError) as raised:
        prepare(load_case(scenario))
    assert [str(problem) for problem in raised.value.problems] == told


def edit(file: str, *changes: tuple[str, str]) -> dict[str, str]:
    text = SOUND[file]
    for old, new in changes:
        assert old in text, old
        text = text.replace(old, new)
    return {file: text}


RUN_FILE = "models/bench/rye-a.csv"
LINES = RUN.splitlines()
GIVEN = "  parameters:\n    R0: 0.0008 bar/LMH\n    k: 0.012 m2/L\n"
DIPS = "  coefficients: [0.0008 bar/LMH, -0.001 bar/LMH/(L/m2), 0 bar/LMH/(L/m2)^2]\n"
STANDS = SOUND[CASE_FILE][SOUND[CASE_FILE].index("installed:") :]
HELD = ("operation: constant-flow", "operation: constant-pressure")

REFUSED = {
    # bench files
    "run-empty": {RUN_FILE: ""},
    "run-without-header": {RUN_FILE: "\n".join(LINES[1:])},
    "run-time-goes-back": edit(RUN_FILE, ("\n25,", "\n19,")),
    "run-volume-falls": edit(RUN_FILE, ("\n25,95.0", "\n25,5.0")),
    "run-word-in-a-cell": edit(RUN_FILE, ("\n25,95.0", "\n25,many")),
    "run-with-three-readings": {RUN_FILE: "\n".join(LINES[:4])},
    "run-without-its-column": edit(RUN_FILE, ("P [psi]", "gauge")),
    # what the medium says of its runs
    "run-in-the-hold-up": edit(RYE_FILE, ("hold_up: 12 mL", "hold_up: 2 L")),
    "run-tared-as-mass": edit(RYE_FILE, ("tare: 5 mL", "tare: 5 g")),
    "run-column-of-another-kind": edit(RYE_FILE, ("volume: V [mL]", "mass: V [mL]")),
    "run-sheet-of-a-csv": edit(RYE_FILE, ("lot: a", "sheet: x\n      lot: a")),
    "runs-both": {**edit(RYE_FILE, ("hold_up: 12 mL", "hold_up: 2 L")), "models/bench/rye-b.csv": "nothing\n"},
    # curves
    "curve-of-too-few-readings": {
        **edit(RYE_FILE, ("law: cake", "law: cubic"), ("\n      tare: 5 mL", "")),
        RUN_FILE: "\n".join(LINES[:6]),
        "models/bench/rye-b.csv": "\n".join(LINES[:6]),
    },
    "curve-past-its-pole": edit(OAT_FILE, ("law: intermediate", "law: complete")),
    "curve-that-goes-below-zero": edit(OAT_FILE, ("law: intermediate", "law: quadratic"), (GIVEN, DIPS)),
    # a block against what its media stand
    "block-beyond-both-ratings": edit(CASE_FILE, HELD, ("pressure: 2 bar", "pressure: 4 bar")),
    "block-beyond-the-inlet": {**edit(CASE_FILE, HELD), **edit(OAT_FILE, ("3.4 bar", "1.9 bar"))},
    # several at once, and files that look like another kind
    "medium-and-scenario": {
        **edit(OAT_FILE, ("law: intermediate", "law: complete")),
        **edit(CASE_FILE, ("objective: area", "objective: price")),
    },
    "scenario-with-a-curve": edit(CASE_FILE, ("objective: area", "curve: area")),
    "scenario-with-modules": edit(CASE_FILE, ("objective: area", "modules: area")),
    "scenario-installed-empty": edit(CASE_FILE, (STANDS, "installed: {}\n")),
    **{case.name: {case.file: case.text()} for case in BROKEN if case.name != "case-rating-inlet"},
}


@pytest.mark.parametrize("name", REFUSED)
def test_what_a_design_refuses_is_found_by_check(name: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    scenario = write_workspace(tmp_path)
    for file, text in REFUSED[name].items():
        (tmp_path / file).write_text(text, encoding="utf-8")
    with pytest.raises(InputError) as raised:
        prepare(load_case(scenario))
    refused = set(raised.value.problems)
    assert refused <= set(check([tmp_path])[0])
    assert refused <= set(check([scenario])[0])


AUTO = """\
medium: rye
curve:
  law: auto
  runs: [{file: ../bench/rye-a.csv, area: 23 cm2, operation: constant-flow}]
limits: {loading: 90 L/m2}
"""


def test_auto_that_cannot_tell_is_found_by_check(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    scenario = write_workspace(tmp_path)
    (tmp_path / RYE_FILE).write_text(AUTO, encoding="utf-8")
    refusals = 0
    for seed in range(8):
        Lab(noise=0.25, n=8, reach=150.0, seed=seed, turbidity=(1.0, 0.0)).write(tmp_path / RUN_FILE)
        try:
            prepare(load_case(scenario))
            assert check([tmp_path])[0] == ()
        except InputError as error:
            (problem,) = error.problems
            assert (problem.file, problem.line) == (RYE_FILE, 3)
            assert "auto cannot tell between" in problem.text
            assert check([tmp_path])[0] == check([scenario])[0] == (problem,)
            refusals += 1
    assert refusals >= 2


def test_a_scenario_in_a_folder_of_its_own_is_checked_with_its_workspace(tmp_path: Path) -> None:
    write_workspace(tmp_path)
    inner = tmp_path / "scenarios" / "spring" / "case.yaml"
    inner.parent.mkdir()
    inner.write_text(SOUND[CASE_FILE].replace("objective: area", "objective: price"), encoding="utf-8")
    with pytest.raises(InputError) as raised:
        load_case(inner)
    assert check([tmp_path])[0] == check([inner])[0] == raised.value.problems


def test_a_bench_file_by_itself_is_held_to_what_its_medium_says(tmp_path: Path) -> None:
    write_workspace(tmp_path)
    (tmp_path / RYE_FILE).write_text(RYE.replace("hold_up: 12 mL", "hold_up: 2 L"), encoding="utf-8")
    (problem,) = check([tmp_path / RUN_FILE])[0]
    assert "holds no usable reading" in problem.text
    assert check([tmp_path / "models/bench/rye-b.csv"])[0] == ()
