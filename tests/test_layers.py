"""The package reads in one direction: a room imports only from the rooms above it."""

from __future__ import annotations

import ast
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parent.parent / "trainopt"
ROOMS = ["files", "bench", "curves", "train", "optimize", "study", "report", "app"]
SHARED = {"errors", "units", "version"}  # open to every room
SOURCES = sorted(PACKAGE.rglob("*.py"))


def imported(path: Path) -> Iterator[tuple[str, int]]:
    """Every absolute module name that a file imports, also inside its functions."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from ((alias.name, node.lineno) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path.name}:{node.lineno}: relative import"
            module = node.module or ""
            yield module, node.lineno
            if module == "trainopt":
                yield from ((f"trainopt.{alias.name}", node.lineno) for alias in node.names)


def room_of(path: Path) -> str:
    return path.relative_to(PACKAGE).parts[0].removesuffix(".py")


@pytest.mark.parametrize("path", SOURCES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_a_room_imports_only_from_rooms_above(path: Path) -> None:
    room = room_of(path)
    for module, line in imported(path):
        parts = module.split(".")
        if parts[0] != "trainopt" or len(parts) == 1:
            # Only the public face and the command line may lean on the package as a whole.
            assert parts[0] != "trainopt" or room in {"cli", "app"}, f"{path}:{line}: imports the package itself"
            continue
        target = parts[1]
        if room in {"cli", "__init__", "__main__"} or target in SHARED or target == room:
            continue
        assert room in ROOMS, f"{path}:{line}: {room} imports {module}"
        assert target in ROOMS, f"{path}:{line}: {room} imports {module}"
        assert ROOMS.index(target) < ROOMS.index(room), f"{path}:{line}: {room} imports {module}, which is below it"


@pytest.mark.parametrize("path", SOURCES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_only_optimize_knows_pyomo_and_the_solver(path: Path) -> None:
    if room_of(path) != "optimize":
        found = [f"{path}:{line}" for module, line in imported(path) if module.split(".")[0] in {"pyomo", "highspy"}]
        assert found == []


@pytest.mark.parametrize("path", SOURCES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_dependencies_are_declared(path: Path) -> None:
    declared = {"highspy", "jinja2", "matplotlib", "numpy", "openpyxl", "pandas", "pint", "pydantic", "pydantic_core",
                "pyomo", "yaml", "rich", "scipy", "typer", "click", "markupsafe", "trainopt"}  # fmt: skip
    for module, line in imported(path):
        top = module.split(".")[0]
        known = top in declared or top in sys.stdlib_module_names
        assert known, f"{path}:{line}: {module} is not a declared dependency"


def test_top_level_holds_what_the_guide_says() -> None:
    visible = {p.name for p in PACKAGE.parent.iterdir() if not p.name.startswith(".")}
    generated = {"build", "dist", "trainopt.egg-info"}
    expected = {"README.md", "DEVELOPERS.md", "pyproject.toml", "trainopt", "models", "tests", "scenarios"}
    assert visible - generated == expected


def test_files_stay_readable_in_one_sitting() -> None:
    lines = {str(p.relative_to(PACKAGE)): len(p.read_text(encoding="utf-8").splitlines()) for p in SOURCES}
    assert {name: count for name, count in lines.items() if count > 450} == {}
