"""What the studies say: frozen results in canonical units (bar, L, m², h). A number that does not exist is None."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from trainopt.study.axis import Axis
from trainopt.train.results import Pick


@dataclass(frozen=True)
class EvenCell:
    """The even split of one cell: `status` "optimal" or "infeasible", area in m², cost per batch."""

    status: str
    area: float | None = None
    cost: float | None = None


@dataclass(frozen=True)
class SweepCell:
    """One design of a sweep at `at` (canonical, one value per axis).

    `status` "optimal", "infeasible" (then `reason` says why), "limit", "invalid" (the files do not allow this
    value; `reason`) or "not-computed" (the sweep was stopped before). `area` m², `time` h with setups, `cost`
    per batch; `spare` bar left at the end of the batch, by block.
    """

    at: tuple[float, ...]
    status: str
    objective: float | None = None
    area: float | None = None
    cost: float | None = None
    time: float | None = None
    spare: tuple[float, ...] = ()
    picks: tuple[Pick, ...] = ()
    even_split: EvenCell | None = None
    reason: str = ""


@dataclass(frozen=True)
class Change:
    """Where the pick changes along an axis: somewhere in `between` (canonical).

    `others` holds the values of the other axes. A side without a design has no picks.
    """

    axis: str
    between: tuple[float, float]
    before: tuple[Pick, ...]
    after: tuple[Pick, ...]
    others: tuple[float, ...] = ()


@dataclass(frozen=True)
class Sweep:
    """All cells of a sweep, the last axis running fastest, and where the pick changes.

    `kind` is what was made least ("area" or "cost"); `complete` is False where the sweep was stopped early.
    """

    scenario: str
    kind: str
    currency: str
    axes: tuple[Axis, ...]
    cells: tuple[SweepCell, ...]
    changes: tuple[Change, ...]
    complete: bool
    blocks: tuple[str, ...] = ()
    inputs: Mapping[str, str] = field(default_factory=dict)
