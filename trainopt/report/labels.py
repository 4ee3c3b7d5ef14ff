"""Names as labels in pictures: wrapped, shortened only when nothing else fits, never read as markup."""

from __future__ import annotations

import textwrap

from trainopt.report.numbers import plain


def wrapped(name: str, width: int, lines: int = 2) -> str:
    """`name` over at most so many lines of so many letters; a longer one ends in an ellipsis."""
    rows = textwrap.wrap(plain(name), max(4, width), break_on_hyphens=True) or [""]
    if len(rows) > lines:
        rows = [*rows[: lines - 1], rows[lines - 1][: max(3, width) - 1] + "…"]
    return "\n".join(rows)


def short(name: str, width: int) -> str:
    """`name` in one line."""
    return wrapped(name, width, 1)
