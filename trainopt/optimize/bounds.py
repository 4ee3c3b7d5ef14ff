"""Options that no best design can have, by a bound on every design that has them: fewer columns, the same optimum.

Pressure rows of all blocks together ask Σ_i D_{i,s}/(P_b − Pstatic_b) ≤ T′ of a lot s that holds, T′ the process time
that the lines leave. Priced at λ ≥ 0 per hour (Lagrange), the least Σ w·x + λ·(Σ D·x/head − T′) over the routes is
below every design's objective, and so is the least over the routes through one option below that of every design with
it. An option falls when this passes the objective of a design at hand. With k lots that may fail, one of any k + 1
holds: the (k + 1)-th highest of the lots' bounds counts. Holders that are owned and shared save a train at most what
they could save each of its options alone: w is taken less that.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from trainopt.optimize.index import SINK, SOURCE, Index
from trainopt.optimize.run import route_of
from trainopt.optimize.times import Route, block_times, objective_of, process_time
from trainopt.train.options import take
from trainopt.train.problem import Candidate, DesignProblem, Floats, worst_but

Places = NDArray[np.intp]
_STEPS = 40
_CLOSE = 1.02
"""A price is found to within this factor: any gives a valid bound."""
_LOTS = 64
_TRIALS = 24


@dataclass(frozen=True, eq=False)
class _Priced:
    """Weights and hours of all options for the lots looked at: `weight` (lots, options), hours included where they are
    paid for; `hours` (lots, options), a large number where a lot fails; `allowed` T′ in h."""

    index: Index
    lots: Places
    weight: Floats
    hours: Floats
    allowed: float
    constant: float


_FAILS = 1e12
"""Hours that stand for a demand without end, where infinity would make a product undefined."""


def _priced(index: Index, lots: Places | None = None) -> _Priced:
    problem = index.problem
    hours = np.concatenate(
        [node.candidate.options.demand / problem.blocks[node.block].head for node in index.nodes], axis=1
    )
    line = math.fsum(block.line * problem.volume / block.head for block in problem.blocks)
    if problem.schedule == "sequential":
        allowed = process_time(problem) - line
    else:
        allowed = math.fsum(problem.longest_time(block) for block in problem.blocks) - line
    if lots is None:
        level = np.minimum(hours, _FAILS).sum(axis=1)
        lots = np.argsort(-level, kind="stable")[: max(_LOTS, 4 * (problem.may_fail + 1))]
    hours = hours[lots]
    hours = np.minimum(hours, _FAILS)
    weight, constant = np.broadcast_to(index.least_weight, hours.shape), 0.0
    if problem.objective == "cost" and problem.hour_rate > 0.0:
        weight = weight + problem.hour_rate * hours
        constant = problem.hour_rate * (line + math.fsum(block.setup for block in problem.blocks))
    return _Priced(index, lots, weight, hours, allowed, constant)


@dataclass(frozen=True, eq=False)
class _Paths:
    """Per lot the least price of a route and its hours, per option the least price of a route through it, and the flat
    options of the cheapest route, shape (lots, stages), −1 where a stage is not used."""

    least: Floats
    hours: Floats
    through: Floats
    picks: Places


def _paths(priced: _Priced, price: Floats) -> _Paths:
    """The cheapest routes at λ = `price` (lots,): forward and backward over the nodes in flow order."""
    index = priced.index
    value = priced.weight + price[:, None] * priced.hours
    lots, count = len(value), len(index.nodes)
    best, hours, picks = np.empty((lots, count)), np.empty((lots, count)), np.empty((lots, count), dtype=np.intp)
    rows = np.arange(lots)
    for n, node in enumerate(index.nodes):
        part = value[:, node.options.start : node.options.stop]
        place = part.argmin(axis=1)
        best[:, n], picks[:, n] = part[rows, place], place + node.options.start
        hours[:, n] = priced.hours[rows, picks[:, n]]
    if index.plain:
        return _plain_paths(index, value, best, hours, picks)
    return _arc_paths(index, value, best, hours, picks)


def _plain_paths(index: Index, value: Floats, best: Floats, hours: Floats, picks: Places) -> _Paths:
    """Every stage by itself."""
    rows = np.arange(len(value))
    least, spent = np.zeros(len(value)), np.zeros(len(value))
    chosen, stage_least = [], np.empty_like(best)
    for place in range(len(index.stages)):
        own = np.array([n for n, node in enumerate(index.nodes) if node.place == place])
        at = own[best[:, own].argmin(axis=1)]
        stage_least[:, own] = best[rows, at][:, None]
        least, spent = least + best[rows, at], spent + hours[rows, at]
        chosen.append(picks[rows, at])
    through = np.empty_like(value)
    for n, node in enumerate(index.nodes):
        span = slice(node.options.start, node.options.stop)
        through[:, span] = value[:, span] + (least - stage_least[:, n])[:, None]
    return _Paths(least, spent, through, np.stack(chosen, axis=1))


def _arc_paths(index: Index, value: Floats, best: Floats, hours: Floats, picks: Places) -> _Paths:
    """Shortest paths over the arcs between nodes."""
    lots, count = best.shape
    rows = np.arange(lots)
    ahead = np.full((lots, count + 1), np.inf)  # the last column is the source
    following = np.full((lots, count + 1), SINK, dtype=np.intp)
    heads: dict[int, list[int]] = {}
    for tail, head in index.arcs:
        heads.setdefault(tail, []).append(head)
    for n in [*range(count - 1, -1, -1), SOURCE]:
        for head in heads.get(n, []):
            onward = np.zeros(lots) if head == SINK else best[:, head] + ahead[:, head]
            better = onward < ahead[:, n]
            ahead[better, n], following[better, n] = onward[better], head
    behind = np.full((lots, count), np.inf)
    for tail, head in sorted(index.arcs):
        if head != SINK:
            so_far = np.zeros(lots) if tail == SOURCE else behind[:, tail] + best[:, tail]
            behind[:, head] = np.minimum(behind[:, head], so_far)
    through = np.empty_like(value)
    for n, node in enumerate(index.nodes):
        span = slice(node.options.start, node.options.stop)
        through[:, span] = value[:, span] + (behind[:, n] + ahead[:, n])[:, None]
    spent, at = np.zeros(lots), following[:, SOURCE]
    chosen = np.full((lots, len(index.stages)), -1, dtype=np.intp)
    places = np.array([node.place for node in index.nodes])
    for _ in range(len(index.stages)):
        used = at >= 0
        if not used.any():
            break
        spent[used] += hours[rows[used], at[used]]
        chosen[rows[used], places[at[used]]] = picks[rows[used], at[used]]
        at = np.where(used, following[rows, np.maximum(at, 0)], at)
    return _Paths(ahead[:, SOURCE], spent, through, chosen)


def _best_prices(priced: _Priced) -> Floats:
    """λ (lots,) near where each lot's bound is highest: where the cheapest route just takes the time allowed."""
    lots = len(priced.hours)
    scale = max(float(priced.index.weight.max(initial=0.0)) / max(priced.allowed, 1e-9), 1e-12)
    low, high = np.zeros(lots), np.full(lots, scale)
    for _ in range(_STEPS):
        slow = _paths(priced, high).hours > priced.allowed
        if not slow.any():
            break
        low, high = np.where(slow, high, low), np.where(slow, high * 8.0, high)
    for _ in range(_STEPS):
        middle = np.where(low > 0.0, np.sqrt(low * high), high / 64.0)
        slow = _paths(priced, middle).hours > priced.allowed
        low, high = np.where(slow, middle, low), np.where(slow, high, middle)
        if (high <= np.maximum(low * _CLOSE, scale * 1e-9)).all():
            break
    return high


@dataclass(frozen=True, eq=False)
class Bounds:
    """`option`: below the objective of every design with that option, shape (options,); `picks` promising ones, each
    the flat options of the stages (−1: not used), the smaller first; `lots` looked at, and their `prices` λ."""

    option: Floats
    picks: tuple[tuple[int, ...], ...]
    lots: Places
    prices: Floats


def bounds(index: Index, known: Bounds | None = None) -> Bounds:
    """Bounds on every design with each option, and picks that may be good designs.

    `known`: bounds of the same problem with more options, whose prices serve again (picks are not looked for then).
    """
    none = np.zeros(0, dtype=np.intp)
    if not index.nodes:
        return Bounds(np.zeros(0), (), none, np.zeros(0))
    known = known if known is not None and len(known.lots) else None
    priced, spared = _priced(index, None if known is None else known.lots), index.problem.may_fail
    if priced.allowed <= 0.0:
        return Bounds(np.full(len(index.names), -math.inf), (), none, np.zeros(0))
    prices = _best_prices(priced) if known is None else known.prices
    option = np.full(priced.weight.shape, -np.inf)
    for factor in (1.0, 0.5, 2.0, 0.0):
        found = _paths(priced, prices * factor)
        bound = found.through + (priced.constant - prices * factor * priced.allowed)[:, None]
        option = np.maximum(option, bound)
    if known is not None:
        return Bounds(worst_but(option, spared), (), priced.lots, prices)
    return Bounds(worst_but(option, spared), _promising(priced, spared), priced.lots, prices)


def _promising(priced: _Priced, spared: int) -> tuple[tuple[int, ...], ...]:
    """Picks for a lot as bad in every option as the worst that must hold: its cheapest routes at rising prices.

    Where lots may fail, stages may each spare others: lots that are worse by more are tried too.
    """
    picks: dict[tuple[int, ...], None] = {}
    stages = len(priced.index.stages)
    for few in sorted({spared, spared // 2, spared // stages, spared // (2 * stages), 0}):
        weight, hours = (worst_but(table, few)[None, :] for table in (priced.weight, priced.hours))
        one = replace(priced, lots=priced.lots[:1], weight=weight, hours=hours)
        prices = _best_prices(one)
        for factor in [*np.geomspace(0.7, 3.0, _TRIALS).tolist(), *np.geomspace(4.0, 1e4, _TRIALS // 2).tolist()]:
            picks[tuple(_paths(one, prices * factor).picks[0].tolist())] = None
    weights = priced.index.weight

    def total(pick: tuple[int, ...]) -> float:
        return float(sum(weights[k] for k in pick if k >= 0))

    return tuple(sorted(picks, key=lambda pick: (total(pick), pick)))


def node_bounds(index: Index) -> tuple[dict[tuple[int, str], float], float]:
    """Per (place of the stage, medium) the least price of an option, and a constant: the sum over a route is below
    every design's objective on it."""
    if not index.nodes:
        return {}, -math.inf
    priced = _priced(index)
    if priced.allowed <= 0.0:
        return {(n.place, n.candidate.medium): 0.0 for n in index.nodes}, -math.inf
    if index.problem.may_fail:
        # No single lot need hold: only what the options cost is sure.
        value, price = index.least_weight, 0.0
    else:
        prices = _best_prices(priced)
        lot = int(np.argmax(_paths(priced, prices).least - prices * priced.allowed))
        price = float(prices[lot])
        value = priced.weight[lot] + price * priced.hours[lot]
    least = {(n.place, n.candidate.medium): float(value[n.options.start : n.options.stop].min()) for n in index.nodes}
    return least, priced.constant - price * priced.allowed


def first_design(index: Index, found: Bounds) -> tuple[float, Route | None]:
    """A good design found without a solver and its objective, an upper bound on the optimum; infinite: none found."""
    best, value = None, math.inf
    for picks in found.picks:
        own = _value(index, picks)
        if own < value:
            best, value = picks, own
            if index.problem.objective == "area":
                break  # the picks that follow weigh no less
    if best is None:
        return value, None
    better, value = _improved(index, list(best), value)
    return value, route_of(index, better)


def _value(index: Index, picks: Sequence[int]) -> float:
    route = route_of(index, picks)
    times = block_times(index.problem, route)
    return math.inf if times is None else objective_of(index.problem, route, times)


def _improved(index: Index, picks: list[int], value: float) -> tuple[list[int], float]:
    """Smaller options one at a time, the largest gain first, as long as every limit holds."""
    spans = {k: node.options for node in index.nodes for k in picks if k in node.options}
    improved = True
    while improved:
        improved = False
        steps = []
        for place, k in enumerate(picks):
            cheaper = [c for c in spans[k] if index.weight[c] < index.weight[k]] if k >= 0 else []
            if cheaper:
                best = max(cheaper, key=lambda c: float(index.weight[c]))
                steps.append((float(index.weight[best] - index.weight[k]), place, best))
        for _, place, option in sorted(steps):
            trial = [*picks[:place], option, *picks[place + 1 :]]
            own = _value(index, trial)
            if own < value:
                spans[option] = spans[picks[place]]
                picks, value, improved = trial, own, True
                break
    return picks, value


def within(index: Index, option_bounds: Floats, ceiling: float) -> DesignProblem:
    """The problem with the options only whose bound does not pass `ceiling`."""
    room = 1e-7 * max(1.0, abs(ceiling))
    keep = option_bounds <= ceiling + room if math.isfinite(ceiling) else np.full(len(option_bounds), True)
    kept = {
        (node.block, node.stage, node.candidate.medium): np.flatnonzero(keep[node.options.start : node.options.stop])
        for node in index.nodes
    }

    def left(b: int, i: int, one: Candidate) -> Candidate:
        places = kept.get((b, i, one.medium))
        few = places is not None and len(places) < len(one.options)
        return replace(one, options=take(one.options, places)) if few and places is not None else one

    problem = index.problem
    return replace(problem, blocks=tuple(
        replace(block, stages=tuple(
            replace(stage, candidates=tuple(left(b, i, c) for c in stage.candidates))
            for i, stage in enumerate(block.stages)
        ))
        for b, block in enumerate(problem.blocks)
    ))  # fmt: skip
