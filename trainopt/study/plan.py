"""What a sweep has to compute, cut into jobs that any process can do: groups of cells, and intervals where the
pick changes."""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field

from trainopt.curves.curve import Curve
from trainopt.curves.medium import fit_curve
from trainopt.errors import InputError
from trainopt.files import Case, set_field
from trainopt.optimize.design import Prepared, design
from trainopt.study.axis import Axis
from trainopt.study.cells import Cells
from trainopt.study.results import Change, EvenCell, SweepCell
from trainopt.train.build import build_problem, used_media
from trainopt.train.results import Design, Pick

TIME = "batch.time"
RESOLUTION = 1e-3
"""Changes are located to this part of the axis."""

Picks = tuple[Pick, ...]


@dataclass(frozen=True)
class Group:
    """Cells that differ in the batch time alone: the values of the other axes (None in the time's place)."""

    values: tuple[float | None, ...]

    @property
    def key(self) -> str:
        """Its name in a journal."""
        return f"group {self.values!r}"


@dataclass(frozen=True)
class Interval:
    """Two neighbors along one axis whose picks differ, the other axes' values in `at` (the axis's own is not
    read)."""

    axis: int
    at: tuple[float, ...]
    low: float
    high: float
    before: Picks
    after: Picks

    @property
    def key(self) -> str:
        """Its name in a journal."""
        others = tuple(v for k, v in enumerate(self.at) if k != self.axis)
        return f"interval {self.axis} {others!r} {self.low!r} {self.high!r}"


Job = Group | Interval


@dataclass(frozen=True)
class Found:
    """What a job found."""

    cells: tuple[SweepCell, ...] = ()
    changes: tuple[Change, ...] = ()


@dataclass(frozen=True, eq=False)
class Plan:
    """A sweep of one case: its axes, what is made least, and whether changes along the batch time are located."""

    case: Case
    curves: Mapping[str, Curve]
    axes: tuple[Axis, ...]
    objective: str | None
    locate_time: bool
    _fitted: dict[int, tuple[object, Curve]] = field(default_factory=dict)

    @property
    def time_axis(self) -> int | None:
        """Place of the axis that varies the batch time, if one does."""
        return next((k for k, axis in enumerate(self.axes) if axis.field == TIME), None)

    def groups(self) -> tuple[Group, ...]:
        """All cells, grouped."""
        tables: list[tuple[float | None, ...]] = [
            (None,) if k == self.time_axis else axis.values for k, axis in enumerate(self.axes)
        ]
        return tuple(Group(values) for values in itertools.product(*tables))

    def run(self, job: Job) -> Found:
        """Do one job."""
        return self._group(job) if isinstance(job, Group) else Found(changes=tuple(self._interval(job)))

    def _group(self, group: Group) -> Found:
        times = self.axes[self.time_axis].values if self.time_axis is not None else (None,)
        ats = [tuple(time if v is None else v for v in group.values) for time in times]
        places = [tuple(0.0 if v is None else v for v in at) for at in ats]
        try:
            cells = self._cells(group.values)
        except InputError as error:
            return Found(tuple(SweepCell(at, "invalid", reason=_texts(error)) for at in places))
        if isinstance(cells, Case):
            return Found(tuple(self._designed(cells, at) for at in places))
        allowed = [cells.full.time if time is None else time for time in times]
        found = tuple(cells.cell(at, time) for at, time in zip(places, allowed, strict=True))
        return Found(found, tuple(self._time_changes(cells, found, self.time_axis)))

    def _cells(self, values: tuple[float | None, ...]) -> Cells | Case:
        """The tables of a group, or its case where the solver has to serve each cell."""
        case = self.case
        for axis, value in zip(self.axes, values, strict=True):
            if value is not None:
                case = set_field(case, axis.field, value)
        if not isinstance(case.scenario.basis, str):
            return case
        full = build_problem(case, self._curves(case), self.objective)
        k = self.time_axis
        return Cells(full, full.time if k is None else max(self.axes[k].values))

    def _curves(self, case: Case) -> dict[str, Curve]:
        """The case's curves: fitted again only where a change of the medium can change them."""
        curves: dict[str, Curve] = {}
        for name in used_media(case):
            medium, base = case.workspace.media[name], self.case.workspace.media[name]
            if medium is base or (medium.curve == base.curve and _same_turbidity(medium, base)):
                curves[name] = self.curves[name]
                continue
            known = self._fitted.get(id(medium))
            if known is None or known[0] is not medium:
                self._fitted.clear()
                known = self._fitted[id(medium)] = (medium, fit_curve(medium))
            curves[name] = known[1]
        return curves

    def _designed(self, case: Case, at: tuple[float, ...]) -> SweepCell:
        """A cell by `design` itself, where the tables do not serve the case's basis."""
        k = self.time_axis
        if k is not None:
            case = set_field(case, TIME, at[k])
        curves = self._curves(case)
        return cell_of(design(Prepared(curves, build_problem(case, curves, self.objective), (), {})), at)

    def picks_at(self, at: tuple[float, ...]) -> Picks:
        """What is bought at one point; empty where there is no design or the files do not allow the value."""
        k = self.time_axis
        try:
            cells = self._cells(tuple(None if place == k else v for place, v in enumerate(at)))
        except InputError:
            return ()
        if isinstance(cells, Case):
            return self._designed(cells, at).picks
        return cells.picks(cells.full.time if k is None else at[k])

    def _time_changes(self, cells: Cells, found: tuple[SweepCell, ...], k: int | None) -> Iterator[Change]:
        if k is None or not self.locate_time:
            return
        axis = self.axes[k]
        for one, other in itertools.pairwise(sorted(found, key=lambda cell: cell.at[k])):
            if one.picks != other.picks:
                others = tuple(v for place, v in enumerate(one.at) if place != k)
                for low, high, before, after in _located(
                    cells.picks, one.at[k], other.at[k], one.picks, other.picks, RESOLUTION * axis.span
                ):
                    yield Change(axis.field, (low, high), before, after, others)

    def _interval(self, job: Interval) -> Iterator[Change]:
        def picks(value: float) -> Picks:
            return self.picks_at(tuple(value if k == job.axis else v for k, v in enumerate(job.at)))

        axis = self.axes[job.axis]
        others = tuple(v for k, v in enumerate(job.at) if k != job.axis)
        for low, high, before, after in _located(
            picks, job.low, job.high, job.before, job.after, RESOLUTION * axis.span
        ):
            yield Change(axis.field, (low, high), before, after, others)

    def intervals(self, cells: Mapping[tuple[float, ...], SweepCell], axis: int) -> Iterator[Interval]:
        """Neighbors along an axis whose picks differ, both computed."""
        values = sorted(self.axes[axis].values)
        rest = [(0.0,) if k == axis else other.values for k, other in enumerate(self.axes)]
        for others in itertools.product(*rest):
            for low, high in itertools.pairwise(values):
                ends = [cells.get(tuple(v if k == axis else o for k, o in enumerate(others))) for v in (low, high)]
                if ends[0] is not None and ends[1] is not None and ends[0].picks != ends[1].picks:
                    yield Interval(axis, others, low, high, ends[0].picks, ends[1].picks)


def _texts(error: InputError) -> str:
    return "; ".join(problem.text for problem in error.problems)


def _same_turbidity(one: object, other: object) -> bool:
    """Whether two versions of a medium have the same turbidity limits: the only ones a curve depends on."""
    limits = [getattr(medium, "limits", None) for medium in (one, other)]
    return all(
        getattr(limits[0], name, None) == getattr(limits[1], name, None)
        for name in ("turbidity", "pool_turbidity", "differential_pressure")
    )


def _located(
    picks: Callable[[float], Picks], low: float, high: float, before: Picks, after: Picks, width: float
) -> Iterator[tuple[float, float, Picks, Picks]]:
    """Every change between two points that halving shows, each to within `width`."""
    middle = 0.5 * (low + high)
    if high - low <= width or not low < middle < high:
        yield low, high, before, after
        return
    between = picks(middle)
    if between != before:
        yield from _located(picks, low, middle, before, between, width)
    if between != after:
        yield from _located(picks, middle, high, between, after, width)


def cell_of(result: Design, at: tuple[float, ...]) -> SweepCell:
    """A design as a cell."""
    even = result.even_split
    return SweepCell(
        at=at,
        status=result.status,
        objective=None if result.objective is None else result.objective.value,
        area=result.area,
        cost=result.cost,
        time=result.time,
        spare=tuple(block.pressure.spare for block in result.blocks),
        picks=result.picks,
        even_split=None if even is None else EvenCell(even.status, even.area, even.cost),
        reason="; ".join(reason.text for reason in result.reasons[:1]),
    )
