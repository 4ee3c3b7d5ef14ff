"""Flags of a curve as notices of a design: one line per medium and code, however many runs carry it.

`trainopt curve` shows every flag by itself.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Sequence

from trainopt.bench.run import Flag
from trainopt.train.results import Notice

MOST_PLACES = 6
"""Places named for what is said alike of many readings; the rest is counted."""

_NUMBER = re.compile(r"[+-]?\d+(\.\d+)?(e[+-]?\d+)?%?")


def flag_notices(medium: str, flags: Iterable[Flag]) -> Iterator[Notice]:
    """One notice per code, in the order in which the codes first appear.

    What is said of several runs in the same words is said once, with their names; where only its numbers differ, with
    the first run's numbers and the names of the others; what differs in more stands behind it.
    """
    by_code: dict[str, list[Flag]] = {}
    for flag in flags:
        by_code.setdefault(flag.code, []).append(flag)
    for code, alike in by_code.items():
        by_words: dict[str, list[Flag]] = {}
        for flag in alike:
            by_words.setdefault(_NUMBER.sub("#", flag.text), []).append(flag)
        parts = [_said_once(medium, same) for same in by_words.values()]
        if len(parts) == 1:
            who, text = parts[0]
            yield Notice(code, f"{', '.join((medium, *who))}: {text}")
        else:
            rest = "; ".join(f"{', '.join(who)}: {text}" if who else text for who, text in parts)
            yield Notice(code, f"{medium}: {rest}")


def _said_once(medium: str, flags: Sequence[Flag]) -> tuple[tuple[str, ...], str]:
    """The runs that a text holds for as it stands (none: the medium as a whole), and the text with what is alike."""
    first, whole = flags[0], not _place(medium, flags[0])
    if all(flag.text == first.text and flag.rows is None for flag in flags):
        return (() if whole else tuple(dict.fromkeys(flag.run for flag in flags))), first.text
    others = [_place(medium, flag) for flag in flags[1:]]
    named = [place for place in others[:MOST_PLACES] if place]
    more = f" and {len(others) - MOST_PLACES} more" if len(others) > MOST_PLACES else ""
    likewise = f"; likewise {', '.join(named)}{more}" if named else ""
    text = f"{_rows(first)}: {first.text}" if first.rows else first.text
    return (() if whole else (first.run,)), text + likewise


def _place(medium: str, flag: Flag) -> str:
    """Run and rows of a flag; "" for one of the medium as a whole."""
    run = "" if flag.run == medium else flag.run
    return " ".join(part for part in (run, _rows(flag)) if part)


def _rows(flag: Flag) -> str:
    if flag.rows is None:
        return ""
    first, last = flag.rows
    return f"row {first}" if first == last else f"rows {first} to {last}"
