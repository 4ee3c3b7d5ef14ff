"""The design as one plain matrix of raw numbers, dominated options included, for exact solvers of any kind.

Written again from the algebra in models/README.md; nothing here imports trainopt. Routes are not a network here but
what they mean: a medium with `after` may not follow another in the nearest used stage upstream.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from independent import INFINITE, Option, Spec, lot_names, options_of, shared_holders, value_of
from scipy.optimize import Bounds, LinearConstraint, milp
from scipy.sparse import csr_array

Terms = dict[int, float]


@dataclass
class Plain:
    """min Σ cost·v; rows least ≤ Σ value·v ≤ most. Columns: binaries (one per option), the blocks' times in h, and for
    cost the shared holders in use of those that are owned."""

    options: list[tuple[int, int, Option]]
    """Stage, block and option of each binary."""
    cost: list[float]
    low: list[float]
    high: list[float]
    rows: list[tuple[Terms, float, float]] = field(default_factory=list)

    @property
    def binaries(self) -> int:
        """How many of the columns are binary: the first ones."""
        return len(self.options)

    def add(self, terms: Terms, least: float, most: float) -> None:
        self.rows.append((terms, least, most))


Solve = Callable[[Plain], list[float] | None]
"""A solver: the values of an optimum's columns, None where the rows cannot be met."""


def plain_model(spec: Spec) -> Plain | None:
    """The matrix of a spec; None where a pump or setup leaves a block no time."""
    stages = [(b, st, options_of(spec, block, st)) for b, block in enumerate(spec.blocks) for st in block["stages"]]
    options = [(place, b, o) for place, (b, _, own) in enumerate(stages) for o in own]
    n, blocks = len(options), len(spec.blocks)
    bounds = time_bounds(spec)
    if any(most < least for least, most in bounds):
        return None
    area = spec.objective == "area"
    model = Plain(
        options,
        [o.area if area else o.cost for _, _, o in options] + [0.0 if area else spec.hour] * blocks,
        [0.0] * n + [low for low, _ in bounds],
        [1.0] * n + [high for _, high in bounds],
    )
    for place, (_, stage, _) in enumerate(stages):
        model.add(dict.fromkeys(_of(model, place), 1.0), 0.0 if stage["optional"] else 1.0, 1.0)
        for medium, after in stage["media"]:
            if after is not None:
                _follows(model, place, medium, after)
    for b in range(blocks):
        here = [(k, p, o) for k, (p, at, o) in enumerate(options) if at == b]
        for s in range(max(len(lot_names(spec)), 1)):
            pressure_rows(model, spec, b, here, s, n + b)
        for k, _, o in here:
            model.add({k: o.tau, n + b: -1.0}, -INFINITE, 0.0)
    if spec.schedule == "sequential":
        setups = sum(block["setup"] for block in spec.blocks)
        model.add({n + b: 1.0 for b in range(blocks)}, -INFINITE, spec.time - setups)
    if not area:
        _share_holders(model, spec)
    return model


def _share_holders(model: Plain, spec: Spec) -> None:
    """r ≤ Σ number·x, 0 ≤ r ≤ owned, at minus the price per batch, for each shared holder."""
    for name, h in shared_holders(spec).items():
        r = len(model.cost)
        model.cost.append(-h["price"] / h["batches"])
        model.low.append(0.0)
        model.high.append(float(h["owned"]))
        numbers = [(k, o.holder) for k, (_, _, o) in enumerate(model.options)]
        model.add({r: 1.0, **{k: -float(one[1]) for k, one in numbers if one and one[0] == name}}, -INFINITE, 0.0)


def _of(model: Plain, place: int, medium: str | None = None) -> list[int]:
    return [k for k, (p, _, o) in enumerate(model.options) if p == place and medium in (None, o.medium)]


def _follows(model: Plain, place: int, medium: str, after: list[str]) -> None:
    """u + v ≤ 1 + Σ used between, v any other medium upstream; and u ≤ Σ used upstream."""
    own = dict.fromkeys(_of(model, place, medium), 1.0)
    if not own:
        return
    for before in range(place):
        between = {k: -1.0 for p in range(before + 1, place) for k in _of(model, p)}
        others = {k: 1.0 for k in _of(model, before) if model.options[k][2].medium not in after}
        if others:
            model.add({**own, **others, **between}, -INFINITE, 1.0)
    model.add({**own, **{k: -1.0 for p in range(place) for k in _of(model, p)}}, -INFINITE, 0.0)


def pressure_rows(model: Plain, spec: Spec, b: int, here: list[tuple[int, int, Option]], s: int, time: int) -> None:
    """Budget and ratings of one block and lot; `time` is the column of its time."""
    block = spec.blocks[b]
    room, line = block["pressure"] - block["static"], block["line"] * spec.volume
    model.add({**{k: o.demand[s] / room for k, _, o in here}, time: -1.0}, -INFINITE, -line / room)
    for k, p, o in here if block["operation"] == "constant-flow" else ():
        m = spec.media[o.medium]
        if m["dp"] is not None:
            model.add({k: o.demand[s] / m["dp"], time: -1.0}, -INFINITE, 0.0)
        if m["inlet"] is not None and m["inlet"] < block["pressure"]:
            free = m["inlet"] - block["static"]
            # The budget holds the left side to (P − P_static)·t: more than that at the longest time is no limit.
            big = room / free * model.high[time]
            below = {j: q.demand[s] / free for j, at, q in here if at > p}
            model.add({**below, k: o.demand[s] / free + big, time: -1.0}, -INFINITE, big - line / free)


def time_bounds(spec: Spec) -> list[tuple[float, float]]:
    """Shortest and longest time of every block by its pump and the batch time."""
    bounds = []
    setups = sum(block["setup"] for block in spec.blocks)
    for block in spec.blocks:
        slow, fast = block["pump"] or (None, None)
        most = spec.time - (setups if spec.schedule == "sequential" else block["setup"])
        bounds.append((spec.volume / fast if fast else 0.0, min(most, spec.volume / slow) if slow else most))
    return bounds


def best_by(spec: Spec, solve: Solve) -> float:
    """The least objective by a solver; infinite where there is none.

    The solver's pick is valued in closed form, and ruled out where only the solver's tolerance let it through.
    """
    model = plain_model(spec)
    while model is not None:
        values = solve(model)
        if values is None:
            break
        picked = [k for k in range(model.binaries) if values[k] > 0.5]
        blocks: list[list[Option]] = [[] for _ in spec.blocks]
        for k in picked:
            blocks[model.options[k][1]].append(model.options[k][2])
        value = value_of(spec, blocks)
        if math.isfinite(value):
            return value
        rest = {k: -1.0 for k in range(model.binaries) if k not in picked}
        model.add({**rest, **dict.fromkeys(picked, 1.0)}, -INFINITE, len(picked) - 1.0)
    return INFINITE


def scipy_solve(model: Plain) -> list[float] | None:
    """By scipy.optimize.milp."""
    entries = [(r, c, v) for r, (terms, _, _) in enumerate(model.rows) for c, v in terms.items()]
    at, column, value = zip(*entries, strict=True)
    matrix = csr_array((value, (at, column)), shape=(len(model.rows), len(model.cost)))
    answer: Any = milp(
        np.array(model.cost),
        constraints=LinearConstraint(matrix, [low for _, low, _ in model.rows], [high for _, _, high in model.rows]),
        integrality=np.arange(len(model.cost)) < model.binaries,
        bounds=Bounds(model.low, model.high),
        options={"mip_rel_gap": 0.0},
    )
    # 0: optimal, 2: infeasible; anything else is no answer.
    assert answer.status in (0, 2), answer.message
    return None if answer.x is None else answer.x.tolist()
