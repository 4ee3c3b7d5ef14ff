"""A design problem in plain numbers: what `train/` builds from files and curves and `optimize/` decides on.

Canonical units throughout: bar, L, m², h; flux in LMH (L/m²/h); loading in L/m²; demand in bar·h.
A limit that is not given is infinite (or zero for a minimum), so that formulas need no special case.
Entries are kept in sorted order (except stages, whose order is the flow), so that an answer
cannot depend on the order in which a file lists them.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from trainopt.curves.curve import LotCurve

if TYPE_CHECKING:
    from trainopt.train.sampling import Sampler

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class OwnedHolder:
    """A holder type of which so many are there already, free to whichever stages use them first.

    `price` of one per batch, in the catalog's currency: what each owned one that is used saves.
    """

    name: str
    owned: int
    price: float


@dataclass(frozen=True, eq=False)
class Options:
    """The module counts a candidate can be bought in: arrays of shape (n,), `demand` of shape (lots, n).

    `area` m²; `modules_cost`, `holders_cost`, `flush_cost`, `product_cost` per batch in the catalog's
    currency (`holders_cost` of holders that the problem lists as `owned` is that of all of them); `weight` what the
    objective counts (area, or the sum of the four costs); `shortest_time` τ in h;
    `loading` the design loading L (safety factor included) in L/m²; `demand` D in bar·h, per lot.
    """

    module: tuple[str, ...]
    count: NDArray[np.int64]
    holders: tuple[tuple[str, int] | None, ...]
    area: Floats
    modules_cost: Floats
    holders_cost: Floats
    flush_cost: Floats
    product_cost: Floats
    weight: Floats
    shortest_time: Floats
    loading: Floats
    demand: Floats

    def __len__(self) -> int:
        return len(self.module)


@dataclass(frozen=True)
class Dropped:
    """Options that were left out before the model was built: why, how many, and the cap that did it, L/m²."""

    code: str  # "loading-tested" | "loading-limit" | "turbidity" | "pole" | "too-slow" | "dominated"
    module: str  # "" where the reason holds for every module of the medium
    options: int
    limit: float | None
    text: str


@dataclass(frozen=True)
class ModuleSize:
    """One module type a candidate can be bought in: area of one in m², lowest and highest count allowed."""

    name: str
    area: float
    low: int
    high: int


@dataclass(frozen=True)
class Candidate:
    """One medium that may serve in one stage.

    `after`: the media allowed in the nearest used stage upstream (None: any, or none at all).
    Ratings in bar, `flux_limit` in LMH on the installed area, `loading_cap` the highest design loading L in L/m²
    with `cap_reason` ("loading-tested", "loading-limit", "turbidity") saying which limit it comes from.
    `curves`: the curve of each lot of the problem, in the problem's order of lots.
    `modules` are the sizes on offer, `options` all those inside the caps, undominated ones only when the problem was
    pruned. For what-ifs: `on_offer` every option, caps aside (`demand` and `shortest_time` not filled; None: not
    known); `pooled` the curve that no lot's multipliers change, `pooled_cap` its loading cap, `further_cap` the cap
    if bench runs had gone on for ever, L/m². `sampler` draws further lots (None: the problem has no reliability basis).
    """

    medium: str
    after: frozenset[str] | None
    differential_pressure: float
    inlet_pressure: float
    flux_limit: float
    loading_cap: float
    cap_reason: str
    scale_up: float
    curves: Sequence[LotCurve]
    options: Options
    dropped: tuple[Dropped, ...]
    modules: tuple[ModuleSize, ...] = ()
    on_offer: Options | None = None
    pooled: LotCurve | None = None
    pooled_cap: float = math.inf
    further_cap: float = math.inf
    sampler: Sampler | None = None

    @property
    def largest_area(self) -> float:
        """The most area in m² that the catalog offers of it, loading caps aside (0: none)."""
        if self.modules:
            return max(one.area * one.high for one in self.modules)
        return float(self.options.area.max(initial=0.0))


@dataclass(frozen=True)
class Stage:
    """One place in a block, with the media that may serve there, sorted by name."""

    name: str
    optional: bool
    candidates: tuple[Candidate, ...]


@dataclass(frozen=True)
class Block:
    """Stages in series under one pump, no tank between.

    `pressure` and `static` in bar, `line` in bar/(L/h), `setup` in h, flows in L/h (0 and infinity where not given).
    """

    name: str
    operation: str  # "constant-flow" | "constant-pressure"
    pressure: float
    static: float
    line: float
    setup: float
    min_flow: float
    max_flow: float
    stages: tuple[Stage, ...]

    @property
    def head(self) -> float:
        """Pressure left for stages and line, bar."""
        return self.pressure - self.static

    def budget(self, time: float, volume: float) -> float:
        """Pressure × time left for the stages in `time` h and `volume` L, bar·h (model.md, section 5)."""
        return self.head * time - self.line * volume


@dataclass(frozen=True)
class Reliability:
    """A reliability basis: the share of batches to finish, how many of the sampled lots may fail, and their seed."""

    target: float
    may_fail: int
    seed: int


@dataclass(frozen=True)
class DesignProblem:
    """Everything a design is decided on: volume L, total time h, blocks in flow order, lots by name.

    With `reliability` the lots are samples, of which so many may break a pressure limit or go beyond what was tested;
    without, every lot must hold. `owned` lists the holders that are there already and that several stages may use,
    by name; no option's cost counts them as free.
    """

    title: str
    volume: float
    time: float
    schedule: str  # "sequential" | "side-by-side"
    objective: str  # "area" | "cost"
    hour_rate: float  # currency per hour of process time and setup (counts in the objective for "cost" only)
    safety_factor: float
    lots: tuple[str, ...]
    blocks: tuple[Block, ...]
    currency: str
    reliability: Reliability | None = None
    owned: tuple[OwnedHolder, ...] = ()

    @property
    def shares_cost(self) -> bool:
        """Whether the objective counts shared holders, so that what a stage costs depends on the others."""
        return bool(self.owned) and self.objective == "cost"

    @property
    def may_fail(self) -> int:
        """How many of the lots may fail."""
        return 0 if self.reliability is None else self.reliability.may_fail

    def enough(self, holds: NDArray[np.bool_]) -> NDArray[np.bool_]:
        """Whether enough lots hold: `holds` of shape (lots, …), the answer of shape (…)."""
        return np.asarray((~holds).sum(axis=0) <= self.may_fail)

    def worst(self, values: Floats) -> Floats:
        """What all but the lots that may fail stay within, for one quantity: (lots, …) to (…), −inf without lots."""
        return worst_but(values, self.may_fail)

    def longest_time(self, block: Block) -> float:
        """The most t_b can be, h: what all setups leave (side by side: its own), within the pump's least flow."""
        setups = sum(b.setup for b in self.blocks) if self.schedule == "sequential" else block.setup
        pump = self.volume / block.min_flow if block.min_flow > 0.0 else float("inf")
        return min(self.time - setups, pump)


def worst_but(values: Floats, spared: int) -> Floats:
    """The highest of the values of shape (lots, …) along the lots, after so many of the highest are spared."""
    if spared <= 0:
        return np.asarray(values.max(axis=0, initial=-math.inf))
    place = len(values) - 1 - spared
    if place < 0:
        return np.full(values.shape[1:], -math.inf)
    return np.asarray(np.partition(values, place, axis=0)[place])
