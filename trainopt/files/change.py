"""One number of a case changed, by the dotted path of its field: what sweeps and what-ifs are made of.

A path is the way to a number through the case, its parts set off by dots:

    batch.volume   safety_factor   costs.hour   costs.product.titer   basis.reliability   feed_variability.fouling
    blocks.BLOCK.pressure (or BLOCK.pressure)   blocks.BLOCK.pump.max_flow   installed.STAGE.count
    stages.STAGE.fix.count   stages.STAGE.limits.loading (of the media of that stage, which no other stage may use)
    media.MEDIUM.limits.loading   media.MEDIUM.scale_up   media.MEDIUM.flush.volume   media.MEDIUM.variability.fouling
    media.MEDIUM.curve.parameters.k   media.MEDIUM.curve.tested.flux   media.MEDIUM.curve.lots.LOT.fouling
    modules.MODULE.price   holders.HOLDER.batches

Names are the user's own and may hold dots themselves; the longest name that fits is meant.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from typing import Any

from pydantic import BaseModel, ValidationError

from trainopt.errors import InputError, Problem
from trainopt.files.catalog import Catalog
from trainopt.files.crosscheck import case_problems, case_warnings
from trainopt.files.document import scalar
from trainopt.files.fields import Amount, Count, Number, Rule, nearest
from trainopt.files.load import Found
from trainopt.files.medium import Medium, Parameters
from trainopt.files.scenario import Scenario
from trainopt.files.schema import entry, is_mapping, items, rule_of
from trainopt.files.workspace import Case
from trainopt.units import CANONICAL, quantity

Loc = tuple[str | int, ...]
_MODELS: dict[str, type[BaseModel]] = {"scenario": Scenario, "catalog": Catalog, "medium": Medium}
_CATALOG_PARTS = ("modules", "holders")


@dataclass(frozen=True)
class Place:
    """One number of a case: in the scenario ("scenario"), the catalog ("catalog") or a medium ("medium", its name)."""

    kind: str
    name: str
    loc: Loc


@dataclass(frozen=True)
class Field:
    """A numeric field of a case, found by its path.

    `dimension` is a key of `units.CANONICAL`, "" for a bare number, "count" for a whole number. A path through
    `stages.STAGE.limits` stands for several places, which are changed together.
    """

    path: str
    places: tuple[Place, ...]
    rule: Rule

    @property
    def dimension(self) -> str:
        """What is measured."""
        if isinstance(self.rule, Amount):
            return self.rule.dimension
        return "count" if isinstance(self.rule, Count) else ""

    @property
    def unit(self) -> str:
        """The canonical unit of the field ("" for a bare number or a count)."""
        return CANONICAL.get(self.dimension, "")

    def read(self, text: str) -> float:
        """A value for the field from text, in canonical units; ValueError says what was expected."""
        if isinstance(self.rule, Amount):
            return quantity(text, self.rule.dimension)
        value = scalar(text.strip())
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise ValueError(f"'{text}' is not a bare number; expected {self.rule.expected}")
        return float(value)

    def value(self, case: Case) -> float | None:
        """The field's value in a case, canonical; None where the case does not give it."""
        found = _value(_root(case, self.places[0]), self.places[0].loc)
        return None if found is None else float(found)

    def set(self, case: Case, value: str | float) -> Case:
        """A copy of the case with the field changed; raises `InputError` where the value is not allowed."""
        try:
            number: float = self.read(value) if isinstance(value, str) else value
            if isinstance(self.rule, Count) and float(number).is_integer():
                number = int(number)
            changed = case
            for place in self.places:
                changed = _with_root(changed, place, _updated(_root(changed, place), place.loc, number))
        except ValidationError as error:
            texts = [str(detail.get("ctx", {}).get("error") or _rule_text(detail)) for detail in error.errors()]
            raise _refused(case, self.path, "; ".join(texts)) from None
        except ValueError as error:
            raise _refused(case, self.path, str(error)) from None
        return _rechecked(changed)


def set_field(case: Case, path: str, value: str | float) -> Case:
    """A copy of `case` with the field at `path` set to `value`: text with its unit, or a canonical number.

    Raises `InputError` where there is no such field or the value is not allowed there, alone or beside others.
    """
    return find_field(case, path).set(case, value)


def field_dimension(case: Case, path: str) -> str:
    """What the field at `path` measures: a key of `units.CANONICAL`, "" for a bare number, "count" for a whole one."""
    return find_field(case, path).dimension


def find_field(case: Case, path: str) -> Field:
    """The numeric field at a dotted path; raises `InputError` with the nearest known name."""
    try:
        places = _places(case, path.strip().split("."))
        rule = _rule(places[0])
    except ValueError as error:
        raise _refused(case, path, str(error)) from None
    return Field(path.strip(), places, rule)


def _places(case: Case, parts: list[str]) -> tuple[Place, ...]:
    head, rest = parts[0], parts[1:]
    scenario = case.scenario
    if head == "media":
        name, rest = _take(rest, case.workspace.media, "medium")
        return (Place("medium", name, _walk(Medium, case.workspace.media[name], rest)),)
    if head in _CATALOG_PARTS:
        return (Place("catalog", "", _walk(Catalog, case.workspace.catalog, parts)),)
    if head == "stages":
        return _stage_places(case, rest)
    if head in Scenario.model_fields:
        return (Place("scenario", "", _walk(Scenario, scenario, parts)),)
    blocks = [block.block for block in scenario.blocks]
    if any(parts[: len(name.split("."))] == name.split(".") for name in blocks):
        return (Place("scenario", "", _walk(Scenario, scenario, ["blocks", *parts])),)
    known = {*Scenario.model_fields, "media", "stages", *_CATALOG_PARTS, *blocks} - {"scenario", "extends"}
    raise ValueError(f"unknown '{head}'; {nearest(head, known)}")


def _stage_places(case: Case, parts: list[str]) -> tuple[Place, ...]:
    names = [stage.stage for stage in case.scenario.stages]
    name, rest = _take(parts, names, "stage")
    for b, block in enumerate(case.scenario.blocks):
        for s, stage in enumerate(block.stages):
            if stage.stage != name:
                continue
            if rest[:1] != ["limits"]:
                return (Place("scenario", "", ("blocks", b, "stages", s, *_walk(type(stage), stage, rest))),)
            media = sorted(choice.medium for choice in stage.media)
            _refuse_shared(case, name, media)
            return tuple(Place("medium", m, _walk(Medium, case.workspace.media[m], rest)) for m in media)
    raise ValueError(f"unknown stage '{name}'; {nearest(name, names)}")


def _refuse_shared(case: Case, name: str, media: list[str]) -> None:
    for other in case.scenario.stages:
        shared = sorted({choice.medium for choice in other.media} & set(media))
        if other.stage != name and shared:
            text = f"medium '{shared[0]}' serves stage '{other.stage}' too; expected media.{shared[0]}.limits"
            raise ValueError(f"{text} and what follows, which changes both")


def _take(parts: Sequence[str], names: Iterable[str], what: str) -> tuple[str, list[str]]:
    """The longest known name that the parts begin with, and what is left of them."""
    names = list(names)
    for end in range(len(parts), 0, -1):
        name = ".".join(parts[:end])
        if name in names:
            return name, list(parts[end:])
    given = parts[0] if parts else ""
    raise ValueError(f"unknown {what} '{given}'; {nearest(given, names)}")


def _walk(model: type[BaseModel], here: Any, parts: Sequence[str]) -> Loc:
    """The keys and indices that the parts stand for, below an object of `model` (`here`, None where not given)."""
    loc: list[str | int] = []
    annotation: Any = model
    rest = list(parts)
    while rest:
        inside, owner = items(annotation), entry(annotation)
        if inside is not None and isinstance(here, dict | tuple | None):
            here, step, rest = _into(annotation, here, rest)
            loc.append(step)
            annotation = inside
        elif owner is not None:
            name, rest = rest[0], rest[1:]
            if name not in owner.model_fields:
                raise ValueError(f"unknown '{name}'; {nearest(name, owner.model_fields)}")
            here = getattr(here, name, None)
            loc.append(name)
            field = owner.model_fields[name]
            if isinstance(rule_of(field), Parameters):
                step, rest = _take(rest, here or {}, "parameter")
                loc.append(step)
            annotation = field.annotation
        else:
            raise ValueError(f"'{loc[-1]}' holds no '{rest[0]}'; expected the path to end at '{loc[-1]}'")
    return tuple(loc)


def _into(annotation: Any, here: Any, rest: list[str]) -> tuple[Any, str | int, list[str]]:
    """One step into a mapping of names or a list of named blocks and stages."""
    if is_mapping(annotation):
        name, rest = _take(rest, here or {}, "name")
        return here[name], name, rest
    keys = [getattr(item, "block", None) or getattr(item, "stage", None) for item in here or ()]
    names = [key for key in keys if key is not None]
    name, rest = _take(rest, names, "name")
    index = keys.index(name)
    return here[index], index, rest


def _rule(place: Place) -> Rule:
    if len(place.loc) >= 2 and place.loc[-2] == "parameters":
        return Parameters.rule(str(place.loc[-1]))
    annotation: Any = _MODELS[place.kind]
    rule: Rule | None = None
    for part in place.loc:
        inside, owner = items(annotation), entry(annotation)
        if isinstance(part, int) or (inside is not None and is_mapping(annotation)):
            annotation, rule = inside, None
        else:
            assert owner is not None, "the path was walked before"
            rule = rule_of(owner.model_fields[part])
            annotation = owner.model_fields[part].annotation
    if isinstance(rule, Amount | Number | Count):
        return rule
    owner = entry(annotation)
    if owner is not None:
        raise ValueError(f"is not a number; expected one of its fields: {', '.join(owner.model_fields)}")
    raise ValueError("is not a number; expected the path of a numeric field")


def _root(case: Case, place: Place) -> Any:
    if place.kind == "scenario":
        return case.scenario
    return case.workspace.catalog if place.kind == "catalog" else case.workspace.media[place.name]


def _with_root(case: Case, place: Place, root: Any) -> Case:
    root.__pydantic_private__ = {"_source": _root(case, place).source}
    if place.kind == "scenario":
        return replace(case, scenario=root)
    if place.kind == "catalog":
        return replace(case, workspace=replace(case.workspace, catalog=root))
    media = {**case.workspace.media, place.name: root}
    return replace(case, workspace=replace(case.workspace, media=media))


def _value(node: Any, loc: Loc) -> Any:
    for part in loc:
        if node is None:
            return None
        if isinstance(node, BaseModel):
            node = getattr(node, str(part))
        else:
            node = node[part] if isinstance(node, dict | tuple) else None  # type: ignore[index]
    return node


def _updated(node: Any, loc: Loc, value: float) -> Any:
    """A copy of a file object with one number changed, held to its schema."""
    if not loc:
        return value
    part, rest = loc[0], loc[1:]
    if isinstance(node, tuple):
        return tuple(_updated(item, rest, value) if i == part else item for i, item in enumerate(node))
    if isinstance(node, dict):
        return {**node, part: _updated(node[part], rest, value)}
    name = str(part)
    if not isinstance(node, BaseModel):
        raise ValueError(
            f"stands as '{node}' in the file; expected a mapping with '{name}' there to change a number of it"
        )
    child = getattr(node, name)
    if child is None and rest:
        inner = entry(type(node).model_fields[name].annotation)
        if inner is None or any(field.is_required() and key != rest[0] for key, field in inner.model_fields.items()):
            raise ValueError(f"'{name}' is not given; expected it in the file before a number of it can be changed")
        child_value: Any = inner.model_validate({str(rest[0]): value})
    else:
        child_value = _updated(child, rest, value)
    given = {key: getattr(node, key) for key in node.model_fields_set}
    return type(node).model_validate({**given, name: child_value})


def _rechecked(case: Case) -> Case:
    """The case with its cross-file checks made again."""
    workspace = case.workspace
    source = workspace.catalog.source
    found = Found(workspace.root, workspace.catalog, source, dict(workspace.media), set(workspace.media), [])
    problems = case_problems(case.scenario, found)
    if problems:
        raise InputError(problems)
    warnings = (*workspace.warnings, *case_warnings(case.scenario, workspace))
    return replace(case, warnings=warnings)


def _rule_text(detail: Any) -> str:
    return str(detail.get("ctx", {}).get("text") or detail["msg"])


def _refused(case: Case, path: str, text: str) -> InputError:
    return InputError([Problem(case.scenario.source.shown, 0, f"field '{path}': {text}")])
