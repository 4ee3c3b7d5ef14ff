"""A numeric field of a case by its dotted path: its dimension, and the same case with another value there.

    batch.volume                       a field of the scenario
    blocks.clarification.pressure      a block by its name (`clarification.pressure` for short)
    media.rye-fine.limits.loading      a medium's field
    catalog.modules.rye-fine-09.price  the catalog's
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from pydantic import BaseModel, ValidationError

from trainopt.files import Case
from trainopt.files.fields import Amount, Count, Number, nearest
from trainopt.files.schema import entry, rule_of

_NAMED = {"blocks": "block", "stages": "stage"}
"""Lists whose entries go by a name, and the key that holds it."""


def field_dimension(case: Case, path: str) -> str | None:
    """The dimension of the field at `path` (None: a bare number); ValueError where there is none such."""
    rule = _rule(*_owner(case, path))
    return rule.dimension if isinstance(rule, Amount) else None


def set_field(case: Case, path: str, value: float) -> Case:
    """The case with `value` (canonical) at `path`; ValueError where the schema does not allow it."""
    root, rest = _root(case, path)
    if root is case.scenario:
        return replace(case, scenario=_changed(root, rest, value))
    if root is case.workspace.catalog:
        return replace(case, workspace=replace(case.workspace, catalog=_changed(root, rest, value)))
    media = {name: _changed(m, rest, value) if m is root else m for name, m in case.workspace.media.items()}
    return replace(case, workspace=replace(case.workspace, media=media))


def _root(case: Case, path: str) -> tuple[BaseModel, str]:
    """The file object that a path starts in, and the path inside it."""
    if path.startswith("media."):
        name, rest = _named(path.removeprefix("media."), case.workspace.media, "medium")
        return case.workspace.media[name], rest
    if path.startswith("catalog."):
        return case.workspace.catalog, path.removeprefix("catalog.")
    head = path.split(".", 1)[0]
    if head not in type(case.scenario).model_fields and any(
        path.startswith(f"{block.block}.") for block in case.scenario.blocks
    ):
        path = f"blocks.{path}"
    return case.scenario, path


def _named(path: str, names: Mapping[str, Any] | list[str], what: str) -> tuple[str, str]:
    """The longest of `names` that the path starts with (a name may hold dots), and the rest of the path."""
    found = [name for name in names if path.startswith(f"{name}.")]
    if not found:
        raise ValueError(f"unknown {what} '{path.split('.', 1)[0]}'; {nearest(path.split('.', 1)[0], names)}")
    name = max(found, key=len)
    return name, path.removeprefix(f"{name}.")


def _owner(case: Case, path: str) -> tuple[type[BaseModel], str]:
    """The kind of object that holds the field at a path, and the field's key in it."""
    here, rest = _root(case, path)
    return _walk(here, rest, path)


def _walk(here: BaseModel, rest: str, path: str) -> tuple[type[BaseModel], str]:
    key, dot, below = rest.partition(".")
    kind = type(here)
    if key not in kind.model_fields:
        raise ValueError(f"'{path}': unknown field '{key}'; {nearest(key, kind.model_fields)}")
    if not dot:
        return kind, key
    value = getattr(here, key)
    if key in _NAMED or isinstance(value, Mapping):
        entries = _entries(key, value)
        name, below = _named(below, entries, key)
        return _walk(entries[name], below, path)
    if isinstance(value, BaseModel):
        return _walk(value, below, path)
    inner = entry(kind.model_fields[key].annotation)
    if inner is None or below not in inner.model_fields:
        raise ValueError(f"'{path}': '{key}' holds no field '{below}'")
    return inner, below


def _entries(key: str, value: Any) -> dict[str, BaseModel]:
    if isinstance(value, Mapping):
        return {name: each for name, each in value.items() if isinstance(each, BaseModel)}
    return {getattr(each, _NAMED[key]): each for each in value}


def _rule(kind: type[BaseModel], key: str) -> Amount | Number | Count:
    rule = rule_of(kind.model_fields[key])
    if not isinstance(rule, Amount | Number | Count):
        raise ValueError(f"'{key}' is not a number; expected a field that is, such as batch.volume")
    return rule


def _changed(here: Any, rest: str, value: float) -> Any:
    """A copy of a file object with one field below it replaced, held against the schema."""
    key, dot, below = rest.partition(".")
    new: Any
    if not dot:
        new = value
        if isinstance(_rule(type(here), key), Count):
            if value != int(value):
                raise ValueError(f"{value:g} does not count anything; expected a whole number")
            new = int(value)
    elif key in _NAMED or isinstance(getattr(here, key), Mapping):
        old = getattr(here, key)
        name, below = _named(below, _entries(key, old), key)
        if isinstance(old, Mapping):
            new = {n: _changed(each, below, value) if n == name else each for n, each in old.items()}
        else:
            new = tuple(_changed(e, below, value) if getattr(e, _NAMED[key]) == name else e for e in old)
    elif getattr(here, key) is None:
        inner = entry(type(here).model_fields[key].annotation)
        assert inner is not None, "the path was walked before"
        new = _validated(inner, {below: value})
    else:
        new = _changed(getattr(here, key), below, value)
    copy = _validated(type(here), {**dict(here), key: new})
    copy.__pydantic_private__ = here.__pydantic_private__
    return copy


def _validated(kind: type[BaseModel], fields: dict[str, Any]) -> BaseModel:
    try:
        return kind.model_validate(fields)
    except ValidationError as error:
        detail = error.errors(include_url=False)[0]
        context: dict[str, Any] = detail.get("ctx", {})
        raise ValueError(str(context.get("text") or context.get("error") or detail["msg"])) from None
