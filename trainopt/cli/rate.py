"""`trainopt rate`: what a train that stands can do."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

from trainopt.cli.options import ObjectiveKind, Units, amount
from trainopt.cli.status import Status
from trainopt.cli.terminal import color, progress, width


def rate(
    scenario: Annotated[Path, typer.Argument(metavar="SCENARIO", help="The scenario file, with `installed:`.")],
    volumes: Annotated[
        list[str] | None,
        typer.Option(
            "--volume", metavar="VOLUME", help="A batch to rate too, such as '1500 L'; give it as often as needed."
        ),
    ] = None,
    designed: Annotated[
        bool, typer.Option("--designed", help="Rate the train that `design` picks instead of the installed one.")
    ] = False,
    objective: Annotated[
        ObjectiveKind | None, typer.Option(help="With --designed: what to make least, in place of the scenario's own.")
    ] = None,
    safety_factor: Annotated[
        float | None,
        typer.Option(
            min=0.1,
            metavar="F",
            help="Divide every area by it (default: 1 as installed, the scenario's with --designed).",
        ),
    ] = None,
    json: Annotated[bool, typer.Option("--json", help="Print the whole result as JSON instead of tables.")] = False,
    units: Annotated[Units, typer.Option(help="Unit of pressure in the tables.")] = Units.bar,
) -> Status:
    """Rate the installed train of a scenario.

    Its largest batch in the time allowed, the shortest time for the batch, what limits it, and the pressures at
    the end by lot. The answer is in `status` and the tables; a train that fails is an answer too.
    """
    batches = [amount("--volume", text, "volume") for text in volumes or ()]
    with progress("rating"):
        from trainopt.errors import InputError, Problem
        from trainopt.files import load_case
        from trainopt.study.rate import rate as rate_case

        if any(volume <= 0.0 for volume in batches):
            raise InputError([Problem("--volume", 0, "a batch of no volume; expected one above 0 L")])
        kind = None if objective is None else objective.value
        result = rate_case(load_case(scenario), batches, safety_factor, designed, kind)
    if json:
        from trainopt.report.json import dumps
        from trainopt.report.study_json import rate_document

        sys.stdout.write(dumps(rate_document(result)))
    else:
        from trainopt.report.study_text import rate_text

        sys.stdout.write(rate_text(result, units.value, width(), color()))
    return Status.DONE
