"""`trainopt curve`: the resistance curve of one medium."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

from trainopt.cli.options import Units, output_file
from trainopt.cli.status import Status, say
from trainopt.cli.terminal import color, progress, width

PLOTS = (".svg", ".png", ".pdf")


def curve(
    medium: Annotated[
        Path,
        typer.Argument(metavar="MEDIUM", help="The medium file, for example models/media/oat-coarse.yaml."),
    ],
    json: Annotated[
        bool, typer.Option("--json", help="Print the whole result as JSON instead of tables.")
    ] = False,
    plot: Annotated[
        Path | None,
        typer.Option(metavar="FILE", help="Draw resistance against loading as .svg, .png or .pdf."),
    ] = None,
    units: Annotated[Units, typer.Option(help="Unit of pressure in the tables and the picture.")] = Units.bar,
    force: Annotated[bool, typer.Option("--force", help="Replace the picture if it exists.")] = False,
) -> Status:
    """Fit the resistance curve of a medium.

    Prints the reduced bench readings, the law with its parameters and lots, and the alternatives;
    --plot draws them.
    """
    target = None if plot is None else output_file(plot, PLOTS, force)
    with progress("fitting"):
        from trainopt.curves.medium import fit_curve
        from trainopt.files import load_medium

        result = fit_curve(load_medium(medium))
    if json:
        from trainopt.report.json import curve_document, dumps

        sys.stdout.write(dumps(curve_document(result)))
    else:
        from trainopt.report.curve_text import curve_text

        sys.stdout.write(curve_text(result, units.value, width(), color()))
    if target is not None:
        with progress("drawing"):
            from trainopt.files.write import write_bytes_atomic
            from trainopt.report.curve_figure import curve_figure
            from trainopt.report.picture import picture_bytes

            picture = picture_bytes(curve_figure(result, units.value), target.suffix)
            write_bytes_atomic(target, picture, overwrite=force)
        say(f"wrote {target}")
    return Status.DONE
