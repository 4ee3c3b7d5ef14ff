"""Scenarios that extend another: what differs laid over what is inherited, each part at its own file and line.

Mappings merge key by key; blocks and stages merge by name, further ones follow after the inherited ones; any other
value, a list of media included, replaces the inherited one. A key given as nothing (`pump:`) takes the inherited
value away.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

from trainopt.errors import InputError, Problem
from trainopt.files.document import Loc
from trainopt.files.fields import as_text, written
from trainopt.files.source import Source, is_file, read_source

_NAMED_LISTS = {"blocks": "block", "stages": "stage"}


def read_inherited(path: Path) -> tuple[Source, list[Problem]]:
    """Read a scenario file with all that it extends; raises `InputError` where a file cannot be looked at at all."""
    source, problems = read_source(path)
    chain = [source]
    while (name := as_text(chain[-1].data.get("extends"))) is not None:
        child = chain[-1]
        target = Path(child.path.parent, name)
        if not is_file(target):
            problems.append(child.at(("extends",), f"no such file {written(name)}; expected a scenario"))
            break
        if any(target.resolve() == one.path for one in chain):
            circle = " → ".join([*(one.path.name for one in chain), target.name])
            text = f"goes round in a circle ({circle}); expected a scenario that does not extend this one"
            problems.append(child.at(("extends",), text))
            break
        try:
            parent, more = read_source(target)
        except InputError as error:
            raise InputError([*problems, *error.problems]) from None
        problems += more
        chain.append(parent)
    return _laid_over(chain), problems


def _laid_over(chain: list[Source]) -> Source:
    """One source of all: the last of the chain is inherited by the one before it, and so on."""
    whole = chain[-1]
    for child in reversed(chain[:-1]):
        overlay = _Overlay(whole, child)
        data = overlay.merged(whole.data, child.data, (), (), ())
        whole = replace(child, data=data, places=overlay.places)
    return replace(whole, parents=tuple(chain[1:]))


class _Overlay:
    """Merges data and places of an inherited source and of the one that extends it."""

    def __init__(self, base: Source, child: Source) -> None:
        self.base = base
        self.child = child
        self.places: dict[Loc, tuple[str, int]] = {}

    def merged(self, base: Any, child: Any, base_loc: Loc, child_loc: Loc, loc: Loc) -> Any:
        """The child's data over the base's; `loc` is where the outcome stands."""
        self._put(self.child, child_loc, loc)
        if isinstance(base, dict) and isinstance(child, dict):
            return self._mapping(base, child, base_loc, child_loc, loc)
        key = _NAMED_LISTS.get(str(loc[-1])) if loc else None
        if key and isinstance(base, tuple) and isinstance(child, tuple):
            return self._named(key, base, child, base_loc, child_loc, loc)
        return self._copied(self.child, child, child_loc, loc)

    def _mapping(self, base: dict[str, Any], child: dict[str, Any], base_loc: Loc, child_loc: Loc, loc: Loc) -> Any:
        out = {}
        for key in (*base, *(key for key in child if key not in base)):
            at = (*loc, key)
            if key not in child:
                if not (key == "extends" and not loc):
                    out[key] = self._copied(self.base, base[key], (*base_loc, key), at)
            elif key in base:
                out[key] = self.merged(base[key], child[key], (*base_loc, key), (*child_loc, key), at)
            else:
                out[key] = self._copied(self.child, child[key], (*child_loc, key), at)
        return out

    def _named(
        self, key: str, base: tuple[Any, ...], child: tuple[Any, ...], base_loc: Loc, child_loc: Loc, loc: Loc
    ) -> Any:
        out: list[Any] = []
        rest = dict(enumerate(child))
        for place, item in enumerate(base):
            name = _name(item, key)
            same = next((i for i, other in rest.items() if _name(other, key) == name), None)
            at = (*loc, place)
            if name is None or same is None:
                out.append(self._copied(self.base, item, (*base_loc, place), at))
            else:
                out.append(self.merged(item, rest.pop(same), (*base_loc, place), (*child_loc, same), at))
        for place, item in rest.items():
            out.append(self._copied(self.child, item, (*child_loc, place), (*loc, len(out))))
        return tuple(out)

    def _copied(self, source: Source, data: Any, old: Loc, new: Loc) -> Any:
        self._put(source, old, new)
        if isinstance(data, dict):
            for key, value in data.items():
                self._copied(source, value, (*old, key), (*new, key))
        elif isinstance(data, tuple):
            for index, value in enumerate(data):
                self._copied(source, value, (*old, index), (*new, index))
        return data

    def _put(self, source: Source, old: Loc, new: Loc) -> None:
        place = source.places.get(old)
        if place is not None:
            self.places[new] = place


def _name(item: Any, key: str) -> str | None:
    return as_text(item.get(key)) if isinstance(item, dict) else None
