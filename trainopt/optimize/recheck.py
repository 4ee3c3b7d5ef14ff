"""Every design is marched through its batch, lot by lot, before it is shown: a failure is a defect of the program."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

import numpy as np

from trainopt.errors import DefectError
from trainopt.optimize.index import undominated_lots
from trainopt.optimize.times import BlockChoice, Route
from trainopt.train import march
from trainopt.train.problem import Block, DesignProblem

ROOM = 1e-6
"""Relative room in the re-check, for the march's own quadrature and rounding."""


def march_stages(choices: BlockChoice, lot: int, safety_factor: float) -> list[march.MarchStage]:
    """A block's picked stages as the march takes them: area derated by F, times the scale-up factor."""
    return [
        march.MarchStage(
            c.stage.name,
            c.candidate.curves[lot],
            float(c.candidate.options.area[c.option]) * c.candidate.scale_up / safety_factor,
        )
        for c in choices
    ]


def recheck(problem: DesignProblem, route: Route, times: tuple[float, ...]) -> None:
    """March the batch through the pick; raise `DefectError` with every limit that it breaks."""
    broken = list(_time_broken(problem, times))
    for block, choices, time in zip(problem.blocks, route, times, strict=True):
        for lot in _marched(problem, choices):
            broken += [f"block '{block.name}', lot '{problem.lots[lot]}': {text}"
                       for text in _block_broken(problem, block, choices, time, lot)]  # fmt: skip
    if broken:
        raise DefectError("the design failed its independent re-check: " + "; ".join(broken))


def _marched(problem: DesignProblem, choices: BlockChoice) -> Sequence[int]:
    """The lots to march: all, or of very many those that no other exceeds in every stage."""
    if len(problem.lots) <= _MANY or not choices:
        return range(len(problem.lots))
    return undominated_lots(np.stack([choice.demand for choice in choices], axis=1))


_MANY = 50


def flow_of(problem: DesignProblem, time: float) -> float:
    """Mean flow of a block in L/h; infinite for a block that nothing slows (no stage, no line, no pump limit)."""
    return problem.volume / time if time > 0.0 else math.inf


def _time_broken(problem: DesignProblem, times: tuple[float, ...]) -> Iterator[str]:
    spent = [t + b.setup for t, b in zip(times, problem.blocks, strict=True)]
    used = sum(spent) if problem.schedule == "sequential" else max(spent)
    if used > problem.time * (1.0 + ROOM):
        yield f"the batch takes {used:.6g} h of {problem.time:.6g} h"
    for block, time in zip(problem.blocks, times, strict=True):
        flow = flow_of(problem, time)
        if not block.min_flow * (1.0 - ROOM) <= flow <= block.max_flow * (1.0 + ROOM):
            yield f"block '{block.name}' flows at {flow:.6g} L/h, outside its pump's range"


def _block_broken(problem: DesignProblem, block: Block, choices: BlockChoice, time: float, lot: int) -> Iterator[str]:
    stages = march_stages(choices, lot, problem.safety_factor)
    flow = flow_of(problem, time)
    if not choices and math.isinf(flow):
        return
    if block.operation == "constant-pressure":
        course = march.constant_pressure(stages, problem.volume, block.pressure, block.line, block.static)
        if not course.time[-1] <= time * (1.0 + ROOM):
            yield f"the batch takes {course.time[-1]:.6g} h of {time:.6g} h"
    else:
        course = march.constant_flow(stages, problem.volume, flow, block.line, block.static)
        if not course.total.max() <= block.pressure * (1.0 + ROOM):
            yield f"the pressure reaches {course.total.max():.6g} of {block.pressure:.6g} bar"
    inlet = course.inlet
    for place, choice in enumerate(choices):
        one, name = choice.candidate, choice.stage.name
        checks = [
            ("loading", float(course.loading[place, -1]), one.loading_cap, "L/m2"),
            ("flux at the installed area", flow / float(one.options.area[choice.option]), one.flux_limit, "LMH"),
            ("differential pressure", float(course.pressure[place].max()), one.differential_pressure, "bar"),
            ("inlet pressure", float(inlet[place].max()), one.inlet_pressure, "bar"),
        ]
        for what, value, limit, unit in checks:
            if not (math.isinf(limit) or value <= limit * (1.0 + ROOM)):
                yield f"stage '{name}': {what} {value:.6g} of {limit:.6g} {unit}"
