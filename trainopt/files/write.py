"""Files written whole or not at all, and never over what the user has unless asked."""

from __future__ import annotations

import contextlib
import os
import tempfile
from pathlib import Path

from trainopt.errors import InputError, Problem
from trainopt.files.source import shown_path


def write_text_atomic(path: Path, text: str, overwrite: bool = False) -> None:
    """Write UTF-8 text; raises `InputError` where the file exists already or cannot be written."""
    write_bytes_atomic(path, text.encode("utf-8"), overwrite)


def write_bytes_atomic(path: Path, data: bytes, overwrite: bool = False) -> None:
    """Write bytes through a temporary file beside the target, so that a reader sees all of it or nothing."""
    path = Path(path)
    try:
        handle, name = tempfile.mkstemp(prefix=f".{path.name[:100]}.", suffix=".part", dir=path.parent)
    except OSError as error:
        raise InputError([_cannot(path, error)]) from None
    part = Path(name)
    try:
        with os.fdopen(handle, "wb") as file:
            file.write(data)
            file.flush()
            os.fsync(file.fileno())
        part.chmod(_mode(path))
        _put(part, path, overwrite)
    except OSError as error:
        raise InputError([_cannot(path, error)]) from None
    finally:
        with contextlib.suppress(FileNotFoundError):
            part.unlink()


def _mode(path: Path) -> int:
    """The permissions of the file replaced, or those a new file would get."""
    if path.exists():
        return path.stat().st_mode & 0o777
    mask = os.umask(0)
    os.umask(mask)
    return 0o666 & ~mask


def _put(part: Path, path: Path, overwrite: bool) -> None:
    """Move the finished part into place; a link fails where the name is taken, a rename would replace it."""
    if overwrite:
        part.replace(path)
        return
    try:
        os.link(part, path)
    except FileExistsError:
        raise
    except OSError:  # a file system without hard links
        if path.exists():
            raise FileExistsError(17, "exists already") from None
        part.rename(path)


def _cannot(path: Path, error: OSError) -> Problem:
    if isinstance(error, FileExistsError):
        return Problem(shown_path(path), 0, "exists already; expected a new name (nothing was overwritten)")
    return Problem(shown_path(path), 0, f"cannot be written: {error.strerror or error}")
