"""Why no design exists: the limits in conflict, and what each limit alone would have to be."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import replace

from trainopt.optimize.levers import Levers, Setting, moved, nearest
from trainopt.train.problem import DesignProblem, Stage
from trainopt.train.results import Reason


def reasons(problem: DesignProblem) -> tuple[Reason, ...]:
    """What stands in the way of any design, then each lever alone with the nearest value that works (or that none does).

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


def _conflict(levers: Levers) -> Reason:
    """The smallest set of limits that together admit no design: each is needed for the conflict (deletion filter)."""
    kept: list[str] = []
    setting = levers.setting
    for text, lift in _limits(levers):
        lifted = lift(setting)
        if levers.possible(lifted):
            kept.append(text)
        else:
            setting = lifted
    if not kept:
        return Reason("no allowed sequence of media leads through the stages", {})
    return Reason("these limits together admit no design: " + "; ".join(kept), {})


def _limits(levers: Levers) -> Iterator[tuple[str, Callable[[Setting], Setting]]]:
    """Every limit in words with how to lift it; the ones a user would rather not move come last, so that they stay."""
    problem, nodes = levers.problem, levers.index.nodes
    for b, block in enumerate(problem.blocks):
        if math.isfinite(block.max_flow) or block.min_flow > 0.0:
            yield f"the pump's range of '{block.name}'", lambda s, b=b: replace(s, lifted=s.lifted | {("pump", b)})
    for place, (_, stage) in enumerate(levers.index.stages):
        own = [n for n, node in enumerate(nodes) if node.place == place]
        name = stage.name
        yield (
            f"the pressure ratings of '{name}'",
            lambda s, own=own: replace(s, lifted=s.lifted | {("rating", n) for n in own}),
        )
        yield f"the flux limit of '{name}'", lambda s, own=own: replace(s, flux={**s.flux, **dict.fromkeys(own, math.inf)})
        yield (
            f"the loading cap of '{name}'",
            lambda s, own=own: replace(s, cap={**s.cap, **dict.fromkeys(own, math.inf)}),
        )
        yield (
            f"the module counts of '{name}'",
            lambda s, own=own: replace(s, area={**s.area, **{n: 1e12 for n in own}}),
        )
    for b, block in enumerate(problem.blocks):
        yield (
            f"the pressure of '{block.name}', {block.pressure:.4g} bar",
            lambda s, b=b: moved(s, "pressure", b, 1e12),
        )
    yield f"the time, {problem.time:.4g} h", lambda s: replace(s, time=math.inf)


def _levers(levers: Levers) -> Iterator[Reason]:
    """Each lever alone: time, each block's pressure, each stage's counts, caps and flux, safety factor, volume."""
    problem, base = levers.problem, levers.setting
    yield _single(
        levers, "batch.time_h", "the time", "h", base.time, 1, lambda v: replace(base, time=v)
    )
    for b, block in enumerate(problem.blocks):
        yield _single(
            levers, f"{block.name}.pressure_bar", f"the pressure of '{block.name}'", "bar", block.pressure, 1,
            lambda v, b=b: moved(base, "pressure", b, v),
        )  # fmt: skip
    for place, (_, stage) in enumerate(levers.index.stages):
        own = [n for n, node in enumerate(levers.index.nodes) if node.place == place]
        yield _counts(levers, stage.name, own)
        for name, field, what, unit in (
            ("cap", "loading_limit_L_m2", "the loading limit", "L/m2"), ("flux", "flux_limit_LMH", "the flux limit", "LMH"),
        ):  # fmt: skip
            start = max(getattr(base, name)[n] for n in own)
            yield _single(
                levers, f"{stage.name}.{field}", f"{what} of '{stage.name}'", unit, start, 1,
                lambda v, own=own, name=name: replace(
                    base, **{name: {**getattr(base, name), **{n: max(getattr(base, name)[n], v) for n in own}}}
                ),
            )  # fmt: skip
    yield _single(
        levers, "safety_factor", "the safety factor", "", base.safety_factor, -1,
        lambda v: replace(base, safety_factor=v),
    )  # fmt: skip
    yield _single(levers, "batch.volume_L", "the batch", "L", base.volume, -1, lambda v: replace(base, volume=v))


def _single(
    levers: Levers, field: str, what: str, unit: str, start: float, direction: int, change: Change
) -> Reason:
    value = nearest(levers, change, start, direction) if math.isfinite(start) else None
    if value is not None and field == "safety_factor" and value < 1e-6:
        value = None
    now, unit = f"{start:.4g}", f" {unit}" if unit else ""
    if value is None:
        return Reason(f"{what} ({now}{unit}): no value of it alone makes a design possible", {field: None})
    verb = "would have to be at least" if direction > 0 else "could be at most"
    return Reason(f"{what} ({now}{unit}) {verb} {_rounded(value, direction)}{unit}, all else as it is", {field: value})


def _counts(levers: Levers, stage: str, own: list[int]) -> Reason:
    """The lowest count of any module type of a stage that makes a design possible, all else as it is."""
    base, field = levers.setting, f"{stage}.max_count"
    best: tuple[float, int, str] | None = None
    for n in own:
        area = base.area[n]
        needed = nearest(levers, lambda v, n=n: moved(base, "area", n, v), area, 1) if area > 0.0 else None
        for module in levers.index.nodes[n].candidate.modules if needed is not None else ():
            assert needed is not None
            count = math.ceil(needed / module.area * (1.0 - 1e-12))
            best = min(filter(None, (best, (count / module.high, count, module.name))))
    if best is None:
        text = f"the module counts of '{stage}': no number of them alone makes a design possible"
        return Reason(text, {field: None})
    _, count, module_name = best
    text = f"stage '{stage}' would need {count} × {module_name} on offer (max_count), all else as it is"
    return Reason(text, {field: count})


def _rounded(value: float, direction: int) -> str:
    """Four digits, rounded to the side that still works."""
    digits = 3 - math.floor(math.log10(abs(value)))
    scaled = value * 10.0**digits
    whole = math.ceil(scaled - 1e-7) if direction > 0 else math.floor(scaled + 1e-7)
    return f"{whole / 10.0**digits:.4g}"
