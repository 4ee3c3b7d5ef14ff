"""`trainopt simulate`: the course of a batch."""

from __future__ import annotations

import sys
from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from trainopt.cli.options import Units, amount
from trainopt.cli.status import Status
from trainopt.cli.studies import draw, one_of_json_and_csv, picture_target
from trainopt.cli.terminal import color, progress, width

if TYPE_CHECKING:
    from matplotlib.figure import Figure


class Mode(StrEnum):
    """How the pump is driven."""

    constant_flow = "constant-flow"
    constant_pressure = "constant-pressure"
    flow_then_pressure = "flow-then-pressure"


def simulate(
    scenario: Annotated[Path, typer.Argument(metavar="SCENARIO", help="The scenario file.")],
    mode: Annotated[
        Mode | None,
        typer.Option(
            help="How every block is driven; flow-then-pressure: at constant flow until the pressure limit, then held "
            "there (default: as the scenario says)."
        ),
    ] = None,
    designed: Annotated[
        bool, typer.Option("--designed", help="Use the train that `design` picks instead of the installed one.")
    ] = False,
    volume: Annotated[
        str | None, typer.Option(metavar="VOLUME", help="Another batch than the scenario's, such as '1500 L'.")
    ] = None,
    safety_factor: Annotated[
        float, typer.Option(min=0.1, metavar="F", help="Divide every area by it (1: as installed).")
    ] = 1.0,
    points: Annotated[int, typer.Option(min=2, max=100_000, metavar="N", help="Readings per course.")] = 201,
    json: Annotated[bool, typer.Option("--json", help="Print the whole course as JSON instead of tables.")] = False,
    csv: Annotated[bool, typer.Option("--csv", help="Print the whole course as CSV instead of tables.")] = False,
    plot: Annotated[Path | None, typer.Option(metavar="FILE", help="Draw it as .svg, .png or .pdf.")] = None,
    units: Annotated[Units, typer.Option(help="Unit of pressure in tables and pictures.")] = Units.bar,
    force: Annotated[bool, typer.Option("--force", help="Replace the picture if it exists.")] = False,
) -> Status:
    """Follow a batch through the installed or designed train.

    Pressure of every stage, flow, flux, loading and volume against time, lot by lot; the time it takes beyond what
    is allowed, and the volume at which the pressure limit is met. A scenario without `installed:` is designed first.
    """
    one_of_json_and_csv(json, csv)
    target = picture_target(plot, force)
    batch = None if volume is None else amount("--volume", volume, "volume")
    with progress("simulating"):
        from trainopt.errors import InputError, Problem
        from trainopt.files import load_case
        from trainopt.study.simulate import simulate as march

        if batch is not None and batch <= 0.0:
            raise InputError([Problem("--volume", 0, "a batch of no volume; expected one above 0 L")])
        case = load_case(scenario)
        result = march(
            case,
            None if mode is None else mode.value,
            designed or not case.scenario.installed,
            safety_factor,
            batch,
            points,
        )
    if json:
        from trainopt.report.json import dumps
        from trainopt.report.study_json import simulate_document

        sys.stdout.write(dumps(simulate_document(result)))
    elif csv:
        from trainopt.report.study_csv import simulate_csv

        sys.stdout.write(simulate_csv(result))
    else:
        from trainopt.report.study_text import simulate_text

        sys.stdout.write(simulate_text(result, units.value, width(), color()))

    def figure() -> Figure:
        from trainopt.report.study_figures import simulate_figure

        return simulate_figure(result, units.value)

    draw(target, figure, force)
    return Status.DONE
