"""One model in one solver: solved, checked in closed form, cut, and solved again for another purpose."""

from __future__ import annotations

import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from trainopt.optimize.chance import Relief
from trainopt.optimize.index import Index
from trainopt.optimize.model import build_model
from trainopt.optimize.samples import largest
from trainopt.optimize.solve import INFINITE, Answer, Matrix, Solver, compile_model
from trainopt.optimize.times import Choice, Route, block_times, objective_of

TIE = 1e-9
"""Objectives closer than this, relative to their size, count as equal."""
Name = tuple[str, str, str, int]
"""(stage, medium, module, count) of an option."""


@dataclass(frozen=True)
class SolverOptions:
    """How HiGHS is run: `time_limit` in s over all solves (None: none); `ties` whether equal designs are told apart."""

    time_limit: float | None = None
    seed: int = 0
    threads: int = 1
    ties: bool = True


@dataclass(frozen=True)
class Cut:
    """A pick, or a route, that may not be had again: its options' names, or its (stage, medium) pairs."""

    picks: frozenset[Name] = frozenset()
    route: frozenset[tuple[str, str]] | None = None


@dataclass(frozen=True)
class Pick:
    """An answer that holds in closed form: status "optimal" or "limit" with a route and times in h, or neither."""

    answer: Answer
    route: Route | None = None
    times: tuple[float, ...] | None = None

    @property
    def proven(self) -> bool:
        """Whether it is there and proven best."""
        return self.route is not None and self.times is not None and self.answer.status == "optimal"


class Run:
    """The model of an index in HiGHS; counts its solves, and stops at `deadline` (of `time.monotonic`)."""

    def __init__(self, index: Index, options: SolverOptions, deadline: float | None, cuts: Sequence[Cut] = ()) -> None:
        self.index = index
        self.problem = index.problem
        model = build_model(index)
        self.matrix: Matrix = compile_model(model)
        self.x = [self.matrix.column[id(v)] for v in model.x.values()]
        self.y = {s: self.matrix.column[id(v)] for s, v in model.y.items()} if self.problem.may_fail else {}
        self.deadline = deadline
        self.solver = Solver(self.matrix, options.time_limit, options.seed, options.threads)
        self.solves = 0
        for cut in cuts:
            self.forbid(cut)

    @property
    def size(self) -> tuple[int, int]:
        """Rows and columns of the model."""
        rows, columns = self.matrix.A.shape
        return int(rows), int(columns)

    def forbid(self, cut: Cut) -> None:
        """Σ_{in the pick} x − Σ_{in stages it leaves out} x ≤ its stages − 1; of a route, all options of its media."""
        names = self.index.names
        if cut.route is not None:
            wanted = [k for k, name in enumerate(names) if name[:2] in cut.route]
            used, size = {stage for stage, _ in cut.route}, len(cut.route)
        else:
            wanted = [k for k, name in enumerate(names) if name in cut.picks]
            used, size = {name[0] for name in cut.picks}, len(cut.picks)
        others = [k for k, name in enumerate(names) if name[0] not in used]
        columns = [self.x[k] for k in [*wanted, *others]]
        self.solver.add_row(-INFINITE, size - 1.0, columns, [1.0] * len(wanted) + [-1.0] * len(others))

    def solve(self) -> Pick:
        """Solve until HiGHS's pick also holds in closed form; a pick its tolerance let through is cut off."""
        while True:
            if self.deadline is not None:
                self.solver.limit_time(max(self.deadline - time.monotonic(), 0.0))
            answer = self.solver.run()
            self.solves += 1
            if answer.values is None:
                return Pick(answer)
            places = [k for k, column in enumerate(self.x) if answer.values[column] > 0.5]
            route = route_of(self.index, places)
            times = block_times(self.problem, route)
            if times is not None:
                self.solver.start_from(answer.values)
                return Pick(answer, route, times)
            self.forbid(Cut(frozenset(self.index.names[k] for k in places)))

    def keep_objective(self, best: float) -> None:
        """From now on no worse than `best`."""
        places = np.flatnonzero(self.matrix.cost)
        scale = max(1.0, abs(best))
        constant = 0.0
        if self.problem.objective == "cost":
            constant = self.problem.hour_rate * sum(block.setup for block in self.problem.blocks)
        upper = (best - constant) / scale + TIE
        self.solver.add_row(-INFINITE, upper, places.tolist(), (self.matrix.cost[places] / scale).tolist())

    def ask_for_spare(self) -> list[int]:
        """min Σ_b d_b, d_b ≥ Σ D_s·x/(P_b − Pstatic_b) for every lot s kept: most spare pressure–time first."""
        self.solver.set_costs(np.zeros(len(self.matrix.cost)))
        relief = Relief(self.index) if self.problem.may_fail else None
        places = []
        for b, block in enumerate(self.problem.blocks):
            place = self.solver.add_variable(0.0, INFINITE, cost=1.0)
            places.append(place)
            nodes = self.index.nodes_of(b)
            columns = [place, *(self.x[k] for node in nodes for k in node.options)]
            # A spared lot's row gives by all that the lot could spend.
            give = None if relief is None else largest(self.index, nodes, block.head)
            lots = self.index.lots(b) if relief is None else [s for s in self.y if not relief.budget[b].implied[s]]
            for s in lots:
                demand = np.concatenate([n.candidate.options.demand[s] for n in nodes]) if nodes else np.zeros(0)
                spent = np.where(np.isfinite(demand), demand, 0.0) / block.head
                extra = ([], []) if give is None else ([self.y[s]], [float(give[s])])
                self.solver.add_row(0.0, INFINITE, [*columns, *extra[0]], [1.0, *(-spent).tolist(), *extra[1]])
        return places

    def keep_spare(self, pick: Pick, places: list[int], order: Mapping[Name, float]) -> None:
        """From now on no less spare; then a fixed order of options, so that no equal design depends on the solver."""
        assert pick.answer.values is not None
        spent = float(sum(pick.answer.values[place] for place in places))
        self.solver.add_row(-INFINITE, spent * (1.0 + TIE), places, [1.0] * len(places))
        costs = np.zeros(len(self.matrix.cost))
        costs[self.x] = [order[name] for name in self.index.names]
        self.solver.set_costs(costs)
        for place in places:
            self.solver.set_cost(place, 0.0)

    def improve(self, pick: Pick, best: float) -> Pick:
        """The next answer if it is proven and no worse than `best`, else the pick at hand."""
        other = self.solve()
        if not other.proven or other.route is None or other.times is None:
            return pick
        value = objective_of(self.problem, other.route, other.times)
        return pick if value > best + 2.0 * TIE * max(1.0, abs(best)) else other


def route_of(index: Index, places: Sequence[int]) -> Route:
    """The pick that the options at `places` (of the flat list) make."""
    blocks: list[list[Choice]] = [[] for _ in index.problem.blocks]
    chosen = sorted(places)
    for node in index.nodes:
        for k in chosen:
            if k in node.options:
                blocks[node.block].append(Choice(node.spec, node.candidate, k - node.options.start))
    return tuple(tuple(block) for block in blocks)
