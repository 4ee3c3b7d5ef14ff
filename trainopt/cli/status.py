"""Exit statuses, and the one place where an exception becomes a message and a status."""

from __future__ import annotations

import functools
import os
import sys
from collections.abc import Callable
from enum import IntEnum
from typing import ParamSpec

import typer

from trainopt.errors import DefectError, InputError

P = ParamSpec("P")


class Status(IntEnum):
    """How the program ended."""

    DONE = 0
    DEFECT = 1
    INPUT = 2
    NO_DESIGN = 3
    LIMIT = 4
    INTERRUPTED = 130  # as a shell reports a process ended by Ctrl-C
    READER_GONE = 141  # as a shell reports a process whose reader went away


TRACEBACK = "TRAINOPT_TRACEBACK"
"""Environment variable that lets a defect show where it happened, for a report of it."""


def guarded(command: Callable[P, Status | None]) -> Callable[P, None]:
    """The command with its outcome as exit status and every exception as lines on stderr."""

    @functools.wraps(command)
    def run(*args: P.args, **kwargs: P.kwargs) -> None:
        try:
            status = command(*args, **kwargs) or Status.DONE
            sys.stdout.flush()
        except (typer.Exit, typer.Abort):
            raise
        except InputError as error:
            status = Status.INPUT
            for problem in error.problems:
                say(str(problem))
        except BrokenPipeError:
            status = Status.READER_GONE
            _drop_stdout()
        except KeyboardInterrupt:
            status = Status.INTERRUPTED
            say("interrupted")
        except Exception as error:
            status = Status.DEFECT
            _report_defect(error)
        raise typer.Exit(int(status))

    return run


def say(text: str) -> None:
    """One message on stderr, without the control codes that its text may carry."""
    from trainopt.report.numbers import plain

    for line in text.splitlines() or [""]:
        sys.stderr.write(plain(line) + "\n")


def _report_defect(error: Exception) -> None:
    what = str(error) if isinstance(error, DefectError) else f"{type(error).__name__}: {error}"
    say(f"trainopt: defect: {what}")
    say(
        "This is an error of the program, not of your files, and no design is shown. Please report it with "
        f"the files and the command; {TRACEBACK}=1 in the environment adds where it happened."
    )
    if os.environ.get(TRACEBACK):
        import traceback

        sys.stderr.write("".join(traceback.format_exception(error)))


def _drop_stdout() -> None:
    """Point stdout at nothing, so that the interpreter's own flush at the end cannot fail."""
    try:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
    except (OSError, ValueError):  # no real file behind stdout: nothing will be flushed to a pipe
        sys.stdout = None
