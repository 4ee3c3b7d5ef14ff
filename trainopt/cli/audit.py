"""`trainopt audit`: the even split against the optimum, over cases."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from trainopt.cli.options import ObjectiveKind, Units
from trainopt.cli.status import Status, say
from trainopt.cli.studies import draw, picture_target
from trainopt.cli.terminal import color, progress, width

if TYPE_CHECKING:
    from matplotlib.figure import Figure


def audit(
    paths: Annotated[
        list[Path], typer.Argument(metavar="SCENARIO|FOLDER...", help="Scenario files, or folders that hold some.")
    ],
    json: Annotated[bool, typer.Option("--json", help="Print the whole result as JSON instead of tables.")] = False,
    plot: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Draw both splits side by side as .svg, .png or .pdf.")
    ] = None,
    objective: Annotated[
        ObjectiveKind | None, typer.Option(help="What to make least, in place of each scenario's own.")
    ] = None,
    units: Annotated[Units, typer.Option(help="Unit of pressure in the tables.")] = Units.bar,
    force: Annotated[bool, typer.Option("--force", help="Replace the picture if it exists.")] = False,
) -> Status:
    """Say what the even split wastes, case by case.

    Each case's optimum beside its even split, where the pressure should have gone, the most that the even split
    could waste, and the lever worth pulling where it is not the split.
    """
    target = picture_target(plot, force)
    with progress("auditing"):
        from trainopt.study.audit import audit as audit_cases

        result = audit_cases(list(paths), None if objective is None else objective.value)
    for problem in result.failures:
        say(str(problem))
    if json:
        from trainopt.report.json import dumps
        from trainopt.report.study_json import audit_document

        sys.stdout.write(dumps(audit_document(result)))
    elif result.cases:
        from trainopt.report.study_text import audit_text

        sys.stdout.write(audit_text(result, units.value, width(), color()))

    def figure() -> Figure:
        from trainopt.report.study_figures import audit_figure

        return audit_figure(result)

    if result.cases:
        draw(target, figure, force)
    if result.failures:
        return Status.INPUT
    return Status.DONE if any(case.design.blocks for case in result.cases) else Status.NO_DESIGN
