"""Designs beside the best one: the next best picks within a gap, and the best design of every other allowed route."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import replace

from trainopt.optimize.bounds import bounds, node_bounds, within
from trainopt.optimize.describe import Picked, cost_parts, total_area
from trainopt.optimize.even_split import routes
from trainopt.optimize.index import SINK, SOURCE, Index, Node, index_problem
from trainopt.optimize.margins import common_safety_factor
from trainopt.optimize.restate import picks_of
from trainopt.optimize.search import TIE, Clock, Cut, Found, SolverOptions, best_route, fixed_order, searched
from trainopt.optimize.times import Route, block_bounds
from trainopt.train.build import prune
from trainopt.train.problem import DesignProblem, Stage
from trainopt.train.results import Alternatives, NearDesign, RouteDesign, RouteDesigns, SpareBlock

ROUTES = 12
"""How many other routes are designed for at most: the best ones."""
_TOO_MANY = 20_000


def near_designs(problem: DesignProblem, best: Found, count: int, gap: float, options: SolverOptions) -> Alternatives:
    """The `count` best distinct picks of a problem (unpruned) whose objective is within `gap` of `best`, that included.

    Proven in order: each is the best pick that is none of those before it. Options that another of the same medium
    beats take part: what the model does not know may speak for them.
    """
    assert best.route is not None
    assert best.times is not None
    ceiling = best.objective + gap * abs(best.objective)
    index = index_problem(problem)
    known = bounds(index)
    few = index_problem(within(index, known.option, ceiling))
    order = dict(zip(index.names, fixed_order(index).tolist(), strict=True))
    designs = [_near(problem, best.route, best.times, best.objective)]
    cuts = [_cut(best.route)]
    status, clock = "optimal", Clock(options)
    while len(designs) < count:
        found = searched(few, clock.left(), order, cuts, known)
        status = found.status
        if found.route is None or found.times is None or found.objective > ceiling + TIE * max(1.0, abs(ceiling)):
            break
        if found.status != "optimal":
            break
        designs.append(_near(problem, found.route, found.times, found.objective))
        cuts.append(_cut(found.route))
    return Alternatives(gap, count, status != "limit", tuple(designs))


def _cut(route: Route) -> Cut:
    return Cut(frozenset((p.stage, p.medium, p.module, p.count) for p in picks_of(route)))


def _near(problem: DesignProblem, route: Route, times: tuple[float, ...], objective: float) -> NearDesign:
    shown = Picked(problem, problem, route, times).held
    blocks, least = [], []
    for block, choices, time in zip(shown.problem.blocks, shown.route, times, strict=True):
        needed = block_bounds(block, choices, problem.volume)
        spare = block.head * (1.0 - needed.pressure / time) if time > 0.0 else block.head
        blocks.append(SpareBlock(block.name, time, max(spare, 0.0)))
        least.append(needed.least + block.setup)
    spent = math.fsum(least) if problem.schedule == "sequential" else max(least)
    return NearDesign(
        objective=objective,
        area=total_area(route),
        cost=cost_parts(problem, route, times).total,
        picks=picks_of(route),
        blocks=tuple(blocks),
        spare_time=max(problem.time - spent, 0.0),
        safety_factor=common_safety_factor(problem, route, times),
    )


def route_designs(problem: DesignProblem, best: Found, options: SolverOptions) -> RouteDesigns:
    """The best design of every other allowed route of a pruned problem, the best `ROUTES` of them, proven.

    Routes are taken in the order of a bound on their designs; once the next bound is above what has been found, the
    rest can be left.
    """
    assert best.route is not None
    index = _all_nodes(problem)
    own = tuple((p.stage, p.medium) for p in picks_of(best.route))
    allowed = _number_of_routes(index) - 1
    if allowed > _TOO_MANY:
        return RouteDesigns((), allowed, False)
    others = [r for r in _bounded(index) if _media(r[1]) != own]
    others.sort(key=lambda r: (r[0], _media(r[1])))
    clock = Clock(options)
    designs: list[RouteDesign] = []
    for bound, nodes in others:
        worst = designs[ROUTES - 1].objective if len(designs) >= ROUTES else None
        if len(designs) >= ROUTES and (worst is None or bound > worst):
            break
        found = _route_design(problem, nodes, clock.left())
        if found is None:
            return RouteDesigns(tuple(designs[:ROUTES]), allowed, False)
        designs.append(found)
        designs.sort(key=lambda d: (math.inf if d.objective is None else d.objective, d.media))
    return RouteDesigns(tuple(designs[:ROUTES]), allowed, True)


def _number_of_routes(index: Index) -> int:
    """How many routes the arcs allow, counted without going through them."""
    onward: dict[int, int] = {SINK: 1}
    heads: dict[int, list[int]] = {}
    for tail, head in index.arcs:
        heads.setdefault(tail, []).append(head)
    for n in [*range(len(index.nodes) - 1, -1, -1), SOURCE]:
        onward[n] = sum(onward.get(head, 0) for head in heads.get(n, []))
    return onward[SOURCE]


def _all_nodes(problem: DesignProblem) -> Index:
    from trainopt.optimize.levers import all_candidates

    return all_candidates(problem)


def _media(nodes: tuple[Node, ...]) -> tuple[tuple[str, str], ...]:
    return tuple((node.spec.name, node.candidate.medium) for node in nodes)


def _bounded(index: Index) -> Iterator[tuple[float, tuple[Node, ...]]]:
    """Every allowed route with a bound on its designs; infinite where a medium has no option."""
    least, constant = node_bounds(index_problem(index.problem))
    for nodes in routes(index):
        parts = [least.get((node.place, node.candidate.medium), math.inf) for node in nodes]
        yield math.fsum(parts) + constant if all(map(math.isfinite, parts)) else math.inf, nodes


def _route_design(problem: DesignProblem, nodes: tuple[Node, ...], options: SolverOptions) -> RouteDesign | None:
    """The best design of one route; None where a limit stopped the solver before it was proven."""
    used = {(node.block, node.stage): node.candidate.medium for node in nodes}

    def only(b: int, i: int, stage: Stage) -> Stage:
        medium = used.get((b, i))
        # A stage that the route leaves out stays, with nothing on offer; one that it uses may not be left out.
        candidates = tuple(c for c in stage.candidates if c.medium == medium)
        return replace(stage, optional=medium is None, candidates=candidates)

    blocks = tuple(
        replace(block, stages=tuple(only(b, i, s) for i, s in enumerate(block.stages)))
        for b, block in enumerate(problem.blocks)
    )
    narrowed = prune(replace(problem, blocks=blocks))
    found = best_route(narrowed, options)
    if found.status == "limit":
        return None
    if found.route is None or found.times is None:
        return RouteDesign(_media(nodes), None, None, None, ())
    return RouteDesign(
        media=_media(nodes),
        objective=found.objective,
        area=total_area(found.route),
        cost=cost_parts(narrowed, found.route, found.times).total,
        picks=picks_of(found.route),
    )
