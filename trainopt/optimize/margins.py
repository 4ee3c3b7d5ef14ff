"""How much a pick can take before a limit breaks, and which limit that is, at the design's own block times."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from trainopt.optimize.roots import largest_where
from trainopt.optimize.times import BlockChoice, Choice, Route, block_bounds, block_times, kept_lots
from trainopt.train.options import CAP_SLACK, demand
from trainopt.train.problem import Block, Candidate, DesignProblem, Floats

ROOM = 1e-9
"""Relative room for rounding: a limit met to the last digit is met."""


def _loading_at_one(problem: DesignProblem, choice: Choice) -> float:
    """V/(φ·A) in L/m²: the loading at F = 1."""
    return problem.volume / (choice.candidate.scale_up * float(choice.candidate.options.area[choice.option]))


def _holds(
    problem: DesignProblem, block: Block, choices: BlockChoice, time: float, factors: Sequence[Floats]
) -> NDArray[np.bool_]:
    """Whether the block meets every limit at derating `factors[k]` (n,) of each of its stages, shape (lots, n)."""
    demands = [
        demand(c.candidate.curves, block.operation, f * _loading_at_one(problem, c))
        for c, f in zip(choices, factors, strict=True)
    ]
    line = block.line * problem.volume
    room = 1.0 + ROOM
    total = np.sum(demands, axis=0)
    good = total + line <= block.head * time * room
    if block.operation == "constant-flow":
        for k, choice in enumerate(choices):
            one = choice.candidate
            good &= demands[k] <= one.differential_pressure * time * room
            if one.inlet_pressure < block.pressure:
                downstream = np.sum(demands[k:], axis=0)
                good &= downstream + line <= (one.inlet_pressure - block.static) * time * room
    return np.asarray(good)


def _most(problem: DesignProblem, choice: Choice) -> float:
    """The derating at which the stage meets its loading cap."""
    return choice.candidate.loading_cap * (1.0 + CAP_SLACK) / _loading_at_one(problem, choice)


def stage_safety_factor(problem: DesignProblem, route: Route, times: Sequence[float], block: int, place: int) -> float:
    """The largest derating of one stage alone, the others at F, that still meets every limit."""
    choices, others = route[block], [b for b in range(len(route)) if b != block and route[b]]
    base = np.full((len(problem.lots), 1), True)
    # Which lots the other blocks hold matters only where some may fail.
    for b in others if problem.may_fail else ():
        plain = [np.array([problem.safety_factor])] * len(route[b])
        base &= _holds(problem, problem.blocks[b], route[b], times[b], plain)

    def holds(factor: Floats) -> NDArray[np.bool_]:
        rest = np.full_like(factor, problem.safety_factor)
        factors = [factor if k == place else rest for k in range(len(choices))]
        return problem.enough(base & _holds(problem, problem.blocks[block], choices, times[block], factors))

    return largest_where(holds, _most(problem, choices[place]), 1e-12)


def common_safety_factor(problem: DesignProblem, route: Route, times: Sequence[float]) -> float | None:
    """The largest common derating that still meets every limit at these block times; None where nothing filters."""
    choices = [choice for block in route for choice in block]
    if not choices:
        return None

    def holds(factor: Floats) -> NDArray[np.bool_]:
        good = np.full((len(problem.lots), len(factor)), True)
        for block, picked, time in zip(problem.blocks, route, times, strict=True):
            if picked:
                good &= _holds(problem, block, picked, time, [factor] * len(picked))
        return problem.enough(good)

    return largest_where(holds, min(_most(problem, choice) for choice in choices), 1e-12)


def limiting(full: DesignProblem, problem: DesignProblem, route: Route, block: int, place: int) -> str:
    """The limit that the next smaller area of this stage's medium would break, all else as picked.

    `full` is the unpruned problem, where the next smaller area is looked up; "module-size" where no smaller area is
    on offer or it breaks no limit.
    """
    choice = route[block][place]
    everything = _same_candidate(full, block, choice)
    area = float(choice.candidate.options.area[choice.option])
    smaller = np.flatnonzero(everything.options.area < area * (1.0 - CAP_SLACK))
    if not len(smaller):
        return everything.cap_reason if _capped(everything) else "module-size"
    places = smaller[everything.options.area[smaller] == everything.options.area[smaller].max()]
    trial = Choice(choice.stage, everything, int(places[0]))
    choices = tuple(trial if k == place else c for k, c in enumerate(route[block]))
    if block_times(problem, (*route[:block], choices, *route[block + 1 :])) is not None:
        return "module-size"
    # Held against the lots that the pick itself holds for.
    lots = kept_lots(problem, route) if problem.may_fail else None
    if lots is not None and not np.isfinite(trial.demand[lots]).all():
        return everything.cap_reason
    bounds = block_bounds(problem.blocks[block], choices, problem.volume, lots)
    limits = {key: value for key, value in bounds.limits.items() if key[0] in ("", choice.stage.name)}
    return max(limits.items(), key=lambda item: (item[1], item[0]))[0][1]


def _capped(candidate: Candidate) -> bool:
    return any(note.code in ("loading-tested", "loading-limit", "turbidity", "pole") for note in candidate.dropped)


def _same_candidate(full: DesignProblem, block: int, choice: Choice) -> Candidate:
    for stage in full.blocks[block].stages:
        if stage.name == choice.stage.name:
            return next(c for c in stage.candidates if c.medium == choice.candidate.medium)
    raise LookupError(choice.stage.name)
