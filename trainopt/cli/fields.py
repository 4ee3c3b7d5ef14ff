"""`trainopt fields`: what every field of every file means."""

from __future__ import annotations

import sys
from typing import Annotated

import typer

from trainopt.cli.status import Status
from trainopt.cli.terminal import color, width


def fields(
    topic: Annotated[
        str | None,
        typer.Argument(
            metavar="[medium|catalog|scenario|PATH]",
            help="A kind of file, a field such as blocks.pump or medium.limits, or a file.",
            show_default=False,
        ),
    ] = None,
) -> Status:
    """Explain every field of the files.

    Its meaning, unit, default and an example. [] stands for an item of a list, NAME for a name of your own.
    """
    from trainopt.files.reference import FILES
    from trainopt.files.reference import fields as find_fields
    from trainopt.report.fields_text import fields_text

    notes = find_fields(topic)
    parts = [fields_text(kind, [n for n in notes if n.file == kind], width(), color()) for kind in FILES]
    sys.stdout.write("\n".join(part for part in parts if part))
    return Status.DONE
