"""Whether any design exists at all, in closed form, with one limit or another moved.

Of each medium the largest area on offer has the least demand and the shortest time, so that a design exists exactly if
one exists with the largest areas on some allowed route: no solver is needed to say what would make one possible.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np

from trainopt.curves.sampled import SampledCurves
from trainopt.optimize.even_split import routes
from trainopt.optimize.index import Index, Node
from trainopt.optimize.sparing import spare_lots
from trainopt.train.options import CAP_SLACK, demand
from trainopt.train.problem import Block, Candidate, DesignProblem, Floats

INSIDE = 1.0 - 2e-8
"""How far inside its time a design must be to count: a named value also works when it is typed back."""


@dataclass(frozen=True)
class Setting:
    """The limits of a problem, any of which may be moved: volume L, time h, safety factor; by block pressure in bar;
    per node the area in m² on offer, the loading cap in L/m² and the flux limit in LMH; `lifted` names limits that
    are off: ("pump", block), ("rating", node)."""

    volume: float
    time: float
    safety_factor: float
    pressure: tuple[float, ...]
    area: Mapping[int, float]
    cap: Mapping[int, float]
    flux: Mapping[int, float]
    lifted: frozenset[tuple[str, int]] = field(default_factory=frozenset)


class Levers:
    """A problem's allowed routes with the largest areas on offer; answers whether a setting admits a design."""

    def __init__(self, problem: DesignProblem) -> None:
        self.problem = problem
        self.index = all_candidates(problem)

    @cached_property
    def routes(self) -> tuple[tuple[int, ...], ...]:
        """Allowed routes as places of nodes."""
        places = {id(node): n for n, node in enumerate(self.index.nodes)}
        return tuple(tuple(places[id(node)] for node in nodes) for nodes in routes(self.index))

    @cached_property
    def setting(self) -> Setting:
        """The limits as they stand."""
        problem, nodes = self.problem, self.index.nodes
        return Setting(
            volume=problem.volume,
            time=problem.time,
            safety_factor=problem.safety_factor,
            pressure=tuple(block.pressure for block in problem.blocks),
            area={n: node.candidate.largest_area for n, node in enumerate(nodes)},
            cap={n: node.candidate.loading_cap for n, node in enumerate(nodes)},
            flux={n: node.candidate.flux_limit for n, node in enumerate(nodes)},
        )

    def possible(self, setting: Setting) -> bool:
        """Whether some route admits a design."""
        spent = {n: self._spent(setting, n) for n in range(len(self.index.nodes))}
        return any(self._route_possible(setting, route, spent) for route in self.routes)

    def _spent(self, setting: Setting, n: int) -> Floats | None:
        """D per lot of a node at the area on offer, bar·h; None where its loading cap cannot be met."""
        candidate = self.index.nodes[n].candidate
        area = setting.area[n]
        if area <= 0.0:
            return None
        loading = setting.safety_factor * setting.volume / (candidate.scale_up * area)
        if loading > setting.cap[n] * (1.0 + CAP_SLACK):
            return None
        operation = self.problem.blocks[self.index.nodes[n].block].operation
        curves = candidate.curves
        if setting.cap[n] > candidate.loading_cap and isinstance(curves, SampledCurves):
            # A loading limit in place of what was tested lets every lot go that far.
            curves = replace(curves, known=math.inf)
        spent = demand(curves, operation, np.array([loading]))[:, 0]
        return spent if self.problem.enough(np.isfinite(spent)) else None

    def _route_possible(self, setting: Setting, route: tuple[int, ...], spent: Mapping[int, Floats | None]) -> bool:
        needed: list[Floats] = []
        for b, block in enumerate(self.problem.blocks):
            here = [n for n in route if self.index.nodes[n].block == b]
            least = self._least_times(setting, b, block, here, spent)
            if least is None:
                return False
            pump = ("pump", b) not in setting.lifted and block.min_flow > 0.0
            most = setting.volume / block.min_flow if pump else math.inf
            needed.append(np.where(least <= most * INSIDE, least, np.inf))
        return self._in_time(setting, np.array(needed))

    def _in_time(self, setting: Setting, needed: Floats) -> bool:
        """Whether blocks that need these times in h, shape (blocks, lots), fit the time allowed for enough lots."""
        setups = np.array([block.setup for block in self.problem.blocks])
        allowed = setting.time * INSIDE
        if self.problem.schedule != "sequential":
            return bool(self.problem.enough((needed + setups[:, None] <= allowed).all(axis=0)))
        able = np.isfinite(needed).all(axis=0)
        left = self.problem.may_fail - int((~able).sum())
        if left < 0:
            return False
        kept = needed[:, able]
        if left:
            kept = kept[:, spare_lots(kept, left)]
        return float(kept.max(axis=1, initial=0.0).sum() + setups.sum()) <= allowed

    def _least_times(
        self, setting: Setting, b: int, block: Block, here: list[int], spent: Mapping[int, Floats | None]
    ) -> Floats | None:
        """Shortest time of a block for each lot, h (model.md, section 4); None where it cannot run."""
        floor = 0.0 if ("pump", b) in setting.lifted else setting.volume / block.max_flow
        demands = [spent[n] for n in here]
        known = [d for d in demands if d is not None]
        if len(known) < len(demands):
            return None
        line = block.line * setting.volume
        lots = np.zeros(len(self.problem.lots))
        least = np.maximum(_ratios(np.sum([lots, *known], axis=0) + line, setting.pressure[b] - block.static), floor)
        for k, n in enumerate(here):
            one = self.index.nodes[n].candidate
            least = np.maximum(least, _ratio(setting.volume, setting.area[n] * setting.flux[n]))
            if ("rating", n) in setting.lifted:
                continue
            if block.operation == "constant-flow":
                downstream = np.sum(known[k:], axis=0) + line
                least = np.maximum(least, _ratios(known[k], one.differential_pressure))
                least = np.maximum(least, _ratios(downstream, one.inlet_pressure - block.static))
            elif setting.pressure[b] > bearable(block, one) * (1.0 + 1e-9):
                return None
        return np.asarray(least)


def bearable(block: Block, candidate: Candidate) -> float:
    """The pressure in bar up to which a medium bears the whole of a constant-pressure block's."""
    return min(candidate.differential_pressure + block.static, candidate.inlet_pressure)


def _ratio(need: float, have: float) -> float:
    if need <= 0.0:
        return 0.0
    return need / have if have > 0.0 else math.inf


def _ratios(need: Floats, have: float) -> Floats:
    """The same for every lot; no limit at all asks for no time, whatever the lot."""
    if math.isinf(have) and have > 0.0:
        return np.zeros_like(need)
    return np.where(need <= 0.0, 0.0, need / have) if have > 0.0 else np.where(need <= 0.0, 0.0, np.inf)


def all_candidates(problem: DesignProblem) -> Index:
    """An index with a node for every candidate, also those without an option inside their caps."""
    nodes: list[Node] = []
    place = 0
    for b, block in enumerate(problem.blocks):
        for i, stage in enumerate(block.stages):
            nodes += [Node(b, i, place, stage, candidate, range(0)) for candidate in stage.candidates]
            place += 1
    return Index(problem, tuple(nodes))


def moved(setting: Setting, name: str, key: int, value: float) -> Setting:
    """The setting with one entry replaced: of "pressure" by block, of "area", "cap" or "flux" by node."""
    if name == "pressure":
        return replace(setting, pressure=tuple(value if k == key else v for k, v in enumerate(setting.pressure)))
    if name == "area":
        return replace(setting, area={**setting.area, key: value})
    if name == "cap":
        return replace(setting, cap={**setting.cap, key: value})
    return replace(setting, flux={**setting.flux, key: value})


_FAR = 2.0**80


def nearest(
    levers: Levers, change: Callable[[float], Setting], start: float, direction: int, most: float = math.inf
) -> float | None:
    """The value nearest to `start`, upward (+1, to `most`) or downward (−1), at which a design exists; None: none does.

    `change(value)` is the setting with that value. Monotone: once possible, further is possible too.
    """
    if not levers.possible(change(min(start * _FAR, most) if direction > 0 else start / _FAR)):
        return None
    near = far = start
    while not levers.possible(change(far)):
        near, far = far, min(far * 2.0, most) if direction > 0 else far / 2.0
    for _ in range(200):
        middle = 0.5 * (near + far)
        if abs(far - near) <= 1e-12 * abs(far) or middle in (near, far):
            break
        if levers.possible(change(middle)):
            far = middle
        else:
            near = middle
    return far
