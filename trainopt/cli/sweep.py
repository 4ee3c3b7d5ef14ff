"""`trainopt sweep`: the design for every value of one or two fields."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from trainopt.cli.options import ObjectiveKind
from trainopt.cli.status import Status, say
from trainopt.cli.studies import bar, draw, one_of_json_and_csv, picture_target, refused
from trainopt.cli.terminal import color, width

if TYPE_CHECKING:
    from matplotlib.figure import Figure


def sweep(
    scenario: Annotated[Path, typer.Argument(metavar="SCENARIO", help="The scenario file.")],
    vary: Annotated[
        list[str],
        typer.Option(
            metavar="FIELD=VALUES",
            help="A field and its values: 'batch.volume=500 L..5000 L/19' (19 values; ' log' at the end spaces them "
            "by a factor) or 'batch.volume=1000 L, 2000 L'. Once for a line, twice for a map.",
        ),
    ],
    json: Annotated[bool, typer.Option("--json", help="Print the whole result as JSON instead of tables.")] = False,
    csv: Annotated[bool, typer.Option("--csv", help="Print one line per cell as CSV instead of tables.")] = False,
    plot: Annotated[Path | None, typer.Option(metavar="FILE", help="Draw it as .svg, .png or .pdf.")] = None,
    objective: Annotated[
        ObjectiveKind | None, typer.Option(help="What to make least, in place of the scenario's own.")
    ] = None,
    workers: Annotated[
        int | None, typer.Option(min=1, metavar="N", help="Processes to use at most (default: all cores).")
    ] = None,
    resume: Annotated[
        Path | None,
        typer.Option(metavar="FILE", help="Keep what is done in this file, and go on from there if it exists."),
    ] = None,
    changes: Annotated[
        bool | None,
        typer.Option(
            "--changes/--no-changes",
            help="Locate changes of the pick to 0.1 % of each axis (default: on a line, along batch.time on a map).",
        ),
    ] = None,
    force: Annotated[bool, typer.Option("--force", help="Replace the picture if it exists.")] = False,
) -> Status:
    """Design a scenario for every value of one or two of its fields.

    Every cell is what `design` would pick, proven optimal. Ctrl-C ends the sweep with what is done.
    """
    one_of_json_and_csv(json, csv)
    target = picture_target(plot, force)
    kind = None if objective is None else objective.value
    with bar("designing") as tell:
        from trainopt.files import load_case
        from trainopt.study.sweep import MOST_AXES, axes_of
        from trainopt.study.sweep import sweep as run

        case = load_case(scenario)
        with refused("--vary"):
            if len(vary) > MOST_AXES:
                raise ValueError(f"{len(vary)} fields vary; expected one or two")
            axes = axes_of(case, vary)
        result = run(case, axes, kind, workers, resume, tell, changes)
    if json:
        from trainopt.report.json import dumps
        from trainopt.report.study_json import sweep_document

        sys.stdout.write(dumps(sweep_document(result)))
    elif csv:
        from trainopt.report.study_csv import sweep_csv

        sys.stdout.write(sweep_csv(result))
    else:
        from trainopt.report.study_sweep_text import sweep_text

        sys.stdout.write(sweep_text(result, width(), color()))

    def figure() -> Figure:
        from trainopt.report.study_figures import sweep_figure

        return sweep_figure(result)

    draw(target, figure, force)
    if not result.complete:
        say("interrupted: what was done is shown" + (f"; --resume {resume} goes on" if resume is not None else ""))
        return Status.INTERRUPTED
    return Status.DONE if any(cell.status == "optimal" for cell in result.cells) else Status.NO_DESIGN
