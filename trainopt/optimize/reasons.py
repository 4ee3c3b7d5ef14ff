"""Why no design exists: the limits in conflict, and what each limit alone would have to be."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from functools import partial

from trainopt.optimize.levers import Levers, Setting, bearable, moved, nearest
from trainopt.train.limit_words import rounded
from trainopt.train.problem import Block, DesignProblem, Stage
from trainopt.train.results import Reason


def reasons(problem: DesignProblem) -> tuple[Reason, ...]:
    """What stands in the way of any design, then each lever alone with the nearest value that works, if one does.

    Empty where a design exists.
    """
    levers = Levers(problem)
    if levers.possible(levers.setting):
        return ()
    return (*_plain_faults(problem), _conflict(levers), *_levers(levers))


def _plain_faults(problem: DesignProblem) -> Iterator[Reason]:
    """What can be seen without any combination: setups, pumps, stages that nothing on offer can carry."""
    left = problem.time - sum(b.setup for b in problem.blocks)
    if problem.schedule == "sequential" and left <= 0.0:
        yield Reason(f"the setups take {problem.time - left:.4g} h of the {problem.time:.4g} h allowed", {})
    for block in problem.blocks:
        longest = problem.longest_time(block)
        if longest > 0.0 and problem.volume / block.max_flow > longest:
            text = (
                f"block '{block.name}': {problem.volume:.4g} L in at most {longest:.4g} h needs "
                f"{problem.volume / longest:.4g} L/h, more than the pump's {block.max_flow:.4g} L/h"
            )
            yield Reason(text, {})
        for stage in block.stages:
            if not stage.optional and not any(len(c.options) for c in stage.candidates):
                yield Reason(f"stage '{stage.name}': {_too_loaded(problem, stage)}", {})


def _too_loaded(problem: DesignProblem, stage: Stage) -> str:
    parts = []
    for one in stage.candidates:
        area = one.largest_area
        if area <= 0.0:
            parts.append(f"'{one.medium}' has no module on offer")
            continue
        loading = problem.safety_factor * problem.volume / (one.scale_up * area)
        parts.append(
            f"the most on offer of '{one.medium}', {area:.4g} m2, is loaded to {loading:.4g} L/m2, "
            f"above {one.loading_cap:.4g} L/m2 ({_CAPS[one.cap_reason]})"
        )
    return "; ".join(parts)


_CAPS = {
    "loading-tested": "the highest loading tested, worst lot",
    "loading-limit": "its loading limit",
    "turbidity": "where its filtrate reaches the turbidity limit",
}

Change = Callable[[float], Setting]
Lift = Callable[[Setting], Setting]
BOUNDLESS = 1e12
"""Stands for a limit that is not there, where infinity would make a product undefined."""


@dataclass(frozen=True)
class Lever:
    """One thing a user may change: its field with the unit, its name, its unit, the direction that helps, how far."""

    field: str
    what: str
    unit: str
    direction: int
    most: float = math.inf


def _conflict(levers: Levers) -> Reason:
    """The smallest set of limits that together admit no design: lifting any one of them would."""
    limits = list(_limits(levers))
    kept = _smallest(levers, limits)
    if not kept:
        return Reason("no allowed sequence of media leads through the stages", {})
    if len(kept) == 1:
        return Reason(f"one limit alone admits no design: {kept[0]}", {})
    return Reason("these limits together admit no design: " + "; ".join(kept), {})


def _smallest(levers: Levers, limits: Sequence[tuple[str, Lift]]) -> list[str]:
    """The smallest conflict: every set of one, two and three limits is tried, unless a shorter way shows it first."""
    best = _irreducible(levers, limits)
    for size in range(1, min(len(best), _TRIED + 1)):
        for alone in itertools.combinations(range(len(limits)), size):
            setting = levers.setting
            for k, (_, lift) in enumerate(limits):
                setting = setting if k in alone else lift(setting)
            if not levers.possible(setting):
                return [limits[k][0] for k in alone]
    return best


_TRIED = 3


def _irreducible(levers: Levers, limits: Sequence[tuple[str, Lift]]) -> list[str]:
    """A conflict each of whose limits is needed for it, found by lifting one limit after another (deletion filter)."""
    kept: list[str] = []
    setting = levers.setting
    for text, lift in limits:
        lifted = lift(setting)
        if levers.possible(lifted):
            kept.append(text)
        else:
            setting = lifted
    return kept


def _limits(levers: Levers) -> Iterator[tuple[str, Lift]]:
    """Every limit in words with how to lift it; the ones a user would rather not move come last, so that they stay."""
    problem, nodes = levers.problem, levers.index.nodes
    for b, block in enumerate(problem.blocks):
        if math.isfinite(block.max_flow) or block.min_flow > 0.0:
            yield f"the pump's range of '{block.name}'", partial(_lifted, keys=frozenset({("pump", b)}))
    for place, (_, stage) in enumerate(levers.index.stages):
        own = [n for n, node in enumerate(nodes) if node.place == place]
        name = stage.name
        yield f"the pressure ratings of '{name}'", partial(_lifted, keys=frozenset(("rating", n) for n in own))
        for table, what in (("flux", "flux limit"), ("cap", "loading cap"), ("area", "module counts")):
            yield f"the {what} of '{name}'", partial(_raised, table=table, own=own, value=BOUNDLESS)
    for b, block in enumerate(problem.blocks):
        text = f"the pressure of '{block.name}', {block.pressure:.4g} bar"
        yield text, partial(_with_pressure, b=b, value=min(BOUNDLESS, _rating(block)))
    yield f"the time, {problem.time:.4g} h", partial(_with_time, value=math.inf)


def _lifted(setting: Setting, keys: frozenset[tuple[str, int]]) -> Setting:
    return replace(setting, lifted=setting.lifted | keys)


def _raised(setting: Setting, table: str, own: list[int], value: float) -> Setting:
    """The setting with a per-node limit of these nodes raised to at least `value`."""
    for n in own:
        setting = moved(setting, table, n, max(getattr(setting, table)[n], value))
    return setting


def _with_pressure(setting: Setting, b: int, value: float) -> Setting:
    return moved(setting, "pressure", b, value)


def _with_time(setting: Setting, value: float) -> Setting:
    return replace(setting, time=value)


def _with_factor(setting: Setting, value: float) -> Setting:
    return replace(setting, safety_factor=value)


def _with_volume(setting: Setting, value: float) -> Setting:
    return replace(setting, volume=value)


def _levers(levers: Levers) -> Iterator[Reason]:
    """Each lever alone: time, each block's pressure, each stage's counts, caps and flux, safety factor, volume."""
    problem, base = levers.problem, levers.setting
    yield _single(levers, Lever("batch.time_h", "the time", "h", 1), base.time, partial(_with_time, base))
    for b, block in enumerate(problem.blocks):
        lever = Lever(f"{block.name}.pressure_bar", f"the pressure of '{block.name}'", "bar", 1, _rating(block))
        yield _single(levers, lever, block.pressure, partial(_with_pressure, base, b))
    for place, (_, stage) in enumerate(levers.index.stages):
        own = [n for n, node in enumerate(levers.index.nodes) if node.place == place]
        yield _counts(levers, stage.name, own)
        for table, field, what, unit in _NODE_LEVERS:
            lever = Lever(f"{stage.name}.{field}", f"the {what} of '{stage.name}'", unit, 1)
            start = min(getattr(base, table)[n] for n in own)
            yield _single(levers, lever, start, partial(_raised, base, table, own))
    lever = Lever("safety_factor", "the safety factor", "", -1)
    yield _single(levers, lever, base.safety_factor, partial(_with_factor, base))
    yield _single(levers, Lever("batch.volume_L", "the batch", "L", -1), base.volume, partial(_with_volume, base))


_NODE_LEVERS = (
    ("cap", "loading_limit_L_m2", "loading limit", "L/m2"),
    ("flux", "flux_limit_LMH", "flux limit", "LMH"),
)


def _rating(block: Block) -> float:
    """The most a block's pressure may be, bar: at constant pressure the best-rated route must bear it."""
    if block.operation == "constant-flow":
        return math.inf
    stages = [s for s in block.stages if not s.optional]
    return min((max(bearable(block, c) for c in s.candidates) for s in stages), default=math.inf)


def _single(levers: Levers, lever: Lever, start: float, change: Change) -> Reason:
    value = None
    if math.isfinite(start):
        value = nearest(levers, change, start, lever.direction, lever.most)
    if value is not None and lever.field == "safety_factor" and value < 1.0:
        value = None  # less than no margin is none to ask for
    unit = f" {lever.unit}" if lever.unit else ""
    now = f"{lever.what} ({start:.4g}{unit})"
    if value is None:
        return Reason(f"{now}: no value of it alone makes a design possible", {lever.field: None})
    verb = "would have to be at least" if lever.direction > 0 else "could be at most"
    text = f"{now} {verb} {rounded(value, lever.direction)}{unit}, all else as it is"
    return Reason(text, {lever.field: value})


def _counts(levers: Levers, stage: str, own: list[int]) -> Reason:
    """The lowest count of any module type of a stage that makes a design possible, all else as it is."""
    base, field = levers.setting, f"{stage}.max_count"
    best: tuple[float, int, str] | None = None
    for n in own:
        area = base.area[n]
        needed = nearest(levers, partial(moved, base, "area", n), area, 1) if area > 0.0 else None
        for module in levers.index.nodes[n].candidate.modules if needed is not None else ():
            assert needed is not None
            count = math.ceil(needed / module.area * (1.0 - 1e-7))
            best = min(filter(None, (best, (count / module.high, count, module.name))))
    if best is None:
        text = f"the module counts of '{stage}': no number of them alone makes a design possible"
        return Reason(text, {field: None})
    _, count, module_name = best
    text = f"stage '{stage}' would need {count} × {module_name} on offer (max_count), all else as it is"
    return Reason(text, {field: count}, module_name)
