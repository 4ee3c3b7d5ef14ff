"""The course of a batch through a designed or installed train, lot by lot, in three modes (model.md, section 6)."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from trainopt.curves.curve import Curve
from trainopt.files import Case
from trainopt.optimize.design import fit_curves
from trainopt.optimize.holding import shown_lots
from trainopt.study.installed import Train, fixed_train
from trainopt.study.rate import times_at, train_of
from trainopt.train import march
from trainopt.train.march import Course, MarchStage
from trainopt.train.problem import Block, Floats
from trainopt.train.results import Notice, Pick

MODES = ("constant-flow", "constant-pressure", "flow-then-pressure")
"""Constant flow; constant pressure from the start; constant flow until the pressure limit, then held there."""


@dataclass(frozen=True, eq=False)
class LotCourse:
    """One block's batch with one lot.

    `course` as in `train/march.py`; `needed` h the batch takes (infinite: a stage plugs), `over_run` h beyond
    the block's time (0: none). `limit_volume` L at which the pressure limit is met (None: never), `handover` L
    at which the flow was given up. `turbidity` NTU by stage, at the course's points, where bench runs read it
    and reached that loading (nan elsewhere).
    """

    lot: str
    course: Course
    needed: float
    over_run: float
    limit_volume: float | None
    turbidity: Mapping[str, Floats] = field(default_factory=dict)


@dataclass(frozen=True, eq=False)
class BlockCourse:
    """One block: its `limit` and `static` in bar, the `time` in h that it has, the set `flow` in L/h (None at
    constant pressure)."""

    block: str
    mode: str
    limit: float
    static: float
    time: float
    flow: float | None
    lots: tuple[LotCourse, ...]


@dataclass(frozen=True, eq=False)
class Simulation:
    """The course of one batch: `volume` L, `time` h allowed, `needed` h with setups for the worst lot,
    `derated_by` what all areas were divided by; one entry per block that has stages."""

    scenario: str
    volume: float
    time: float
    needed: float
    derated_by: float
    picks: tuple[Pick, ...]
    blocks: tuple[BlockCourse, ...]
    warnings: tuple[Notice, ...] = ()
    inputs: Mapping[str, str] = field(default_factory=dict)

    @property
    def over_run(self) -> float:
        """Hours beyond the time allowed, for the worst lot (0: none)."""
        return max(0.0, self.needed - self.time)


def simulate(
    case: Case,
    mode: str | None = None,
    designed: bool = False,
    safety_factor: float | None = None,
    volume: float | None = None,
    points: int = march.POINTS,
    objective: str | None = None,
) -> Simulation:
    """March a batch through the train that the scenario's `installed:` names, or (`designed`) the one that
    `design` picks.

    `mode`: one of `MODES` for every block (None: each block as the scenario drives it). Areas are those
    installed unless `safety_factor` derates them. `volume` in L replaces the scenario's batch. `points` per
    course. Block times are those of a design; where they do not suffice, the time allowed in proportion to what
    each block needs.
    """
    if mode is not None and mode not in MODES:
        raise ValueError(f"unknown mode '{mode}'; expected one of {', '.join(MODES)}")
    curves = fit_curves(case)
    bought, _ = train_of(case, designed, objective)
    train = fixed_train(case, curves, bought, 1.0 if safety_factor is None else safety_factor)
    return simulate_train(case, curves, train, mode, train.problem.volume if volume is None else volume, points)


def simulate_train(
    case: Case, curves: Mapping[str, Curve], train: Train, mode: str | None, volume: float, points: int = march.POINTS
) -> Simulation:
    """March `volume` L through a fixed train."""
    problem = train.problem
    times = times_at(train, volume) or even_times(train)
    lots = _shown(train, volume, times)
    blocks = tuple(
        _block(train, curves, b, mode or block.operation, volume, times[b], points, lots)
        for b, block in enumerate(problem.blocks)
        if train.route[b]
    )
    used = {block.block: max(lot.needed for lot in block.lots) for block in blocks}
    spent = [used.get(block.name, 0.0) + block.setup for block in problem.blocks]
    return Simulation(
        scenario=problem.title,
        volume=volume,
        time=problem.time,
        needed=math.fsum(spent) if problem.schedule == "sequential" else max(spent),
        derated_by=problem.safety_factor,
        picks=train.picks,
        blocks=blocks,
        inputs=case.inputs(),
    )


def _shown(train: Train, volume: float, times: tuple[float, ...]) -> list[int]:
    """The lots to march: all, or of sampled ones the slowest that the train holds and some spread below it."""
    count = len(train.problem.lots)
    if not train.problem.may_fail:
        return list(range(count))
    problem, route = train.at(volume)
    lots = shown_lots(problem, route, times)
    spent = train.lot_times(np.array([volume]))[:, lots, 0].sum(axis=0)
    order = lots[np.argsort(-spent, kind="stable")]
    places = np.unique(np.linspace(0, len(order) - 1, min(_MARCHED, len(order))).astype(int))
    return [int(order[place]) for place in places]


_MARCHED = 6


def even_times(train: Train) -> tuple[float, ...]:
    """The time left after setups divided evenly, h: for a train that no time is enough for."""
    problem = train.problem
    if problem.schedule != "sequential":
        return tuple(max(problem.time - block.setup, 1e-3 * problem.time) for block in problem.blocks)
    left = problem.time - sum(block.setup for block in problem.blocks)
    return (max(left, 1e-3 * problem.time) / len(problem.blocks),) * len(problem.blocks)


def march_stages(train: Train, b: int, lot: int) -> list[MarchStage]:
    """A block's stages as the march takes them."""
    return [
        MarchStage(
            c.stage.name,
            c.candidate.curves[lot],
            float(c.candidate.options.area[c.option]) * c.candidate.scale_up / train.problem.safety_factor,
        )
        for c in train.route[b]
    ]


def _block(
    train: Train,
    curves: Mapping[str, Curve],
    b: int,
    mode: str,
    volume: float,
    time: float,
    points: int,
    lots: Sequence[int],
) -> BlockCourse:
    block = train.problem.blocks[b]
    flow = volume / time
    return BlockCourse(
        block=block.name,
        mode=mode,
        limit=block.pressure,
        static=block.static,
        time=time,
        flow=None if mode == "constant-pressure" else flow,
        lots=tuple(_lot(train, curves, b, lot, mode, volume, time, points) for lot in lots),
    )


def _lot(
    train: Train, curves: Mapping[str, Curve], b: int, lot: int, mode: str, volume: float, time: float, points: int
) -> LotCourse:
    block = train.problem.blocks[b]
    stages = march_stages(train, b, lot)
    course = _course(block, stages, mode, volume, volume / time, points)
    met = course.handover
    if mode == "constant-flow":
        met = march.limit_volume(stages, volume, volume / time, block.pressure, block.line, block.static)
    elif mode == "constant-pressure":
        met = 0.0
    needed = float(course.time[-1])
    return LotCourse(
        lot=train.problem.lots[lot],
        course=course,
        needed=needed if math.isfinite(needed) else math.inf,
        over_run=max(0.0, needed - time * (1.0 + 1e-12)),
        limit_volume=met,
        turbidity={
            c.stage.name: turbidity(curves[c.candidate.medium], course.loading[k]) for k, c in enumerate(train.route[b])
        },
    )


def _course(block: Block, stages: list[MarchStage], mode: str, volume: float, flow: float, points: int) -> Course:
    if mode == "constant-flow":
        return march.constant_flow(stages, volume, flow, block.line, block.static, points)
    if mode == "constant-pressure":
        return march.constant_pressure(stages, volume, block.pressure, block.line, block.static, points=points)
    return march.flow_then_pressure(stages, volume, flow, block.pressure, block.line, block.static, points)


def turbidity(curve: Curve, loading: Floats) -> Floats:
    """The highest turbidity in NTU that any bench run read at each loading in L/m², between its readings; nan
    beyond all runs."""
    runs: dict[str, list[tuple[float, float]]] = {}
    for point in curve.points:
        if point.turbidity is not None and point.excluded is None:
            runs.setdefault(point.run, []).append((point.loading, point.turbidity))
    worst = np.full(loading.shape, math.nan)
    for readings in runs.values():
        at, read = np.array(sorted(readings)).T
        worst = np.fmax(worst, np.interp(loading, at, read, left=math.nan, right=math.nan))
    return worst
