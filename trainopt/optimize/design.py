"""A case, or a problem in plain numbers, to its proven design and what it is compared with."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from importlib.metadata import version
from typing import TYPE_CHECKING

from trainopt.curves.curve import Curve
from trainopt.curves.medium import fit_curve
from trainopt.errors import DefectError, InputError, Problem
from trainopt.optimize.alternatives import near_designs, route_designs
from trainopt.optimize.area_parts import area_parts
from trainopt.optimize.describe import Picked, cost_parts, describe, total_area, total_time
from trainopt.optimize.even_split import EvenPick, even_split
from trainopt.optimize.limits import limits as what_binds
from trainopt.optimize.margins import common_safety_factor
from trainopt.optimize.reasons import reasons
from trainopt.optimize.recheck import recheck
from trainopt.optimize.reliability import Bought, reliability
from trainopt.optimize.search import Clock, Found, SolverOptions, best_route
from trainopt.optimize.solve import FEASIBILITY, GAP, solver_version
from trainopt.train.build import build_problem, prune, used_media
from trainopt.train.notices import (
    case_notices,
    design_notices,
    reliability_notices,
    starting_flow_notices,
    unused_block_notices,
)
from trainopt.train.problem import DesignProblem
from trainopt.train.results import Design, EvenSplit, Notice, Objective, Proof, Saving

if TYPE_CHECKING:
    from trainopt.files import Case


@dataclass(frozen=True)
class Prepared:
    """A case ready to be designed: its curves, its problem with all options, and the notices from its files."""

    curves: Mapping[str, Curve]
    problem: DesignProblem
    notices: tuple[Notice, ...]
    inputs: Mapping[str, str]
    usual: DesignProblem | None = None
    """On a reliability basis: the same case on the worst-lot basis, for comparison."""


def fit_curves(case: Case) -> dict[str, Curve]:
    """The curve of every medium that the scenario may use; raises `InputError` with the problems of all of them."""
    curves: dict[str, Curve] = {}
    problems: list[Problem] = []
    for name in used_media(case):
        try:
            curves[name] = fit_curve(case.workspace.media[name])
        except InputError as error:
            problems.extend(error.problems)
    if problems:
        raise InputError(problems)
    return curves


def prepare(case: Case, objective: str | None = None) -> Prepared:
    """Fit the curves of a case and build its problem."""
    curves = fit_curves(case)
    problem = build_problem(case, curves, objective)
    usual = None
    if problem.reliability is not None:
        worst = case.scenario.model_copy(update={"basis": "worst-lot"})
        usual = build_problem(replace(case, scenario=worst), curves, objective)
    return Prepared(curves, problem, tuple(case_notices(case, curves)), case.inputs(), usual)


def design(
    what: Case | Prepared | DesignProblem,
    objective: str | None = None,
    time_limit: float | None = None,
    solver: SolverOptions | None = None,
    parts: bool = False,
    routes: bool = False,
    alternatives: int = 0,
    gap: float = 0.05,
    limits: bool = False,
) -> Design:
    """The least area or cost that meets every limit, proven, marched through its batch, beside the even split.

    `objective` ("area", "cost") overrides the scenario's, for a case only (`ValueError` else); `time_limit` in s.
    Asked for besides: `parts`, where the area goes; `routes`, the best designs with other media; `alternatives`, so
    many of the best picks within the relative `gap`, the design included; `limits`, what a little more of each limit
    would gain. Raises `InputError` for what is wrong in the files and `DefectError` where the design fails its
    re-check.
    """
    if objective is not None and isinstance(what, DesignProblem | Prepared):
        kind = what.objective if isinstance(what, DesignProblem) else what.problem.objective
        if objective != kind:
            raise ValueError(f"this problem was built for {kind}; build it anew for {objective}")
    if isinstance(what, DesignProblem):
        prepared = Prepared({}, what, (), {})
    elif isinstance(what, Prepared):
        prepared = what
    else:
        prepared = prepare(what, objective)
    full = prepared.problem
    problem = prune(full)
    options = solver or SolverOptions(time_limit=time_limit)
    clock = Clock(options)
    found = best_route(problem, options)
    if found.route is None or found.times is None:
        return _no_design(prepared, found, options)
    picked = Picked(full, problem, found.route, found.times)
    recheck(picked.held.problem, picked.held.route, found.times)
    cost, area = cost_parts(problem, found.route, found.times), total_area(found.route)
    blocks = describe(picked)
    even, even_pick = _even(full)
    result = Design(
        scenario=full.title,
        status=found.status,
        objective=Objective(full.objective, found.objective, found.bound, _gap(found)),
        area=area,
        cost=cost.total,
        currency=full.currency,
        time=total_time(problem, found.times),
        cost_parts=cost,
        blocks=blocks,
        safety_factor=common_safety_factor(problem, found.route, found.times),
        even_split=even,
        saving=_saving(area, cost.total, even),
        warnings=(
            *prepared.notices,
            *unused_block_notices(blocks, even.blocks),
            *starting_flow_notices(picked.held.full, blocks),
            *(design_notices(picked.held.full, prepared.curves, blocks) if prepared.curves else ()),
        ),
        inputs=prepared.inputs,
        proof=proof_of(found, options),
    )
    if full.reliability is not None:
        result = _with_reliability(prepared, result, found, even_pick, clock.left())
    result = replace(result, limits=what_binds(full, result, prepared.curves, search=limits))
    if parts:
        result = replace(result, area_parts=area_parts(picked.held.full, result))
    if routes:
        result = replace(result, routes=route_designs(problem, found, clock.left()))
    if alternatives:
        result = replace(result, alternatives=near_designs(full, found, alternatives, gap, clock.left()))
    return result


def _with_reliability(
    prepared: Prepared, result: Design, found: Found, even: EvenPick, options: SolverOptions
) -> Design:
    """How sure the design is, and what to say where that falls short."""
    full = prepared.problem
    assert found.route is not None
    assert found.times is not None
    bought = Bought(found.route, found.times, full.safety_factor)
    compared = None if even.route is None else Bought(even.route, even.times, full.safety_factor)
    sure = reliability(full, bought, compared, prepared.usual, options)
    if sure is None:
        return result
    return replace(result, reliability=sure, warnings=(*result.warnings, *reliability_notices(sure)))


def proof_of(found: Found, options: SolverOptions) -> Proof:
    """How the solver was run."""
    return Proof(
        solver="HiGHS",
        solver_version=solver_version(),
        modeler="Pyomo",
        modeler_version=version("pyomo"),
        seed=options.seed,
        threads=options.threads,
        time_limit=options.time_limit,
        relative_gap=GAP,
        feasibility_tolerance=FEASIBILITY,
        solves=found.solves,
        rows=found.rows,
        columns=found.columns,
    )


def even_design(full: DesignProblem) -> EvenSplit:
    """The even split of a problem as a result."""
    return _even(full)[0]


def _even(full: DesignProblem) -> tuple[EvenSplit, EvenPick]:
    pick = even_split(full)
    if pick.route is None:
        return EvenSplit("infeasible", None, None, None, None, (), pick.text), pick
    parts = cost_parts(full, pick.route, pick.times)
    result = EvenSplit(
        status="optimal",
        area=total_area(pick.route),
        cost=parts.total,
        cost_parts=parts,
        time=total_time(full, pick.times),
        blocks=describe(Picked(full, full, pick.route, pick.times)),
    )
    return result, pick


def _no_design(prepared: Prepared, found: Found, options: SolverOptions) -> Design:
    """No pick: proven impossible, or stopped before any was found."""
    full = prepared.problem
    status = "limit" if found.status == "limit" else "infeasible"
    why = reasons(full) if status == "infeasible" else ()
    if status == "infeasible" and not why:
        raise DefectError("the solver finds no design where one exists by the closed form")
    return Design(
        scenario=full.title,
        status=status,
        objective=None,
        area=None,
        cost=None,
        currency=full.currency,
        time=None,
        cost_parts=None,
        blocks=(),
        safety_factor=None,
        even_split=None,
        saving=None,
        warnings=prepared.notices,
        reasons=why,
        inputs=prepared.inputs,
        proof=proof_of(found, options),
    )


def _gap(found: Found) -> float:
    """Relative distance of the bound from the value."""
    if found.status == "optimal" or found.objective == found.bound:
        return 0.0
    return abs(found.objective - found.bound) / max(abs(found.objective), 1e-12)


def _saving(area: float, cost: float, even: EvenSplit) -> Saving | None:
    if even.area is None or even.cost is None:
        return None
    return Saving(
        area=even.area - area,
        area_percent=100.0 * (even.area - area) / even.area if even.area > 0.0 else 0.0,
        cost=even.cost - cost,
        cost_percent=100.0 * (even.cost - cost) / even.cost if even.cost > 0.0 else None,
    )
