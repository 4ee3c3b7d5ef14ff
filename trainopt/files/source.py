"""Where a file's parts stand, so that every room can name the line of what it finds wrong."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from trainopt.errors import InputError, Problem
from trainopt.files.document import Loc, Places, read_document

_LARGEST = 5_000_000
_NAMED = {"blocks": "block", "stages": "stage"}
_KEYED = {"modules": "module", "holders": "holder", "lots": "lot", "installed": "installed stage"}


@dataclass(frozen=True)
class Source:
    """A file that was read: `path`, how it is `shown` to the user, the `sha256` of its bytes.

    `places` maps (field, index, …) to file and line; `data` is what the file says, before any check.
    `parents` are the files it extends, nearest first.
    """

    path: Path
    shown: str
    sha256: str
    places: Mapping[Loc, tuple[str, int]] = field(default_factory=dict, repr=False)
    data: Any = field(default=None, repr=False)
    parents: tuple[Source, ...] = ()

    def place(self, *loc: str | int) -> tuple[str, int]:
        """File and line of a field, or of the nearest part around it that is written."""
        for end in range(len(loc), -1, -1):
            found = self.places.get(loc[:end])
            if found is not None:
                return found
        return self.shown, 0

    def line(self, *loc: str | int) -> int:
        """Line of a field (0: the file as a whole)."""
        return self.place(*loc)[1]

    def problem(self, loc: tuple[str | int, ...], text: str) -> Problem:
        """A problem at the place of a field."""
        return Problem(*self.place(*loc), text)

    def at(self, loc: tuple[str | int, ...], text: str) -> Problem:
        """A problem at the place of a field, the field named in the user's words before the text."""
        where = self.words(*loc)
        return self.problem(loc, f"{where}: {text}" if where else text)

    def words(self, *loc: str | int) -> str:
        """A field in the user's words: "stage 'polish': media", "run 2: area", "batch.volume"."""
        head, rest = "", list[str | int]()
        data, parent = self.data, ""
        for part in loc:
            named = self._named(parent, part, data)
            if named:
                head, rest = named, []
            else:
                rest.append(part)
            data = _child(data, part)
            parent = part if isinstance(part, str) else ""
        tail = ""
        for part in rest:
            tail += f" item {part + 1}" if isinstance(part, int) else f".{part}" if tail else str(part)
        return ": ".join(text for text in (head, tail.strip()) if text)

    @staticmethod
    def _named(parent: str, part: str | int, data: Any) -> str:
        if isinstance(part, int):
            if parent == "runs":
                return f"run {part + 1}"
            if parent not in _NAMED:
                return ""
            kind = _NAMED[parent]
            item = _child(data, part)
            name = item.get(kind) if isinstance(item, dict) else None
            return f"{kind} '{name}'" if isinstance(name, str | int) else f"{kind} {part + 1}"
        return f"{_KEYED[parent]} '{part}'" if parent in _KEYED else ""


def _child(data: Any, part: str | int) -> Any:
    if isinstance(data, dict):
        return data.get(part)
    if isinstance(data, tuple) and isinstance(part, int) and part < len(data):
        return data[part]
    return None


def shown_path(path: Path) -> str:
    """The path as the user would type it: relative to the current folder where it is below it."""
    try:
        whole = path.resolve()
        if whole.is_relative_to(Path.cwd()):
            return str(whole.relative_to(Path.cwd()))
        return str(whole if ".." in path.parts else path)
    except (ValueError, OSError):
        return str(path)


def is_file(path: Path) -> bool:
    """Whether a file is there; a name that no file system can hold (too long) is none."""
    try:
        return path.is_file()
    except (OSError, ValueError):
        return False


def is_folder(path: Path) -> bool:
    """Whether a folder is there, in the same way."""
    try:
        return path.is_dir()
    except (OSError, ValueError):
        return False


def file_hash(path: Path) -> str:
    """SHA-256 of a file's bytes, in hexadecimal digits."""
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


def read_source(path: Path) -> tuple[Source, list[Problem]]:
    """Read one YAML file; raises `InputError` where there is nothing to look at."""
    path = path.absolute()
    shown = shown_path(path)
    raw = _read_bytes(path, shown)
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        raise InputError([Problem(shown, line, "is not UTF-8 text; expected a file saved as UTF-8")]) from None
    document = read_document(text, shown)
    problems = list(document.problems)
    if not isinstance(document.data, dict):
        if not problems:
            problems.append(Problem(shown, 1, "is not a mapping; expected 'key: value' lines"))
        raise InputError(problems)
    digest = hashlib.sha256(raw).hexdigest()
    return Source(path.resolve(), shown, digest, document.places, document.data), problems


def _read_bytes(path: Path, shown: str) -> bytes:
    try:
        if path.is_dir():
            raise InputError([Problem(shown, 0, "is a folder; expected a YAML file")])
        if path.stat().st_size > _LARGEST:
            raise InputError([Problem(shown, 0, "is larger than 5 MB; expected a YAML file written by hand")])
        return path.read_bytes()
    except FileNotFoundError:
        raise InputError([Problem(shown, 0, "no such file; expected a YAML file")]) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError([Problem(shown, 0, f"cannot be read: {reason}")]) from None


__all__ = ["Loc", "Places", "Source", "file_hash", "is_file", "is_folder", "read_source", "shown_path"]
