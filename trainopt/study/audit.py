"""The even split against the optimum, case by case: what it wastes here, the most it could waste, and the lever
worth pulling.

Where the split is not to blame, the decomposition of the installed area says what is, and what a little more of
each limit would gain names the change that gives most for its size. Gains are asked for only in trains small enough
that they take well under a second (`MOST_STAGES`); in others what limits the most area stands in.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from trainopt.errors import InputError, Problem
from trainopt.files import Case, find_root, load_case
from trainopt.optimize.design import Prepared, design, prepare
from trainopt.optimize.limits import limits
from trainopt.optimize.restate import route_of_picks
from trainopt.study.waste import Waste, most_waste
from trainopt.train.problem import DesignProblem
from trainopt.train.results import BlockDesign, Design, EvenSplit, Limits, Pick, Saving, StageDesign

WORTH = 1.0
"""Percent of the objective from which a saving is worth a sentence of its own."""

MOST_STAGES = 5
"""Stages of a train up to which the gains of its limits are asked for: below a second on random trains, some 0.5 s on
the demo's three stages; trains of six and more take up to ten."""


@dataclass(frozen=True)
class Shift:
    """A stage's pressure at the end of the batch, bar: in the optimum and in the even split (None: no even split)."""

    block: str
    stage: str
    optimum: float
    even: float | None


@dataclass(frozen=True)
class CaseAudit:
    """One case: its design beside the even split, where the pressure went, the most a split could waste, the
    verdict.

    `limits`: what a little more of each limit gains (None: the split is the lever, or the train is too large to ask).
    `lever` names what is worth changing: "split", "time", "pressure-or-time", "rating", "flux", "longer-bench-run",
    "turbidity", "smaller-modules", "limits", "lots", "safety-factor", "none", or "no-design". `modules` counts in the
    optimum and in the even split.
    """

    file: str
    design: Design
    modules: tuple[int, int | None]
    shifts: tuple[Shift, ...]
    waste: Waste | None
    lever: str
    verdict: str
    limits: Limits | None = None


@dataclass(frozen=True)
class Audit:
    """All cases, and the files that could not be read, with their problems."""

    cases: tuple[CaseAudit, ...]
    failures: tuple[Problem, ...] = field(default=())


def scenario_files(paths: Iterable[Path]) -> tuple[Path, ...]:
    """The scenario files that `paths` name: files themselves, folders with what their `scenarios/` (or they
    themselves) hold.

    Raises `InputError` for a path that is not there or a folder without any.
    """
    found: list[Path] = []
    problems: list[Problem] = []
    for path in paths:
        if path.is_dir():
            folder = path / "scenarios" if (path / "scenarios").is_dir() else path
            here = sorted(folder.glob("*.yaml"))
            if not here:
                problems.append(Problem(str(path), 0, "holds no scenario; expected *.yaml in it or in its scenarios/"))
            found.extend(here)
        elif path.exists():
            found.append(path)
        else:
            problems.append(Problem(str(path), 0, "no such file or folder; expected a scenario or a folder of them"))
    if problems:
        raise InputError(problems)
    return tuple(dict.fromkeys(found))


def audit(paths: Sequence[Path | str], objective: str | None = None) -> Audit:
    """Audit every scenario that `paths` name; one that cannot be read is listed, and the others are still audited."""
    cases: list[CaseAudit] = []
    failures: list[Problem] = []
    for path in scenario_files([Path(path) for path in paths]):
        try:
            find_root(path)
            cases.append(audit_case(load_case(path), objective))
        except InputError as error:
            failures.extend(problem for problem in error.problems if problem not in failures)
    return Audit(tuple(cases), tuple(failures))


def audit_case(case: Case, objective: str | None = None) -> CaseAudit:
    """Audit one case."""
    prepared = prepare(case, objective)
    result = design(prepared, parts=True)
    even = result.even_split
    waste = None
    if result.blocks:
        full = prepared.problem
        route = route_of_picks(full, result.picks)
        # With sampled lots that may fail the two splits spare other lots, and the bound says nothing of that.
        waste = None if route is None or full.may_fail else most_waste(full, route)
    fault = _split_at_fault(result)
    found = None if fault is not None else _asked(prepared, result)
    lever, verdict = fault or _other_fault(prepared.problem, result, waste, found)
    return CaseAudit(
        file=case.scenario.source.shown,
        design=result,
        modules=(_count(result.blocks), None if even is None or not even.blocks else _count(even.blocks)),
        shifts=tuple(_shifts(result)),
        waste=waste,
        lever=lever,
        verdict=verdict,
        limits=found,
    )


def _asked(prepared: Prepared, result: Design) -> Limits | None:
    """What a little more of each limit gains, where that is told in well under a second."""
    problem = prepared.problem
    if problem.reliability is not None or sum(len(block.stages) for block in problem.blocks) > MOST_STAGES:
        return None
    return limits(problem, result, prepared.curves)


def _count(blocks: Iterable[BlockDesign]) -> int:
    return sum(stage.count for block in blocks for stage in block.stages)


def _shifts(result: Design) -> Iterable[Shift]:
    even = result.even_split
    theirs = {stage.stage: stage for block in (even.blocks if even else ()) for stage in block.stages}
    for block in result.blocks:
        for stage in block.stages:
            other = theirs.get(stage.stage)
            yield Shift(block.block, stage.stage, stage.pressure, None if other is None else other.pressure)


def _split_at_fault(result: Design) -> tuple[str, str] | None:
    """The lever and a sentence that says so, where it is how pressure and time are split, or no design exists."""
    if not result.blocks:
        reason = result.reasons[0].text if result.reasons else "the search was stopped before it found one"
        return "no-design", f"No design meets every limit: {reason}."
    even, saving = result.even_split, result.saving
    if even is None or saving is None:
        return "split", f"The even split yields no design here, the optimum does: {_text(even.text if even else '')}."
    percent, amount = _wasted(result, saving)
    if percent < WORTH:
        return None
    if result.picks == picks_of(even):
        took, enough = f"{even.time or 0.0:.3g} h", f"{result.time or 0.0:.3g} h"
        return (
            "time",
            f"The even split buys the same modules, but takes {took} where {enough} are enough: "
            f"{amount} ({percent:.3g} %).",
        )
    return "split", f"The even split wastes {amount} ({percent:.3g} %){_moved(result)}."


def _wasted(result: Design, saving: Saving) -> tuple[float, str]:
    """What the even split wastes of what is made least: percent, and the amount in words."""
    if result.objective is not None and result.objective.kind == "cost":
        return saving.cost_percent or 0.0, f"{saving.cost:,.0f} {result.currency}".rstrip() + " per batch"
    return saving.area_percent, f"{saving.area:.3g} m²"


def _other_fault(problem: DesignProblem, result: Design, waste: Waste | None, found: Limits | None) -> tuple[str, str]:
    """The lever and a sentence that says so, where the split is not to blame."""
    assert result.saving is not None
    percent, amount = _wasted(result, result.saving)
    lever, what = _other_lever(problem, result, found)
    wasted = f"only {amount} ({percent:.2g} %)" if percent > 1e-6 else "nothing"
    bound = ""
    if waste is not None:
        most = waste.percent if waste.percent > 1e-6 else 0.0
        bound = f", and could waste at most {most:.2g} % with these curves and modules of any size"
    return lever, f"The even split wastes {wasted} here{bound}; {what}."


def picks_of(even: EvenSplit) -> tuple[Pick, ...]:
    """What the even split buys, in flow order."""
    return tuple(Pick(s.stage, s.medium, s.module, s.count) for block in even.blocks for s in block.stages)


def _text(text: str) -> str:
    return text.rstrip(".") or "it is too small in some stage"


def by_cost_of_hours(result: Design) -> bool:
    """Whether hours count in what is made least."""
    cost = result.cost_parts
    return result.objective is not None and result.objective.kind == "cost" and cost is not None and cost.hours > 0.0


def _moved(result: Design) -> str:
    """Where the pressure should have gone: the stage whose share the even split misses most."""
    shifts = [(s.optimum - s.even, s) for s in _shifts(result) if s.even is not None]
    if not shifts:
        return ""
    gap, shift = max(shifts, key=lambda item: (item[0], item[1].stage))
    took, enough = (result.even_split.time if result.even_split else None) or 0.0, result.time or 0.0
    if by_cost_of_hours(result) and took > 1.01 * enough:
        return f": it takes {took:.3g} h where {enough:.3g} h are enough"
    if gap < 0.005:
        return ": the time, not the pressure, is what it divides badly"
    return f": '{shift.stage}' should have had {shift.optimum:.2f} bar at the end of the batch, not {shift.even:.2f}"


_LEVERS = {
    "pressure": ("pressure-or-time", "more pressure or more time would save, for pressure is what limits {stages}"),
    "differential-pressure": ("rating", "more time, or a medium of a higher differential rating for {stages}, would"),
    "inlet-pressure": ("rating", "more time, or a medium of a higher inlet rating for {stages}, would"),
    "flux": ("flux", "more time, or bench runs at a higher flux, would: {stages} meet their flux limit"),
    "loading-tested": ("longer-bench-run", "a longer bench run would: {stages} may not be loaded beyond what was run"),
    "loading-limit": ("longer-bench-run", "the loading limit given for {stages} is what holds"),
    "turbidity": ("turbidity", "the turbidity limit holds {stages}: a tighter medium there or upstream would help"),
    "module-size": ("smaller-modules", "smaller modules would: the next smaller pick of {stages} is just too small"),
}  # fmt: skip
"""What a limit of a stage says about the lever worth pulling."""


_PARTS = {
    "loading caps, flux limits and ratings": ("limits", "a longer bench run or a higher rating"),
    "lots": ("lots", "fewer surprises between lots, or a basis that weighs how rare they are"),
    "safety factor": ("safety-factor", "a basis that weighs the risk, in place of a blanket factor"),
    "whole modules and holders": ("smaller-modules", "smaller modules"),
}
"""What a part of the installed area says about the lever worth pulling."""

WEIGHTY = 0.1
"""A part of the whole from which it is worth a word."""


def _largest_part(result: Design) -> tuple[str, str] | None:
    """The lever behind the largest part of the area (or cost) beside the ideal split; None where none is large."""
    if result.area_parts is None:
        return None
    by_cost = result.objective is not None and result.objective.kind == "cost"
    amounts = {p.name: p.cost if by_cost else p.area for p in result.area_parts.parts if p.name in _PARTS}
    whole = (result.cost if by_cost else result.area) or 0.0
    name = max(amounts, key=lambda name: (amounts[name], name), default=None)
    if name is None or amounts[name] < WEIGHTY * whole:
        return None
    lever, remedy = _PARTS[name]
    amount = f"{amounts[name]:,.0f} {result.currency}".rstrip() if by_cost else f"{amounts[name]:.3g} m²"
    verb = "account" if name.endswith("s") else "accounts"
    return lever, f"{name} {verb} for {amount} of {'the cost' if by_cost else 'the area'}: look at {remedy}"


def _other_lever(problem: DesignProblem, result: Design, found: Limits | None) -> tuple[str, str]:
    """Where the split is not the lever: the largest part of the area that something else is to blame for, the change of
    a limit that gives most for its size, or, where that was not asked, what limits the most area."""
    stages: list[StageDesign] = [stage for block in result.blocks for stage in block.stages]
    if not stages:
        return "none", "nothing filters in this design"
    part = _largest_part(result)
    change = None if found is None else _best_change(problem, result, found)
    if change is not None:
        lever, text = change
        said = f"of all limits, the change that gives most for its size: {text}"
        return (lever, said) if part is None else (part[0], f"{part[1]}; {said}")
    if part is not None:
        return part
    area: dict[str, float] = {}
    for stage in stages:
        area[stage.limited_by] = area.get(stage.limited_by, 0.0) + stage.area
    most = max(area, key=lambda limit: (area[limit], limit))
    if found is not None and most != "module-size":
        return "none", "no limit moved alone would save anything"
    names = " and ".join(f"'{stage.stage}'" for stage in stages if stage.limited_by == most)
    lever, words = _LEVERS.get(most, ("none", "{stages} are held by " + most))
    return lever, words.format(stages=names)


_FIELDS = {
    "time_h": "pressure-or-time",
    "pressure_bar": "pressure-or-time",
    "differential_pressure_bar": "rating",
    "inlet_pressure_bar": "rating",
    "flux_limit_LMH": "flux",
    "loading_limit_L_m2": "longer-bench-run",
}
"""The lever that a limit is, by the last part of its field."""


def _best_change(problem: DesignProblem, result: Design, found: Limits) -> tuple[str, str] | None:
    """Lever and words of the change of one limit, or of the longer bench run, that saves most per relative change."""
    media = {stage.stage: stage.medium for block in result.blocks for stage in block.stages}
    turbid = {
        stage.name
        for block in problem.blocks
        for stage in block.stages
        for one in stage.candidates
        if one.cap_reason == "turbidity" and media.get(stage.name) == one.medium
    }
    runs = {run.medium for run in found.longer_runs}
    changes: list[tuple[float, str, str]] = []
    for gain in found.gains:
        if gain.field == "safety_factor":
            continue  # a margin is no limit to shave; where it is the largest part, the verdict says so by itself
        stage, _, field = gain.field.rpartition(".")
        lever = _FIELDS.get(field, "limits")
        if lever == "longer-bench-run" and media.get(stage) in runs:
            continue  # told as the run to make
        changes.append(
            (
                _rate(gain.saves, gain.now, gain.needs),
                "turbidity" if lever == "longer-bench-run" and stage in turbid else lever,
                gain.text,
            )
        )
    changes += [(_rate(run.saves, run.tested, run.loading), "longer-bench-run", run.text) for run in found.longer_runs]
    return max(changes)[1:] if changes else None


def _rate(saves: float, now: float, needs: float) -> float:
    """What is saved per relative change of a limit."""
    return saves * now / max(abs(needs - now), 1e-9 * now) if now > 0.0 else 0.0
