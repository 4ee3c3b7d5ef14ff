"""Options that several commands share."""

from __future__ import annotations

from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterable

    from trainopt.errors import Problem
    from trainopt.report.dossier import Dossier

REPORTS = (".html", ".xlsx", ".json")
"""Kinds of report files."""


class Units(StrEnum):
    """Units of pressure in tables and pictures."""

    bar = "bar"
    psi = "psi"
    kPa = "kPa"  # noqa: N815  (the unit's own spelling)


class ObjectiveKind(StrEnum):
    """What a design makes least."""

    area = "area"
    cost = "cost"


def warn(problems: Iterable[Problem]) -> None:
    """Print what the user should know about the files, one line each, on stderr."""
    from trainopt.cli.status import say

    for problem in problems:
        say(f"warning: {problem}")


def amount(option: str, text: str, dimension: str) -> float:
    """The canonical value of an option with a unit; `InputError` names the option."""
    from trainopt.errors import InputError, Problem
    from trainopt.units import quantity

    try:
        return quantity(text, dimension)
    except ValueError as error:
        raise InputError([Problem(option, 0, str(error))]) from None


def output_file(path: Path, suffixes: tuple[str, ...], force: bool) -> Path:
    """The path of a file to write, refused at once where its kind is unknown or it would overwrite."""
    from trainopt.errors import InputError, Problem

    kinds = ", ".join(suffixes)
    if path.suffix.lower() not in suffixes:
        raise InputError([Problem(str(path), 0, f"cannot be written as '{path.suffix}'; expected one of {kinds}")])
    if not path.parent.is_dir():
        raise InputError([Problem(str(path.parent), 0, f"no such folder; expected one to write {path.name} into")])
    if path.is_dir():
        raise InputError([Problem(str(path), 0, "is a folder; expected a file to write")])
    if path.exists() and not force:
        raise InputError([Problem(str(path), 0, "exists already; use --force to replace it")])
    return path


def write_report(dossier: Dossier, target: Path, units: str, force: bool) -> None:
    """Write the report in the kind that the target's suffix names, and say so."""
    from trainopt.cli.status import say
    from trainopt.cli.terminal import progress

    with progress("writing the report"):
        from trainopt.files.write import write_bytes_atomic
        from trainopt.report.render import report_bytes

        write_bytes_atomic(target, report_bytes(dossier, target.suffix, units), overwrite=force)
    say(f"wrote {target}")
