"""What an engineer should know about a case although it can be designed."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING

from trainopt.curves.curve import Curve
from trainopt.train.build import POOLED, lots_of, used_media
from trainopt.train.problem import DesignProblem
from trainopt.train.results import BlockDesign, Notice

if TYPE_CHECKING:
    from trainopt.files import Case, Medium


def case_notices(case: Case, curves: Mapping[str, Curve]) -> Iterator[Notice]:
    """Notices that follow from the files alone: what was assumed, what was not tested."""
    for problem in case.warnings:
        yield Notice("files", str(problem))
    if case.scenario.feed_variability is not None:
        yield Notice(
            "variability-not-used", "feed_variability is not used yet: the design holds for the lots that were run"
        )
    temperature = case.scenario.batch.temperature
    lots = lots_of(case, curves)
    for name in used_media(case):
        curve, medium = curves[name], case.workspace.media[name]
        yield from _medium_notices(medium, curve, temperature, lots)


def _medium_notices(medium: Medium, curve: Curve, temperature: float | None, lots: tuple[str, ...]) -> Iterator[Notice]:
    name = medium.medium
    if medium.variability is not None:
        yield Notice("variability-not-used", f"{name}: variability is not used yet: the lots that were run count")
    for flag in curve.flags:
        rows = f" rows {flag.rows[0]} to {flag.rows[1]}:" if flag.rows else ""
        yield Notice(flag.code, f"{name}, {flag.run}:{rows} {flag.text}" if flag.run else f"{name}: {flag.text}")
    if temperature is not None and curve.tested_temperature is not None:
        if abs(temperature - curve.tested_temperature) > 1e-9:
            yield Notice(
                "viscosity",
                f"{name}: resistance tested at {curve.tested_temperature:g} degC is scaled by the viscosity of water "
                f"to {temperature:g} degC (an assumption: the feed may thicken more)",
            )
    elif temperature is not None:
        yield Notice("no-test-temperature", f"{name}: no test temperature is given: no viscosity correction is made")
    untested = [lot for lot in lots if lot != POOLED and curve.lots and lot not in curve.lots]
    if untested:
        yield Notice(
            "lot-not-tested",
            f"{name}: lot {', '.join(untested)} was not run on it; the worst of its own lots stands in",
        )
    held = medium.curve.origin is not None and medium.curve.origin.turbidity == medium.limits.turbidity
    given = curve.source == "parameters" and curve.turbidity_loading is None
    if medium.limits.turbidity is not None and given and not held:
        yield Notice(
            "turbidity-not-tested", f"{name}: the turbidity limit cannot be held against a curve by parameters"
        )


def design_notices(
    problem: DesignProblem, curves: Mapping[str, Curve], blocks: tuple[BlockDesign, ...]
) -> Iterator[Notice]:
    """Notices about a design: where it leaves the tested range, or leans on feed that was collected differently."""
    upstream: str | None = None
    loaded = 0.0
    for block in blocks:
        for stage in block.stages:
            curve = curves[stage.medium]
            loading = problem.safety_factor * stage.loading * _derating(problem, stage.stage, stage.medium)
            worst = max([1.0] if problem.lots == (POOLED,) else [e.fouling for e in curve.lots.values()] or [1.0])
            if loading * worst > curve.tested_loading * (1.0 + 1e-9):
                yield Notice(
                    "beyond-tested-loading",
                    f"{stage.stage}: the design loading {loading:.4g} L/m2 (safety factor included, worst lot) is "
                    f"beyond the {curve.tested_loading / worst:.4g} L/m2 that was tested; "
                    "the given loading limit allows it",
                )
            if stage.flux > curve.tested_flux * (1.0 + 1e-9):
                yield Notice(
                    "beyond-tested-flux",
                    f"{stage.stage}: the flux {stage.flux:.4g} LMH is beyond the {curve.tested_flux:.4g} LMH "
                    "that was tested",
                )
            feed = curve.feed_loading
            if upstream is not None and feed is not None and loaded > feed * (1.0 + 1e-9):
                yield Notice(
                    "feed-loading",
                    f"{stage.stage}: its feed was collected with the filter upstream loaded to {feed:.4g} L/m2, but "
                    f"{upstream} is loaded to {loaded:.4g} L/m2 here: its filtrate may foul more than was tested",
                )
            upstream, loaded = stage.stage, stage.loading


def _derating(problem: DesignProblem, stage: str, medium: str) -> float:
    """1/φ of the candidate."""
    for block in problem.blocks:
        for one in block.stages:
            if one.name == stage:
                return 1.0 / next(c.scale_up for c in one.candidates if c.medium == medium)
    raise LookupError(stage)


def starting_flow_notices(problem: DesignProblem, blocks: tuple[BlockDesign, ...]) -> Iterator[Notice]:
    """At constant pressure the flow is highest at the start: say where it is beyond pump or flux limit."""
    for block, found in zip(problem.blocks, blocks, strict=True):
        if block.operation != "constant-pressure" or not found.stages:
            continue
        media = {(s.name, c.medium): c for s in block.stages for c in s.candidates}
        used = [(media[s.stage, s.medium], s) for s in found.stages]
        resistances = [
            sum(c.curves[lot].resistance(0.0) / (s.area * c.scale_up) for c, s in used) + block.line
            for lot in range(len(problem.lots))
        ]
        flow = block.head / min(resistances)
        if flow > block.max_flow * (1.0 + 1e-9):
            yield Notice(
                "starting-flow",
                f"{block.name}: at {block.pressure:.4g} bar the clean train starts at {flow:.4g} L/h, more than the "
                f"{block.max_flow:.4g} L/h of its pump or vessel: throttle the start",
            )
        for c, s in used:
            if flow / s.area > c.flux_limit * (1.0 + 1e-9):
                yield Notice(
                    "starting-flow",
                    f"{s.stage}: the clean train starts at {flow / s.area:.4g} LMH, beyond its flux limit of "
                    f"{c.flux_limit:.4g} LMH: throttle the start",
                )
