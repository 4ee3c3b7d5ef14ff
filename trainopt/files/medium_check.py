"""What must hold between the fields of one medium file, also where some of them do not fit the schema."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from trainopt.errors import Problem
from trainopt.files.fields import as_text, nearest, nearest_name, written
from trainopt.files.medium import LAWS, POLYNOMIALS, Medium
from trainopt.files.source import Source, is_file

_WAYS = ("runs", "parameters", "coefficients")


def medium_problems(source: Source, medium: Medium | None) -> list[Problem]:
    """Every problem between fields; `medium` is None where the file does not fit the schema."""
    out = list(_name_problems(source))
    curve = source.data.get("curve")
    if isinstance(curve, dict):
        out.extend(_curve_problems(source, curve))
    if medium is not None:
        out.extend(_run_problems(source, medium))
    return out


def _name_problems(source: Source) -> Iterator[Problem]:
    name = as_text(source.data.get("medium"))
    if name is not None and name != source.path.stem:
        yield source.at(("medium",), f"'{name}' is not the file's name; expected '{source.path.stem}'")


def _curve_problems(source: Source, curve: dict[str, Any]) -> Iterator[Problem]:
    given = [way for way in _WAYS if curve.get(way) is not None]
    if not given:
        text = "says nothing about resistance; expected one of runs, parameters, coefficients"
        yield source.at(("curve",), text)
    for extra in given[1:]:
        text = f"stands beside {given[0]}; expected only one of runs, parameters, coefficients"
        yield source.at(("curve", extra), text)
    if len(given) != 1:
        return
    if given == ["runs"]:
        yield from _by_runs(source, curve)
    else:
        yield from _by_numbers(source, curve, given[0])


def _by_runs(source: Source, curve: dict[str, Any]) -> Iterator[Problem]:
    if curve["runs"] == ():
        yield source.at(("curve", "runs"), "is empty; expected at least one bench run")
    for field in ("tested", "lots", "origin"):
        if curve.get(field) is not None:
            text = "belongs to a curve given by parameters; expected none beside runs, which say it themselves"
            yield source.at(("curve", field), text)


def _by_numbers(source: Source, curve: dict[str, Any], way: str) -> Iterator[Problem]:
    law = curve.get("law", "auto")
    if curve.get("tested") is None:
        text = f"curve: 'tested' is missing; expected the range the {way} were tested over, such as "
        yield source.problem(("curve", way), text + "{loading: 160 L/m2, flux: 180 LMH}")
    if law == "auto":
        text = f"auto needs runs to choose by; expected the law that the {way} belong to"
        yield source.at(("curve", "law"), text)
    elif isinstance(law, str) and law in LAWS:
        if way == "coefficients":
            yield from _coefficients(source, law, curve[way])
        else:
            yield from _parameters(source, law, curve[way])


def _coefficients(source: Source, law: str, values: Any) -> Iterator[Problem]:
    loc = ("curve", "coefficients")
    if law not in POLYNOMIALS:
        names = ", ".join(LAWS[law])
        yield source.at(loc, f"do not belong to law '{law}'; expected `parameters:` {names}")
    elif isinstance(values, tuple) and len(values) in (3, 4) and len(values) != len(LAWS[law]):
        yield source.at(loc, f"are {len(values)}; expected {len(LAWS[law])} for law '{law}'")


def _parameters(source: Source, law: str, values: Any) -> Iterator[Problem]:
    loc = ("curve", "parameters")
    if law in POLYNOMIALS:
        yield source.at(loc, f"do not belong to law '{law}'; expected `coefficients:` {', '.join(LAWS[law])}")
        return
    if not isinstance(values, dict):
        return
    unknown = [name for name in values if name not in LAWS[law]]
    meant = {nearest_name(name, LAWS[law]) for name in unknown}
    for name in unknown:
        text = f"law '{law}' has no parameter '{name}'; {nearest(name, LAWS[law])}"
        yield source.problem((*loc, name), f"curve.parameters: {text}")
    for name in LAWS[law]:
        if name not in values and name not in meant:
            yield source.at(loc, f"'{name}' is missing; law '{law}' expected {', '.join(LAWS[law])}")


def _run_problems(source: Source, medium: Medium) -> Iterator[Problem]:
    seen: dict[tuple[str, str | None], int] = {}
    for index, run in enumerate(medium.curve.runs):
        loc = ("curve", "runs", index, "file")
        if not is_file(run.file):
            given = written(source.data["curve"]["runs"][index]["file"])
            yield source.at(loc, f"no such file {given}; expected a bench run")
        first = seen.setdefault((str(run.file), run.sheet), index)
        if first != index:
            yield source.at(loc, f"is run {first + 1}'s file too; expected each run once")
