"""`trainopt check`: every problem in the files, each with its place."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from trainopt.cli.options import warn
from trainopt.cli.status import Status, say


def check(
    paths: Annotated[
        list[Path],
        typer.Argument(metavar="PATH...", help="Workspace folders, scenario, medium, catalog or bench files."),
    ],
) -> Status:
    """Name every problem in the files.

    All of them at once, one line each, with file and line. Nothing is designed.
    """
    from trainopt.curves.check import check as check_files

    problems, warnings = check_files(paths)
    warn(warnings)
    for problem in problems:
        say(str(problem))
    if problems:
        return Status.INPUT
    counted = f", {len(warnings)} {'warning' if len(warnings) == 1 else 'warnings'}" if warnings else ""
    typer.echo(f"no problems{counted}")
    return Status.DONE
