"""From the Pyomo model to HiGHS and back: one matrix, one solver, several objectives in turn.

The model is compiled once to a sparse matrix; the tie-breaks of model.md, section 4, change the costs and add a row
to the same HiGHS instance, warm-started from the answer before.
"""

from __future__ import annotations

import math
import os
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any, ClassVar

import highspy
import numpy as np
from pyomo.repn.plugins.standard_form import LinearStandardFormCompiler

from trainopt.errors import DefectError
from trainopt.train.problem import Floats

INFINITE = highspy.kHighsInf
GAP = 0.0
"""Relative and absolute gap at which a solve may end: none."""
FEASIBILITY = 1e-9
"""Tolerance on every row, in h."""


@dataclass(frozen=True, eq=False)
class Matrix:
    """min cost·v, lower ≤ A·v ≤ upper, low ≤ v ≤ high; `integral` marks the binaries. A is column-wise (scipy CSC)."""

    cost: Floats
    A: Any
    lower: Floats
    upper: Floats
    low: Floats
    high: Floats
    integral: Any
    column: dict[int, int]
    """id of a Pyomo variable to its column."""


def compile_model(model: Any) -> Matrix:
    """The matrix of a Pyomo model; variables that no row or cost mentions are left out."""
    form = LinearStandardFormCompiler().write(model, mixed_form=True)
    rhs = np.asarray(form.rhs, dtype=float)
    kind = np.array([row.bound_type for row in form.rows])
    low = np.array([-INFINITE if v.lb is None else v.lb for v in form.columns], dtype=float)
    high = np.array([INFINITE if v.ub is None or math.isinf(v.ub) else v.ub for v in form.columns], dtype=float)
    return Matrix(
        cost=np.asarray(form.c.toarray()[0], dtype=float),
        A=form.A,
        lower=np.where(kind == 1, -INFINITE, rhs),
        upper=np.where(kind == -1, INFINITE, rhs),
        low=low,
        high=high,
        integral=np.array([not v.is_continuous() for v in form.columns]),
        column={id(v): place for place, v in enumerate(form.columns)},
    )


@contextmanager
def _quiet() -> Iterator[None]:
    """HiGHS greets on the process's own standard output before any option can silence it: send that nowhere."""
    try:
        saved = os.dup(1)
    except OSError:  # no standard output: nothing to keep clean
        yield
        return
    sink = os.open(os.devnull, os.O_WRONLY)
    try:
        os.dup2(sink, 1)
        yield
    finally:
        os.dup2(saved, 1)
        os.close(saved)
        os.close(sink)


@dataclass(frozen=True)
class Answer:
    """What HiGHS found: `status` "optimal", "limit" or "infeasible"; `values` None where it found nothing."""

    status: str
    values: Floats | None
    objective: float
    bound: float


class Solver:
    """One HiGHS instance holding one matrix; seeded, gaps 0, silent, on one thread unless told otherwise."""

    _scheduled: ClassVar[int | None] = None
    """Threads of the process's only scheduler, as an instance last asked for them."""

    def __init__(self, matrix: Matrix, time_limit: float | None = None, seed: int = 0, threads: int = 1) -> None:
        self._threads = threads
        with _quiet():
            self._highs: Any = highspy.Highs()  # type: ignore[no-untyped-call]
        options = {
            "output_flag": False, "mip_rel_gap": GAP, "mip_abs_gap": GAP, "threads": threads, "random_seed": seed,
            "mip_feasibility_tolerance": FEASIBILITY, "primal_feasibility_tolerance": FEASIBILITY,
        }  # fmt: skip
        if time_limit is not None:
            options["time_limit"] = time_limit
        for name, value in options.items():
            self._highs.setOptionValue(name, value)
        self._columns = len(matrix.cost)
        self._highs.passModel(highs_lp(matrix))

    def add_row(self, lower: float, upper: float, places: Sequence[int], values: Sequence[float]) -> None:
        """Add lower ≤ Σ values·v[places] ≤ upper."""
        self._highs.addRow(lower, upper, len(places), np.array(places, dtype=np.int32), np.array(values, dtype=float))

    def add_variable(self, low: float, high: float, cost: float = 0.0) -> int:
        """Add a continuous variable and return its place."""
        self._highs.addVar(low, high)
        place, self._columns = self._columns, self._columns + 1
        self._highs.changeColCost(place, cost)
        return place

    def set_costs(self, cost: Floats) -> None:
        """Replace the objective; variables added later than `cost` reaches keep theirs."""
        self._highs.changeColsCost(len(cost), np.arange(len(cost), dtype=np.int32), np.asarray(cost, dtype=float))

    def set_cost(self, place: int, cost: float) -> None:
        """Replace one variable's cost."""
        self._highs.changeColCost(place, cost)

    def limit_time(self, seconds: float) -> None:
        """Stop the next run after so many seconds (HiGHS counts from the instance's first run)."""
        self._highs.setOptionValue("time_limit", self._highs.getRunTime() + seconds)

    def start_from(self, values: Floats) -> None:
        """Offer a feasible point to begin with."""
        solution = highspy.HighsSolution()
        solution.col_value = values.tolist()
        self._highs.setSolution(solution)

    def run(self) -> Answer:
        """Solve, and map the status once; an unexpected status is a defect."""
        if Solver._scheduled != self._threads:
            # HiGHS refuses to run on another number of threads than the process's scheduler was started with.
            highspy.Highs.resetGlobalScheduler(True)
            Solver._scheduled = self._threads
        self._highs.run()
        status = self._highs.getModelStatus()
        info = self._highs.getInfo()
        found = info.primal_solution_status == highspy.SolutionStatus.kSolutionStatusFeasible
        values = np.array(self._highs.getSolution().col_value) if found else None
        codes = highspy.HighsModelStatus
        if status == codes.kOptimal:
            return Answer("optimal", values, info.objective_function_value, _bound(info))
        if status in (codes.kInfeasible, codes.kUnboundedOrInfeasible):
            return Answer("infeasible", None, math.inf, math.inf)
        if status in (codes.kTimeLimit, codes.kIterationLimit, codes.kSolutionLimit, codes.kInterrupt):
            return Answer("limit", values, info.objective_function_value if found else math.inf, _bound(info))
        raise DefectError(f"HiGHS ended with status {self._highs.modelStatusToString(status)}")


def solver_version() -> str:
    """Version of HiGHS."""
    parts = (highspy.HIGHS_VERSION_MAJOR, highspy.HIGHS_VERSION_MINOR, highspy.HIGHS_VERSION_PATCH)
    return ".".join(map(str, parts))


def _bound(info: Any) -> float:
    bound = float(info.mip_dual_bound)
    return bound if math.isfinite(bound) else -math.inf


def highs_lp(matrix: Matrix) -> Any:
    """The matrix as HiGHS takes it."""
    lp = highspy.HighsLp()
    lp.num_col_, lp.num_row_ = len(matrix.cost), len(matrix.lower)
    lp.col_cost_, lp.col_lower_, lp.col_upper_ = matrix.cost, matrix.low, matrix.high
    lp.row_lower_, lp.row_upper_ = matrix.lower, matrix.upper
    lp.a_matrix_.format_ = highspy.MatrixFormat.kColwise
    lp.a_matrix_.start_ = matrix.A.indptr.astype(np.int32)
    lp.a_matrix_.index_ = matrix.A.indices.astype(np.int32)
    lp.a_matrix_.value_ = matrix.A.data.astype(float)
    kinds = (highspy.HighsVarType.kContinuous, highspy.HighsVarType.kInteger)
    lp.integrality_ = [kinds[bool(flag)] for flag in matrix.integral]
    return lp
