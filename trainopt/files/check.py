"""Every problem and warning in the files that a path stands for, without designing anything.

`trainopt.curves.check` adds what reading the bench runs and fitting the curves finds; use that one where the
runs count too.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field
from pathlib import Path

from trainopt.errors import InputError, Problem
from trainopt.files.crosscheck import case_problems, case_warnings, unused_warnings
from trainopt.files.load import (
    Found,
    file_kind,
    find_root,
    finished,
    read_catalog,
    read_medium,
    read_scenario,
    read_workspace,
)
from trainopt.files.medium import Medium
from trainopt.files.scenario import Scenario
from trainopt.files.source import is_file, is_folder, shown_path

BENCH_SUFFIXES = (".csv", ".xlsx", ".tsv", ".txt")
YAML_SUFFIXES = (".yaml", ".yml")


@dataclass
class Checked:
    """What was looked at: its problems and warnings, and the media whose bench runs are still to be read.

    `media` by path; `runs`: bench files that were asked for by name, with the media that name them.
    """

    problems: set[Problem] = field(default_factory=set)
    warnings: set[Problem] = field(default_factory=set)
    media: dict[Path, Medium] = field(default_factory=dict)
    runs: dict[Path, list[Medium]] = field(default_factory=dict)

    def problem(self, path: Path, text: str) -> None:
        """A problem of a file as a whole."""
        self.problems.add(Problem(shown_path(path), 0, text))


def check(paths: Iterable[Path | str]) -> tuple[tuple[Problem, ...], tuple[Problem, ...]]:
    """Problems and warnings of the YAML files that `paths` stand for, sorted; bench runs are not opened."""
    found = examine(paths)
    return tuple(sorted(found.problems)), tuple(sorted(found.warnings))


def examine(paths: Iterable[Path | str]) -> Checked:
    """Look at every path: a workspace folder (or a folder in one), a scenario, a medium, a catalog, a bench file.

    A folder stands for its whole workspace with all scenarios, a scenario for itself and its workspace, a medium
    for itself, a catalog for what is under `models/`, a bench file for itself (see `Checked.runs`).
    """
    checked = Checked()
    for path in map(Path, paths):
        try:
            _look(path, checked)
        except InputError as error:
            checked.problems.update(error.problems)
    return checked


def _look(path: Path, checked: Checked) -> None:
    if is_folder(path):
        _folder(path, checked)
    elif path.suffix.lower() in BENCH_SUFFIXES:
        _bench_file(path, checked)
    elif is_file(path) and path.suffix.lower() not in YAML_SUFFIXES:
        checked.problem(path, f"is no {', '.join(YAML_SUFFIXES + BENCH_SUFFIXES)} file; expected one of these")
    else:
        _yaml_file(path, checked)


def _folder(path: Path, checked: Checked) -> None:
    found = _workspace_at(find_root(path), checked)
    folder = found.root / "scenarios"
    paths = sorted(p for p in folder.rglob("*") if p.suffix.lower() in YAML_SUFFIXES) if folder.is_dir() else []
    if not paths:
        checked.warnings.add(Problem(shown_path(folder), 0, "holds no scenario"))
    scenarios = [_scenario(scenario, found, checked) for scenario in paths]
    sound = [scenario for scenario in scenarios if scenario is not None]
    if found.sound and len(sound) == len(paths) and sound:
        checked.warnings.update(unused_warnings(finished(found), sound))


def _workspace_at(root: Path, checked: Checked) -> Found:
    found = read_workspace(root)
    checked.problems.update(found.problems)
    checked.media.update({medium.source.path: medium for medium in found.media.values()})
    if found.sound:
        checked.warnings.update(finished(found).warnings)
    return found


def _scenario(path: Path, found: Found, checked: Checked) -> Scenario | None:
    scenario, problems = read_scenario(path)
    checked.problems.update(problems)
    if scenario is None:
        return None
    faults = case_problems(scenario, found)
    checked.problems.update(faults)
    if found.sound and not faults:
        checked.warnings.update(case_warnings(scenario, finished(found)))
    return scenario


def _bench_file(path: Path, checked: Checked) -> None:
    if not is_file(path):
        checked.problem(path, "no such file; expected a bench run")
        return
    target = path.resolve()
    found = read_workspace(find_root(path))
    named = [m for m in found.media.values() if any(run.file == target for run in m.curve.runs)]
    checked.runs[target] = named
    if not named:
        checked.problem(path, "no medium names this run; expected it under `runs:` of a medium file")


def _yaml_file(path: Path, checked: Checked) -> None:
    kind = file_kind(path)
    if kind == "scenario":
        try:
            found = _workspace_at(find_root(path), checked)
        except InputError as error:
            checked.problems.update(error.problems)
            checked.problems.update(read_scenario(path)[1])
            return
        _scenario(path, found, checked)
    elif kind == "medium":
        medium, _, problems = read_medium(path)
        checked.problems.update(problems)
        if medium is not None:
            checked.media[medium.source.path] = medium
    elif kind == "catalog":
        checked.problems.update(read_catalog(path)[2])
        root = find_root(path)
        if (root / "models" / "catalog.yaml").resolve() == path.resolve():
            _workspace_at(root, checked)
