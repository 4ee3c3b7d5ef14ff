"""What an engineer should know about a case although it can be designed."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING

from trainopt.curves.curve import Curve
from trainopt.train.build import POOLED, lots_of, reliability_of, shared_holders, used_media
from trainopt.train.flag_notices import flag_notices
from trainopt.train.problem import Candidate, DesignProblem
from trainopt.train.results import BlockDesign, Notice, ReliabilityResult
from trainopt.train.sampling import root_covariance, sampler

if TYPE_CHECKING:
    from trainopt.files import Case, Medium


def case_notices(case: Case, curves: Mapping[str, Curve]) -> Iterator[Notice]:
    """Notices that follow from the files alone: what was assumed, what was not tested."""
    for problem in case.warnings:
        yield Notice("files", str(problem))
    yield from _holder_notices(case)
    yield from _variability_notices(case, curves)
    temperature = case.scenario.batch.temperature
    lots = lots_of(case, curves)
    for name in used_media(case):
        curve, medium = curves[name], case.workspace.media[name]
        yield from _medium_notices(medium, curve, temperature, lots, isinstance(case.scenario.basis, str))


def _holder_notices(case: Case) -> Iterator[Notice]:
    """Where owned holders are shared, the type that a stage takes is chosen by a rule, not with the rest."""
    holders, used = case.workspace.catalog.holders, set(used_media(case))
    shared = {holder.name for holder in shared_holders(case)}
    modules = {name for name, module in case.workspace.catalog.modules.items() if module.medium in used}
    for name in sorted(shared):
        rivals = {other for other, holder in holders.items()
                  if other != name and modules & set(holder.modules) & set(holders[name].modules)}  # fmt: skip
        if rivals:
            yield Notice(
                "owned-holder-choice",
                f"{name}: each stage takes the holder type that is cheapest for it with all owned ones free; they are "
                f"counted once over the train, but a mix with {', '.join(sorted(rivals))} could cost less",
            )


def _variability_notices(case: Case, curves: Mapping[str, Curve]) -> Iterator[Notice]:
    """What of the variability given counts, and what a reliability basis lacks."""
    scenario, media = case.scenario, {name: case.workspace.media[name] for name in used_media(case)}
    if isinstance(scenario.basis, str):
        given = [name for name, medium in media.items() if medium.variability is not None]
        given += ["the feed"] if scenario.feed_variability is not None else []
        if given:
            yield Notice(
                "variability-not-used",
                f"the variability of {', '.join(given)} does not enter a design on the {scenario.basis} basis, which "
                "holds for the lots that were run; basis: {reliability: 0.95} would use it",
            )
        return
    if scenario.safety_factor > 1.0:
        yield Notice(
            "two-margins",
            f"safety factor {scenario.safety_factor:g} derates the area on top of the reliability basis: both margins "
            "are held; safety_factor: 1 leaves the margin to the sampled lots",
        )
    basis = reliability_of(scenario.basis)
    enough = math.ceil((1.0 - 1e-9) / (1.0 - basis.target))
    if basis.may_fail == 0:
        yield Notice(
            "few-samples",
            f"with {scenario.basis.samples} samples a reliability of {basis.target:g} lets none of them fail: the "
            f"design holds for all; {enough} samples and more would let one fail",
        )
    samplers = [
        sampler(scenario, scenario.basis.seed, stage.stage, media[choice.medium], curves[choice.medium], 1.0)
        for block in scenario.blocks for stage in block.stages for choice in stage.media
    ]  # fmt: skip
    if not any(one.varies for one in samplers):
        yield Notice(
            "nothing-varies",
            "no variability is known of any medium or of the feed: all sampled lots are alike; give variability in the "
            "media and feed_variability in the scenario",
        )
        return
    alike = sorted({one.curve.medium for one in samplers if one.resistance.deviation + one.fouling.deviation == 0.0})
    if alike:
        yield Notice(
            "no-lot-variability",
            f"{', '.join(alike)}: no variability is given and fewer than three lots were run (or they did not differ): "
            "module and media lots count as alike",
        )
    unknown = sorted({one.curve.medium for one in samplers
                      if one.curve.source == "runs" and root_covariance(one.curve) is None})  # fmt: skip
    if unknown:
        yield Notice(
            "fit-uncertainty-unknown",
            f"{', '.join(unknown)}: the runs do not show how sure the fitted parameters are; they count as exact",
        )


def reliability_notices(sure: ReliabilityResult) -> Iterator[Notice]:
    """Where a reliability falls short of what was asked for."""
    if sure.fresh.high < sure.target:
        yield Notice(
            "reliability-short",
            f"on {sure.fresh_samples} fresh lots the design finishes {sure.fresh.share:.2%} of batches "
            f"({sure.fresh.low:.2%} to {sure.fresh.high:.2%}), short of the {sure.target:.4g} asked for: a design fits "
            "its own samples; ask for more samples, or for a little more reliability",
        )


def _medium_notices(
    medium: Medium, curve: Curve, temperature: float | None, lots: tuple[str, ...], fixed: bool
) -> Iterator[Notice]:
    """`fixed`: the lots are those that were run, not samples."""
    name = medium.medium
    yield from flag_notices(name, curve.flags)
    if temperature is not None and curve.tested_temperature is not None:
        if abs(temperature - curve.tested_temperature) > 1e-9:
            yield Notice(
                "viscosity",
                f"{name}: resistance tested at {curve.tested_temperature:g} degC is scaled by the viscosity of water "
                f"to {temperature:g} degC (an assumption: the feed may thicken more)",
            )
    elif temperature is not None:
        yield Notice("no-test-temperature", f"{name}: no test temperature is given: no viscosity correction is made")
    untested = [lot for lot in lots if lot != POOLED and curve.lots and lot not in curve.lots] if fixed else []
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
            worst = _worst_fouling(problem, stage.stage, stage.medium)
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


def _worst_fouling(problem: DesignProblem, stage: str, medium: str) -> float:
    """The highest κ of the lots."""
    return max(curve.fouling_factor for curve in _candidate(problem, stage, medium).curves)


def _derating(problem: DesignProblem, stage: str, medium: str) -> float:
    """1/φ of the candidate."""
    return 1.0 / _candidate(problem, stage, medium).scale_up


def _candidate(problem: DesignProblem, stage: str, medium: str) -> Candidate:
    for block in problem.blocks:
        for one in block.stages:
            if one.name == stage:
                return next(c for c in one.candidates if c.medium == medium)
    raise LookupError(stage)


def starting_flow_notices(problem: DesignProblem, blocks: tuple[BlockDesign, ...]) -> Iterator[Notice]:
    """At constant pressure the flow is highest at the start: say where it is beyond pump or flux limit."""
    for block, found in zip(problem.blocks, blocks, strict=True):
        flow = found.starting_flow
        if flow is None:
            continue
        media = {(s.name, c.medium): c for s in block.stages for c in s.candidates}
        used = [(media[s.stage, s.medium], s) for s in found.stages]
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


def unused_block_notices(blocks: tuple[BlockDesign, ...], even: tuple[BlockDesign, ...]) -> Iterator[Notice]:
    """Blocks of the design and of the even split that do nothing and yet take their time."""
    for rule, share, found in (("", "its time", blocks), (", even split", "its even share of the time", even)):
        for block in found:
            if block.stages:
                continue
            parts = [f"its setup of {block.setup:.4g} h"] if block.setup > 0.0 else []
            parts += [f"{share} of {block.time:.4g} h"] if block.time > 0.0 else []
            counted = (
                f"{' and '.join(parts)} still count{'s' * (len(parts) == 1)}, which leaving the block out would save"
            )
            yield Notice(
                "block-not-used",
                f"{block.block}{rule}: no stage of this block is used, since all are optional; "
                f"{counted if parts else 'it takes no time'}",
            )
