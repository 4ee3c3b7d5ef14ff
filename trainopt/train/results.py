"""What a design says: frozen results, in canonical units (bar, L, m², h, LMH, L/m², bar·h).

The JSON of these objects is made in one place, `trainopt.report`. A number that does not exist is None.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field


@dataclass(frozen=True)
class Notice:
    """Something the engineer should know that does not stop the design."""

    code: str
    text: str


@dataclass(frozen=True)
class Pick:
    """What is bought for one used stage."""

    stage: str
    medium: str
    module: str
    count: int


@dataclass(frozen=True)
class StageDesign:
    """One used stage of a design.

    `area` m²; `ideal_area` m², the stage's area in the ideal split of the picked route (None where there is none);
    `loading` L/m² and `flux` LMH at the installed area; `demand` bar·h and `pressure` bar (end of batch) for the
    block's worst lot at the derated area; `pressure_share` of what the block's stages use; `safety_factor` the largest
    derating of this stage alone at the design's times; `limited_by` the binding limit
    ("pressure", "differential-pressure", "inlet-pressure", "flux", "loading-tested", "loading-limit", "turbidity",
    "module-size"). `modules_cost` and `holders_cost` per batch, in the catalog's currency.
    """

    stage: str
    medium: str
    module: str
    count: int
    holders: Mapping[str, int]
    area: float
    ideal_area: float | None
    loading: float
    flux: float
    demand: float
    pressure: float
    pressure_share: float
    safety_factor: float | None
    limited_by: str
    modules_cost: float | None = None
    holders_cost: float | None = None


@dataclass(frozen=True)
class BlockPressure:
    """Pressure of a block at the end of the batch, worst lot, derated area; all in bar."""

    limit: float
    static: float
    line: float
    stages: float
    spare: float


@dataclass(frozen=True)
class BlockDesign:
    """One block of a design: `time` and `setup` in h, `flow` in L/h, `budget` and `demand` in bar·h.

    `starting_flow` in L/h: at constant pressure the flow of the clean train, areas as installed, the lot that flows
    fastest; None at constant flow.
    """

    block: str
    operation: str
    time: float
    setup: float
    flow: float
    pressure: BlockPressure
    budget: float
    demand: float
    worst_lot: str
    stages: tuple[StageDesign, ...]
    starting_flow: float | None = None


@dataclass(frozen=True)
class CostParts:
    """Cost per batch by cause, in the catalog's currency."""

    modules: float
    holders: float
    flush: float
    product: float
    hours: float

    @property
    def total(self) -> float:
        """Sum of the parts."""
        return self.modules + self.holders + self.flush + self.product + self.hours


@dataclass(frozen=True)
class Objective:
    """Objective of the picked design with HiGHS's proof: `gap` is relative, 0 when proven optimal."""

    kind: str  # "area" | "cost"
    value: float
    bound: float
    gap: float


@dataclass(frozen=True)
class Reason:
    """Why no design exists: a limit, and what single change to it alone would make one possible.

    `needs` maps a field with its unit ("batch.time_h", "clarification.pressure_bar", …) to the value that works,
    or to None where no value of it alone does. `module`: the module type that a count in `needs` is of.
    """

    text: str
    needs: Mapping[str, float | None]
    module: str | None = None


@dataclass(frozen=True)
class EvenSplit:
    """The even split of pressure and time over stages and blocks, sized stage by stage (model.md, section 5).

    `status` "optimal" (sized) or "infeasible" (then `text` says why and the numbers are None).
    """

    status: str
    area: float | None
    cost: float | None
    cost_parts: CostParts | None
    time: float | None
    blocks: tuple[BlockDesign, ...]
    text: str = ""


@dataclass(frozen=True)
class Saving:
    """What the optimum saves against the even split; percentages are of the even split's figure."""

    area: float
    area_percent: float
    cost: float
    cost_percent: float | None


@dataclass(frozen=True)
class Chance:
    """A share of fresh sampled lots that finish in time and inside every limit, with its 95 % Wilson interval."""

    share: float
    low: float
    high: float


@dataclass(frozen=True)
class UsualDesign:
    """The design with a safety factor on the worst lot run, in place of sampled lots, and how it fares with them.

    `area` m², `cost` per batch; `fresh` counts its areas as they are, not derated. None where there is no such design.
    """

    safety_factor: float
    area: float | None
    cost: float | None
    fresh: Chance | None


@dataclass(frozen=True)
class ReliabilityResult:
    """How sure a design on a reliability basis is.

    `target` the share asked for, `in_sample` the share of the `samples` lots it was made for that hold, `fresh` the
    share of `fresh_samples` others; `even_split` the same for the even split (None where there is none), `usual` for
    the safety-factor design. `equivalent_safety_factor` is the common derating that the design takes at the pooled
    curve: what its reliability amounts to. `seed` of the samples.
    """

    target: float
    in_sample: float
    fresh: Chance
    samples: int
    fresh_samples: int
    even_split: Chance | None
    usual: UsualDesign | None
    equivalent_safety_factor: float | None
    seed: int


@dataclass(frozen=True)
class SpareBlock:
    """What a design leaves of a block: its `time` in h, and the `pressure` in bar that it does not need."""

    block: str
    time: float
    pressure: float


@dataclass(frozen=True)
class NearDesign:
    """A pick near the best: `area` m², `cost` per batch, `spare_time` in h that it could finish earlier, and the
    largest common derating it takes at its block times."""

    objective: float
    area: float
    cost: float
    picks: tuple[Pick, ...]
    blocks: tuple[SpareBlock, ...]
    spare_time: float
    safety_factor: float | None


@dataclass(frozen=True)
class Alternatives:
    """The best distinct picks, the design first, that are within `gap` (relative) of its objective.

    `asked` how many were asked for at most; `proven` False where a limit stopped the solver before all were found.
    """

    gap: float
    asked: int
    proven: bool
    designs: tuple[NearDesign, ...]


@dataclass(frozen=True)
class RouteDesign:
    """The best design with one sequence of media, (stage, medium) in flow order; numbers None where there is none."""

    media: tuple[tuple[str, str], ...]
    objective: float | None
    area: float | None
    cost: float | None
    picks: tuple[Pick, ...]


@dataclass(frozen=True)
class RouteDesigns:
    """The best designs of other allowed routes, best first, and how many other routes there are.

    `proven` False where the solver was stopped, or there are too many routes to go through.
    """

    designs: tuple[RouteDesign, ...]
    allowed: int
    proven: bool = True


@dataclass(frozen=True)
class Proof:
    """How the optimum was proven: solver and versions, its seed, threads and limits, number of runs, size of the model.

    `time_limit` in s (None: none); gaps relative and absolute, tolerances as set.
    """

    solver: str
    solver_version: str
    modeler: str
    modeler_version: str
    seed: int
    threads: int
    time_limit: float | None
    relative_gap: float
    feasibility_tolerance: float
    solves: int
    rows: int
    columns: int


@dataclass(frozen=True)
class AreaPart:
    """One cause's share of what is installed: `area` m², `cost` per batch (below zero where it takes some off)."""

    name: str
    area: float
    cost: float


@dataclass(frozen=True)
class AreaParts:
    """Where a design's area and cost go: parts that add up to them, and beside them what the even split would add."""

    parts: tuple[AreaPart, ...]
    even_split_area: float | None
    even_split_cost: float | None


@dataclass(frozen=True)
class Gain:
    """The least change of one limit alone that makes a better design possible.

    `field` the limit with its unit ("batch.time_h", "clarification.pressure_bar", "secondary.loading_limit_L_m2", …),
    `now` and `needs` its values in `unit`; `objective` the better design's, `saves` how much less that is, `picks`
    what it buys. `text` says so with pressures in bar; `what` limit, what it `buys` and what is `saved` are its parts.
    """

    field: str
    unit: str
    now: float
    needs: float
    objective: float
    saves: float
    picks: tuple[Pick, ...]
    text: str
    what: str = ""
    buys: str = ""
    saved: str = ""


@dataclass(frozen=True)
class LongerRun:
    """What bench runs of a medium would be worth that went on further, if its fitted curve holds that far.

    `tested` and `loading` L/m² say how far they went and should go, `pressure` bar is what they would reach there at
    `flux` LMH, the flux tested; `objective` the best design's then, `saves` how much less that is, `picks` what it
    buys.
    """

    medium: str
    tested: float
    loading: float
    flux: float
    pressure: float
    objective: float
    saves: float
    picks: tuple[Pick, ...]
    text: str
    saved: str = ""


@dataclass(frozen=True)
class BlockLimit:
    """What binds in a block: `limited_by` the limit its time comes closest to ("pressure", "pump", "flux", …), at which
    `stage` ("" for the block's own); `used` of 1 that limit is; `stages` maps each stage to its own binding limit. Of
    the `head` bar that static head leaves, `spare` are not needed."""

    block: str
    limited_by: str
    stage: str
    used: float
    stages: Mapping[str, str]
    text: str
    head: float | None = None
    spare: float | None = None


@dataclass(frozen=True)
class Limits:
    """What limits a design and what a little more of each limit would gain, nearest changes first.

    `searched` False where gains and longer runs were not asked for.
    """

    blocks: tuple[BlockLimit, ...]
    gains: tuple[Gain, ...]
    longer_runs: tuple[LongerRun, ...]
    searched: bool = True


@dataclass(frozen=True)
class Design:
    """A proven design, or the reasons why none exists.

    `status` "optimal" (proven), "limit" (best found when a limit stopped the solver) or "infeasible" (then numbers are
    None and `reasons` is filled). `area` m², `time` h (process time and setups), `cost` per batch.
    `safety_factor`: the largest common derating at the design's times that still meets every limit.
    `inputs` maps each file read to "sha256:…". `area_parts`, `routes` and `alternatives` are filled where they were
    asked for, `reliability` on a reliability basis; `limits` says what binds, and what more would gain where asked for.
    """

    scenario: str
    status: str
    objective: Objective | None
    area: float | None
    cost: float | None
    currency: str
    time: float | None
    cost_parts: CostParts | None
    blocks: tuple[BlockDesign, ...]
    safety_factor: float | None
    even_split: EvenSplit | None
    saving: Saving | None
    warnings: tuple[Notice, ...]
    reasons: tuple[Reason, ...] = ()
    inputs: Mapping[str, str] = field(default_factory=dict)
    area_parts: AreaParts | None = None
    reliability: ReliabilityResult | None = None
    routes: RouteDesigns | None = None
    alternatives: Alternatives | None = None
    proof: Proof | None = None
    limits: Limits | None = None

    @property
    def picks(self) -> tuple[Pick, ...]:
        """What is bought, in flow order."""
        return tuple(Pick(s.stage, s.medium, s.module, s.count) for b in self.blocks for s in b.stages)
