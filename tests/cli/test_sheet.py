"""`trainopt sheet` and `trainopt curve --freeze` from the command line."""

from __future__ import annotations

import json
from pathlib import Path

from typer.testing import CliRunner

from trainopt.bench.table import read_table
from trainopt.cli.program import program

ROOT = Path(__file__).parents[2]
RUNNER = CliRunner()
PLAN = ["sheet", "--area", "23 cm2", "--flux", "150 LMH", "--loading", "150 L/m2"]


def test_a_sheet_is_written_once_and_described(tmp_path: Path) -> None:
    target = tmp_path / "run.csv"
    medium = ROOT / "models" / "media" / "oat-coarse.yaml"
    result = RUNNER.invoke(program, [*PLAN, "--medium", str(medium), "-o", str(target), "--units", "psi"])
    assert result.exit_code == 0
    assert "Run: pump at 5.75 mL/min" in result.stdout
    assert "hold-up 12" in result.stdout
    assert read_table(target).header[:3] == ("time (min)", "volume (mL)", "inlet pressure (psi)")
    again = RUNNER.invoke(program, [*PLAN, "-o", str(target)])
    assert again.exit_code == 2
    assert "exists already; use --force to replace it" in again.stderr
    assert RUNNER.invoke(program, [*PLAN, "-o", str(target), "--force"]).exit_code == 0


def test_every_wrong_option_is_said_at_once(tmp_path: Path) -> None:
    result = RUNNER.invoke(
        program, ["sheet", "--area", "23", "--flux", "150 L", "--loading", "9 L/m2", "-o", str(tmp_path / "a.csv")]
    )
    assert result.exit_code == 2
    assert "--area: 23 has no unit" in result.stderr
    assert "--flux: 'L' is not a unit of flux" in result.stderr


def test_freeze_writes_a_medium_file(tmp_path: Path) -> None:
    medium = ROOT / "models" / "media" / "rye-fine.yaml"
    target = tmp_path / "rye-fine.yaml"
    result = RUNNER.invoke(program, ["curve", str(medium), "--freeze", str(target)])
    assert result.exit_code == 0, result.stderr
    assert f"wrote {target}" in result.stderr
    frozen = RUNNER.invoke(program, ["curve", str(target)])
    assert frozen.exit_code == 0, frozen.stderr
    assert "given by its parameters" in frozen.stdout
    assert RUNNER.invoke(program, ["curve", str(medium), "--freeze", str(target)]).exit_code == 2


def test_the_loading_at_a_resistance(tmp_path: Path) -> None:
    medium = str(ROOT / "models" / "media" / "rye-fine.yaml")
    result = RUNNER.invoke(program, ["curve", medium, "--at", "0.01 bar/LMH"])
    assert result.exit_code == 0
    assert "Loading where the resistance reaches 0.0100 bar/LMH" in result.stdout
    wrong = RUNNER.invoke(program, ["curve", medium, "--at", "0.01"])
    assert wrong.exit_code == 2
    assert wrong.stderr.startswith("--at: 0.01 has no unit")


def test_json_carries_the_uncertainty() -> None:
    medium = str(ROOT / "models" / "media" / "rye-fine.yaml")
    document = json.loads(RUNNER.invoke(program, ["curve", medium, "--json"]).stdout)
    band = document["band"]
    assert len(band["loading_L_m2"]) == len(band["low_bar_per_LMH"]) == len(band["high_bar_per_LMH"]) == 41
    assert all(low < high for low, high in zip(band["low_bar_per_LMH"], band["high_bar_per_LMH"], strict=True))
    assert document["lot_spread"]["lots"] == 3
    assert set(document["left_out_errors"]) == {other["law"] for other in document["alternatives"]}
