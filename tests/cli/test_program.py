"""Help, version, usage errors, exit statuses, and what happens when the reader or the user goes away."""

from __future__ import annotations

import io
import os
import subprocess
import sys
import time
from pathlib import Path

import pytest
import typer
from typer.testing import CliRunner

from trainopt.cli import terminal
from trainopt.cli.options import output_file
from trainopt.cli.program import program
from trainopt.cli.status import Status, guarded
from trainopt.errors import DefectError, InputError, Problem
from trainopt.version import __version__

ROOT = Path(__file__).parents[2]
RUNNER = CliRunner()
COMMANDS = ("design", "curve", "check", "sheet", "report")


def trainopt(*arguments: str, **options: object) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-m", "trainopt", *arguments]
    return subprocess.run(command, capture_output=True, text=True, encoding="utf-8", timeout=60, **options)  # type: ignore[call-overload,no-any-return]


def outcome(command: object) -> int:
    with pytest.raises(typer.Exit) as left:
        guarded(command)()  # type: ignore[arg-type]
    return left.value.exit_code


def test_help_names_every_command_and_the_exit_statuses() -> None:
    result = trainopt("--help")
    assert result.returncode == 0
    assert result.stderr == ""
    for word in (*COMMANDS, "Exit status", "--version"):
        assert word in result.stdout
    assert "..." not in "".join(line for line in result.stdout.splitlines() if "[ARGS]" not in line)


@pytest.mark.parametrize("command", COMMANDS)
def test_each_command_explains_itself(command: str) -> None:
    result = RUNNER.invoke(program, [command, "-h"])
    assert result.exit_code == 0
    assert "Usage" in result.stdout


def test_options_of_the_commands() -> None:
    promised = {
        "design": ("SCENARIO", "--json", "--objective", "--units", "--time-limit", "--report", "--force"),
        "report": ("SCENARIO", "--output", "--objective", "--units", "--time-limit", "--force"),
        "curve": ("MEDIUM", "--json", "--plot", "--units", "--force"),
        "check": ("PATH...",),
    }
    for command, options in promised.items():
        shown = RUNNER.invoke(program, [command, "--help"]).stdout
        assert [option for option in options if option not in shown] == []


def test_version() -> None:
    assert trainopt("--version").stdout == f"trainopt {__version__}\n"


@pytest.mark.parametrize(
    "arguments",
    [["desing", "x.yaml"], ["design"], ["design", "x.yaml", "--units", "furlong"], ["design", "--what"], []],
)
def test_wrong_usage_is_wrong_input(arguments: list[str]) -> None:
    result = trainopt(*arguments)
    assert result.returncode == 2
    assert "Usage" in result.stderr + result.stdout
    assert "Traceback" not in result.stderr


def test_help_imports_nothing_heavy() -> None:
    script = (
        "import sys; sys.argv = ['trainopt', '--help']\n"
        "from trainopt.cli import main\n"
        "try: main()\n"
        "except SystemExit: pass\n"
        "heavy = {'numpy', 'scipy', 'pandas', 'pyomo', 'highspy', 'matplotlib', 'pydantic', 'pint', 'rich'}\n"
        "print(sorted(heavy & set(sys.modules)))"
    )
    result = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    assert result.stdout.splitlines()[-1] == "[]"


def test_done_and_other_statuses_are_passed_on() -> None:
    assert outcome(lambda: None) == 0
    assert outcome(lambda: Status.NO_DESIGN) == 3
    assert outcome(lambda: Status.LIMIT) == 4


def test_input_errors_are_one_line_each(capsys: pytest.CaptureFixture[str]) -> None:
    def command() -> None:
        raise InputError([Problem("b.yaml", 3, "second"), Problem("a.yaml", 0, "first \x1b[31m")])

    assert outcome(command) == 2
    assert capsys.readouterr().err == "a.yaml: first \ufffd[31m\nb.yaml:3: second\n"


@pytest.mark.parametrize("error", [DefectError("the march disagrees"), ZeroDivisionError("oops")])
def test_a_defect_asks_for_a_report(
    error: Exception, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    def command() -> None:
        raise error

    monkeypatch.delenv("TRAINOPT_TRACEBACK", raising=False)
    assert outcome(command) == 1
    shown = capsys.readouterr().err
    assert str(error) in shown
    assert "report" in shown
    assert "Traceback" not in shown
    monkeypatch.setenv("TRAINOPT_TRACEBACK", "1")
    assert outcome(command) == 1
    assert "Traceback" in capsys.readouterr().err


def test_interrupt_is_no_traceback(capsys: pytest.CaptureFixture[str]) -> None:
    def command() -> None:
        raise KeyboardInterrupt

    assert outcome(command) == 130
    assert capsys.readouterr().err == "interrupted\n"


def test_a_reader_that_goes_away_is_no_traceback() -> None:
    script = (
        "import sys\n"
        "from trainopt.cli.status import guarded\n"
        "import typer\n"
        "app = typer.Typer()\n"
        "@app.command()\n"
        "@guarded\n"
        "def much() -> None:\n"
        "    for _ in range(100000): print('a line that nobody reads')\n"
        "app()\n"
    )
    shell = f'{sys.executable} -c "$SCRIPT" | head -n 1; exit ${{PIPESTATUS[0]}}'
    result = subprocess.run(["bash", "-c", shell], env={**os.environ, "SCRIPT": script}, capture_output=True, text=True)
    assert result.stdout == "a line that nobody reads\n"
    assert result.stderr == ""
    assert result.returncode == 141


def test_letters_a_terminal_cannot_show_get_plain_ones() -> None:
    script = (
        "from trainopt.cli.terminal import prepare_streams\n"
        "prepare_streams()\n"
        "print('Area m\\xb2 \\u2013 2 \\xd7 rack, \\u0394 \\u2264 3, \\u5b57 \\udc80')"
    )
    environment = {**os.environ, "PYTHONIOENCODING": "ascii"}
    result = subprocess.run([sys.executable, "-c", script], capture_output=True, env=environment)
    assert result.stdout == b"Area m2 - 2 x rack, d <= 3, ? ?\n"
    environment = {key: value for key, value in os.environ.items() if key != "PYTHONIOENCODING"}
    environment.update(LC_ALL="C", PYTHONUTF8="0", PYTHONCOERCECLOCALE="0")
    result = subprocess.run([sys.executable, "-c", script], capture_output=True, env=environment)
    assert result.stdout == "Area m² – 2 × rack, Δ ≤ 3, 字 ?\n".encode()


class FakeTerminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def test_progress_shows_itself_only_on_a_terminal(monkeypatch: pytest.MonkeyPatch) -> None:
    for stream, shown in ((FakeTerminal(), True), (io.StringIO(), False)):
        monkeypatch.setattr(sys, "stderr", stream)
        monkeypatch.setenv("TERM", "xterm")
        with terminal.progress("designing the train"):
            time.sleep(1.2)
        assert ("designing the train" in stream.getvalue()) == shown


def test_quick_work_shows_no_progress(monkeypatch: pytest.MonkeyPatch) -> None:
    stream = FakeTerminal()
    monkeypatch.setattr(sys, "stderr", stream)
    with terminal.progress("designing"):
        pass
    assert stream.getvalue() == ""


def test_an_error_inside_the_progress_comes_through(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sys, "stderr", FakeTerminal())
    with pytest.raises(ValueError, match="inside"), terminal.progress("designing"):
        raise ValueError("inside")


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("there.svg", "use --force to replace it"),
        ("picture.gif", "expected one of .svg, .png"),
        ("no/such/a.svg", "no such folder"),
        ("folder.svg", "is a folder"),
    ],
)
def test_outputs_are_refused_before_any_work(tmp_path: Path, name: str, words: str) -> None:
    (tmp_path / "there.svg").write_text("mine")
    (tmp_path / "folder.svg").mkdir()
    with pytest.raises(InputError, match=words):
        output_file(tmp_path / name, (".svg", ".png"), force=False)
    assert (tmp_path / "there.svg").read_text() == "mine"


def test_force_lets_a_file_be_replaced(tmp_path: Path) -> None:
    (tmp_path / "there.svg").write_text("mine")
    assert output_file(tmp_path / "there.svg", (".svg",), force=True) == tmp_path / "there.svg"
