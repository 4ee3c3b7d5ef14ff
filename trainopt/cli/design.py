"""`trainopt design`: the modules to buy for a scenario."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

from trainopt.cli.options import ObjectiveKind, Units, warn
from trainopt.cli.status import Status
from trainopt.cli.terminal import color, progress, width

STATUS = {"optimal": Status.DONE, "infeasible": Status.NO_DESIGN, "limit": Status.LIMIT}


def design(
    scenario: Annotated[
        Path,
        typer.Argument(metavar="SCENARIO", help="The scenario file, for example scenarios/harvest.yaml."),
    ],
    json: Annotated[
        bool, typer.Option("--json", help="Print the whole result as JSON instead of tables.")
    ] = False,
    objective: Annotated[
        ObjectiveKind | None, typer.Option(help="What to make least, in place of the scenario's own.")
    ] = None,
    units: Annotated[Units, typer.Option(help="Unit of pressure in the tables.")] = Units.bar,
    time_limit: Annotated[
        float | None,
        typer.Option(
            min=0.0, metavar="S", help="Stop the search after so many seconds, with the best found."
        ),
    ] = None,
) -> Status:
    """Name the modules to buy for a scenario.

    The installed area or the cost per batch is least, proven optimal, and stands beside what the even
    split of pressure and time would have bought.
    """
    with progress("designing"):
        from trainopt.files import load_case
        from trainopt.optimize import design as find_design

        case = load_case(scenario)
        warn(case.warnings)
        result = find_design(case, objective=objective and objective.value, time_limit=time_limit)
    if json:
        from trainopt.report.json import design_document, dumps

        sys.stdout.write(dumps(design_document(result)))
    else:
        from trainopt.report.text import design_text

        sys.stdout.write(design_text(result, units.value, width(), color()))
    return STATUS[result.status]
