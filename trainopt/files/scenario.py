"""The scenario: one batch, the blocks and stages it goes through, and what is to be made least."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import Discriminator, PrivateAttr, Tag, ValidationInfo, model_validator

from trainopt.files.fields import (
    NOT_NEGATIVE,
    POSITIVE,
    Amount,
    Choice,
    Count,
    Entry,
    Flag,
    Fraction,
    Name,
    Number,
    Pressure,
    Range,
    Rule,
    Spread,
    Temperature,
    Time,
    Volume,
    Words,
    written,
    wrong,
)
from trainopt.files.medium import OPERATIONS
from trainopt.files.source import Source

OBJECTIVES = ("area", "cost")
SCHEDULES = ("sequential", "side-by-side")
BASES = ("pooled", "worst-lot")


class Batch(Entry):
    """What has to go through, and in what time."""

    volume: Volume
    """Volume of the batch."""
    time: Time
    """Time allowed for the batch, setups included."""
    temperature: Temperature | None = None
    """Process temperature; without it no viscosity correction is made."""


class Pump(Entry):
    """The range of a block's pump."""

    min_flow: Annotated[float, Amount("flow", NOT_NEGATIVE, "50 L/h")] | None = None
    """Lowest flow it can hold (default: none)."""
    max_flow: Annotated[float, Amount("flow", POSITIVE, "1200 L/h")] | None = None
    """Highest flow it can give (default: no limit)."""

    @model_validator(mode="after")
    def _in_order(self) -> Pump:
        if self.min_flow is not None and self.max_flow is not None and self.min_flow > self.max_flow:
            raise wrong(
                (("min_flow",), f"{self.min_flow:g} L/h is above max_flow; expected at most {self.max_flow:g} L/h")
            )
        return self


class MediumChoice(Entry):
    """One medium that may serve in a stage."""

    medium: Annotated[str, Name()]
    """Name of the medium."""
    after: tuple[Annotated[str, Name()], ...] | None = None
    """The media allowed in the nearest used stage upstream, across blocks (default: any)."""

    @model_validator(mode="before")
    @classmethod
    def _from_name(cls, value: Any) -> Any:
        return value if isinstance(value, dict | MediumChoice) else {"medium": value}


class Fix(Entry):
    """Equipment a stage must use."""

    module: Annotated[str, Name("oat-coarse-11")] | None = None
    """The module type (default: any of the stage's media)."""
    count: Annotated[int, Count(example="12")] | None = None
    """How many of it (default: as many as needed)."""


class CountRange(Rule):
    """Fewest and most modules of a stage."""

    def _expected(self) -> str:
        return "the fewest and the most modules such as [8, 16]"

    def _read(self, value: Any, info: ValidationInfo, /) -> tuple[int, int]:
        if not isinstance(value, tuple | list) or len(value) != 2:
            raise ValueError(f"{written(value)} is not a range; expected {self.expected}")
        low, high = (Count().read(part, info) for part in value)
        if low > high:
            raise ValueError(f"[{low}, {high}] holds no count; expected {self.expected}")
        return low, high


class StageSpec(Entry):
    """One stage: a place for modules of one medium."""

    stage: Annotated[str, Name("primary")]
    """Name of the stage."""
    optional: Annotated[bool, Flag()] = False
    """Whether a design may leave the stage out."""
    media: tuple[MediumChoice, ...]
    """The media that may serve here: names, or {medium: …, after: […]}."""
    fix: Fix | None = None
    """Equipment the stage must use."""
    count: Annotated[tuple[int, int], CountRange()] | None = None
    """Fewest and most modules, [8, 16] (default: 1 and the module's max_count)."""


class BlockSpec(Entry):
    """Stages in series under one pump, no tank between."""

    block: Annotated[str, Name("clarification")]
    """Name of the block."""
    pressure: Pressure
    """Pressure the pump and housings allow at the block's inlet."""
    operation: Annotated[str, Choice(OPERATIONS)] = "constant-flow"
    """How the block is driven: constant-flow or constant-pressure."""
    setup: Annotated[float, Amount("time", NOT_NEGATIVE, "30 min")] = 0.0
    """Time for installing, flushing and blowing down, taken from the batch time."""
    static: Annotated[float, Amount("pressure", NOT_NEGATIVE, "0.05 bar")] = 0.0
    """Static head the pump works against."""
    line: Annotated[float, Amount("line", NOT_NEGATIVE)] = 0.0
    """Resistance of the piping, pressure per flow."""
    pump: Pump | None = None
    """The range of the pump."""
    stages: tuple[StageSpec, ...]
    """The stages in flow order."""

    @model_validator(mode="after")
    def _some_pressure_left(self) -> BlockSpec:
        if self.static >= self.pressure:
            text = f"{self.static:g} bar leaves no pressure for the stages; expected less than {self.pressure:g} bar"
            raise wrong((("static",), text))
        return self


class Product(Entry):
    """The product left behind in the modules' hold-up."""

    titer: Annotated[float, Amount("titer", NOT_NEGATIVE)]
    """Product per volume of feed."""
    value: Annotated[float, Number(NOT_NEGATIVE, "40")]
    """Worth of the product per g, in the catalog's currency."""
    recovered: Fraction = 0.0
    """Part of the hold-up that is recovered, 0 to 1."""


class Costs(Entry):
    """What a batch costs beside modules and holders, in the catalog's currency."""

    hour: Annotated[float, Number(NOT_NEGATIVE, "180")] = 0.0
    """Per hour of process time and setup."""
    flush: Annotated[float, Number(NOT_NEGATIVE, "0.02")] = 0.0
    """Per L of flush."""
    product: Product | None = None
    """The product left in the modules."""


class ReliabilityBasis(Entry):
    """Design for a share of sampled lots."""

    reliability: Annotated[float, Number(Range(above=0.0, below=1.0), "0.95")]
    """Share of batches that must finish in time and under pressure."""
    samples: Annotated[int, Count(Range(least=1, most=20_000), "400")] = 400
    """Sampled lots the design is made for."""
    seed: Annotated[int, Count(Range(least=0), "1")] = 1
    """Seed of the samples."""


class FeedVariability(Entry):
    """Spread from batch to batch, shared by all stages: log-normal with mean 1."""

    fouling: Spread
    """Coefficient of variation of the fouling."""


class Installed(Entry):
    """What stands in a stage today."""

    module: Annotated[str, Name("oat-coarse-11")]
    """The module type."""
    count: Annotated[int, Count(example="18")]
    """How many of it."""


def _basis_kind(value: Any) -> str:
    return "<words>" if isinstance(value, str) else "<mapping>"


Basis = Annotated[
    Annotated[Literal["pooled", "worst-lot"], Choice(BASES, "a mapping with reliability"), Tag("<words>")]
    | Annotated[ReliabilityBasis, Tag("<mapping>")],
    Discriminator(_basis_kind),
]


class Scenario(Entry):
    """One design case."""

    scenario: Annotated[str, Words("2000 L harvest in one shift")]
    """Title of the case."""
    extends: Annotated[str, Words("harvest.yaml")] | None = None
    """Another scenario, relative to this file; this one then says only what differs."""
    batch: Batch
    """What has to go through, and in what time."""
    objective: Annotated[Literal["area", "cost"], Choice(OBJECTIVES)] = "area"
    """What a design makes least: area, or cost per batch."""
    safety_factor: Annotated[float, Number(Range(least=1.0), "1.5")] = 1.0
    """Derating of every area (common practice for clarification: 1.5 to 1.6)."""
    basis: Basis = "worst-lot"
    """Which lots a design must hold for: pooled, worst-lot, or a mapping {reliability: 0.95, samples: 400, seed: 1}:
    all but a share of sampled lots."""
    schedule: Annotated[Literal["sequential", "side-by-side"], Choice(SCHEDULES)] = "sequential"
    """Whether blocks run one after the other or side by side."""
    blocks: tuple[BlockSpec, ...]
    """The blocks in flow order."""
    costs: Costs = Costs()
    """What a batch costs beside modules and holders."""
    feed_variability: FeedVariability | None = None
    """Spread from batch to batch, for a reliability basis and the chance of finishing in a rating."""
    installed: dict[str, Installed] | None = None
    """What stands in each stage today, for rating and simulation."""

    _source: Source = PrivateAttr(default=Source(Path(), "(built in Python)", ""))

    @property
    def source(self) -> Source:
        """The file it was read from."""
        return self._source

    @property
    def stages(self) -> tuple[StageSpec, ...]:
        """All stages in flow order."""
        return tuple(stage for block in self.blocks for stage in block.stages)
