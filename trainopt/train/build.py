"""From a case and its curves to a design problem in plain numbers (model.md, section 3)."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from trainopt.curves.curve import Curve, LotCurve
from trainopt.curves.sampled import SampledCurves
from trainopt.curves.viscosity import viscosity_ratio
from trainopt.train.options import Cap, Duty, inside_caps, joined, module_options, price_per_batch, take, undominated
from trainopt.train.problem import (
    Block,
    Candidate,
    DesignProblem,
    Dropped,
    ModuleSize,
    Options,
    OwnedHolder,
    Reliability,
    Stage,
    worst_but,
)
from trainopt.train.sampling import Sampler, sampler

if TYPE_CHECKING:
    from trainopt.files import BlockSpec, Case, Medium, MediumChoice, ReliabilityBasis, StageSpec

POOLED = "pooled"


def used_media(case: Case) -> tuple[str, ...]:
    """Names of the media that some stage of the scenario may use, sorted."""
    stages = (stage for block in case.scenario.blocks for stage in block.stages)
    return tuple(sorted({choice.medium for stage in stages for choice in stage.media}))


def lots_of(case: Case, curves: Mapping[str, Curve]) -> tuple[str, ...]:
    """Lots a design must hold for: those run on any candidate medium (worst-lot), the pooled curve, or samples."""
    basis = case.scenario.basis
    if not isinstance(basis, str):
        return tuple(f"sample {number}" for number in range(1, basis.samples + 1))
    if basis == POOLED:
        return (POOLED,)
    return tuple(sorted({lot for name in used_media(case) for lot in curves[name].lots})) or (POOLED,)


def build_problem(case: Case, curves: Mapping[str, Curve], objective: str | None = None) -> DesignProblem:
    """The design problem of a case, all options inside the caps included; `prune` drops the dominated ones.

    `curves` maps each of `used_media(case)` to its curve; `objective` ("area", "cost") overrides the scenario's.
    """
    scenario = case.scenario
    kind = objective or scenario.objective
    lots = lots_of(case, curves)
    owned = shared_holders(case)
    shared = frozenset(holder.name for holder in owned)
    blocks = tuple(_block(case, block, curves, lots, kind, shared) for block in scenario.blocks)
    return DesignProblem(
        title=scenario.scenario,
        volume=scenario.batch.volume,
        time=scenario.batch.time,
        schedule=scenario.schedule,
        objective=kind,
        hour_rate=scenario.costs.hour,
        safety_factor=scenario.safety_factor,
        lots=lots,
        blocks=blocks,
        currency=case.workspace.catalog.currency,
        reliability=None if isinstance(scenario.basis, str) else reliability_of(scenario.basis),
        owned=owned,
    )


def shared_holders(case: Case) -> tuple[OwnedHolder, ...]:
    """Holder types of which some are owned and whose modules two or more stages may use, by name.

    What only one stage can use is deducted in that stage's options.
    """
    catalog = case.workspace.catalog
    users: Counter[str] = Counter()
    for stage in (stage for block in case.scenario.blocks for stage in block.stages):
        media = {choice.medium for choice in stage.media}
        modules = {
            name
            for name, module in catalog.modules.items()
            if module.medium in media and _counts(stage, name, module.max_count) is not None
        }
        users.update(name for name, holder in catalog.holders.items() if modules & set(holder.modules))
    return tuple(
        OwnedHolder(name, holder.owned, price_per_batch(holder))
        for name, holder in sorted(catalog.holders.items())
        if holder.owned > 0 and users[name] > 1
    )


def reliability_of(basis: ReliabilityBasis) -> Reliability:
    """The share to hold, and floor((1 − q)·N), the number of sampled lots that may fail."""
    # The share is written in decimals: 0.95 of 400 leaves 20, whatever binary rounding makes of it.
    may_fail = math.floor((1.0 - basis.reliability) * basis.samples * (1.0 + 1e-12) + 1e-9)
    return Reliability(basis.reliability, may_fail, basis.seed)


def _block(
    case: Case,
    spec: BlockSpec,
    curves: Mapping[str, Curve],
    lots: tuple[str, ...],
    objective: str,
    shared: frozenset[str],
) -> Block:
    scenario = case.scenario
    duty = Duty(scenario.batch.volume, scenario.safety_factor, objective, spec.operation, shared)
    pump = spec.pump
    return Block(
        name=spec.block,
        operation=spec.operation,
        pressure=spec.pressure,
        static=spec.static,
        line=spec.line,
        setup=spec.setup,
        min_flow=(pump.min_flow if pump is not None else None) or 0.0,
        max_flow=(pump.max_flow if pump is not None else None) or math.inf,
        stages=tuple(_stage(case, stage, curves, lots, duty) for stage in spec.stages),
    )


def _stage(case: Case, spec: StageSpec, curves: Mapping[str, Curve], lots: tuple[str, ...], duty: Duty) -> Stage:
    choices = sorted(spec.media, key=lambda choice: choice.medium)
    candidates = tuple(_candidate(case, spec, choice, curves[choice.medium], lots, duty) for choice in choices)
    return Stage(spec.stage, spec.optional, candidates)


def plant_curves(curve: Curve, lots: tuple[str, ...], temperature: float | None) -> tuple[LotCurve, ...]:
    """The curve as each lot sees it at the process temperature in degC (None: no viscosity correction)."""
    ratio = viscosity_ratio(temperature, curve.tested_temperature)
    return tuple(curve.lot_curve(None if lot == POOLED else lot, ratio) for lot in lots)


def loading_cap(medium: Medium, curve: Curve, curves: Sequence[LotCurve], may_fail: int = 0) -> Cap:
    """The lowest of the caps on design loading: the given limit or else what was tested, and the turbidity limit's.

    What was tested must hold for every lot but `may_fail`.
    """
    if medium.limits.loading is not None:
        cap = Cap(medium.limits.loading, "loading-limit")
    else:
        fouling = (
            curves.fouling_factor
            if isinstance(curves, SampledCurves)
            else np.array([one.fouling_factor for one in curves])
        )
        cap = Cap(curve.tested_loading / float(worst_but(fouling, may_fail)), "loading-tested")
    if curve.turbidity_loading is not None and curve.turbidity_loading < cap.loading:
        cap = Cap(curve.turbidity_loading, "turbidity")
    return cap


def _candidate(
    case: Case, stage: StageSpec, choice: MediumChoice, curve: Curve, lots: tuple[str, ...], duty: Duty
) -> Candidate:
    medium, catalog = case.workspace.media[choice.medium], case.workspace.catalog
    draws, may_fail = _sampler(case, stage, medium, curve), 0
    if draws is None:
        curves: Sequence[LotCurve] = plant_curves(curve, lots, case.scenario.batch.temperature)
        cap = loading_cap(medium, curve, curves)
    else:
        assert not isinstance(case.scenario.basis, str)
        may_fail = reliability_of(case.scenario.basis).may_fail
        curves = draws.curves(len(lots))
        cap = loading_cap(medium, curve, curves, may_fail)
    flux_limit = medium.limits.flux if medium.limits.flux is not None else curve.tested_flux
    (pooled,) = plant_curves(curve, (POOLED,), case.scenario.batch.temperature)
    further = math.inf if medium.limits.loading is None else medium.limits.loading
    if curve.turbidity_loading is not None:
        further = min(further, curve.turbidity_loading)
    parts: list[Options] = []
    everything: list[Options] = []
    dropped: list[Dropped] = []
    sizes: list[ModuleSize] = []
    for name, module in sorted(catalog.modules.items()):
        counts = _counts(stage, name, module.max_count) if module.medium == medium.medium else None
        if counts is None:
            continue
        options = module_options(medium, name, catalog, case.scenario.costs, duty, counts)
        kept, left_out = inside_caps(options, cap, curves, duty.operation, flux_limit, duty.volume, may_fail)
        parts.append(kept)
        everything.append(options)
        sizes.append(ModuleSize(name, module.area, int(counts[0]), int(counts[-1])))
        dropped.extend(left_out)
    return Candidate(
        medium=medium.medium,
        after=frozenset(choice.after) if choice.after is not None else None,
        differential_pressure=_given(medium.limits.differential_pressure),
        inlet_pressure=_given(medium.limits.inlet_pressure),
        flux_limit=flux_limit,
        loading_cap=cap.loading,
        cap_reason=cap.reason,
        scale_up=medium.scale_up,
        curves=curves,
        options=_by_area(joined(parts)),
        dropped=tuple(dropped),
        modules=tuple(sizes),
        on_offer=joined(everything),
        pooled=pooled,
        pooled_cap=loading_cap(medium, curve, (pooled,)).loading,
        further_cap=further,
        sampler=draws,
    )


def _sampler(case: Case, stage: StageSpec, medium: Medium, curve: Curve) -> Sampler | None:
    """What draws a candidate's lots on a reliability basis (None on another)."""
    basis = case.scenario.basis
    if isinstance(basis, str):
        return None
    ratio = viscosity_ratio(case.scenario.batch.temperature, curve.tested_temperature)
    return sampler(case.scenario, basis.seed, stage.stage, medium, curve, ratio)


def _counts(stage: StageSpec, module: str, max_count: int) -> NDArray[np.int64] | None:
    """Counts a module may be bought in for a stage (None: not at all), by the catalog and `fix` or `count`."""
    low, high = 1, max_count
    if stage.fix is not None:
        if stage.fix.module not in (None, module):
            return None
        low = high = stage.fix.count if stage.fix.count is not None else 0
        if stage.fix.count is None:
            low, high = 1, max_count
    elif stage.count is not None:
        low, high = max(stage.count[0], 1), min(stage.count[1], max_count)
    return np.arange(low, high + 1, dtype=np.int64) if low <= high else None


def _given(limit: float | None) -> float:
    return math.inf if limit is None else limit


def _by_area(options: Options) -> Options:
    keys = zip(options.area.tolist(), options.module, options.count.tolist(), strict=True)
    order = [place for _, place in sorted((key, place) for place, key in enumerate(keys))]
    return take(options, np.array(order, dtype=np.intp))


def prune(problem: DesignProblem) -> DesignProblem:
    """The same problem without options that no best design can have: its optimum is the same (model.md, section 3).

    Left out are those that take the whole block's pressure or flux for longer than the block has, and then the
    dominated.
    """
    return replace(problem, blocks=tuple(_pruned_block(problem, block) for block in problem.blocks))


def _pruned_block(problem: DesignProblem, block: Block) -> Block:
    longest = problem.longest_time(block)
    line = block.line * problem.volume

    def candidate(one: Candidate) -> Candidate:
        options = one.options
        if not len(options):
            return one
        head = min(block.head, one.differential_pressure) if block.operation == "constant-flow" else block.head
        needed = np.maximum((problem.worst(options.demand) + (line if head == block.head else 0.0)) / max(head, 1e-300),
                            options.shortest_time)  # fmt: skip
        slow = needed > longest * (1.0 + 1e-6)
        text = f"{int(slow.sum())} options alone take longer than the block has"
        one = _keep(one, np.flatnonzero(~slow), Dropped("too-slow", "", int(slow.sum()), None, text))
        kept = undominated(one.options, problem.owned, problem.objective)
        gone = len(one.options) - len(kept)
        text = f"{gone} options cost more and are not larger than another"
        return _keep(one, kept, Dropped("dominated", "", gone, None, text))

    stages = tuple(replace(s, candidates=tuple(candidate(c) for c in s.candidates)) for s in block.stages)
    return replace(block, stages=stages)


def _keep(candidate: Candidate, places: NDArray[np.intp], note: Dropped) -> Candidate:
    dropped = (*candidate.dropped, note) if note.options else candidate.dropped
    return replace(candidate, options=take(candidate.options, places), dropped=dropped)
