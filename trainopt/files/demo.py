"""The demo workspace, copied out for a user to edit."""

from __future__ import annotations

import shutil
import tempfile
from pathlib import Path

from trainopt.errors import InputError, Problem
from trainopt.files.source import shown_path

PARTS = ("models", "scenarios")


def demo_folder() -> Path:
    """Where the demo workspace is: in the installed package, or at the root of a checkout."""
    package = Path(__file__).parents[1]
    for folder in (package / "demo", package.parent):
        if all((folder / part).is_dir() for part in PARTS):
            return folder
    raise FileNotFoundError(f"the demo workspace is missing from {package}")


def copy_demo(target: Path | str) -> tuple[Path, ...]:
    """Copy the demo workspace into a new folder; the files written, sorted.

    The folder may exist when it is empty. It appears with all its files or not at all. Raises `InputError` where
    something is there already (nothing is overwritten) or the folder cannot be written.
    """
    target = Path(target).absolute()
    shown = shown_path(target)
    if target.exists() and (not target.is_dir() or any(target.iterdir())):
        raise InputError(
            [Problem(shown, 0, "exists already; expected a new or empty folder (nothing was overwritten)")]
        )
    if not target.parent.is_dir():
        raise InputError(
            [Problem(shown_path(target.parent), 0, f"no such folder; expected one to put {target.name} into")]
        )
    try:
        with tempfile.TemporaryDirectory(prefix=f".{target.name}.", dir=target.parent) as scratch:
            folder = Path(scratch) / "demo"
            names = _copy(demo_folder(), folder)
            folder.replace(target)
    except OSError as error:
        raise InputError([Problem(shown, 0, f"cannot be written: {error.strerror or error}")]) from None
    return tuple(target / name for name in names)


def _copy(source: Path, target: Path) -> list[Path]:
    """Copy every file that belongs to the workspace; their paths inside it."""
    names = sorted(
        path.relative_to(source)
        for part in PARTS
        for path in (source / part).rglob("*")
        if path.is_file() and not any(step.startswith((".", "__")) for step in path.relative_to(source).parts)
    )
    for name in names:
        (target / name).parent.mkdir(parents=True, exist_ok=True)
        shutil.copyfile(source / name, target / name)
    return names
