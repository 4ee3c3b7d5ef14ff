"""Notices as people read them: what is said of several media alike is said once."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from trainopt.train.results import Notice


def grouped(notices: Sequence[Notice]) -> tuple[tuple[str, str], ...]:
    """Code and text of each notice; those that differ only in the name before the colon share one text."""
    names: dict[tuple[str, str], list[str]] = {}
    for notice in notices:
        name, colon, rest = notice.text.partition(": ")
        names.setdefault((notice.code, rest if colon else notice.text), []).append(name if colon else "")
    return tuple(
        (code, f"{', '.join(dict.fromkeys(who))}: {text}" if who[0] else text) for (code, text), who in names.items()
    )
