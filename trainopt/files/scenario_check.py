"""What must hold between the fields of one scenario file, also where some of them do not fit the schema."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from trainopt.errors import Problem
from trainopt.files.fields import as_text
from trainopt.files.scenario import Scenario
from trainopt.files.source import Loc, Source
from trainopt.units import show


def scenario_problems(source: Source, scenario: Scenario | None) -> list[Problem]:
    """Every problem between fields; `scenario` is None where the file does not fit the schema."""
    return [*_list_problems(source), *(_setup_problems(source, scenario) if scenario is not None else ())]


def _setup_problems(source: Source, scenario: Scenario) -> Iterator[Problem]:
    """Setups that leave no time to filter. (Not asked of a case that a sweep changes: there it is an answer.)"""
    allowed = scenario.batch.time
    setups = [block.setup for block in scenario.blocks]
    if scenario.schedule == "side-by-side":
        for index, setup in enumerate(setups):
            if setup >= allowed:
                text = f"{show(setup, 'time')} leaves no time to filter; expected less than {show(allowed, 'time')}"
                yield source.at(("blocks", index, "setup"), text)
    elif sum(setups) >= allowed:
        text = f"{show(allowed, 'time')} leaves no time to filter; expected more than the blocks' setups take, "
        yield source.at(("batch", "time"), text + show(sum(setups), "time"))


def _list_problems(source: Source) -> list[Problem]:
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
            name = as_text(choice.get("medium") if isinstance(choice, dict) else choice)
            if name is not None:
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
    names = [((*at, key), as_text(item.get(key))) for at, item in _entries(loc, items)]
    return [(at, name) for at, name in names if name is not None]


def _empty(source: Source, loc: Loc, items: Any, expected: str) -> Iterator[Problem]:
    if items == ():
        yield source.at(loc, f"is empty; expected {expected}")


def _twice(source: Source, names: list[tuple[Loc, str]]) -> Iterator[Problem]:
    first: dict[str, Loc] = {}
    for loc, name in names:
        other = first.setdefault(name, loc)
        if other != loc:
            yield source.at(loc, f"'{name}' stands twice (first in line {source.line(*other)}); expected another name")
