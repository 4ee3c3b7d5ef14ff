"""What the README promises can be typed as it stands."""

from __future__ import annotations

import re
import shlex
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")


def blocks(language: str) -> list[str]:
    """The fenced code blocks of one language, in order."""
    return re.findall(rf"```{language}\n(.*?)```", README, flags=re.DOTALL)


def trainopt_calls() -> list[list[str]]:
    """Every `trainopt …` command line shown in the README's shell blocks."""
    parts = [part.strip() for block in blocks("sh") for line in block.splitlines() for part in line.split("&&")]
    program = r"^(\.venv/bin/)?trainopt "
    calls = [re.sub(program, "", part) for part in parts if re.match(program, part)]
    return [shlex.split(call, comments=True) for call in calls]


def test_the_first_two_commands_are_complete_one_liners() -> None:
    design, test = (block.strip() for block in blocks("sh")[:2])
    assert "\n" not in design
    assert "\n" not in test
    assert design.startswith("python3 -m venv .venv && .venv/bin/pip install")
    assert "trainopt design scenarios/" in design
    assert "[test,bench]" in test
    assert ".venv/bin/pytest" in test


@pytest.mark.parametrize("call", trainopt_calls(), ids=" ".join)
def test_each_command_shown_runs(call: list[str], tmp_path: Path) -> None:
    arguments = [str(ROOT / part) if (ROOT / part).exists() and part != "." else part for part in call]
    run = subprocess.run(
        [sys.executable, "-m", "trainopt", *arguments], cwd=tmp_path, capture_output=True, text=True, timeout=120
    )
    assert run.returncode == 0, run.stderr
    assert run.stdout.strip() or run.stderr.strip()


def test_the_notebook_lines_run(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)
    (lines,) = blocks("python")
    assert len([line for line in lines.splitlines() if line.strip()]) <= 5
    namespace: dict[str, object] = {}
    exec(compile(lines, "README.md", "exec"), namespace)
    design = namespace["design"]
    assert design.status == "optimal"  # type: ignore[attr-defined]
