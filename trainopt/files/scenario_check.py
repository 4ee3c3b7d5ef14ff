"""What must hold between the fields of one scenario file, also where some of them do not fit the schema."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from trainopt.errors import Problem
from trainopt.files.source import Loc, Source


def scenario_problems(source: Source) -> list[Problem]:
    """Empty lists and names that stand twice."""
    blocks = source.data.get("blocks")
    out = list(_empty(source, ("blocks",), blocks, "at least one block"))
    out.extend(_twice(source, _named(("blocks",), blocks, "block")))
    stages: list[tuple[Loc, str]] = []
    for loc, block in _entries(("blocks",), blocks):
        inside = block.get("stages")
        out.extend(_empty(source, (*loc, "stages"), inside, "at least one stage"))
        stages.extend(_named((*loc, "stages"), inside, "stage"))
        for stage_loc, stage in _entries((*loc, "stages"), inside):
            out.extend(_media(source, stage_loc, stage.get("media")))
    out.extend(_twice(source, stages))
    return out


def _media(source: Source, loc: Loc, media: Any) -> Iterator[Problem]:
    loc = (*loc, "media")
    yield from _empty(source, loc, media, "at least one medium")
    if isinstance(media, tuple):
        names = []
        for index, choice in enumerate(media):
            name = choice.get("medium") if isinstance(choice, dict) else choice
            if isinstance(name, str):
                names.append(((*loc, index), name))
        yield from _twice(source, names)
        for index, choice in enumerate(media):
            if isinstance(choice, dict):
                yield from _empty(source, (*loc, index, "after"), choice.get("after"), "at least one medium")


def _entries(loc: Loc, items: Any) -> Iterator[tuple[Loc, dict[str, Any]]]:
    if isinstance(items, tuple):
        for index, item in enumerate(items):
            if isinstance(item, dict):
                yield (*loc, index), item


def _named(loc: Loc, items: Any, key: str) -> list[tuple[Loc, str]]:
    return [((*at, key), item[key]) for at, item in _entries(loc, items) if isinstance(item.get(key), str)]


def _empty(source: Source, loc: Loc, items: Any, expected: str) -> Iterator[Problem]:
    if items == ():
        yield source.at(loc, f"is empty; expected {expected}")


def _twice(source: Source, names: list[tuple[Loc, str]]) -> Iterator[Problem]:
    first: dict[str, Loc] = {}
    for loc, name in names:
        other = first.setdefault(name, loc)
        if other != loc:
            yield source.at(loc, f"'{name}' stands twice (first in line {source.line(*other)}); expected another name")
