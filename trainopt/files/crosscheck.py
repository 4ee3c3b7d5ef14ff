"""What must hold between files: names that exist, media that can follow one another, ratings, lots.

Each check works on what could be read, so that one broken file does not hide the faults of another.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

from trainopt.errors import Problem
from trainopt.files.fields import as_text, nearest
from trainopt.files.medium import Medium
from trainopt.files.scenario import BlockSpec, Scenario, StageSpec
from trainopt.files.source import Loc, Source
from trainopt.files.workspace import Workspace

if TYPE_CHECKING:
    from trainopt.files.load import Found


def workspace_problems(found: Found) -> Iterator[Problem]:
    """Modules of no medium and holders of no module."""
    source = found.catalog_source
    if source is None:
        return
    modules, holders = _mapping(source.data, "modules"), _mapping(source.data, "holders")
    for name, module in modules.items():
        medium = as_text(module.get("medium")) if isinstance(module, dict) else None
        if medium is not None and medium not in found.medium_names:
            text = f"unknown medium '{medium}'; {nearest(medium, found.medium_names)}"
            yield source.at(("modules", name, "medium"), text)
    for name, holder in holders.items():
        listed = holder.get("modules") if isinstance(holder, dict) else None
        if listed == ():
            yield source.at(("holders", name, "modules"), "is empty; expected at least one module")
        for index, module in enumerate(map(as_text, listed) if isinstance(listed, tuple) else ()):
            if module is not None and module not in modules:
                loc = ("holders", name, "modules", index)
                yield source.problem(loc, f"holder '{name}': unknown module '{module}'; {nearest(module, modules)}")
    if source.data.get("modules") == {}:
        yield source.at(("modules",), "is empty; expected at least one module")


def workspace_warnings(workspace: Workspace) -> Iterator[Problem]:
    """Media that no module is built from."""
    offered = {module.medium for module in workspace.catalog.modules.values()}
    for name, medium in workspace.media.items():
        if name not in offered:
            yield medium.source.problem(("medium",), f"medium '{name}': no module of the catalog is built from it")


def unused_warnings(workspace: Workspace, scenarios: list[Scenario]) -> Iterator[Problem]:
    """Media and modules that no scenario of the workspace can use."""
    used = {choice.medium for scenario in scenarios for stage in scenario.stages for choice in stage.media}
    for name, medium in workspace.media.items():
        if name not in used:
            yield medium.source.problem(("medium",), f"medium '{name}': no scenario uses it")
    source = workspace.catalog.source
    for name, module in workspace.catalog.modules.items():
        if module.medium not in used:
            yield source.problem(("modules", name), f"module '{name}': no scenario uses medium '{module.medium}'")


def case_problems(scenario: Scenario, found: Found) -> list[Problem]:
    """Every problem of a scenario against what could be read of its workspace."""
    source = scenario.source
    modules = _module_media(found.catalog_source)
    out: list[Problem] = []
    upstream: set[str] = set()
    for b, block in enumerate(scenario.blocks):
        for s, stage in enumerate(block.stages):
            loc: Loc = ("blocks", b, "stages", s)
            out.extend(_media_problems(source, loc, stage, found.medium_names, modules))
            out.extend(_after_problems(source, loc, stage, upstream, found.medium_names))
            out.extend(_fix_problems(source, loc, stage, modules))
            if block.operation == "constant-pressure":
                out.extend(_rating_problems(source, loc, block, stage, found.media))
            upstream |= {choice.medium for choice in stage.media}
    out.extend(_installed_problems(source, scenario, modules))
    return out


def _media_problems(
    source: Source, loc: Loc, stage: StageSpec, media: set[str], modules: dict[str, str] | None
) -> Iterator[Problem]:
    for index, choice in enumerate(stage.media):
        place = (*loc, "media", index)
        if choice.medium not in media:
            text = f"unknown medium '{choice.medium}'; {nearest(choice.medium, media)}"
            yield _at_stage(source, place, stage, text)
        elif modules is not None and choice.medium not in modules.values():
            text = f"no module of the catalog is built from '{choice.medium}'; expected at least one"
            yield _at_stage(source, place, stage, text)


def _after_problems(
    source: Source, loc: Loc, stage: StageSpec, upstream: set[str], media: set[str]
) -> Iterator[Problem]:
    for index, choice in enumerate(stage.media):
        for place, name in enumerate(choice.after or ()):
            at = (*loc, "media", index, "after", place)
            if name not in media:
                yield _at_stage(source, at, stage, f"after: unknown medium '{name}'; {nearest(name, media)}")
            elif name not in upstream:
                offer = f"one of {', '.join(sorted(upstream))}" if upstream else "no `after` in the first stage"
                text = f"after: no stage upstream can use '{name}'; expected {offer}"
                yield _at_stage(source, at, stage, text)


def _fix_problems(source: Source, loc: Loc, stage: StageSpec, modules: dict[str, str] | None) -> Iterator[Problem]:
    if stage.fix is None:
        return
    if stage.fix.module is None and stage.fix.count is None:
        yield _at_stage(source, (*loc, "fix"), stage, "fix says nothing; expected module, count or both")
    if stage.count is not None:
        yield _at_stage(source, (*loc, "count"), stage, "count stands beside fix; expected only one of them")
    if stage.fix.module is not None and modules is not None:
        allowed = {choice.medium for choice in stage.media}
        yield from _module_problems(source, (*loc, "fix", "module"), stage, stage.fix.module, modules, allowed)


def _module_problems(
    source: Source, loc: Loc, stage: StageSpec, module: str, modules: dict[str, str], allowed: set[str]
) -> Iterator[Problem]:
    if module not in modules:
        yield _at_stage(source, loc, stage, f"unknown module '{module}'; {nearest(module, modules)}")
    elif allowed and modules[module] not in allowed:
        text = f"module '{module}' is of medium '{modules[module]}'; expected one of {', '.join(sorted(allowed))}"
        yield _at_stage(source, loc, stage, text)


def _rating_problems(
    source: Source, loc: Loc, block: BlockSpec, stage: StageSpec, media: dict[str, Medium]
) -> Iterator[Problem]:
    """At constant pressure a fresh or a blocked filter can see all of the block's pressure."""
    for index, choice in enumerate(stage.media):
        medium = media.get(choice.medium)
        if medium is None:
            continue
        rating, inlet = medium.limits.differential_pressure, medium.limits.inlet_pressure
        head, place = block.pressure - block.static, (*loc, "media", index)
        if rating is not None and head > rating:
            text = f"medium '{choice.medium}' is rated for {rating:.4g} bar across it, and constant pressure "
            text += f"in block '{block.block}' puts {head:.4g} bar on it; expected at most the rating"
            yield _at_stage(source, place, stage, text)
        if inlet is not None and block.pressure > inlet:
            text = f"medium '{choice.medium}' is rated for {inlet:.4g} bar at its inlet, and constant pressure "
            text += f"in block '{block.block}' puts {block.pressure:.4g} bar on it; expected at most the rating"
            yield _at_stage(source, place, stage, text)


def _installed_problems(source: Source, scenario: Scenario, modules: dict[str, str] | None) -> Iterator[Problem]:
    stages = {stage.stage: stage for stage in scenario.stages}
    for name, installed in (scenario.installed or {}).items():
        if name not in stages:
            text = f"installed: unknown stage '{name}'; {nearest(name, stages)}"
            yield source.problem(("installed", name), text)
        elif modules is not None:
            stage = stages[name]
            allowed = {choice.medium for choice in stage.media}
            loc: Loc = ("installed", name, "module")
            yield from _module_problems(source, loc, stage, installed.module, modules, allowed)
    if scenario.installed == {}:
        yield source.at(("installed",), "is empty; expected the module and the count that stand in each stage")
    elif scenario.installed is not None:
        for name, stage in stages.items():
            if name not in scenario.installed and not stage.optional:
                text = f"'{name}' is missing; expected what is installed in every stage that is not optional"
                yield source.at(("installed",), text)


def case_warnings(scenario: Scenario, workspace: Workspace) -> Iterator[Problem]:
    """What a designer should know: no safety factor, lots that were not run on every medium."""
    source = scenario.source
    if "safety_factor" not in scenario.model_fields_set:
        text = "no safety_factor: areas are not derated (common practice for clarification: 1.5 to 1.6)"
        yield source.problem((), text)
    if scenario.basis == "pooled":
        return
    used = sorted({choice.medium for stage in scenario.stages for choice in stage.media})
    lots = {name: set(workspace.media[name].lots) for name in used}
    every = set().union(*lots.values()) if lots else set()
    for name in used:
        missing = sorted(every - lots[name])
        if missing and lots[name]:
            plural = "lots" if len(missing) > 1 else "lot"
            text = f"medium '{name}': {plural} {', '.join(missing)} not run on it, but on other media of the "
            text += f"scenario '{source.shown}'; its own worst lot stands in"
            yield workspace.media[name].source.problem(("curve",), text)


def _at_stage(source: Source, loc: Loc, stage: StageSpec, text: str) -> Problem:
    return source.problem(loc, f"stage '{stage.stage}': {text}")


def _mapping(data: Any, key: str) -> dict[str, Any]:
    # What was built in Python has no file behind it.
    value = data.get(key) if isinstance(data, dict) else None
    return value if isinstance(value, dict) else {}


def _module_media(source: Source | None) -> dict[str, str] | None:
    """The medium of each module of the catalog; None where one does not say, which is a problem of its own."""
    modules = _mapping(source.data, "modules") if source is not None else {}
    media = {name: as_text(module.get("medium")) for name, module in modules.items() if isinstance(module, dict)}
    known = {name: medium for name, medium in media.items() if medium is not None}
    return known if len(known) == len(modules) > 0 else None
