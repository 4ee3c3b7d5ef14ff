"""`trainopt report`: the design report as a page, a workbook or JSON."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from trainopt.cli.design import STATUS
from trainopt.cli.options import REPORTS, ObjectiveKind, Units, output_file, write_report
from trainopt.cli.status import Status
from trainopt.cli.terminal import progress


def report(
    scenario: Annotated[Path, typer.Argument(metavar="SCENARIO", help="The scenario file.")],
    output: Annotated[
        Path, typer.Option("--output", "-o", metavar="FILE", help="Where to write it: .html, .xlsx or .json.")
    ],
    objective: Annotated[
        ObjectiveKind | None, typer.Option(help="What to make least, in place of the scenario's own.")
    ] = None,
    units: Annotated[Units, typer.Option(help="Unit of pressure.")] = Units.bar,
    time_limit: Annotated[
        float | None, typer.Option(min=0.0, metavar="S", help="Stop the search after so many seconds.")
    ] = None,
    force: Annotated[bool, typer.Option("--force", help="Replace the file if it exists.")] = False,
) -> Status:
    """Write the design report of a scenario.

    One HTML page to read, file and print, or the same tables as a workbook, or everything as JSON.
    SOURCE_DATE_EPOCH in the environment fixes its date.
    """
    target = output_file(output, REPORTS, force)
    with progress("designing"):
        from trainopt.files import load_case
        from trainopt.report.gather import gather

        dossier = gather(load_case(scenario), objective and objective.value, time_limit)
    write_report(dossier, target, units.value, force)
    return STATUS[dossier.design.status]
