"""The best pick of a problem, proven by HiGHS and checked in closed form, ties broken as in model.md, section 4."""

from __future__ import annotations

import math
import time
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from trainopt.optimize.index import SINK, SOURCE, Index, index_problem
from trainopt.optimize.model import build_model
from trainopt.optimize.solve import INFINITE, Answer, Matrix, Solver, compile_model
from trainopt.optimize.times import Choice, Route, block_times, objective_of
from trainopt.train.problem import DesignProblem, Floats

TIE = 1e-9
"""Objectives closer than this, relative to their size, count as equal."""


@dataclass(frozen=True)
class SolverOptions:
    """How HiGHS is run: `time_limit` in s over all solves (None: none); `ties` whether equal designs are told apart."""

    time_limit: float | None = None
    seed: int = 0
    threads: int = 1
    ties: bool = True


@dataclass(frozen=True)
class Found:
    """The best pick with its block times in h and the proof; `status` "optimal", "limit" or "infeasible".

    `solves` counts HiGHS runs; `rows` and `columns` are the model's size.
    """

    status: str
    route: Route | None
    times: tuple[float, ...] | None
    objective: float
    bound: float
    solves: int
    rows: int
    columns: int


def best_route(problem: DesignProblem, options: SolverOptions | None = None) -> Found:
    """Solve a problem (pruned or not; the answer is the same) to proven optimality."""
    index = index_problem(problem)
    if _hopeless(index):
        return Found("infeasible", None, None, math.inf, math.inf, 0, 0, 0)
    return _Search(index, options or SolverOptions()).run()


def _hopeless(index: Index) -> bool:
    """Whether some block has no time, a stage that must be used no option, or no route is allowed."""
    problem = index.problem
    for block in problem.blocks:
        longest = problem.longest_time(block)
        if longest <= 0.0 or problem.volume / block.max_flow > longest or block.head <= 0.0:
            return True
    served = {node.place for node in index.nodes}
    if any(not stage.optional and place not in served for place, (_, stage) in enumerate(index.stages)):
        return True
    return not index.plain and not _passable(index)


def _passable(index: Index) -> bool:
    """Whether some allowed route leads through the train."""
    reached, onward = {SOURCE}, [SOURCE]
    while onward:
        tail = onward.pop()
        heads = {head for at, head in index.arcs if at == tail} - reached
        reached |= heads
        onward.extend(heads)
    return SINK in reached


class _Search:
    """One run of the lexicographic search: its state is the solver and what it has counted."""

    def __init__(self, index: Index, options: SolverOptions) -> None:
        self.index = index
        self.problem = index.problem
        self.options = options
        self.model = build_model(index)
        self.matrix: Matrix = compile_model(self.model)
        self.x = [self.matrix.column[id(v)] for v in self.model.x.values()]
        self.t = {b: self.matrix.column.get(id(v)) for b, v in enumerate(self.model.t.values())}
        self.deadline = None if options.time_limit is None else time.monotonic() + options.time_limit
        self.solver = Solver(self.matrix, options.time_limit, options.seed, options.threads)
        self.solves = 0

    def run(self) -> Found:
        answer, route, times = self._solve()
        if route is None or times is None:
            return self._found(answer.status, None, None, answer.bound)
        bound = answer.bound
        if answer.status == "optimal" and self.options.ties:
            best = objective_of(self.problem, route, times)
            self._keep_objective(best)
            spare_rows = self._ask_for_spare()
            route, times, proven = self._improve(route, times, best)
            if proven and _may_tie(self.index):
                self._keep_spare(route, spare_rows)
                route, times, _ = self._improve(route, times, best)
        return self._found(answer.status, route, times, bound)

    def _found(self, status: str, route: Route | None, times: tuple[float, ...] | None, bound: float) -> Found:
        value = math.inf if route is None or times is None else objective_of(self.problem, route, times)
        rows, columns = self.matrix.A.shape
        # The bound is HiGHS's, in its tolerance; a proven optimum's bound is the optimum.
        return Found(status, route, times, value, value if status == "optimal" else bound, self.solves, rows, columns)

    def _solve(self) -> tuple[Answer, Route | None, tuple[float, ...] | None]:
        """Solve until HiGHS's pick also holds in closed form; a pick its tolerance let through is cut off."""
        while True:
            if self.deadline is not None:
                self.solver.limit_time(max(self.deadline - time.monotonic(), 0.0))
            answer = self.solver.run()
            self.solves += 1
            if answer.values is None:
                return answer, None, None
            places = [k for k, column in enumerate(self.x) if answer.values[column] > 0.5]
            route = route_of(self.index, places)
            times = block_times(self.problem, route)
            if times is not None:
                self.solver.start_from(answer.values)
                return answer, route, times
            self.solver.add_row(-INFINITE, len(places) - 1.0, [self.x[k] for k in places], [1.0] * len(places))

    def _improve(self, route: Route, times: tuple[float, ...], best: float) -> tuple[Route, tuple[float, ...], bool]:
        """The tie-break's pick if it is proven and no worse, else the one at hand."""
        answer, other, other_times = self._solve()
        if answer.status != "optimal" or other is None or other_times is None:
            return route, times, False
        if objective_of(self.problem, other, other_times) > best + 2.0 * TIE * max(1.0, abs(best)):
            return route, times, False
        return other, other_times, True

    def _keep_objective(self, best: float) -> None:
        """From now on no worse than the optimum."""
        places = np.flatnonzero(self.matrix.cost)
        scale = max(1.0, abs(best))
        constant = 0.0
        if self.problem.objective == "cost":
            constant = self.problem.hour_rate * sum(block.setup for block in self.problem.blocks)
        upper = (best - constant) / scale + TIE
        self.solver.add_row(-INFINITE, upper, places.tolist(), (self.matrix.cost[places] / scale).tolist())

    def _ask_for_spare(self) -> list[int]:
        """min Σ_b d_b, d_b ≥ Σ D_s·x/(P_b − Pstatic_b) for every lot s: most spare pressure–time first."""
        self.solver.set_costs(np.zeros(len(self.matrix.cost)))
        places = []
        for b, block in enumerate(self.problem.blocks):
            place = self.solver.add_variable(0.0, INFINITE, cost=1.0)
            places.append(place)
            for s in self.index.lots(b):
                columns = [place, *(self.x[k] for node in self.index.nodes_of(b) for k in node.options)]
                spent = [d for node in self.index.nodes_of(b) for d in node.candidate.options.demand[s].tolist()]
                self.solver.add_row(0.0, INFINITE, columns, [1.0, *(-d / block.head for d in spent)])
        return places

    def _keep_spare(self, route: Route, places: list[int]) -> None:
        """From now on no less spare; then a fixed order of options, so that no equal design depends on the solver."""
        spent = sum(
            float(np.sum([c.demand for c in choices], axis=0).max()) / block.head
            for block, choices in zip(self.problem.blocks, route, strict=True)
            if choices
        )
        self.solver.add_row(-INFINITE, spent * (1.0 + TIE), places, [1.0] * len(places))
        costs = np.zeros(len(self.matrix.cost))
        costs[self.x] = fixed_order(self.index)
        self.solver.set_costs(costs)
        for place in places:
            self.solver.set_cost(place, 0.0)


def route_of(index: Index, places: Sequence[int]) -> Route:
    """The pick that the options at `places` (of the flat list) make."""
    blocks: list[list[Choice]] = [[] for _ in index.problem.blocks]
    chosen = sorted(places)
    for node in index.nodes:
        for k in chosen:
            if k in node.options:
                blocks[node.block].append(Choice(node.spec, node.candidate, k - node.options.start))
    return tuple(tuple(block) for block in blocks)


def _may_tie(index: Index) -> bool:
    """Whether two nodes hold options alike in weight and pressure–time, so that designs can tie in both."""
    seen: set[tuple[float, ...]] = set()
    for node in index.nodes:
        options, head = node.candidate.options, index.problem.blocks[node.block].head
        own = {
            (round(w, 9), *(float(f"{d:.9e}") for d in column))
            for w, column in zip(options.weight.tolist(), (options.demand / head).T.tolist(), strict=True)
        }
        if own & seen:
            return True
        seen |= own
    return False


def fixed_order(index: Index) -> Floats:
    """A cost per option whose sums differ between any two picks: smaller options in earlier stages come first."""
    out = np.zeros(len(index.names))
    for n, node in enumerate(index.nodes):
        # Square roots of distinct primes are independent over the rationals, so no two picks cost the same.
        root = math.sqrt(_PRIMES[node.place % len(_PRIMES)])
        out[node.options.start : node.options.stop] = root * (1.0 + np.arange(len(node.options))) + 1e-3 * n
    return out / max(float(out.max(initial=1.0)), 1.0)


_PRIMES = (2, 3, 5, 7, 11, 13, 17, 19, 23, 29, 31, 37)
