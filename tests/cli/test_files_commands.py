"""`check`, `new` and `fields`."""

from __future__ import annotations

from pathlib import Path

import pytest
from typer.testing import CliRunner

from tests.files.broken_cases import write_workspace
from trainopt.cli.program import program

RUNNER = CliRunner()


def test_check_of_a_sound_workspace(tmp_path: Path) -> None:
    write_workspace(tmp_path)
    result = RUNNER.invoke(program, ["check", str(tmp_path)])
    assert (result.exit_code, result.stdout) == (0, "no problems\n")


def test_new_writes_a_workspace_that_works_and_says_what_is_next(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    result = RUNNER.invoke(program, ["new", "mine"])
    assert result.exit_code == 0
    assert "invented" in result.stdout
    (following,) = [line for line in result.stdout.splitlines() if line.startswith("next: trainopt design ")]
    assert Path(following.removeprefix("next: trainopt design ")).is_file()
    again = RUNNER.invoke(program, ["new", "mine"])
    assert again.exit_code == 2
    assert again.stderr.startswith("mine: exists already")


def test_fields_of_everything_and_of_one_thing() -> None:
    everything = RUNNER.invoke(program, ["fields"]).stdout
    for heading in ("Medium: ", "Catalog: ", "Scenario: "):
        assert everything.count(heading) == 1
    one = RUNNER.invoke(program, ["fields", "blocks.pump.max_flow"]).stdout
    assert "Highest flow it can give" in one
    assert "example: 1200 L/h" in " ".join(one.split())
    assert "volume" not in one
    assert max(map(len, everything.splitlines())) <= 100


def test_fields_of_nothing_known() -> None:
    result = RUNNER.invoke(program, ["fields", "blocks.pumps"])
    assert result.exit_code == 2
    assert "did you mean 'blocks.pump'?" in result.stderr
