"""How fast a design is, as ratios: model build and solve against the solver alone on the same matrices.

Run: python tests/benchmarks/design_speed.py. Prints medians of several runs; no test depends on them.
"""

from __future__ import annotations

import statistics
import sys
import time
from collections.abc import Callable
from pathlib import Path

import highspy
import numpy as np

sys.path.insert(0, str(Path(__file__).parent.parent / "optimize"))

from factory import Medium, block, problem, stage

from trainopt.optimize.index import index_problem
from trainopt.optimize.model import build_model
from trainopt.optimize.search import best_route
from trainopt.optimize.solve import Solver, compile_model
from trainopt.train.build import prune
from trainopt.train.problem import DesignProblem

RUNS = 15


def train(counts: int) -> DesignProblem:
    """Two blocks, three stages, two media for the first, three lots, `counts` of each of two module sizes."""
    lots = ((1.0, 1.0), (1.1, 1.2), (0.95, 0.85))
    sizes = (("09", 0.9, 90.0, counts), ("05", 0.53, 60.0, counts))
    limits = {"lots": lots, "sizes": sizes, "cap": 400.0, "flux": 400.0}
    coarse = Medium("oat", "intermediate", (0.0008, 0.008), **limits)  # type: ignore[arg-type]
    open_ = Medium("open", "intermediate", (0.0004, 0.012), **limits)  # type: ignore[arg-type]
    fine = Medium("rye", "standard", (0.002, 0.004), **limits)  # type: ignore[arg-type]
    guard = Medium("quill", "standard", (0.003, 0.001), **limits)  # type: ignore[arg-type]
    first = block("first", stage("primary", coarse, open_), stage("secondary", fine), static=0.05, setup=0.5)
    second = block("second", stage("guard", guard), pressure=1.5, setup=0.2)
    return problem(first, second, volume=2000.0, time=6.0, safety_factor=1.5)


def median(work: Callable[[], object]) -> float:
    """Median time of several runs, s, after one to warm up."""
    work()
    times = []
    for _ in range(RUNS):
        start = time.perf_counter()
        work()
        times.append(time.perf_counter() - start)
    return statistics.median(times)


def main() -> None:
    """Print the ratios for several sizes."""
    print(f"highspy {highspy.Highs().version()}; medians of {RUNS} runs")
    for counts in (20, 30, 40, 80):
        whole = prune(train(counts))
        matrix = compile_model(build_model(index_problem(whole)))
        alone = median(lambda matrix=matrix: Solver(matrix).run())
        once = median(lambda whole=whole: Solver(compile_model(build_model(index_problem(whole)))).run())
        search = median(lambda whole=whole: best_route(whole))
        solves = best_route(whole).solves
        options = int(np.sum(matrix.integral))
        print(
            f"{options:4d} options: solver alone {1e3 * alone:6.1f} ms; build and solve {once / alone:4.2f} of it; "
            f"with tie-breaks ({solves} solves) {search / alone:4.2f} of it, {search / alone / solves:4.2f} a solve"
        )


if __name__ == "__main__":
    main()
