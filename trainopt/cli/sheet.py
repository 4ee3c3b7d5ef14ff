"""`trainopt sheet`: plan a bench run and write the sheet to record it in."""

from __future__ import annotations

import textwrap
from pathlib import Path
from typing import Annotated

import typer

from trainopt.cli.options import Units, output_file
from trainopt.cli.status import Status, say
from trainopt.cli.terminal import width


def sheet(
    area: Annotated[str, typer.Option(metavar="AREA", help="Filter area, for example '23 cm2'.")],
    flux: Annotated[str, typer.Option(metavar="FLUX", help="Flux to run at, for example '150 LMH'.")],
    loading: Annotated[str, typer.Option(metavar="LOADING", help="Loading to reach, for example '150 L/m2'.")],
    output: Annotated[Path, typer.Option("--output", "-o", metavar="FILE", help="The sheet, .xlsx or .csv.")],
    medium: Annotated[
        Path | None,
        typer.Option(metavar="MEDIUM", help="Medium file that brings flush, hold-up and limits."),
    ] = None,
    units: Annotated[Units, typer.Option(help="Unit of pressure in the sheet.")] = Units.bar,
    force: Annotated[bool, typer.Option("--force", help="Replace the sheet if it exists.")] = False,
) -> Status:
    """Plan a bench run and write the sheet to record it in.

    Pump settings, volumes, reading times, endpoints and cautions; the sheet, filled in, is read as a run.
    """
    from trainopt.bench.sheet import plan_lines, plan_run, sheet_bytes
    from trainopt.files import load_medium
    from trainopt.files.write import write_bytes_atomic

    target = output_file(output, (".xlsx", ".csv"), force)
    amounts = _amounts({"area": area, "flux": flux, "loading": loading})
    plan = plan_run(**amounts, medium=load_medium(medium) if medium is not None else None)
    write_bytes_atomic(target, sheet_bytes(plan, target.suffix.lstrip(".").lower(), units.value), overwrite=force)
    for line in plan_lines(plan, units.value):
        typer.echo(textwrap.fill(line, width(), subsequent_indent="  "))
    say(f"wrote {target}")
    return Status.DONE


def _amounts(texts: dict[str, str]) -> dict[str, float]:
    """The options in canonical units; every one that is wrong at once."""
    from trainopt.errors import InputError, Problem
    from trainopt.units import quantity

    out: dict[str, float] = {}
    problems: list[Problem] = []
    for name, text in texts.items():
        try:
            out[name] = quantity(text, name)
        except ValueError as error:
            problems.append(Problem(f"--{name}", 0, str(error)))
    if problems:
        raise InputError(problems)
    return out
