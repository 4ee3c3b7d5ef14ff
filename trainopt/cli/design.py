"""`trainopt design`: the modules to buy for a scenario."""

from __future__ import annotations

import sys
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from trainopt.cli.options import REPORTS, ObjectiveKind, Units, output_file, write_report
from trainopt.cli.status import Status
from trainopt.cli.terminal import color, progress, width

if TYPE_CHECKING:
    from trainopt.train.results import Design

STATUS = {"optimal": Status.DONE, "infeasible": Status.NO_DESIGN, "limit": Status.LIMIT}


def design(
    scenario: Annotated[
        Path,
        typer.Argument(metavar="SCENARIO", help="The scenario file, for example scenarios/harvest.yaml."),
    ],
    json: Annotated[bool, typer.Option("--json", help="Print the whole result as JSON instead of tables.")] = False,
    objective: Annotated[
        ObjectiveKind | None, typer.Option(help="What to make least, in place of the scenario's own.")
    ] = None,
    units: Annotated[Units, typer.Option(help="Unit of pressure in the tables.")] = Units.bar,
    time_limit: Annotated[
        float | None,
        typer.Option(min=0.0, metavar="S", help="Stop the search after so many seconds, with the best found."),
    ] = None,
    alternatives: Annotated[
        int, typer.Option(min=0, metavar="K", help="List the K best picks too, the design among them.")
    ] = 0,
    gap: Annotated[
        float, typer.Option(min=0.0, metavar="PERCENT", help="How much worse than the design these may be.")
    ] = 5.0,
    limits: Annotated[
        bool, typer.Option("--limits", help="Say what a little more of each limit would buy, and longer bench runs.")
    ] = False,
    report: Annotated[
        Path | None,
        typer.Option(metavar="FILE", help="Write the design report too, as .html, .xlsx or .json."),
    ] = None,
    force: Annotated[bool, typer.Option("--force", help="Replace the report if it exists.")] = False,
) -> Status:
    """Name the modules to buy for a scenario.

    The installed area or the cost per batch is least, proven optimal, and stands beside what the even
    split of pressure and time would have bought.
    """
    kind = None if objective is None else objective.value
    target = None if report is None else output_file(report, REPORTS, force)
    with progress("designing"):
        from trainopt.files import load_case

        case = load_case(scenario)
        if target is None:
            from trainopt.optimize import design as find_design

            result, dossier = (
                find_design(
                    case,
                    kind,
                    time_limit,
                    parts=json,
                    routes=True,
                    alternatives=alternatives,
                    gap=gap / 100.0,
                    limits=limits,
                ),
                None,
            )
        else:
            from trainopt.report.gather import ALTERNATIVES, gather

            dossier = gather(case, kind, time_limit, alternatives or ALTERNATIVES, gap / 100.0)
            result = _asked_for(dossier.design, json, alternatives > 0, limits)
    if json:
        from trainopt.report.json import design_document, dumps

        sys.stdout.write(dumps(design_document(result)))
    else:
        from trainopt.report.text import design_text

        sys.stdout.write(design_text(result, units.value, width(), color()))
    if target is not None and dossier is not None:
        write_report(dossier, target, units.value, force)
    return STATUS[result.status]


def _asked_for(result: Design, parts: bool, alternatives: bool, limits: bool) -> Design:
    """The design as it is printed without a report, which works out more than was asked for."""
    bare = None if result.limits is None else replace(result.limits, gains=(), longer_runs=(), searched=False)
    return replace(
        result,
        area_parts=result.area_parts if parts else None,
        alternatives=result.alternatives if alternatives else None,
        limits=result.limits if limits else bare,
    )
