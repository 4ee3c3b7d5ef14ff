"""`trainopt new`: a workspace to start from."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from trainopt.cli.status import Status


def new(
    folder: Annotated[Path, typer.Argument(metavar="FOLDER", help="A folder that does not exist yet, or is empty.")],
) -> Status:
    """Copy the demo workspace into a new folder, to edit.

    Nothing is ever overwritten. Its data are invented: replace the media, bench runs and catalog by your own.
    """
    from trainopt.files.demo import copy_demo

    files = copy_demo(folder)
    scenario = next(path for path in files if path.parent.name == "scenarios" and path.stem == "harvest")
    typer.echo(f"wrote {len(files)} files into {folder}; their data are invented")
    typer.echo(f"next: trainopt design {folder / scenario.relative_to(folder.absolute())}")
    return Status.DONE
