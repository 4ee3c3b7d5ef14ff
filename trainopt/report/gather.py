"""From a case to everything its report shows: design it, march its batch lot by lot, say what was assumed."""

from __future__ import annotations

import datetime
import os
import platform
from collections.abc import Iterator, Mapping
from importlib.metadata import PackageNotFoundError, version
from typing import TYPE_CHECKING

import numpy as np

from trainopt.curves.uncertainty import band
from trainopt.optimize.design import Prepared, design, prepare
from trainopt.optimize.holding import held, shown_lots
from trainopt.optimize.restate import route_of_picks
from trainopt.report.course_figure import Course
from trainopt.report.dossier import Dossier, VolumePoint
from trainopt.report.numbers import limit_words, trimmed
from trainopt.report.stage_figure import Floats, StageCurve
from trainopt.study.axis import Axis
from trainopt.study.sweep import sweep
from trainopt.train import march
from trainopt.train.build import POOLED
from trainopt.version import __version__

if TYPE_CHECKING:
    from trainopt.curves.curve import Curve
    from trainopt.files import Case
    from trainopt.train.problem import Block, Candidate, DesignProblem
    from trainopt.train.results import BlockDesign, Design, StageDesign

ALTERNATIVES, GAP = 5, 0.05
"""Near designs that a report lists at most, and how much worse they may be."""
SHOWN_LOTS = 4
"""Sampled lots that a picture shows."""
LIBRARIES = ("highspy", "pyomo", "numpy", "scipy", "matplotlib")


def gather(
    case: Case,
    objective: str | None = None,
    time_limit: float | None = None,
    alternatives: int = ALTERNATIVES,
    gap: float = GAP,
) -> Dossier:
    """Design the case and gather what its report shows, so many near designs within a gap too; raises what `design`
    raises."""
    prepared = prepare(case, objective)
    found = design(
        prepared, time_limit=time_limit, parts=True, routes=True, alternatives=alternatives, gap=gap, limits=True
    )
    whole = prepared.problem
    problem = few_lots(whole, found) if whole.reliability is not None else whole
    options = {"Objective asked for": problem.objective}
    if time_limit is not None:
        options["Time limit"] = f"{trimmed(time_limit)} s"
    return Dossier(
        design=found,
        volume=problem.volume,
        time_allowed=problem.time,
        safety_factor=problem.safety_factor,
        schedule=problem.schedule,
        lots=problem.lots,
        curves=prepared.curves,
        stage_curves=tuple(_stage_curves(prepared, problem, found)),
        courses=tuple(_courses(problem, found)),
        assumptions=tuple(_assumptions(case, prepared)),
        versions=versions(),
        options=options,
        date=now(),
        volumes=tuple(_volumes(case, found)),
        area_parts=found.area_parts,
        limits=found.limits,
        sampled=len(whole.lots) if whole.reliability is not None else 0,
    )


def few_lots(problem: DesignProblem, found: Design) -> DesignProblem:
    """The problem with a few of its sampled lots: the worst of each block that the design holds for, and others spread
    over those that ask for less."""
    route = route_of_picks(problem, found.picks)
    if route is None or not found.blocks:
        return held(problem, np.arange(min(len(problem.lots), SHOWN_LOTS)))
    times = tuple(block.time for block in found.blocks)
    lots = shown_lots(problem, route, times)
    spent = sum(
        np.sum([choice.demand[lots] for choice in choices], axis=0) / block.head
        for block, choices in zip(problem.blocks, route, strict=True) if choices
    )  # fmt: skip
    order = lots[np.argsort(-np.asarray(spent), kind="stable")]
    spread = order[np.unique(np.linspace(0, len(order) - 1, min(SHOWN_LOTS, len(order))).astype(int))]
    worst = [problem.lots.index(block.worst_lot) for block in found.blocks if block.worst_lot in problem.lots]
    return held(problem, np.array(sorted({*spread.tolist(), *worst})))


def now() -> str:
    """The moment in ISO 8601 and UTC; SOURCE_DATE_EPOCH (seconds) fixes it for reproducible files."""
    fixed = os.environ.get("SOURCE_DATE_EPOCH")
    moment = (
        datetime.datetime.fromtimestamp(int(fixed), datetime.UTC)
        if fixed and fixed.isdigit()
        else datetime.datetime.now(datetime.UTC)
    )
    return moment.isoformat(timespec="seconds")


def versions() -> Mapping[str, str]:
    """Versions of the program, of Python and of the libraries that the numbers and pictures come from."""
    found = {"trainopt": __version__, "Python": platform.python_version()}
    for name in LIBRARIES:
        try:
            found[name] = version(name)
        except PackageNotFoundError:
            found[name] = "not installed as a package"
    return found


def _volumes(case: Case, found: Design) -> Iterator[VolumePoint]:
    """Designs for half to one and a half times the batch volume; none where this one has no proof."""
    if found.status != "optimal" or found.objective is None:
        return
    volume, kind = case.scenario.batch.volume, found.objective.kind
    axis = Axis("batch.volume", "volume", "L", tuple(volume * n / 10 for n in range(5, 16)))
    for cell in sweep(case, [axis], objective=kind, changes=False).cells:
        even = cell.even_split
        yield VolumePoint(
            cell.at[0],
            cell.objective,
            None if even is None else even.cost if kind == "cost" else even.area,
        )


def _used(problem: DesignProblem, found: Design) -> Iterator[tuple[Block, BlockDesign, StageDesign, Candidate]]:
    """Each used stage with its block and the candidate it was taken from."""
    for shown in found.blocks:
        block = next(block for block in problem.blocks if block.name == shown.block)
        for stage in shown.stages:
            place = next(place for place in block.stages if place.name == stage.stage)
            yield block, shown, stage, next(c for c in place.candidates if c.medium == stage.medium)


def _stage_curves(prepared: Prepared, problem: DesignProblem, found: Design) -> Iterator[StageCurve]:
    for _, shown, stage, candidate in _used(problem, found):
        yield StageCurve(
            stage=stage.stage,
            curve=prepared.curves[stage.medium],
            lots=tuple(zip(problem.lots, candidate.curves, strict=True)),
            worst_lot=shown.worst_lot,
            loading=stage.loading,
            design_loading=problem.safety_factor * stage.loading / candidate.scale_up,
            cap=candidate.loading_cap,
            cap_words=limit_words(candidate.cap_reason),
            band=_band(prepared.curves[stage.medium], shown.worst_lot, candidate, problem),
        )


def _band(curve: Curve, lot: str, candidate: Candidate, problem: DesignProblem) -> tuple[Floats, Floats, Floats] | None:
    """The 90 % band on a lot's curve in the plant; None where no runs can say."""
    if curve.evidence is None or not (lot == POOLED or lot in curve.lots):
        return None
    name = None if lot == POOLED else lot
    ratio = candidate.curves[problem.lots.index(lot)].resistance_factor / curve.lot_curve(name).resistance_factor
    loading = np.linspace(0.0, curve.tested_loading, 60)
    low, high = band(curve, loading, name)
    return loading, ratio * low, ratio * high


def _courses(problem: DesignProblem, found: Design) -> Iterator[Course]:
    """Each block's batch with every lot at the installed area, and with the worst lot derated."""
    for shown in found.blocks:
        if not shown.stages:
            continue
        for number, lot in enumerate(problem.lots):
            yield _course(problem, found, shown, number, derated=False)
            if lot == shown.worst_lot and problem.safety_factor != 1.0:
                yield _course(problem, found, shown, number, derated=True)


def _course(problem: DesignProblem, found: Design, shown: BlockDesign, lot: int, derated: bool) -> Course:
    used = [(block, stage, c) for block, one, stage, c in _used(problem, found) if one is shown]
    block = used[0][0]
    factor = problem.safety_factor if derated else 1.0
    stages = [march.MarchStage(stage.stage, c.curves[lot], stage.area * c.scale_up / factor) for _, stage, c in used]
    if block.operation == "constant-pressure":
        course = march.constant_pressure(stages, problem.volume, block.pressure, block.line, block.static)
    else:
        course = march.constant_flow(stages, problem.volume, shown.flow, block.line, block.static)
    return Course(
        block=block.name,
        lot=problem.lots[lot],
        worst=problem.lots[lot] == shown.worst_lot,
        limit=block.pressure,
        time=course.time,
        base=np.asarray(course.total - course.pressure.sum(axis=0)),
        stages=tuple(zip(course.stages, course.pressure, strict=True)),
        flow=course.flow,
        derated=derated,
    )


def _assumptions(case: Case, prepared: Prepared) -> Iterator[str]:
    problem = prepared.problem
    yield (
        "A stage's pressure is its resistance at the loading reached times its flux (Darcy's law); "
        "resistance depends on loading alone, as the bench runs showed it."
    )
    if problem.safety_factor != 1.0:
        yield f"Every area is derated by the safety factor {trimmed(problem.safety_factor)}."
    temperature = case.scenario.batch.temperature
    if temperature is None:
        yield "No process temperature is given: resistances are taken as they were at the bench."
    else:
        yield (
            f"At {trimmed(temperature)} °C resistances change with the viscosity of water "
            "(IAPWS R12-08 at 0.1 MPa), from the temperature of each medium's bench runs."
        )
    yield (
        "Blocks run one after the other; the times and setups of all share the time allowed."
        if problem.schedule == "sequential"
        else "Blocks run side by side, each within the time allowed."
    )
    for name, medium in sorted(case.workspace.media.items()):
        if name in prepared.curves and medium.scale_up != 1.0:
            yield f"Medium {name}: capacity per area at scale is {trimmed(medium.scale_up)} of the bench's."
