"""The model as text: a two-stage train's LP file is kept, so that a change to any coefficient is seen."""

from __future__ import annotations

import os
import re
from pathlib import Path

import numpy as np
from factory import Medium, block, problem, stage
from pyomo.repn.plugins.lp_writer import LPWriter

from trainopt.optimize.index import index_problem
from trainopt.optimize.model import build_model
from trainopt.optimize.solve import compile_model
from trainopt.train.build import prune
from trainopt.train.problem import DesignProblem

GOLDEN = Path(__file__).parent / "golden" / "two_stages.lp"


def two_stages() -> DesignProblem:
    """A coarse and a fine stage under one pump, two lots of which one is worse throughout, three counts each."""
    lots = ((1.0, 1.0), (1.1, 1.2))
    coarse = Medium("oat", "intermediate", (0.001, 0.008), lots, (("10", 1.0, 100.0, 12),), cap=200.0, flux=400.0)
    fine = Medium("rye", "standard", (0.002, 0.004), lots, (("05", 0.5, 90.0, 24),), cap=300.0, flux=300.0)
    one = block(
        "clarification", stage("primary", coarse), stage("secondary", fine), pressure=2.0, static=0.05, line=2e-5
    )
    return problem(one, volume=1000.0, time=4.0, safety_factor=1.5)


def lp_text() -> str:
    """The LP file of the two-stage train, numbers to nine digits so that no library's last digit matters."""
    import io

    out = io.StringIO()
    LPWriter().write(build_model(index_problem(prune(two_stages()))), out, symbolic_solver_labels=True)
    return re.sub(r"[+-]?\d+\.\d+(e[+-]?\d+)?", lambda number: f"{float(number.group()):+.9g}", out.getvalue())


def test_the_lp_of_a_two_stage_train_is_the_recorded_one() -> None:
    """Set GOLDEN_UPDATE=1 to write it anew, and say in the commit why it changed."""
    if os.environ.get("GOLDEN_UPDATE"):
        GOLDEN.write_text(lp_text(), encoding="utf-8")
    assert lp_text() == GOLDEN.read_text(encoding="utf-8")


def test_rows_and_columns_are_counted_as_the_algebra_says() -> None:
    index = index_problem(prune(two_stages()))
    matrix = compile_model(build_model(index))
    stages, options = 2, len(index.names)
    # one option per stage; one pressure budget (one lot matters); a flux row per stage; the batch time.
    assert matrix.A.shape == (stages + 1 + stages + 1, options + 1)
    assert int(np.sum(matrix.integral)) == options
