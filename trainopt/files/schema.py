"""The shape of the file objects, walked by key: for messages, the field reference and changes by dotted path."""

from __future__ import annotations

import types
import typing
from typing import Any

from pydantic import BaseModel
from pydantic.fields import FieldInfo

from trainopt.files.fields import Rule


def parts(annotation: Any) -> list[Any]:
    """The alternatives of an annotation, None left out, Annotated unwrapped."""
    origin = typing.get_origin(annotation)
    if origin is typing.Annotated:
        return parts(typing.get_args(annotation)[0])
    if origin in (typing.Union, types.UnionType):
        return [part for each in typing.get_args(annotation) for part in parts(each)]
    return [] if annotation in (None, type(None)) else [annotation]


def entry(annotation: Any) -> type[BaseModel] | None:
    """The file object that an annotation holds, if it holds one."""
    for part in parts(annotation):
        if isinstance(part, type) and issubclass(part, BaseModel):
            return part
    return None


def items(annotation: Any) -> Any:
    """What a list or mapping holds; None for anything else."""
    for part in parts(annotation):
        origin, args = typing.get_origin(part), typing.get_args(part)
        if origin is tuple and len(args) == 2 and args[1] is Ellipsis:
            return args[0]
        if origin is dict:
            return args[1]
    return None


def is_mapping(annotation: Any) -> bool:
    """Whether an annotation holds a mapping of the user's own names."""
    return any(typing.get_origin(part) is dict for part in parts(annotation))


def rule_of(field: FieldInfo) -> Rule | None:
    """How a field is read, where it holds one value."""
    for piece in field.metadata:
        if isinstance(piece, Rule):
            return piece
    return rule_in(field.annotation)


def rule_in(annotation: Any) -> Rule | None:
    """The same, from an annotation."""
    origin = typing.get_origin(annotation)
    if origin is typing.Annotated:
        for piece in typing.get_args(annotation)[1:]:
            if isinstance(piece, Rule):
                return piece
        return rule_in(typing.get_args(annotation)[0])
    if origin in (typing.Union, types.UnionType):
        found = (rule_in(each) for each in typing.get_args(annotation))
        return next((rule for rule in found if rule is not None), None)
    return None


def entry_at(model: type[BaseModel], loc: tuple[str | int, ...]) -> type[BaseModel] | None:
    """The file object that stands at a place below `model`."""
    annotation: Any = model
    for part in loc:
        here = entry(annotation)
        inside = items(annotation)
        if inside is not None:
            annotation = inside
        elif here is not None and part in here.model_fields:
            annotation = here.model_fields[str(part)].annotation
        else:
            return None
    return entry(annotation)


def field_at(model: type[BaseModel], loc: tuple[str | int, ...]) -> FieldInfo | None:
    """The field that stands at a place below `model`."""
    owner = entry_at(model, loc[:-1]) if loc else None
    return owner.model_fields.get(str(loc[-1])) if owner is not None else None


def expectation(field: FieldInfo) -> str:
    """What a field should hold, completing "expected …"."""
    rule = rule_of(field)
    if rule is not None:
        other = f" or {_of(field.annotation)}" if entry(field.annotation) else ""
        return rule.expected + other
    inside = items(field.annotation)
    if inside is not None:
        kind = "a mapping of names" if is_mapping(field.annotation) else "a list"
        return f"{kind}, each {_of(inside)}"
    return _of(field.annotation)


def _of(annotation: Any) -> str:
    inner = entry(annotation)
    if inner is not None:
        needed = [name for name, field in inner.model_fields.items() if field.is_required()]
        keys = needed or list(inner.model_fields)
        return f"a mapping with {', '.join(keys)}"
    rule = rule_in(annotation)
    return rule.expected if rule is not None else "a value"
