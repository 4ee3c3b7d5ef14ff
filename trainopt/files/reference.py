"""The fields of every file as data, from the schema that reads them: meaning, unit, default, range, example."""

from __future__ import annotations

import ast
import inspect
import textwrap
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

from pydantic import BaseModel
from pydantic.fields import FieldInfo

from trainopt.errors import InputError, Problem
from trainopt.files.catalog import Catalog
from trainopt.files.fields import Amount, Choice, Count, FilePath, Flag, Name, Number, Rule, Words, nearest
from trainopt.files.load import file_kind
from trainopt.files.medium import ColumnNames, Medium
from trainopt.files.scenario import Scenario
from trainopt.files.schema import entry, is_mapping, items, rule_of
from trainopt.units import EXAMPLES, show, usual_units

FILES: dict[str, type[BaseModel]] = {"medium": Medium, "catalog": Catalog, "scenario": Scenario}


@dataclass(frozen=True)
class FieldNote:
    """One field of a file.

    `path` as it is reached (`blocks[].pump.max_flow`, `modules.NAME.area`; `[]` an item of a list, `NAME` a name of the
    user's own); `holds` what is written there, with units; `default` "" where there is none; `example` as one would
    type it, "" for a field that only holds others.
    """

    file: str
    path: str
    meaning: str
    holds: str
    required: bool
    default: str
    allowed: str
    example: str


def file_fields(kind: str) -> tuple[FieldNote, ...]:
    """Every field of a "medium", "catalog" or "scenario" file, in the order of the schema."""
    return tuple(_notes(kind, FILES[kind], ""))


def fields(topic: str | None = None) -> tuple[FieldNote, ...]:
    """The fields that a topic stands for; raises `InputError` with the nearest name where it stands for none.

    A topic is a kind of file, a field and what is below it (`blocks.pump`, `medium.limits`), or the path of a file,
    which stands for its kind; None is everything.
    """
    if topic is None:
        return tuple(note for kind in FILES for note in file_fields(kind))
    if topic in FILES:
        return file_fields(topic)
    if Path(topic).suffix.lower() in (".yaml", ".yml"):
        return file_fields(file_kind(Path(topic)))
    found = _below(topic)
    if not found:
        notes = [note for kind in FILES for note in file_fields(kind)]
        lead = "" if topic.partition(".")[0] not in FILES else topic.partition(".")[0] + "."
        known = {*FILES, *(lead + plain_path(note) for note in notes if not lead or note.file + "." == lead)}
        raise InputError([Problem(topic, 0, f"is no file and no field; {nearest(topic, known)}")])
    return found


def plain_path(note: FieldNote) -> str:
    """The path of a field without its list and name marks: `blocks.stages.media`."""
    return note.path.replace("[]", "").replace(".NAME", "")


def _below(topic: str) -> tuple[FieldNote, ...]:
    head, _, rest = topic.replace("[]", "").replace(".NAME", "").partition(".")
    kinds = [head] if head in FILES and rest else list(FILES)
    wanted = rest if head in FILES and rest else topic.replace("[]", "").replace(".NAME", "")
    notes = (note for kind in kinds for note in file_fields(kind))
    return tuple(note for note in notes if f"{plain_path(note)}.".startswith(f"{wanted}."))


def _notes(kind: str, model: type[BaseModel], prefix: str) -> list[FieldNote]:
    out = []
    meanings = _meanings(model)
    for name, field in model.model_fields.items():
        path = f"{prefix}{name}"
        inside = items(field.annotation)
        inner = entry(inside if inside is not None else field.annotation)
        out.append(_note(kind, path, meanings[name], field))
        if inner is not None:
            mark = "" if inside is None else ".NAME" if is_mapping(field.annotation) else "[]"
            out.extend(_notes(kind, inner, f"{path}{mark}."))
    return out


def _note(kind: str, path: str, meaning: str, field: FieldInfo) -> FieldNote:
    rule = rule_of(field)
    return FieldNote(
        file=kind,
        path=path,
        meaning=meaning,
        holds=_holds(field, rule),
        required=field.is_required(),
        default="" if field.is_required() else _default(field.get_default(call_default_factory=True), rule),
        allowed=_allowed(rule),
        example=_example(rule),
    )


def _holds(field: FieldInfo, rule: Rule | None) -> str:
    if isinstance(rule, Choice):
        return rule.expected + _or_mapping(field)
    if isinstance(rule, Amount) and rule.dimension == "turbidity":
        return "turbidity in NTU, with or without the unit"
    if isinstance(rule, Amount):
        return f"{rule.dimension.replace('_', ' ')} with unit: {', '.join(usual_units(rule.dimension))}"
    if rule is None:
        return _structure(field.annotation)
    own = {Number: "number", Count: "whole number", Name: "name", Words: "text", Flag: "true or false"}
    own |= {FilePath: "path, relative to this file", ColumnNames: "headers by column"}
    words = next((text for kind, text in own.items() if isinstance(rule, kind)), rule.expected.split(" such as")[0])
    return words + _or_mapping(field)


def _or_mapping(field: FieldInfo) -> str:
    return ", or a mapping" if entry(field.annotation) is not None else ""


def _structure(annotation: Any) -> str:
    inside = items(annotation)
    if inside is None:
        return "mapping"
    what = "mappings" if entry(inside) is not None else "names"
    return f"{what} by name" if is_mapping(annotation) else f"list of {what}"


def _default(value: Any, rule: Rule | None) -> str:
    if value is None or isinstance(value, BaseModel | dict | tuple) or value == "":
        return ""
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(rule, Amount):
        return show(value, rule.dimension)
    return f"{value:g}" if isinstance(value, float) else str(value)


def _allowed(rule: Rule | None) -> str:
    if isinstance(rule, Amount):
        return rule.bounds
    if isinstance(rule, Number | Count):
        return rule.range.words()
    return ""


def _example(rule: Rule | None) -> str:
    if isinstance(rule, Amount):
        return rule.example or EXAMPLES[rule.dimension]
    if isinstance(rule, Choice):
        return rule.words[0]
    if isinstance(rule, Flag):
        return "true"
    example = getattr(rule, "example", None)
    if example is not None:
        return str(example)
    return rule.expected.split("such as ")[-1] if rule is not None else ""


@cache
def _meanings(model: type[BaseModel]) -> dict[str, str]:
    """The text below each field in the source of its class."""
    (definition,) = ast.parse(textwrap.dedent(inspect.getsource(model))).body
    assert isinstance(definition, ast.ClassDef)
    out = {}
    for statement, after in zip(definition.body, definition.body[1:], strict=False):
        if isinstance(statement, ast.AnnAssign) and isinstance(statement.target, ast.Name):
            text = after.value if isinstance(after, ast.Expr) else None
            if isinstance(text, ast.Constant) and isinstance(text.value, str):
                out[statement.target.id] = " ".join(text.value.split())
    return out
