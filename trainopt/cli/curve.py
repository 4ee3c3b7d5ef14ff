"""`trainopt curve`: the resistance curve of one medium."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

from trainopt.cli.options import Units, amount, output_file
from trainopt.cli.status import Status, say
from trainopt.cli.terminal import color, progress, width

PLOTS = (".svg", ".png", ".pdf")


def curve(
    medium: Annotated[
        Path,
        typer.Argument(metavar="MEDIUM", help="The medium file, for example models/media/oat-coarse.yaml."),
    ],
    json: Annotated[bool, typer.Option("--json", help="Print the whole result as JSON instead of tables.")] = False,
    plot: Annotated[
        Path | None,
        typer.Option(metavar="FILE", help="Draw resistance against loading as .svg, .png or .pdf."),
    ] = None,
    at: Annotated[
        str | None,
        typer.Option(metavar="RESISTANCE", help="Say at what loading it is reached, for example '0.01 bar/LMH'."),
    ] = None,
    units: Annotated[Units, typer.Option(help="Unit of pressure in the tables and the picture.")] = Units.bar,
    freeze: Annotated[
        Path | None,
        typer.Option(metavar="FILE", help="Write the curve by its parameters as a medium file (.yaml)."),
    ] = None,
    force: Annotated[bool, typer.Option("--force", help="Replace the files written if they exist.")] = False,
) -> Status:
    """Fit the resistance curve of a medium.

    Prints the reduced bench readings, the law with its parameters and lots, and the alternatives;
    --plot draws them; --freeze writes a medium file that gives the same designs without the runs.
    """
    target = None if plot is None else output_file(plot, PLOTS, force)
    asked = None if at is None else amount("--at", at, "resistance")
    frozen = None if freeze is None else output_file(freeze, (".yaml",), force)
    with progress("fitting"):
        from trainopt.curves.medium import fit_curve
        from trainopt.files import load_medium

        read = load_medium(medium)
        result = fit_curve(read)
    if frozen is not None:
        from trainopt.curves.freeze import frozen_text
        from trainopt.files.write import write_text_atomic

        write_text_atomic(frozen, frozen_text(read, result, frozen), overwrite=force)
        say(f"wrote {frozen}")
    if json:
        from trainopt.report.json import curve_document, dumps

        sys.stdout.write(dumps(curve_document(result, uncertainty=True)))
    else:
        from trainopt.report.curve_text import curve_text

        sys.stdout.write(curve_text(result, units.value, width(), color(), asked))
    if target is not None:
        with progress("drawing"):
            from trainopt.files.write import write_bytes_atomic
            from trainopt.report.curve_page import curve_page
            from trainopt.report.picture import picture_bytes

            picture = picture_bytes(curve_page(result, units.value), target.suffix)
            write_bytes_atomic(target, picture, overwrite=force)
        say(f"wrote {target}")
    return Status.DONE
