"""A train that stands: its stages with fixed areas, and how long its blocks take at any batch volume (model.md,
section 1).

The volume is an array throughout, so that the largest batch is found in a few calls.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from trainopt.curves.curve import Curve, LotCurve
from trainopt.errors import InputError
from trainopt.files import BlockSpec, Case
from trainopt.optimize.times import Choice, Route
from trainopt.train.build import build_problem, lots_of
from trainopt.train.options import CAP_SLACK, Duty, demand, module_options
from trainopt.train.problem import Block, Candidate, DesignProblem, Floats, Stage
from trainopt.train.results import Pick

Bools = NDArray[np.bool_]


@dataclass(frozen=True, eq=False)
class Train:
    """A fixed train: `problem` with one option per used stage (nothing left out for its loading), and that pick
    as a route."""

    problem: DesignProblem
    route: Route
    picks: tuple[Pick, ...]

    def with_factor(self, factor: float) -> Train:
        """The same train at another derating."""
        return replace(self, problem=replace(self.problem, safety_factor=factor))

    def for_lot(self, lot: int) -> Train:
        """The same train with one lot alone."""
        route = tuple(
            tuple(replace(c, candidate=replace(c.candidate, curves=c.candidate.curves[lot : lot + 1])) for c in block)
            for block in self.route
        )
        return replace(self, problem=replace(self.problem, lots=(self.problem.lots[lot],)), route=route)

    def with_curves(self, curves: Callable[[Candidate], Sequence[LotCurve]], lots: tuple[str, ...]) -> Train:
        """The same train with other lots, each counted by itself; how far each may be loaded is in its curve."""
        route = tuple(
            tuple(
                replace(
                    c,
                    candidate=replace(c.candidate, curves=curves(c.candidate), loading_cap=c.candidate.further_cap),
                )
                for c in block
            )
            for block in self.route
        )
        return replace(self, problem=replace(self.problem, lots=lots, reliability=None), route=route)

    def loading(self, choice: Choice, volume: Floats, factor: float | Floats = 1.0) -> Floats:
        """Design loading in L/m² at each volume, at `factor` times the train's own derating."""
        area = float(choice.candidate.options.area[choice.option]) * choice.candidate.scale_up
        return np.asarray(self.problem.safety_factor * factor * volume / area)

    def inside_caps(self, volume: Floats, factor: float | Floats = 1.0) -> Bools:
        """Whether every stage's loading is inside its cap and finite in demand."""
        good = np.full(np.shape(volume), True)
        for block, choices in zip(self.problem.blocks, self.route, strict=True):
            for choice in choices:
                loading = self.loading(choice, volume, factor)
                good &= loading <= choice.candidate.loading_cap * (1.0 + CAP_SLACK)
                finite = np.isfinite(demand(choice.candidate.curves, block.operation, loading))
                good &= self.problem.enough(finite)
        return good

    def needs(self, b: int, volume: Floats, factor: float | Floats = 1.0) -> dict[tuple[str, str], Floats]:
        """How long one block takes at least by each of its limits, h; keys as in `optimize.times.block_bounds`.

        Each for the worst lot, on a reliability basis after those that may fail.
        """
        worst = self.problem.worst
        block, choices = self.problem.blocks[b], self.route[b]
        line = block.line * volume
        demands = [demand(c.candidate.curves, block.operation, self.loading(c, volume, factor)) for c in choices]
        total = worst(np.sum(demands, axis=0)) if demands else np.zeros(np.shape(volume))
        limits = {("", "pump"): volume / block.max_flow, ("", "pressure"): _ratio(total + line, block.head)}
        for place, choice in enumerate(choices):
            one, name = choice.candidate, choice.stage.name
            area = float(one.options.area[choice.option])
            limits[name, "flux"] = volume / (area * one.flux_limit)
            if block.operation != "constant-flow":
                continue
            limits[name, "differential-pressure"] = worst(demands[place]) / one.differential_pressure
            if one.inlet_pressure < block.pressure:
                downstream = worst(np.sum(demands[place:], axis=0))
                limits[name, "inlet-pressure"] = _ratio(downstream + line, one.inlet_pressure - block.static)
        return limits

    def shortest(self, volume: Floats, factor: float | Floats = 1.0) -> Floats:
        """Shortest time of each block, h, shape (blocks, n)."""
        return np.array(
            [np.max(list(self.needs(b, volume, factor).values()), axis=0) for b in range(len(self.problem.blocks))]
        )

    def total(self, times: Floats) -> Floats:
        """Batch time with setups, h, of block times of shape (blocks, n)."""
        setups = np.array([[block.setup] for block in self.problem.blocks])
        spent = times + setups
        return np.asarray(spent.sum(axis=0) if self.problem.schedule == "sequential" else spent.max(axis=0))

    def lot_times(self, volume: Floats, factor: float | Floats = 1.0) -> Floats:
        """Shortest time of each block for each lot, h, shape (blocks, lots, n); infinite where a lot fails."""
        return np.array([self._lot_times(b, volume, factor) for b in range(len(self.problem.blocks))])

    def _lot_times(self, b: int, volume: Floats, factor: float | Floats) -> Floats:
        block, choices = self.problem.blocks[b], self.route[b]
        line = block.line * volume
        demands = [demand(c.candidate.curves, block.operation, self.loading(c, volume, factor)) for c in choices]
        total = np.sum(demands, axis=0) if demands else np.zeros((len(self.problem.lots), len(volume)))
        needed = np.maximum(_ratio(total + line, block.head), volume / block.max_flow)
        for place, choice in enumerate(choices):
            one = choice.candidate
            needed = np.maximum(needed, volume / (float(one.options.area[choice.option]) * one.flux_limit))
            if block.operation != "constant-flow":
                continue
            if math.isfinite(one.differential_pressure):
                needed = np.maximum(needed, demands[place] / one.differential_pressure)
            if one.inlet_pressure < block.pressure:
                downstream = np.sum(demands[place:], axis=0) + line
                needed = np.maximum(needed, _ratio(downstream, one.inlet_pressure - block.static))
        return np.where(needed * block.min_flow <= volume * (1.0 + 1e-12), needed, np.inf)

    def lots_passing(self, volume: Floats, factor: float | Floats = 1.0) -> Bools:
        """Whether each volume goes through for each lot by itself in the time allowed, shape (lots, n)."""
        times = self.lot_times(volume, factor)
        setups = np.array([block.setup for block in self.problem.blocks])[:, None, None]
        spent = times + setups
        total = spent.sum(axis=0) if self.problem.schedule == "sequential" else spent.max(axis=0)
        inside = np.full(np.shape(volume), True)
        for choice in (choice for choices in self.route for choice in choices):
            inside &= self.loading(choice, volume, factor) <= choice.candidate.loading_cap * (1.0 + CAP_SLACK)
        return np.asarray((total <= self.problem.time * (1.0 + 1e-12)) & inside)

    def passes(self, volume: Floats, factor: float | Floats = 1.0) -> Bools:
        """Whether each volume goes through in the time allowed with every limit met.

        On a reliability basis: for enough lots, each in its own time.
        """
        if self.problem.may_fail:
            return self.inside_caps(volume, factor) & self.problem.enough(self.lots_passing(volume, factor))
        with np.errstate(invalid="ignore"):
            times = self.shortest(volume, factor)
        slowest = np.array([[b.min_flow] for b in self.problem.blocks])
        slow_enough = (times * slowest <= volume * (1.0 + 1e-12)).all(axis=0)
        in_time = self.total(times) <= self.problem.time * (1.0 + 1e-12)
        return np.asarray(self.inside_caps(volume, factor) & slow_enough & in_time)

    def at(self, volume: float) -> tuple[DesignProblem, Route]:
        """The problem and the route at one volume, every option's demand and loading filled in."""
        v = np.array([volume])
        blocks: list[Block] = []
        route: list[tuple[Choice, ...]] = []
        for block, choices in zip(self.problem.blocks, self.route, strict=True):
            filled = tuple(self._filled(block, choice, v) for choice in choices)
            route.append(filled)
            blocks.append(replace(block, stages=tuple(choice.stage for choice in filled)))
        return replace(self.problem, volume=volume, blocks=tuple(blocks)), tuple(route)

    def _filled(self, block: Block, choice: Choice, volume: Floats) -> Choice:
        one, options = choice.candidate, choice.candidate.options
        loading = self.loading(choice, volume)
        fresh = replace(
            options,
            loading=loading,
            demand=demand(one.curves, block.operation, loading),
            shortest_time=volume / (options.area * one.flux_limit),
        )
        candidate = replace(one, options=fresh)
        return Choice(replace(choice.stage, candidates=(candidate,)), candidate, 0)


def _ratio(need: Floats, have: float) -> Floats:
    return np.asarray(need / have) if have > 0.0 else np.full(np.shape(need), math.inf)


def installed_picks(case: Case) -> dict[str, tuple[str, int]]:
    """Module and count of each stage that the scenario says is installed; `InputError` where it says nothing.

    That the modules fit their stages is checked with the files.
    """
    installed = case.scenario.installed
    if not installed:
        text = "'installed' is missing; expected the module and the count that stand in each stage"
        raise InputError([case.scenario.source.problem((), text)])
    return {stage: (entry.module, entry.count) for stage, entry in installed.items()}


def fixed_train(
    case: Case, curves: Mapping[str, Curve], installed: Mapping[str, tuple[str, int]], safety_factor: float = 1.0
) -> Train:
    """The train of `installed` modules, at a derating."""
    scenario = case.scenario
    bare = scenario.model_copy(update={"safety_factor": safety_factor})
    bare.__pydantic_private__ = scenario.__pydantic_private__
    problem = build_problem(replace(case, scenario=bare), curves)
    lots = lots_of(case, curves)
    blocks: list[Block] = []
    route: list[tuple[Choice, ...]] = []
    for block, spec in zip(problem.blocks, scenario.blocks, strict=True):
        choices = tuple(
            _fixed(case, problem, stage, spec, installed[stage.name], len(lots))
            for stage in block.stages
            if stage.name in installed
        )
        route.append(choices)
        blocks.append(replace(block, stages=tuple(choice.stage for choice in choices)))
    picks = tuple(
        Pick(c.stage.name, c.candidate.medium, c.candidate.options.module[0], int(c.candidate.options.count[0]))
        for choices in route
        for c in choices
    )
    return Train(replace(problem, blocks=tuple(blocks)), tuple(route), picks)


def _fixed(
    case: Case, problem: DesignProblem, stage: Stage, spec: BlockSpec, bought: tuple[str, int], lots: int
) -> Choice:
    """A stage with its one option; the option table says nothing yet of its demand, which is the volume's to say."""
    module, count = bought
    workspace = case.workspace
    medium = workspace.media[workspace.catalog.modules[module].medium]
    own: Candidate = next(c for c in stage.candidates if c.medium == medium.medium)
    shared = frozenset(holder.name for holder in problem.owned)
    duty = Duty(problem.volume, problem.safety_factor, problem.objective, spec.operation, shared)
    options = module_options(
        medium, module, workspace.catalog, case.scenario.costs, duty, np.array([count], dtype=np.int64)
    )
    candidate = replace(own, options=replace(options, demand=np.zeros((lots, 1))), dropped=())
    return Choice(replace(stage, optional=False, candidates=(candidate,)), candidate, 0)
