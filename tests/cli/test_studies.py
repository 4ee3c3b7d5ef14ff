"""The commands that study a train, on the demo: what they print, where, and with which status."""

from __future__ import annotations

import csv
import io
import json
from pathlib import Path

import pytest
from typer.testing import CliRunner

from trainopt.cli.program import program

ROOT = Path(__file__).parents[2]
HARVEST, INSTALLED = "scenarios/harvest.yaml", "scenarios/harvest-installed.yaml"
RUNNER = CliRunner()


@pytest.fixture(autouse=True)
def in_the_demo(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)


def run(*arguments: str) -> tuple[int, str, str]:
    """Exit status, stdout and stderr of a command in this process."""
    result = RUNNER.invoke(program, list(arguments))
    assert result.exception is None or isinstance(result.exception, SystemExit), result.exception
    return result.exit_code, result.stdout, result.stderr


def test_sweep_prints_a_table_a_document_or_csv(tmp_path: Path) -> None:
    vary = ("--vary", "batch.volume=1900 L, 2000 L", "--workers", "1")
    picture = tmp_path / "line.svg"
    status, text, messages = run("sweep", HARVEST, *vary, "--plot", str(picture))
    assert (status, messages) == (0, f"wrote {picture}\n")
    assert "14 × oat-coarse-09" in text
    assert picture.read_text(encoding="utf-8").startswith("<?xml")
    status, text, messages = run("sweep", HARVEST, *vary, "--json", "--no-changes")
    assert (status, messages) == (0, "")
    assert json.loads(text)["schema"] == "trainopt.sweep/1"
    status, text, messages = run("sweep", HARVEST, *vary, "--csv", "--no-changes")
    assert (status, messages) == (0, "")
    rows = list(csv.DictReader(io.StringIO(text)))
    assert [row["status"] for row in rows] == ["optimal", "optimal"]


def test_a_sweep_without_any_design_has_its_own_status() -> None:
    status, text, _ = run("sweep", HARVEST, "--vary", "batch.volume=9000 L, 9500 L")
    assert status == 3
    assert "Cells without a design" in text


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("sweep", HARVEST, "--vary", "batch.volum=1 L, 2 L"), "did you mean 'volume'"),
        (("sweep", HARVEST, "--vary", "batch.volume"), "--vary: 'batch.volume' is not an axis"),
        (("sweep", HARVEST, "--vary", "batch.volume=1, 2"), "--vary: 1 has no unit"),
        (("sweep", HARVEST, *("--vary", "safety_factor=1, 2") * 3), "--vary: 3 fields vary; expected one or two"),
        (("sweep", HARVEST, "--vary", "safety_factor=1, 2", "--json", "--csv"), "expected one of them"),
        (("sweep", HARVEST, "--vary", "safety_factor=1, 2", "--plot", "x.gif"), "expected one of .svg, .png, .pdf"),
        (("sweep", HARVEST, "--vary", "safety_factor=1, 2", "--resume", "README.md"), "is not the journal of a sweep"),
        (("sweep", "scenarios/none.yaml", "--vary", "safety_factor=1, 2"), "scenarios/none.yaml"),
        (("rate", HARVEST), "'installed' is missing"),
        (("rate", INSTALLED, "--volume", "1500"), "--volume: 1500 has no unit"),
        (("rate", INSTALLED, "--volume", "0 L"), "--volume: a batch of no volume"),
        (("simulate", INSTALLED, "--volume", "-2 L"), "--volume: a batch of no volume"),
        (("simulate", INSTALLED, "--json", "--csv"), "expected one of them"),
        (("audit", "scenarios/none.yaml"), "no such file or folder"),
    ],
)
def test_wrong_input_is_said_in_a_line(arguments: tuple[str, ...], words: str) -> None:
    status, text, messages = run(*arguments)
    assert (status, text) == (2, "")
    assert words in messages
    assert "Traceback" not in messages


def test_nothing_is_overwritten(tmp_path: Path) -> None:
    picture = tmp_path / "audit.png"
    picture.write_bytes(b"mine")
    status, _, messages = run("audit", HARVEST, "--plot", str(picture))
    assert status == 2
    assert "exists already" in messages
    assert picture.read_bytes() == b"mine"
    assert run("audit", HARVEST, "--plot", str(picture), "--force")[0] == 0
    assert picture.read_bytes().startswith(b"\x89PNG")


def test_rate_of_the_train_that_stands() -> None:
    status, text, messages = run("rate", INSTALLED, "--volume", "1500 L", "--safety-factor", "1.5")
    assert (status, messages) == (0, "")
    assert "The train fails" in text
    assert "No time is long enough for 2,400 L" in text
    status, text, _ = run("rate", INSTALLED, "--json", "--safety-factor", "1.5")
    document = json.loads(text)
    assert (status, document["status"]) == (0, "fails")
    assert 2000.0 < document["largest_volume_L"] < 2400.0
    assert json.loads(run("rate", INSTALLED, "--json")[1])["status"] == "passes"


def test_simulate_the_train_that_stands_or_the_designed_one(tmp_path: Path) -> None:
    picture = tmp_path / "course.svg"
    mode = ("--mode", "flow-then-pressure", "--safety-factor", "1.5")
    status, text, messages = run("simulate", INSTALLED, *mode, "--plot", str(picture))
    assert (status, messages) == (0, f"wrote {picture}\n")
    assert "more than allowed" in text
    assert "Flow, L/h" in picture.read_text(encoding="utf-8")
    document = json.loads(run("simulate", INSTALLED, *mode, "--json")[1])
    assert document["over_run_h"] > 0.0
    assert document["picks"][0] == ["primary", "oat-coarse", "oat-coarse-09", 15]
    designed = json.loads(run("simulate", HARVEST, "--json", "--points", "5")[1])
    assert designed["picks"][0] == ["primary", "oat-coarse", "oat-coarse-09", 14]
    rows = list(csv.DictReader(io.StringIO(run("simulate", HARVEST, "--csv", "--points", "5")[1])))
    assert len(rows) == 2 * 3 * 5


def test_audit_of_a_folder() -> None:
    status, text, messages = run("audit", ".")
    assert (status, messages) == (0, "")
    assert "scenarios/redundant-guard.yaml" in text
    assert "The even split wastes nothing here" in text
    document = json.loads(run("audit", HARVEST, "--json")[1])
    assert document["cases"][0]["lever"] == "split"


@pytest.mark.parametrize("command", ["sweep", "rate", "simulate", "audit"])
def test_help_fits_and_explains(command: str) -> None:
    status, text, _ = run(command, "--help")
    assert status == 0
    assert "--json" in text
    assert max(map(len, text.splitlines())) <= 100
