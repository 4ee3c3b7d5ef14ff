"""What the commands that study a train share: pictures, one document on stdout, a bar with the time left."""

from __future__ import annotations

import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

from trainopt.cli.options import output_file
from trainopt.cli.status import say
from trainopt.cli.terminal import progress

if TYPE_CHECKING:
    from matplotlib.figure import Figure

PLOTS = (".svg", ".png", ".pdf")
"""Kinds of picture files."""


def picture_target(plot: Path | None, force: bool) -> Path | None:
    """Where to draw, refused at once where it cannot be."""
    return None if plot is None else output_file(plot, PLOTS, force)


def draw(target: Path | None, figure: Callable[[], Figure], force: bool) -> None:
    """Draw a picture into its file, and say so."""
    if target is None:
        return
    with progress("drawing"):
        from trainopt.files.write import write_bytes_atomic
        from trainopt.report.picture import picture_bytes

        write_bytes_atomic(target, picture_bytes(figure(), target.suffix), overwrite=force)
    say(f"wrote {target}")


def one_of_json_and_csv(json: bool, csv: bool) -> None:
    """Refuse two documents on one stdout."""
    from trainopt.errors import InputError, Problem

    if json and csv:
        raise InputError([Problem("--csv", 0, "both --json and --csv print on stdout; expected one of them")])


@contextmanager
def refused(option: str) -> Iterator[None]:
    """What is wrong with an option's value as an input problem that names it."""
    from trainopt.errors import InputError, Problem

    try:
        yield
    except ValueError as error:
        raise InputError([Problem(option, 0, str(error))]) from None


@contextmanager
def bar(text: str) -> Iterator[Callable[[int, int], None]]:
    """A bar with the time left on stderr: from one second on, and only on a terminal."""
    if not sys.stderr.isatty():
        yield lambda _done, _total: None
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

    columns = (
        TextColumn("{task.description}", markup=False),
        BarColumn(),
        MofNCompleteColumn(),
        TextColumn("left"),
        TimeRemainingColumn(),
    )
    shown = Progress(*columns, console=Console(stderr=True), transient=True)
    task = shown.add_task(text, total=None)
    start = time.monotonic()
    running = False

    def tell(done: int, total: int) -> None:
        nonlocal running
        shown.update(task, completed=done, total=total)
        if not running and time.monotonic() - start > 1.0:
            shown.start()
            running = True

    try:
        yield tell
    finally:
        if running:
            shown.stop()
