"""Two exact solvers beside HiGHS (the extra `bench`): SCIP and GLPK, each given the plain matrix its own way."""

from __future__ import annotations

import math
from typing import Any

from plain import Plain

FINEST = 1e-9
"""Tolerance asked of each solver on rows and whole numbers."""


def scip_solve(model: Plain) -> list[float] | None:
    """By SCIP."""
    from pyscipopt import Model, quicksum

    scip = Model()
    scip.hideOutput()
    scip.setParam("limits/gap", 0.0)
    scip.setParam("numerics/feastol", FINEST)
    columns = [
        scip.addVar(vtype="B" if k < model.binaries else "C", lb=low, ub=high, obj=cost)
        for k, (cost, low, high) in enumerate(zip(model.cost, model.low, model.high, strict=True))
    ]
    for terms, least, most in model.rows:
        if not terms:
            if not least <= 0.0 <= most:
                return None
            continue
        total: Any = quicksum(value * columns[k] for k, value in terms.items())
        if math.isfinite(least):
            scip.addCons(total >= least)
        if math.isfinite(most):
            scip.addCons(total <= most)
    scip.optimize()
    assert scip.getStatus() in ("optimal", "infeasible"), scip.getStatus()
    return [scip.getVal(v) for v in columns] if scip.getStatus() == "optimal" else None


def glpk_solve(model: Plain) -> list[float] | None:
    """By GLPK's branch and bound, after its presolver."""
    import swiglpk as glpk

    glpk.glp_term_out(glpk.GLP_OFF)
    problem = glpk.glp_create_prob()
    glpk.glp_set_obj_dir(problem, glpk.GLP_MIN)
    glpk.glp_add_cols(problem, len(model.cost))
    glpk.glp_add_rows(problem, len(model.rows))
    for k, (cost, low, high) in enumerate(zip(model.cost, model.low, model.high, strict=True)):
        glpk.glp_set_obj_coef(problem, k + 1, cost)
        glpk.glp_set_col_kind(problem, k + 1, glpk.GLP_IV if k < model.binaries else glpk.GLP_CV)
        glpk.glp_set_col_bnds(problem, k + 1, _kind(glpk, low, high), low, high)
    for row, (terms, least, most) in enumerate(model.rows, 1):
        places, values = glpk.intArray(len(terms) + 1), glpk.doubleArray(len(terms) + 1)
        for at, (k, value) in enumerate(terms.items(), 1):
            places[at], values[at] = k + 1, value
        glpk.glp_set_mat_row(problem, row, len(terms), places, values)
        bounds = (bound if math.isfinite(bound) else 0.0 for bound in (least, most))
        glpk.glp_set_row_bnds(problem, row, _kind(glpk, least, most), *bounds)
    control = glpk.glp_iocp()
    glpk.glp_init_iocp(control)
    control.msg_lev, control.presolve, control.tol_int, control.tol_obj = glpk.GLP_MSG_OFF, glpk.GLP_ON, FINEST, 1e-12
    ended, status = glpk.glp_intopt(problem, control), glpk.glp_mip_status(problem)
    assert ended in (0, glpk.GLP_ENOPFS), ended
    solved = ended == 0 and status == glpk.GLP_OPT
    assert solved or ended == glpk.GLP_ENOPFS or status == glpk.GLP_NOFEAS, status
    values = [glpk.glp_mip_col_val(problem, k + 1) for k in range(len(model.cost))] if solved else None
    glpk.glp_delete_prob(problem)
    return values


def _kind(glpk: Any, least: float, most: float) -> int:
    """How GLPK names a pair of bounds."""
    if least == most:
        return int(glpk.GLP_FX)
    if math.isinf(least):
        return int(glpk.GLP_UP)
    return int(glpk.GLP_LO if math.isinf(most) else glpk.GLP_DB)
