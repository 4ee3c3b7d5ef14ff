"""The terminal: encodings, width, color, and a sign of life on anything that takes longer than a second."""

from __future__ import annotations

import codecs
import os
import shutil
import sys
import threading
from collections.abc import Iterator
from contextlib import contextmanager

_PLAIN_LETTERS = {
    "²": "2", "³": "3", "·": "*", "×": "x", "–": "-", "—": "-", "−": "-", "…": "...", "≤": "<=", "≥": ">=",
    "Δ": "d", "ρ": "rho", "κ": "kappa", "μ": "u", "µ": "u", "±": "+-", "─": "-", "│": "|", "’": "'", "ⁿ": "n",
}  # fmt: skip


def _in_plain_letters(error: UnicodeError) -> tuple[str, int]:
    if not isinstance(error, UnicodeEncodeError):
        raise error
    letters = error.object[error.start : error.end]
    return "".join(_PLAIN_LETTERS.get(letter, "?") for letter in letters), error.end


def prepare_streams() -> None:
    """UTF-8 into files and pipes; a terminal that cannot show a letter gets its nearest plain one."""
    codecs.register_error("plain-letters", _in_plain_letters)
    for stream in (sys.stdout, sys.stderr):
        reconfigure = getattr(stream, "reconfigure", None)
        if reconfigure is None:
            continue
        if not stream.isatty() and "PYTHONIOENCODING" not in os.environ:
            reconfigure(encoding="utf-8")
        reconfigure(errors="plain-letters")


def width() -> int:
    """Columns to print in: the terminal's, or 100 where the output is piped."""
    return shutil.get_terminal_size((100, 24)).columns if sys.stdout.isatty() else 100


def color() -> bool:
    """Whether stdout is a terminal that wants colors."""
    return sys.stdout.isatty() and "NO_COLOR" not in os.environ and os.environ.get("TERM") != "dumb"


@contextmanager
def progress(text: str) -> Iterator[None]:
    """Show `text` on stderr while the block works, from one second on and only on a terminal."""
    if not sys.stderr.isatty():
        yield
        return
    done = threading.Event()
    sign = threading.Thread(target=_sign_of_life, args=(text, done), daemon=True)
    sign.start()
    try:
        yield
    finally:
        done.set()
        sign.join()


def _sign_of_life(text: str, done: threading.Event) -> None:
    if done.wait(1.0):
        return
    from rich.console import Console

    with Console(stderr=True, markup=False, emoji=False).status(text):
        done.wait()
