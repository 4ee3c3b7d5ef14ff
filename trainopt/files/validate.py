"""Data from a file to a file object, every fault as a problem with its line and what was expected."""

from __future__ import annotations

from typing import Any, TypeVar

from pydantic import BaseModel, ValidationError
from pydantic_core import ErrorDetails

from trainopt.errors import Problem
from trainopt.files.fields import nearest, nearest_name, written
from trainopt.files.schema import entry_at, expectation, field_at
from trainopt.files.source import Loc, Source

Model = TypeVar("Model", bound=BaseModel)


def validated(model: type[Model], source: Source) -> tuple[Model | None, list[Problem]]:
    """The object that the source's data makes, or None with every problem found."""
    try:
        found = model.model_validate(source.data, context={"folder": source.path.parent})
    except ValidationError as error:
        details = error.errors(include_url=False)
        meant = {_meant(model, detail) for detail in details if detail["type"] == "extra_forbidden"}
        told = [detail for detail in details if detail["type"] != "missing" or detail["loc"] not in meant]
        return None, [_problem(model, source, detail) for detail in told]
    found.__pydantic_private__ = {"_source": source}
    return found, []


def _meant(model: type[BaseModel], detail: ErrorDetails) -> Loc:
    """The place of the key that an unknown one is a slip of: that it is missing need not be said too."""
    *above, key = detail["loc"]
    owner = entry_at(model, tuple(above))
    near = nearest_name(str(key), owner.model_fields) if owner is not None else None
    return (*above, near or key)


def _problem(model: type[BaseModel], source: Source, detail: ErrorDetails) -> Problem:
    loc = tuple(part for part in detail["loc"] if not (isinstance(part, str) and part.startswith("<")))
    kind = detail["type"]
    if kind == "extra_forbidden":
        return _unknown_key(model, source, loc)
    if kind == "missing":
        field = field_at(model, loc)
        what = f"'{loc[-1]}' is missing; expected {expectation(field) if field else 'a value'}"
        where = source.words(*loc[:-1])
        return source.problem(loc, f"{where}: {what}" if where else what)
    return source.at(loc, _text(model, loc, kind, detail))


def _unknown_key(model: type[BaseModel], source: Source, loc: Loc) -> Problem:
    owner = entry_at(model, loc[:-1])
    known = list(owner.model_fields) if owner is not None else []
    where = source.words(*loc[:-1])
    what = f"unknown key '{loc[-1]}'; {nearest(str(loc[-1]), known)}"
    return source.problem(loc, f"{where}: {what}" if where else what)


def _text(model: type[BaseModel], loc: Loc, kind: str, detail: ErrorDetails) -> str:
    context: dict[str, Any] = detail.get("ctx", {})
    if kind == "rule":
        return str(context["text"])
    if kind == "value_error":
        return str(context["error"])
    value = detail["input"]
    field = field_at(model, loc)
    if field is not None:
        return f"{written(value)} does not fit; expected {expectation(field)}"
    owner = entry_at(model, loc)
    if owner is not None:
        needed = [name for name, part in owner.model_fields.items() if part.is_required()]
        return f"{written(value)} does not fit; expected a mapping with {', '.join(needed or owner.model_fields)}"
    return f"{written(value)} does not fit; expected another kind of value"
