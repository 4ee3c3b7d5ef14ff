"""Every problem in the files that a path stands for, bench runs and curves included.

`trainopt.files.check` sees the YAML alone; this one also reads every run that the media name and fits their
curves, so that what it passes cannot fail as wrong input later.
"""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path

from trainopt.curves.medium import fit_curve, reduced_runs
from trainopt.errors import InputError, Problem
from trainopt.files import Medium, examine
from trainopt.files.source import is_file


def check(paths: Iterable[Path | str]) -> tuple[tuple[Problem, ...], tuple[Problem, ...]]:
    """Problems and warnings of the files that `paths` stand for, sorted by file and line; never raises for
    them.

    A path is a folder (its whole workspace with every scenario), a scenario, a medium, the catalog or a
    bench file.
    """
    checked = examine(paths)
    faulty = {problem.file for problem in checked.problems}
    for medium in checked.media.values():
        # A curve can only be fitted as its file says, once that is right; its runs can be read all the same.
        sound = medium.source.shown not in faulty
        checked.problems.update(_curve_problems(medium) if sound else _run_problems(medium))
    for file, media in checked.runs.items():
        for medium in media:
            checked.problems.update(_run_problems(medium, file))
    return tuple(sorted(checked.problems)), tuple(sorted(checked.warnings))


def _curve_problems(medium: Medium) -> tuple[Problem, ...]:
    try:
        fit_curve(medium)
    except InputError as error:
        return error.problems
    return ()


def _run_problems(medium: Medium, only: Path | None = None) -> list[Problem]:
    """Problems of a medium's bench files, or of one of them; a file that is not there is told by its medium."""
    files = {run.file for run in medium.curve.runs if is_file(run.file) and only in (None, run.file)}
    return reduced_runs(medium, files)[1]
