"""A pick with its block times as the result objects that a user reads; optimum and even split alike."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from trainopt.optimize.holding import held, held_route, shown_lots
from trainopt.optimize.ideal_split import IdealStage, ideal_areas, loading_limit
from trainopt.optimize.margins import limiting, stage_safety_factor
from trainopt.optimize.owned import credit, stage_credits
from trainopt.optimize.recheck import flow_of, march_stages
from trainopt.optimize.times import BlockChoice, Choice, Route
from trainopt.train.march import end_pressures
from trainopt.train.problem import Block, DesignProblem, Floats
from trainopt.train.results import BlockDesign, BlockPressure, CostParts, StageDesign


@dataclass(frozen=True)
class Picked:
    """A pick, its block times, and the problem it was picked from (`full`: unpruned)."""

    full: DesignProblem
    problem: DesignProblem
    route: Route
    times: tuple[float, ...]

    @cached_property
    def held(self) -> Picked:
        """The same as the lots see it that it holds for: what its pressures are shown by."""
        if not self.problem.may_fail:
            return self
        lots = shown_lots(self.problem, self.route, self.times)
        problem = held(self.problem, lots)
        return Picked(problem, problem, held_route(self.route, lots), self.times)


def cost_parts(problem: DesignProblem, route: Route, times: Sequence[float]) -> CostParts:
    """Cost per batch by cause; holders that are owned and shared count as far as they are not free."""

    def total(name: str) -> float:
        return math.fsum(float(getattr(c.candidate.options, name)[c.option]) for b in route for c in b)

    hours = math.fsum(t + block.setup for t, block in zip(times, problem.blocks, strict=True))
    return CostParts(
        modules=total("modules_cost"),
        holders=total("holders_cost") - credit(problem, route),
        flush=total("flush_cost"),
        product=total("product_cost"),
        hours=problem.hour_rate * hours,
    )


def total_area(route: Route) -> float:
    """Installed area in m²."""
    return math.fsum(float(c.candidate.options.area[c.option]) for b in route for c in b)


def total_time(problem: DesignProblem, times: Sequence[float]) -> float:
    """Process time and setups, h: the sum of the blocks in sequence, the longest of blocks side by side."""
    spent = [t + block.setup for t, block in zip(times, problem.blocks, strict=True)]
    return math.fsum(spent) if problem.schedule == "sequential" else max(spent)


def describe(picked: Picked) -> tuple[BlockDesign, ...]:
    """Every block of a pick, in flow order."""
    return tuple(_block(picked, b) for b in range(len(picked.problem.blocks)))


def _block(picked: Picked, b: int) -> BlockDesign:
    shown = picked.held
    problem, block, choices, time = shown.problem, shown.problem.blocks[b], shown.route[b], shown.times[b]
    demands = np.array([c.demand for c in choices]).reshape(len(choices), len(problem.lots))
    lot = int(np.argmax(demands.sum(axis=0)))
    pressures, line = _end_pressures(problem, block, choices, time, lot, demands)
    used = float(np.sum(pressures))
    ideal = block_ideal(problem, block, choices, time)
    return BlockDesign(
        block=block.name,
        operation=block.operation,
        time=time,
        setup=block.setup,
        flow=flow_of(problem, time),
        pressure=BlockPressure(block.pressure, block.static, line, used, block.head - line - used),
        budget=block.budget(time, problem.volume),
        demand=float(demands[:, lot].sum()),
        worst_lot=problem.lots[lot],
        stages=tuple(
            _stage(picked, b, place, float(demands[place, lot]), float(pressures[place]), used,
                   None if ideal is None else ideal[place])
            for place in range(len(choices))
        ),
        starting_flow=_starting_flow(problem, block, choices),
    )  # fmt: skip


def _starting_flow(problem: DesignProblem, block: Block, choices: BlockChoice) -> float | None:
    """(P − Pstatic)/(Σ R(0)/(φ·A) + r) in L/h at the installed areas, for the lot that flows fastest."""
    if block.operation != "constant-pressure" or not choices:
        return None
    clean = [
        sum(
            c.candidate.curves[lot].resistance(0.0) / (float(c.candidate.options.area[c.option]) * c.candidate.scale_up)
            for c in choices
        )
        for lot in range(len(problem.lots))
    ]
    return block.head / (min(clean) + block.line)


def _end_pressures(
    problem: DesignProblem, block: Block, choices: BlockChoice, time: float, lot: int, demands: Floats
) -> tuple[Floats, float]:
    """Each stage's pressure and the line's at the end of the batch, worst lot, derated area, bar."""
    flow = flow_of(problem, time)
    if not choices or block.operation == "constant-flow":
        return demands[:, lot] / time, block.line * flow if block.line > 0.0 else 0.0
    stages = march_stages(choices, lot, problem.safety_factor)
    shares = end_pressures(stages, problem.volume, block.pressure, block.line, block.static)
    return shares, block.head - float(np.sum(shares))


def _stage(
    picked: Picked, b: int, place: int, demand: float, pressure: float, used: float, ideal: float | None
) -> StageDesign:
    problem, choice, time = picked.problem, picked.route[b][place], picked.times[b]
    options, c = choice.candidate.options, choice.option
    area = float(options.area[c])
    holder = options.holders[c]
    return StageDesign(
        stage=choice.stage.name,
        medium=choice.candidate.medium,
        module=options.module[c],
        count=int(options.count[c]),
        holders={holder[0]: holder[1]} if holder is not None else {},
        area=area,
        ideal_area=ideal,
        loading=problem.volume / area,
        flux=problem.volume / time / area,
        demand=demand,
        pressure=pressure,
        pressure_share=pressure / used if used > 0.0 else 0.0,
        safety_factor=stage_safety_factor(problem, picked.route, picked.times, b, place),
        limited_by=limiting(picked.full, problem, picked.route, b, place),
        modules_cost=float(options.modules_cost[c]),
        holders_cost=float(options.holders_cost[c]) - stage_credits(problem, picked.route)[b][place],
    )


def block_ideal(problem: DesignProblem, block: Block, choices: BlockChoice, time: float) -> tuple[float, ...] | None:
    """Areas of the ideal split of the picked media within the block's budget at its time and all its limits."""
    if not choices:
        return None
    stages = [ideal_stage(problem, block, choice, time) for choice in choices]
    return ideal_areas(stages, block.budget(time, problem.volume))


def ideal_stage(problem: DesignProblem, block: Block, choice: Choice, time: float) -> IdealStage:
    """A picked stage as the ideal split takes it: weight 1 for area, the picked module's cost per m² for cost."""
    one, options, c = choice.candidate, choice.candidate.options, choice.option
    flows = block.operation == "constant-flow"
    rating = one.differential_pressure * time if flows else math.inf
    loading_area = problem.safety_factor * problem.volume / one.scale_up
    fastest = loading_area * one.flux_limit * time / problem.volume
    parts = (options.modules_cost[c], options.flush_cost[c], options.product_cost[c])
    cost = float(sum(parts)) / float(options.area[c])
    suffix = math.inf
    if flows and one.inlet_pressure < block.pressure:
        suffix = (one.inlet_pressure - block.static) * time - block.line * problem.volume
    return IdealStage(
        curves=one.curves,
        operation=block.operation,
        loading_area=loading_area,
        most=loading_limit(one.curves, block.operation, min(one.loading_cap, fastest), rating),
        weight=cost if problem.objective == "cost" and cost > 0.0 else 1.0,
        suffix_budget=suffix,
    )
