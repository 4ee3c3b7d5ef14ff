"""The journal of a sweep: what is done, one line per job, so that a sweep that was killed goes on where it
stopped."""

from __future__ import annotations

import contextlib
import hashlib
import json
import math
import os
import time
from dataclasses import asdict
from pathlib import Path
from typing import Any, TextIO

from trainopt.errors import InputError, Problem
from trainopt.files import Case
from trainopt.study.axis import Axis
from trainopt.study.plan import Found
from trainopt.study.results import Change, EvenCell, SweepCell
from trainopt.train.results import Pick
from trainopt.version import __version__

_KIND = "trainopt.sweep-journal/1"
_SYNC = 0.25
"""Seconds after which what was written is forced to disk."""


def fingerprint(case: Case, axes: tuple[Axis, ...], objective: str | None, changes: object) -> str:
    """What a sweep's results depend on, as one hash: every file, every axis, the program's version."""
    workspace = case.workspace
    parts = (repr(case.scenario), repr(workspace.catalog), repr(dict(workspace.media)), repr(case.inputs()),
             repr(axes), repr(objective), repr(changes), __version__)  # fmt: skip
    return hashlib.sha256("\n".join(parts).encode()).hexdigest()


class Journal:
    """An append-only file: a heading, then one line per finished job, each handed over before the next begins.

    A line that a kill cut short is dropped when the journal is opened again.
    """

    def __init__(self, path: Path, mark: str) -> None:
        self.path = path
        self.done: dict[str, Found] = {}
        self._synced = -math.inf
        if path.exists() and path.stat().st_size:
            self._read(mark)
        self._file: TextIO = path.open("a", encoding="utf-8")
        if not self._file.tell():
            self._write({"journal": _KIND, "of": mark})

    def _read(self, mark: str) -> None:
        data = self.path.read_bytes()
        lines = data.split(b"\n")
        try:
            head = json.loads(lines[0])
            whole = len(lines) > 1 and head.get("journal") == _KIND
        except (ValueError, AttributeError):
            whole = False
        if not whole:
            raise InputError([Problem(str(self.path), 1, "is not the journal of a sweep; expected one, or a new file")])
        if head["of"] != mark:
            text = "belongs to another sweep, or a file has changed since; expected a new file to start over"
            raise InputError([Problem(str(self.path), 1, text)])
        good = len(lines[0]) + 1
        for line in lines[1:-1]:
            try:
                entry = json.loads(line)
                self.done[entry["job"]] = _found(entry)
            except (ValueError, KeyError, TypeError):
                break
            good += len(line) + 1
        if good < len(data):
            with self.path.open("r+b") as file:
                file.truncate(good)

    def add(self, key: str, found: Found) -> None:
        """Put a finished job on disk."""
        self._write({"job": key, **asdict(found)})

    def _write(self, entry: dict[str, Any]) -> None:
        self._file.write(json.dumps(entry, ensure_ascii=False) + "\n")
        # Flushed, a line outlives the process; synced now and then, the power too.
        self._file.flush()
        if time.monotonic() - self._synced > _SYNC:
            self._sync()

    def close(self) -> None:
        """Close the file, all of it on disk."""
        self._sync()
        self._file.close()

    def _sync(self) -> None:
        # A pipe or a device cannot be synced, and need not be.
        with contextlib.suppress(OSError):
            os.fsync(self._file.fileno())
        self._synced = time.monotonic()


def _found(entry: dict[str, Any]) -> Found:
    return Found(
        cells=tuple(_cell(cell) for cell in entry["cells"]),
        changes=tuple(
            Change(
                c["axis"],
                (c["between"][0], c["between"][1]),
                _picks(c["before"]),
                _picks(c["after"]),
                tuple(c["others"]),
            )
            for c in entry["changes"]
        ),
    )


def _cell(entry: dict[str, Any]) -> SweepCell:
    even = entry["even_split"]
    fields = {
        **entry,
        "at": tuple(entry["at"]),
        "spare": tuple(entry["spare"]),
        "picks": _picks(entry["picks"]),
        "even_split": None if even is None else EvenCell(**even),
    }
    return SweepCell(**fields)


def _picks(entries: list[dict[str, Any]]) -> tuple[Pick, ...]:
    return tuple(Pick(**entry) for entry in entries)
