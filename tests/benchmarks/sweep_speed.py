"""How much faster a sweep is than as many designs, one after the other in one process; prints ratios.

    python tests/benchmarks/sweep_speed.py [SCENARIO]

The designs it is held against are given twice: as calls of `design` with a case, curves fitted in each, and
spared that, each with its problem ready made from curves fitted once. The sweep fits its curves once, which its
time includes.
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Callable, Sequence
from dataclasses import replace
from pathlib import Path

import numpy as np

import trainopt
from trainopt.files import Case, set_field
from trainopt.optimize.design import Prepared, prepare
from trainopt.train.build import build_problem

ROOT = Path(__file__).parents[2]
SAMPLE = 40
"""Designs that are timed to stand for all."""


def seconds(work: Callable[[], object], repeats: int = 3) -> float:
    """The best of a few runs, s."""
    best = float("inf")
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        best = min(best, time.perf_counter() - start)
    return best


def one_by_one(case: Case, points: Sequence[dict[str, float]]) -> tuple[float, float]:
    """Mean time of a design at some of the points, s: of a case, and of a problem ready made."""
    prepared = prepare(case)
    sample = [points[k] for k in np.linspace(0, len(points) - 1, SAMPLE).round().astype(int)]
    cases = []
    for point in sample:
        at = case
        for path, value in point.items():
            at = set_field(at, path, value)
        cases.append(at)

    def work() -> None:
        for at in cases:
            problem = build_problem(at, prepared.curves)
            trainopt.design(Prepared(prepared.curves, problem, prepared.notices, prepared.inputs))

    whole = seconds(lambda: [trainopt.design(at) for at in cases[:: SAMPLE // 8]], 2) / len(cases[:: SAMPLE // 8])
    return whole, seconds(work, 2) / SAMPLE


def told(what: str, count: int, whole: float, each: tuple[float, float]) -> None:
    """Print one line of ratios."""
    print(
        f"{what}: {whole:.3f} s; {count} designs / sweep = {count * each[0] / whole:.0f} "
        f"({1e3 * each[0]:.0f} ms each), curves ready {count * each[1] / whole:.1f} ({1e3 * each[1]:.0f} ms each)"
    )


def first_block(case: Case) -> Case:
    """The case with its first block alone."""
    scenario = case.scenario.model_copy(update={"blocks": case.scenario.blocks[:1]})
    scenario.__pydantic_private__ = case.scenario.__pydantic_private__
    return replace(case, scenario=scenario)


def command(*arguments: str) -> float:
    """A whole process, s."""
    run = [sys.executable, "-m", "trainopt", *arguments]
    return seconds(lambda: subprocess.run(run, check=True, capture_output=True, cwd=ROOT))


def main() -> None:
    """Print the three ratios of the demo, or of the scenario named."""
    path = Path(sys.argv[1]) if len(sys.argv) > 1 else ROOT / "scenarios" / "harvest.yaml"
    case = trainopt.load_case(path)
    volume, hours = case.scenario.batch.volume, case.scenario.batch.time
    cores = os.cpu_count() or 1

    block = first_block(case)
    volumes, times = np.linspace(0.4 * volume, 1.6 * volume, 50), np.linspace(0.5 * hours, 1.3 * hours, 50)
    vary = [f"batch.volume={volumes[0]} L..{volumes[-1]} L/50", f"batch.time={times[0]} h..{times[-1]} h/50"]
    cells = [{"batch.volume": v, "batch.time": t} for v in volumes.tolist() for t in times.tolist()]
    each = one_by_one(block, cells)
    for changes, what in ((False, "cells alone"), (None, "with changes along the time")):
        whole = seconds(lambda changes=changes: trainopt.sweep(block, vary, changes=changes))  # type: ignore[misc]
        told(f"map 50 x 50, first block, {what}", 2500, whole, each)

    vary = [f"batch.volume={0.4 * volume} L..{1.4 * volume} L/200"]
    points = [{"batch.volume": v} for v in np.linspace(0.4 * volume, 1.4 * volume, 200).tolist()]
    each = one_by_one(case, points)
    for changes, what in ((False, "cells alone"), (None, "with changes")):
        whole = seconds(lambda changes=changes: trainopt.sweep(case, vary, workers=None, changes=changes))  # type: ignore[misc]
        told(f"line of 200, {len(case.scenario.blocks)} blocks, {cores} cores, {what}", 200, whole, each)

    sweep = command("sweep", str(path), "--vary", f"batch.volume={volume} L", "--no-changes", "--json")
    design = command("design", str(path), "--json")
    print(f"start-up: sweep of one cell {sweep:.2f} s, design {design:.2f} s; sweep / design = {sweep / design:.2f}")


if __name__ == "__main__":
    main()
