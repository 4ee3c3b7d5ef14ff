"""Files to objects; every problem of every file of a workspace is found before anything is raised."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

from trainopt.errors import InputError, Problem
from trainopt.files.catalog import Catalog
from trainopt.files.crosscheck import case_problems, case_warnings, workspace_problems, workspace_warnings
from trainopt.files.fields import as_text
from trainopt.files.inherit import read_inherited
from trainopt.files.medium import Medium
from trainopt.files.medium_check import medium_problems
from trainopt.files.scenario import Scenario
from trainopt.files.scenario_check import scenario_problems
from trainopt.files.source import Source, is_folder, read_source, shown_path
from trainopt.files.validate import validated
from trainopt.files.workspace import Case, Workspace


@dataclass
class Found:
    """What could be read of a workspace, valid or not, and what is wrong with it."""

    root: Path
    catalog: Catalog | None = None
    catalog_source: Source | None = None
    media: dict[str, Medium] = field(default_factory=dict)
    medium_names: set[str] = field(default_factory=set)
    problems: list[Problem] = field(default_factory=list)

    @property
    def sound(self) -> bool:
        """Whether nothing is wrong with it."""
        return not self.problems


def load_workspace(folder: Path | str) -> Workspace:
    """The workspace in `folder` (or the nearest folder above it); raises `InputError` with every problem."""
    found = read_workspace(find_root(Path(folder)))
    if found.problems:
        raise InputError(found.problems)
    return finished(found)


def load_case(scenario_path: Path | str) -> Case:
    """One scenario with its workspace; raises `InputError` with every problem in all of their files."""
    path = Path(scenario_path)
    scenario, problems = read_scenario(path)
    try:
        root = find_root(path)
    except InputError as error:
        raise InputError([*problems, *error.problems]) from None
    found = read_workspace(root)
    problems = [*found.problems, *problems]
    if scenario is not None:
        problems.extend(case_problems(scenario, found))
    if problems or scenario is None:
        raise InputError(problems)
    workspace = finished(found)
    return Case(workspace, scenario, (*workspace.warnings, *case_warnings(scenario, workspace)))


def load_medium(path: Path | str) -> Medium:
    """One medium file by itself; raises `InputError` with every problem in it."""
    medium, _, problems = read_medium(Path(path))
    if medium is None or problems:
        raise InputError(problems)
    return medium


def find_root(path: Path) -> Path:
    """The nearest folder that holds `models/`: `path` itself or one above it."""
    here = path.absolute()
    for folder in (here, *here.parents):
        if is_folder(folder / "models"):
            return folder.resolve()
    text = "no folder above it holds 'models/'; expected a workspace with models/ and scenarios/"
    raise InputError([Problem(shown_path(here), 0, text)])


def file_kind(path: Path) -> str:
    """What a YAML file is, by where it stands, else by what it says: "medium", "catalog" or "scenario"."""
    source, _ = read_source(path)
    if _among_scenarios(path):
        return "scenario"
    if "modules" in source.data or path.name == "catalog.yaml":
        return "catalog"
    in_media = path.absolute().parent.name == "media"
    return "medium" if in_media or "curve" in source.data or "medium" in source.data else "scenario"


def _among_scenarios(path: Path) -> bool:
    """Whether a file stands in the `scenarios/` of a workspace, or in a folder of it."""
    folders = path.absolute().parents
    return any(folder.name == "scenarios" and is_folder(folder.parent / "models") for folder in folders)


def read_workspace(root: Path) -> Found:
    """Everything under `models/`, with the problems in it and between its files."""
    found = Found(root)
    _read_catalog(found)
    folder = root / "models" / "media"
    paths = sorted(folder.glob("*.yaml")) if is_folder(folder) else []
    for path in sorted(folder.glob("*.yml")) if is_folder(folder) else []:
        text = f"is not read under this name; expected it to be named {path.stem}.yaml"
        found.problems.append(Problem(shown_path(path), 0, text))
    if not paths:
        text = "holds no medium file; expected models/media/NAME.yaml, one per filter medium"
        found.problems.append(Problem(shown_path(folder), 0, text))
    for path in paths:
        medium, names, problems = read_medium(path)
        found.problems.extend(problems)
        found.medium_names |= names
        if medium is not None:
            found.media[medium.medium] = medium
    found.problems.extend(workspace_problems(found))
    return found


def read_medium(path: Path) -> tuple[Medium | None, set[str], list[Problem]]:
    """A medium file: the object where it is sound, the names it may be known by, its problems."""
    names = {path.stem}
    try:
        source, problems = read_source(path)
    except InputError as error:
        return None, names, list(error.problems)
    name = as_text(source.data.get("medium"))
    if name is not None:
        names.add(name)
    medium, faults = validated(Medium, source)
    problems += [*faults, *medium_problems(source, medium)]
    return medium, names, problems


def read_scenario(path: Path) -> tuple[Scenario | None, list[Problem]]:
    """A scenario file with what it extends: the object where it fits the schema, and its problems by itself."""
    try:
        source, problems = read_inherited(path)
    except InputError as error:
        return None, list(error.problems)
    scenario, faults = validated(Scenario, source)
    problems += [*faults, *scenario_problems(source, scenario)]
    return scenario, problems


def read_catalog(path: Path) -> tuple[Catalog | None, Source | None, list[Problem]]:
    """A catalog file: the object where it fits the schema, its source, its problems."""
    try:
        source, problems = read_source(path)
    except InputError as error:
        return None, None, list(error.problems)
    catalog, faults = validated(Catalog, source)
    return catalog, source, problems + faults


def _read_catalog(found: Found) -> None:
    found.catalog, found.catalog_source, problems = read_catalog(found.root / "models" / "catalog.yaml")
    found.problems.extend(problems)


def finished(found: Found) -> Workspace:
    """The workspace of what was found sound, with its warnings."""
    assert found.catalog is not None, "a catalog that could not be read is a problem"
    media = dict(sorted(found.media.items()))
    workspace = Workspace(found.root, found.catalog, media)
    return Workspace(found.root, found.catalog, media, tuple(workspace_warnings(workspace)))
