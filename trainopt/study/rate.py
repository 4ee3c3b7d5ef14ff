"""What a train that stands can do: its largest batch in the time allowed, its shortest time, what limits it.

The inverse of a design: there the batch is given and the modules are sought, here the modules are given.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from trainopt.curves.curve import Curve
from trainopt.errors import InputError
from trainopt.files import Case, ReliabilityBasis
from trainopt.optimize.describe import Picked, describe
from trainopt.optimize.design import design, fit_curves
from trainopt.optimize.reliability import wilson
from trainopt.optimize.roots import largest_where
from trainopt.optimize.times import block_bounds, kept_lots, share_time
from trainopt.study.installed import Train, fixed_train, installed_picks
from trainopt.train.notices import case_notices
from trainopt.train.results import BlockDesign, Chance, Notice, Pick
from trainopt.train.sampling import FRESH, FRESH_TIMES

FRESH_LOTS = 4000
"""Sampled lots that a chance is measured with at least."""
TIGHT = 1e-6
"""A limit used to within this part of itself is the one that holds."""


@dataclass(frozen=True)
class LotRating:
    """One lot alone: its largest batch in L, the shortest time in h for the scenario's batch (None: never), and
    the pump's pressure in bar at the end of that batch by block, at the block times of the rating (None where a
    stage is past its pole)."""

    lot: str
    largest_volume: float
    shortest_time: float | None
    pressures: tuple[float | None, ...]


@dataclass(frozen=True)
class BatchRating:
    """One batch volume in L: whether it goes through, the shortest time in h (None: never) and what limits it."""

    volume: float
    passes: bool
    shortest_time: float | None
    limited_by: str
    safety_factor: float | None
    chance: Chance | None = None


@dataclass(frozen=True)
class Rating:
    """What a fixed train can do with the scenario's batch.

    `status` "passes" or "fails"; `volume` L and `time` h as the scenario has them; `largest_volume` L in that
    time, `shortest_time` h for that volume (None: never); `safety_factor` the largest common derating with
    which the batch still goes through (None: with none); `derated_by` what all areas were divided by;
    `limited_by` what holds the largest batch; `forbidden_by` what forbids the
    scenario's batch at any time ("" where nothing does). `blocks` as in a design, in the time allowed.
    `chance`: the share of sampled lots with which the batch goes through in that time, each in its own time (None where
    no variability is known). On a reliability basis the train passes where enough lots do, and no lot is rated alone.
    """

    scenario: str
    status: str
    volume: float
    time: float
    largest_volume: float
    shortest_time: float | None
    safety_factor: float | None
    derated_by: float
    limited_by: str
    picks: tuple[Pick, ...]
    blocks: tuple[BlockDesign, ...]
    lots: tuple[LotRating, ...]
    batches: tuple[BatchRating, ...]
    block_names: tuple[str, ...] = ()
    forbidden_by: str = ""
    chance: Chance | None = None
    chance_lots: int = 0
    warnings: tuple[Notice, ...] = ()
    inputs: Mapping[str, str] = field(default_factory=dict)


def rate(
    case: Case,
    volumes: Sequence[float] = (),
    safety_factor: float | None = None,
    designed: bool = False,
    objective: str | None = None,
) -> Rating:
    """Rate the train that the scenario's `installed:` names, or (`designed`) the one that `design` picks.

    The installed train is rated as it stands (derating 1), the designed one with the scenario's safety factor,
    unless `safety_factor` says otherwise. `volumes` in L are rated one by one. Raises `InputError` where
    nothing is installed or no design exists.
    """
    curves = fit_curves(case)
    bought, own = train_of(case, designed, objective)
    factor = own if safety_factor is None else safety_factor
    train = fixed_train(case, curves, bought, factor)
    return rate_train(case, curves, train, volumes, sampled_train(case, curves, bought, factor))


def train_of(case: Case, designed: bool, objective: str | None = None) -> tuple[dict[str, tuple[str, int]], float]:
    """Module and count by stage of the installed or the designed train, and the derating it is usually rated at."""
    if not designed:
        return installed_picks(case), 1.0
    result = design(case, objective)
    if not result.blocks:
        text = "no design exists, so that there is none to rate; `trainopt design` says why"
        raise InputError([case.scenario.source.problem((), text)])
    return {pick.stage: (pick.module, pick.count) for pick in result.picks}, case.scenario.safety_factor


def rate_train(
    case: Case,
    curves: Mapping[str, Curve],
    train: Train,
    volumes: Sequence[float] = (),
    sampled: Train | None = None,
) -> Rating:
    """Rate a fixed train at the scenario's batch and at each of `volumes`; `sampled` is the same with sampled lots."""
    problem = train.problem
    volume = problem.volume
    largest, shortest = largest_volume(train), shortest_time(train, volume)
    times = times_at(train, volume)
    passes = bool(train.passes(np.array([volume]))[0])
    return Rating(
        scenario=problem.title,
        status="passes" if passes else "fails",
        volume=volume,
        time=problem.time,
        largest_volume=largest,
        shortest_time=shortest,
        safety_factor=largest_derating(train, volume),
        derated_by=problem.safety_factor,
        limited_by=limit_at(train, largest),
        picks=train.picks,
        blocks=() if times is None else _blocks(train, volume, times),
        lots=() if problem.may_fail else tuple(_lot(train, lot, times) for lot in range(len(problem.lots))),
        batches=tuple(_batch(train, v, sampled) for v in volumes),
        block_names=tuple(block.name for block in problem.blocks),
        forbidden_by="" if shortest is not None else limit_at(train, volume),
        chance=None if sampled is None else chance_of_finishing(sampled, volume),
        chance_lots=0 if sampled is None else len(sampled.problem.lots),
        warnings=tuple(
            # Only where the areas are in fact divided by it does the safety factor stand on top of the samples.
            notice
            for notice in case_notices(case, curves)
            if notice.code != "two-margins" or problem.safety_factor > 1.0
        ),
        inputs=case.inputs(),
    )


def sampled_train(
    case: Case, curves: Mapping[str, Curve], bought: Mapping[str, tuple[str, int]], factor: float
) -> Train | None:
    """The train with lots sampled apart from any it was designed for; None where nothing is known to vary."""
    basis = case.scenario.basis
    given = ReliabilityBasis(reliability=0.5, samples=1) if isinstance(basis, str) else basis
    lots = max(FRESH_LOTS, FRESH_TIMES * given.samples)
    few = case.scenario.model_copy(update={"basis": given.model_copy(update={"samples": 1})})
    few.__pydantic_private__ = case.scenario.__pydantic_private__
    train = fixed_train(replace(case, scenario=few), curves, bought, factor)
    samplers = [choice.candidate.sampler for choices in train.route for choice in choices]
    if not any(one is not None and one.varies for one in samplers):
        return None
    return train.with_curves(lambda one: one.sampler.curves(lots, FRESH) if one.sampler is not None else one.curves,
                             tuple(f"sample {k}" for k in range(1, lots + 1)))  # fmt: skip


def chance_of_finishing(sampled: Train, volume: float) -> Chance:
    """The share of sampled lots with which `volume` L go through, each in its own time."""
    passing = sampled.lots_passing(np.array([volume]))[:, 0]
    return wilson(int(passing.sum()), len(passing))


def largest_volume(train: Train) -> float:
    """The largest batch in L that goes through in the time allowed with every limit met; 0 where none does."""
    caps = [
        choice.candidate.loading_cap * float(choice.candidate.options.area[0]) * choice.candidate.scale_up
        for block in train.route
        for choice in block
    ]
    most = min(caps) / train.problem.safety_factor * (1.0 + 1e-12)
    return largest_where(train.passes, most)


def shortest_time(train: Train, volume: float) -> float | None:
    """The shortest time in h, setups included, in which `volume` L go through; None where a limit forbids it at
    any time."""
    v = np.array([volume])
    if not bool(train.inside_caps(v)[0]):
        return None
    times = train.shortest(v)
    total = float(train.total(times)[0])
    if train.problem.may_fail:
        own = train.total(np.moveaxis(train.lot_times(v), 1, 2)[:, 0, :])
        slowest = float(train.problem.worst(own[:, None])[0])
        return slowest if math.isfinite(slowest) else None
    held = any(
        float(t) * b.min_flow > volume * (1.0 + 1e-12) for t, b in zip(times[:, 0], train.problem.blocks, strict=True)
    )
    return None if held or not math.isfinite(total) else total


def largest_derating(train: Train, volume: float) -> float | None:
    """The largest common safety factor with which `volume` L go through in the time allowed; None where not
    even without one."""
    own = train.problem.safety_factor
    v = np.array([volume])
    most = min(
        choice.candidate.loading_cap / float(train.loading(choice, v)[0]) for block in train.route for choice in block
    )
    factor = largest_where(lambda f: train.passes(np.full(f.shape, volume), f), most * (1.0 + 1e-12))
    return factor * own if factor > 0.0 else None


def limit_at(train: Train, volume: float) -> str:
    """What holds a batch of `volume` L: a stage's loading, a pump, or the time, with the limit that the slowest
    block waits for."""
    if volume <= 0.0:
        return "no batch passes: the setups leave no time, or a pump cannot go slowly enough"
    v = np.array([volume])
    for choices in train.route:
        for choice in choices:
            if float(train.loading(choice, v)[0]) >= choice.candidate.loading_cap * (1.0 - TIGHT):
                return f"{choice.stage.name}: {choice.candidate.cap_reason}"
            if not np.isfinite(train.shortest(v)).all():
                return f"{choice.stage.name}: past the loading where its fitted resistance is infinite"
    times = train.shortest(v)[:, 0]
    for block, time in zip(train.problem.blocks, times, strict=True):
        if float(time) * block.min_flow >= volume * (1.0 - TIGHT) and block.min_flow > 0.0:
            return f"{block.name}: pump-least-flow"
    total = [float(t) + b.setup for t, b in zip(times, train.problem.blocks, strict=True)]
    slowest = int(np.argmax(times if train.problem.schedule == "sequential" else total))
    limits = {key: float(value[0]) for key, value in train.needs(slowest, v).items()}
    stage, what = max(limits, key=lambda key: (limits[key], key))
    return f"{stage or train.problem.blocks[slowest].name}: {what}"


def times_at(train: Train, volume: float) -> tuple[float, ...] | None:
    """Block times in h for a batch: spare time shared out as in a design, or, where there is too little, the
    time allowed in proportion to what each block needs. None where a stage is past its pole or no time is
    left."""
    problem, route = train.at(volume)
    lots = kept_lots(problem, route) if problem.may_fail else None
    bounds = [block_bounds(b, c, volume, lots) for b, c in zip(problem.blocks, route, strict=True)]
    shared = share_time(replace(problem, objective="area"), bounds)
    if shared is not None:
        return shared
    least = [bound.least for bound in bounds]
    if not all(math.isfinite(t) and t > 0.0 for t in least):
        return None
    if problem.schedule != "sequential":
        times = [problem.time - block.setup for block in problem.blocks]
    else:
        left = problem.time - sum(block.setup for block in problem.blocks)
        times = [t * left / sum(least) for t in least]
    return tuple(times) if min(times) > 0.0 else None


def _blocks(train: Train, volume: float, times: tuple[float, ...]) -> tuple[BlockDesign, ...]:
    problem, route = train.at(volume)
    blocks = describe(Picked(problem, problem, route, times))
    return tuple(
        replace(
            block,
            stages=tuple(
                replace(s, ideal_area=None, limited_by=_nearest(train, b, s.stage, volume, times[b]))
                for s in block.stages
            ),
        )
        for b, block in enumerate(blocks)
    )


def _nearest(train: Train, b: int, stage: str, volume: float, time: float) -> str:
    """The limit that a stage is closest to, as part of what it allows."""
    v = np.array([volume])
    used = {what: float(t[0]) / time for (name, what), t in train.needs(b, v).items() if name in ("", stage)}
    choice = next(c for c in train.route[b] if c.stage.name == stage)
    used[choice.candidate.cap_reason] = float(train.loading(choice, v)[0]) / choice.candidate.loading_cap
    return max(used, key=lambda what: (used[what], what))


def _lot(train: Train, lot: int, times: tuple[float, ...] | None) -> LotRating:
    alone = train.for_lot(lot)
    volume = train.problem.volume
    pressures: list[float | None] = []
    problem, route = alone.at(volume)
    for b, (block, choices) in enumerate(zip(problem.blocks, route, strict=True)):
        spent = sum(float(choice.demand[0]) for choice in choices) + block.line * volume
        if times is None or not math.isfinite(spent):
            pressures.append(None)
        elif block.operation == "constant-pressure":
            pressures.append(block.pressure)
        else:
            pressures.append(block.static + spent / times[b])
    return LotRating(
        lot=train.problem.lots[lot],
        largest_volume=largest_volume(alone),
        shortest_time=shortest_time(alone, volume),
        pressures=tuple(pressures),
    )


def _batch(train: Train, volume: float, sampled: Train | None) -> BatchRating:
    return BatchRating(
        volume=volume,
        passes=bool(train.passes(np.array([volume]))[0]),
        shortest_time=shortest_time(train, volume),
        limited_by=limit_at(train, volume),
        safety_factor=largest_derating(train, volume),
        chance=None if sampled is None else chance_of_finishing(sampled, volume),
    )
