"""The commands on real files: what they print, where, and with which status."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest
from typer.testing import CliRunner

from tests.files.broken_cases import BROKEN, CASE_FILE, SOUND, Broken, write_workspace
from tests.report.test_json import AREA_PARTS, CURVE, DESIGN, LIMITS, ROUTES, SOLVER, assert_shape, read
from trainopt.cli.program import program

ROOT = Path(__file__).parents[2]
HARVEST = "scenarios/harvest.yaml"
RUNNER = CliRunner()


@pytest.fixture(autouse=True)
def in_the_demo(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)


def run(*arguments: str) -> tuple[int, str, str]:
    """Exit status, stdout and stderr of a command in this process."""
    result = RUNNER.invoke(program, list(arguments))
    assert result.exception is None or isinstance(result.exception, SystemExit), result.exception
    return result.exit_code, result.stdout, result.stderr


def process(*arguments: str, folder: Path = ROOT) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-m", "trainopt", *arguments]
    environment = {key: value for key, value in os.environ.items() if key != "PYTHONIOENCODING"}
    return subprocess.run(
        command, cwd=folder, capture_output=True, text=True, encoding="utf-8", timeout=120, env=environment
    )


def edited(folder: Path, old: str, new: str) -> str:
    """The demo's harvest with one change, in a workspace of its own."""
    for name in ("models", "scenarios"):
        (folder / name).symlink_to(ROOT / name) if name == "models" else (folder / name).mkdir()
    text = (ROOT / HARVEST).read_text(encoding="utf-8")
    assert old in text
    (folder / HARVEST).write_text(text.replace(old, new), encoding="utf-8")
    return str(folder / HARVEST)


def test_design_for_people_fits_and_is_plain() -> None:
    result = process("design", HARVEST)
    assert result.returncode == 0
    assert result.stderr == ""
    assert "\x1b" not in result.stdout
    assert max(len(line) for line in result.stdout.splitlines()) <= 100
    for words in ("What to buy", "proven optimal", "Beside the even split", "Cautions", "oat-coarse-09"):
        assert words in result.stdout


def test_design_as_json_is_one_document_and_nothing_else() -> None:
    result = process("design", HARVEST, "--json")
    document = read(result.stdout)
    assert result.returncode == 0
    assert result.stderr == ""
    assert_shape(document.pop("area_parts"), AREA_PARTS)
    assert_shape(document.pop("routes"), ROUTES)
    assert_shape(document.pop("solver"), SOLVER)
    assert_shape(document.pop("limits"), LIMITS)
    assert_shape(document, DESIGN)
    assert document["inputs"][HARVEST].startswith("sha256:")
    assert any(name.endswith("rye-fine-c.csv") for name in document["inputs"])


def test_design_in_other_units_and_for_another_objective() -> None:
    status, out, _ = run("design", HARVEST, "--units", "psi", "--objective", "cost")
    assert status == 0
    assert "Least cost" in out
    assert "at the end of the batch, psi" in out


def test_no_design_is_status_3_with_reasons(tmp_path: Path) -> None:
    scenario = edited(tmp_path, "time: 6 h", "time: 75 min")
    status, out, _ = run("design", scenario)
    assert status == 3
    assert "No design meets every limit" in out
    status, out, _ = run("design", scenario, "--json")
    assert status == 3
    assert read(out)["status"] == "infeasible"
    assert read(out)["reasons"]


def test_stopped_at_a_limit_is_status_4() -> None:
    status, out, _ = run("design", HARVEST, "--time-limit", "0")
    assert status == 4
    assert "before a limit stopped the search" in out
    status, out, _ = run("design", HARVEST, "--time-limit", "0", "--json")
    assert status == 4
    assert read(out)["status"] == "limit"


def test_curve_for_people_and_as_json() -> None:
    status, out, _ = run("curve", "models/media/rye-fine.yaml")
    assert status == 0
    assert max(len(line) for line in out.splitlines()) <= 100
    assert "Law standard" in out
    assert "pump slip" in out
    status, out, _ = run("curve", "models/media/rye-fine.yaml", "--json")
    assert status == 0
    assert read(out)["medium"] == "rye-fine"
    assert set(CURVE) <= set(read(out))


@pytest.mark.parametrize(("suffix", "start"), [(".svg", b"<?xml"), (".png", b"\x89PNG"), (".pdf", b"%PDF")])
def test_curve_draws_a_picture_and_replaces_none(tmp_path: Path, suffix: str, start: bytes) -> None:
    picture = tmp_path / f"curve{suffix}"
    status, _, messages = run("curve", "models/media/quill-02.yaml", "--plot", str(picture))
    assert (status, messages) == (0, f"wrote {picture}\n")
    first = picture.read_bytes()
    assert first.startswith(start)
    status, out, messages = run("curve", "models/media/quill-02.yaml", "--plot", str(picture))
    assert status == 2
    assert out == ""
    assert "--force" in messages
    status, _, _ = run("curve", "models/media/quill-02.yaml", "--plot", str(picture), "--force")
    assert status == 0
    assert picture.read_bytes() == first


def test_check_finds_the_demo_sound() -> None:
    assert run("check", ".", HARVEST) == (0, "no problems\n", "")


@pytest.mark.parametrize("kind", [".html", ".xlsx", ".json"])
def test_report_is_written_once(tmp_path: Path, kind: str, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("SOURCE_DATE_EPOCH", "1767323045")
    first, second = tmp_path / f"a{kind}", tmp_path / f"b{kind}"
    assert run("report", HARVEST, "-o", str(first)) == (0, "", f"wrote {first}\n")
    # Asked for all that a report works out, the command prints just what the report holds.
    asked = ("--alternatives", "5", "--limits", "--json")
    status, out, messages = run("design", HARVEST, "--report", str(second), *asked)
    assert (status, messages) == (0, f"wrote {second}\n")
    assert first.read_bytes() == second.read_bytes()
    assert run("report", HARVEST, "-o", str(first))[0] == 2
    assert b"2026-01-02" in first.read_bytes() or kind == ".xlsx"
    if kind == ".json":
        assert json.loads(first.read_text(encoding="utf-8"))["design"] == read(out)


def test_report_of_no_design_still_says_why(tmp_path: Path) -> None:
    page = tmp_path / "why.html"
    status, _, _ = run("report", edited(tmp_path, "time: 6 h", "time: 75 min"), "-o", str(page))
    assert status == 3
    assert "No design meets every limit" in page.read_text(encoding="utf-8")


@pytest.mark.parametrize("case", BROKEN, ids=lambda case: case.name)
def test_every_broken_file_is_status_2_with_its_place(
    case: Broken, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    scenario = write_workspace(tmp_path, case)
    if case.name == "case-rating-inlet":
        scenario.write_text(SOUND[CASE_FILE].replace("operation: constant-flow", "operation: constant-pressure"))
    for arguments in (("design", str(scenario)), ("check", ".")):
        status, out, messages = run(*arguments)
        assert status == 2, messages
        assert out == ""
        place = f"{case.at}:{case.line()}:" if case.mark is not None else case.at
        (line, *_) = [line for line in messages.splitlines() if line.startswith(place)] or [""]
        assert line, messages
        for word in case.words:
            assert word in messages
        assert "Traceback" not in messages


@pytest.mark.parametrize("case", BROKEN[:: max(1, len(BROKEN) // 4)], ids=lambda case: case.name)
def test_broken_files_in_a_process_of_their_own(case: Broken, tmp_path: Path) -> None:
    scenario = write_workspace(tmp_path, case)
    result = process("design", str(scenario), folder=tmp_path)
    assert result.returncode == 2
    assert result.stdout == ""
    assert result.stderr.count("Traceback") == 0
    assert case.at in result.stderr


@pytest.mark.parametrize(
    "arguments",
    [("design", "nowhere.yaml"), ("curve", "nowhere.yaml"), ("check", "nowhere.yaml"), ("design", "models"),
     ("report", "nowhere.yaml", "-o", "x.html"), ("curve", "README.md"), ("design", "README.md")],
)  # fmt: skip
def test_a_file_that_is_none_is_wrong_input(arguments: tuple[str, ...]) -> None:
    status, out, messages = run(*arguments)
    assert status == 2
    assert out == ""
    assert arguments[1] in messages


def test_a_report_beside_changes_nothing_that_is_printed(tmp_path: Path) -> None:
    for extra in ((), ("--json",), ("--alternatives", "2", "--gap", "10")):
        report = tmp_path / f"report{len(extra)}.html"
        alone = process("design", "scenarios/redundant-guard.yaml", *extra)
        beside = process("design", "scenarios/redundant-guard.yaml", *extra, "--report", str(report))
        assert beside.stdout == alone.stdout
        assert report.is_file()
