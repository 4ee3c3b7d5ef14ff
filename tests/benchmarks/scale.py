"""How designs scale with lots and samples, as ratios to the solver alone on the matrix that it is given.

Six stages in two blocks, 5 media for each, 4 module sizes of up to 40 each: 4,800 options. For 1, 20 and 200 lots, and
400 and 2,000 sampled lots on a reliability basis. Printed: options before and after pruning and bounding, the time of
bounding, of building the model, of the solver alone, and the most memory that Python held, against one lot. With lots
also the solver on the matrix of all undominated options (60 s at most): what a design would wait for without bounds.

Run: python tests/benchmarks/scale.py [--quick]. No test depends on it.
"""

from __future__ import annotations

import sys
import time
import tracemalloc
from dataclasses import replace
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parent.parent / "optimize"))

from factory import Lot, Medium, block, problem, stage

from trainopt.curves.sampled import SampledCurves
from trainopt.optimize.bounds import bounds, first_design, within
from trainopt.optimize.index import Index, index_problem
from trainopt.optimize.model import build_model
from trainopt.optimize.restate import refilled
from trainopt.optimize.search import best_route
from trainopt.optimize.solve import Solver, compile_model
from trainopt.train.build import prune
from trainopt.train.problem import Candidate, DesignProblem, Reliability

STAGES, MEDIA, COUNTS = 6, 5, 40
SIZES = (0.37, 0.61, 0.93, 1.42)


def train(lots: int, objective: str = "area") -> DesignProblem:
    """The train with so many lots, their ρ and κ spread by 10 and 15 %."""
    rng = np.random.default_rng(11)
    stages = []
    for i in range(STAGES):
        media = []
        for m in range(MEDIA):
            spread: tuple[Lot, ...] = tuple(
                (float(np.exp(0.10 * rng.standard_normal())), float(np.exp(0.15 * rng.standard_normal())))
                for _ in range(lots)
            )
            # Prices of sizes are not in proportion to their areas: some sizes are never worth their price.
            sizes = tuple(
                (f"{k}", round(a * float(rng.uniform(0.98, 1.02)), 3), _price(a, float(rng.uniform(0.8, 1.0))), COUNTS)
                for k, a in enumerate(SIZES)
            )
            resistance = 10.0 ** float(rng.uniform(-3.4, -2.8))
            parameters = (resistance, float(rng.uniform(0.003, 0.012)))
            media.append(Medium(f"m{i}{m}", "intermediate", parameters, spread, sizes, cap=300.0, flux=400.0))
        stages.append(stage(f"s{i}", *media))
    first, second = block("b0", *stages[:3], setup=0.3), block("b1", *stages[3:], setup=0.3)
    return problem(first, second, volume=1500.0, time=8.0, objective=objective, safety_factor=1.2)


def _price(area: float, power: float) -> float:
    return round(100.0 * area**power, 2)


def sampled(lots: int, target: float = 0.95) -> DesignProblem:
    """The same train for a share of sampled lots."""
    base = train(1)
    rng = np.random.default_rng(12)
    feed = np.exp(0.15 * rng.standard_normal(lots))
    whole = replace(
        base,
        lots=tuple(f"sample {k}" for k in range(lots)),
        reliability=Reliability(target, int((1.0 - target) * lots + 1e-9), 12),
    )

    def drawn(one: Candidate) -> Candidate:
        curve = one.curves[0]
        rho, kappa = np.exp(0.1 * rng.standard_normal(lots)), feed * np.exp(0.1 * rng.standard_normal(lots))
        return replace(one, curves=SampledCurves(curve.law, np.array([curve.parameters]), rho, kappa))

    return replace(whole, blocks=tuple(
        replace(b, stages=tuple(
            replace(s, candidates=tuple(refilled(whole, b, drawn(c)) for c in s.candidates)) for s in b.stages
        ))
        for b in whole.blocks
    ))  # fmt: skip


def few(index: Index) -> Index:
    """The index with the options only that a bound leaves."""
    found = bounds(index)
    return index_problem(within(index, found.option, first_design(index, found)[0]))


def report(name: str, whole: DesignProblem, base: float | None) -> float:
    """Print a line; returns the memory in MB."""
    offered = sum(len(c.options) for b in whole.blocks for s in b.stages for c in s.candidates)
    tracemalloc.start()
    start = time.perf_counter()
    pruned = prune(whole)
    index = index_problem(pruned)
    left = few(index)
    bounded = time.perf_counter()
    matrix = compile_model(build_model(left))
    built = time.perf_counter()
    memory = tracemalloc.get_traced_memory()[1] / 1e6
    tracemalloc.stop()
    # Timed again without the tracing, which slows Python down.
    start = time.perf_counter()
    left = few(index_problem(prune(whole)))
    bounded = time.perf_counter()
    matrix = compile_model(build_model(left))
    built = time.perf_counter()
    answer = Solver(matrix, time_limit=600.0).run()
    solved = time.perf_counter()
    alone = solved - built
    rows, columns = matrix.A.shape
    ratio = "" if base is None else f", {memory / base:5.2f} of one lot's"
    print(
        f"{name:>14}: {offered} options, {len(index.names)} undominated, {len(left.names)} left by the bound; "
        f"{rows} rows x {columns} columns; {answer.status}, solver alone {alone:7.2f} s; bounding "
        f"{(bounded - start) / alone:5.2f}, build {(built - bounded) / alone:5.2f} of it; {memory:6.1f} MB{ratio}",
        flush=True,
    )
    if not whole.may_fail:
        _reference(index, solved - start)
    return memory


def _reference(index: Index, whole_time: float) -> None:
    """The solver alone on all undominated options, and everything above as a part of that."""
    start = time.perf_counter()
    matrix = compile_model(build_model(index))
    built = time.perf_counter()
    answer = Solver(matrix, time_limit=60.0).run()
    solved = time.perf_counter()
    alone = solved - built
    print(
        f"{'':>14}  all {matrix.A.shape[1]} columns: build {built - start:5.2f} s, solver alone {alone:6.2f} s "
        f"({answer.status}): build {(built - start) / alone:4.2f} of it, bounding, building and solving "
        f"{whole_time / alone:6.4f} of it",
        flush=True,
    )


def main(quick: bool) -> None:
    """Print a line for each number of lots and samples."""
    base: float | None = None
    best_route(prune(train(1)))  # imports and caches are nobody's memory
    for lots in (1, 20, 200):
        memory = report(f"{lots} lots", train(lots), base)
        base = memory if base is None else base
    report("cost, 20 lots", train(20, "cost"), base)
    for lots in (100,) if quick else (400, 2000):
        report(f"{lots} samples", sampled(lots), base)
    start = time.perf_counter()
    found = best_route(prune(train(20)))
    print(f"whole search with 20 lots, ties told apart: {time.perf_counter() - start:.2f} s, {found.solves} solves")


if __name__ == "__main__":
    main("--quick" in sys.argv)
