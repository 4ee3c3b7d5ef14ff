"""A sweep: the design in every cell of one or two axes, on as many processes as are worth their start."""

from __future__ import annotations

import itertools
import math
import multiprocessing
import os
import signal
import time
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import Future, ProcessPoolExecutor, as_completed
from pathlib import Path

from trainopt.files import Case, field_dimension
from trainopt.optimize.design import fit_curves
from trainopt.study.axis import Axis, parse_axis
from trainopt.study.journal import Journal, fingerprint
from trainopt.study.plan import Found, Job, Plan
from trainopt.study.results import Change, Sweep, SweepCell
from trainopt.units import CANONICAL

MOST_AXES = 2
"""Axes that a picture and a table can show."""

Progress = Callable[[int, int], None]
"""Told how many jobs are done, of how many."""

_WORTH = 4.0
"""Seconds of work left from which more processes pay for their start."""

_TRIAL = 0.4
"""Seconds after which the work left is estimated."""


def axes_of(case: Case, texts: Sequence[str]) -> tuple[Axis, ...]:
    """The axes that `texts` describe ("batch.volume=500 L..5000 L/19").

    Raises ValueError for values that make no sense and `InputError` for a field that the case does not have.
    """

    def dimension_of(field: str) -> str | None:
        dimension = field_dimension(case, field)
        return dimension if dimension in CANONICAL else None

    axes = tuple(parse_axis(text, dimension_of) for text in texts)
    if not axes:
        raise ValueError("nothing varies; expected an axis such as 'batch.volume=500 L..5000 L/19'")
    if len({axis.field for axis in axes}) < len(axes):
        raise ValueError("a field varies twice; expected different fields")
    return axes


def sweep(
    case: Case,
    vary: Sequence[str | Axis],
    objective: str | None = None,
    workers: int | None = 1,
    journal: Path | str | None = None,
    progress: Progress | None = None,
    changes: bool | None = None,
) -> Sweep:
    """The design in every cell of the axes `vary`, exactly as `design` gives it, cell by cell.

    `objective` ("area", "cost") overrides the scenario's. `workers`: processes to use at most (None: all
    cores); with more than one, a script needs the usual `if __name__ == "__main__":`. `journal`: a file that
    keeps what is done; given again, the sweep goes on from there. `changes`: locate where the pick changes, to
    0.1 % of each axis; None: on one axis, or of two along the batch time alone, where it is cheap. Ctrl-C ends
    the sweep with the cells that are done (`complete` False). Raises ValueError for an axis that makes no sense
    and `InputError` for what is wrong in the files.
    """
    given = [axis if isinstance(axis, Axis) else None for axis in vary]
    texts = [text for text in vary if isinstance(text, str)]
    parsed = iter(axes_of(case, texts) if texts else ())
    axes = tuple(axis if axis is not None else next(parsed) for axis in given)
    if not axes:
        axes_of(case, [])
    everywhere = changes if changes is not None else len(axes) == 1
    plan = Plan(case, fit_curves(case), axes, objective, locate_time=changes is not False)
    book = None if journal is None else Journal(Path(journal), fingerprint(case, axes, objective, changes))
    runner = _Runner(plan, workers or os.cpu_count() or 1, book, progress)
    try:
        complete = runner.run(everywhere)
    finally:
        if book is not None:
            book.close()
    return _result(plan, runner, complete)


def _result(plan: Plan, runner: _Runner, complete: bool) -> Sweep:
    cells = {cell.at: cell for found in runner.found.values() for cell in found.cells}
    changed = [change for found in runner.found.values() for change in found.changes]
    scenario = plan.case.scenario
    order = {axis.field: k for k, axis in enumerate(plan.axes)}
    return Sweep(
        scenario=scenario.scenario,
        kind=plan.objective or scenario.objective,
        currency=plan.case.workspace.catalog.currency,
        axes=plan.axes,
        cells=tuple(
            cells.get(at, SweepCell(at, "not-computed", reason="the sweep was stopped before"))
            for at in itertools.product(*(axis.values for axis in plan.axes))
        ),
        changes=tuple(sorted(changed, key=lambda c: (order[c.axis], c.others, c.between))),
        complete=complete,
        blocks=tuple(block.block for block in scenario.blocks),
        inputs=plan.case.inputs(),
    )


class _Runner:
    """Does the jobs of a plan: alone at first, with more processes once they are worth their start."""

    def __init__(self, plan: Plan, workers: int, journal: Journal | None, progress: Progress | None) -> None:
        self.plan = plan
        self.workers = workers
        self.journal = journal
        self.progress = progress
        self.found: dict[str, Found] = {}
        self.pool: ProcessPoolExecutor | None = None
        self.total = 0

    def run(self, everywhere: bool) -> bool:
        """All groups, then all intervals; False where Ctrl-C came in between."""
        try:
            self._all(list(self.plan.groups()))
            if everywhere:
                cells = {cell.at: cell for found in self.found.values() for cell in found.cells}
                axes = [k for k in range(len(self.plan.axes)) if k != self.plan.time_axis]
                self._all([job for k in axes for job in self.plan.intervals(cells, k)])
        except KeyboardInterrupt:
            return False
        finally:
            if self.pool is not None:
                self.pool.shutdown(wait=True, cancel_futures=True)
        return True

    def _all(self, jobs: Sequence[Job]) -> None:
        self.total += len(jobs)
        left: list[Job] = []
        for job in jobs:
            done = self.journal.done.get(job.key) if self.journal is not None else None
            if done is not None:
                self.found[job.key] = done
            else:
                left.append(job)
        for job, found in self._results(left):
            self._keep(job, found)

    def _keep(self, job: Job, found: Found) -> None:
        self.found[job.key] = found
        if self.journal is not None:
            self.journal.add(job.key, found)
        if self.progress is not None:
            self.progress(len(self.found), self.total)

    def _results(self, jobs: Sequence[Job]) -> Iterator[tuple[Job, Found]]:
        """Jobs with what they found, as they end."""
        start, alone = time.perf_counter(), 0
        while alone < len(jobs) and self.pool is None:
            yield jobs[alone], self.plan.run(jobs[alone])
            alone += 1
            spent = time.perf_counter() - start
            if self.workers > 1 and spent > _TRIAL and spent / alone * (len(jobs) - alone) > _WORTH:
                self.pool = _pool(self.plan, self.workers)
        yield from self._shared(jobs[alone:])

    def _shared(self, jobs: Sequence[Job]) -> Iterator[tuple[Job, Found]]:
        if not jobs:
            return
        assert self.pool is not None
        size = max(1, math.ceil(len(jobs) / (8 * self.workers)))
        parts = [tuple(jobs[k : k + size]) for k in range(0, len(jobs), size)]
        futures: dict[Future[list[Found]], tuple[Job, ...]] = {self.pool.submit(_work, part): part for part in parts}
        for future in as_completed(futures):
            yield from zip(futures[future], future.result(), strict=True)


_PLAN: Plan | None = None
"""The plan of a worker process."""


def _pool(plan: Plan, workers: int) -> ProcessPoolExecutor:
    # Spawned, not forked: the solver and the numeric libraries may hold threads.
    context = multiprocessing.get_context("spawn")
    return ProcessPoolExecutor(workers, mp_context=context, initializer=_begin, initargs=(plan,))


def _begin(plan: Plan) -> None:
    global _PLAN
    # Ctrl-C is the parent's to handle.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    _PLAN = plan


def _work(jobs: tuple[Job, ...]) -> list[Found]:
    assert _PLAN is not None
    return [_PLAN.run(job) for job in jobs]


def changes_along(result: Sweep, field: str) -> tuple[Change, ...]:
    """Changes of the pick along one axis."""
    return tuple(change for change in result.changes if change.axis == field)
