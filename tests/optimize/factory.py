"""Design problems made by hand, in plain numbers: no files and no fits. For the tests of this room and any other."""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from random import Random

import numpy as np

from trainopt.curves.curve import LotCurve
from trainopt.optimize.restate import refilled
from trainopt.train.problem import Block, Candidate, DesignProblem, ModuleSize, Options, Stage

Lot = tuple[float, float]


@dataclass(frozen=True)
class Medium:
    """One medium: law and parameters (bar/LMH, m2/L), (ρ, κ) by lot, sizes (name, m², price, most), and its limits."""

    name: str
    law: str = "intermediate"
    parameters: tuple[float, ...] = (1e-3, 5e-3)
    lots: tuple[Lot, ...] = ((1.0, 1.0),)
    sizes: tuple[tuple[str, float, float, int], ...] = (("m", 1.0, 100.0, 40),)
    cap: float = 1e6
    cap_reason: str = "loading-limit"
    flux: float = math.inf
    differential_pressure: float = math.inf
    inlet_pressure: float = math.inf
    scale_up: float = 1.0
    after: tuple[str, ...] | None = None
    further_cap: float = math.inf


def flat(name: str, resistance: float, **limits: object) -> Medium:
    """A medium that does not foul: R bar/LMH at any loading."""
    return Medium(name, "cake", (resistance, 0.0), **limits)  # type: ignore[arg-type]


def stage(name: str, *media: Medium, optional: bool = False) -> tuple[str, tuple[Medium, ...], bool]:
    return name, media, optional


def block(
    name: str,
    *stages: tuple[str, tuple[Medium, ...], bool],
    pressure: float = 2.0,
    operation: str = "constant-flow",
    static: float = 0.0,
    line: float = 0.0,
    setup: float = 0.0,
    min_flow: float = 0.0,
    max_flow: float = math.inf,
) -> Block:
    """A block whose candidates know their curves and sizes; `problem` fills in the options."""
    made = tuple(Stage(n, optional, tuple(_candidate(m) for m in sorted(media, key=lambda m: m.name)))
                 for n, media, optional in stages)  # fmt: skip
    return Block(name, operation, pressure, static, line, setup, min_flow, max_flow, made)


def problem(
    *blocks: Block,
    volume: float = 1000.0,
    time: float = 5.0,
    schedule: str = "sequential",
    objective: str = "area",
    hour_rate: float = 0.0,
    safety_factor: float = 1.0,
) -> DesignProblem:
    """The problem with the options that the caps allow."""
    lots = max((len(c.curves) for b in blocks for s in b.stages for c in s.candidates), default=1)
    empty = DesignProblem(
        "by hand",
        volume,
        time,
        schedule,
        objective,
        hour_rate,
        safety_factor,
        tuple(f"lot-{k:02d}" for k in range(lots)),
        (),
        "EUR",
    )
    return replace(empty, blocks=tuple(_filled(empty, one) for one in blocks))


def _filled(whole: DesignProblem, one: Block) -> Block:
    def weighed(candidate: Candidate) -> Candidate:
        offer = candidate.on_offer
        assert offer is not None
        weight = offer.area if whole.objective == "area" else offer.modules_cost
        return refilled(whole, one, replace(candidate, on_offer=replace(offer, weight=weight)))

    stages = tuple(replace(s, candidates=tuple(weighed(c) for c in s.candidates)) for s in one.stages)
    return replace(one, stages=stages)


def _candidate(m: Medium) -> Candidate:
    offer = _offer(m)
    curves = tuple(LotCurve(m.law, m.parameters, rho, kappa) for rho, kappa in m.lots)
    return Candidate(
        m.name, None if m.after is None else frozenset(m.after), m.differential_pressure, m.inlet_pressure, m.flux,
        m.cap, m.cap_reason, m.scale_up, curves, offer, (),
        tuple(ModuleSize(f"{m.name}-{n}", a, 1, most) for n, a, _, most in m.sizes), offer,
        LotCurve(m.law, m.parameters), m.cap * max(kappa for _, kappa in m.lots), m.further_cap,
    )  # fmt: skip


def _offer(m: Medium) -> Options:
    rows = [(f"{m.name}-{n}", k, a * k, p * k) for n, a, p, most in m.sizes for k in range(1, most + 1)]
    area = np.array([row[2] for row in rows])
    price, zero = np.array([row[3] for row in rows]), np.zeros(len(rows))
    return Options(
        tuple(row[0] for row in rows), np.array([row[1] for row in rows]), (None,) * len(rows), area, price, zero, zero,
        zero, area, zero, zero, np.zeros((0, len(rows))),
    )  # fmt: skip


# --- random trains ---


def random_problem(
    seed: int,
    *,
    blocks: int | None = None,
    stages: int = 2,
    most: int = 4,
    lots: int | None = None,
    routes: bool = True,
    pressure: bool = False,
    hours: bool = True,
) -> DesignProblem:
    """A random train with small option sets; everything about it follows from the seed."""
    r = Random(seed)
    number = blocks or r.choice([1, 1, 2])
    count = lots or r.randint(1, 3)
    factors = [(r.uniform(0.8, 1.3), r.uniform(0.7, 1.4)) for _ in range(count)]
    made, seen = [], []
    for b in range(number):
        chosen = []
        operation = "constant-pressure" if pressure and r.random() < 0.5 else "constant-flow"
        for s in range(r.randint(1, stages)):
            media = []
            for k in range(r.randint(1, 2)):
                after = tuple(r.sample(seen, r.randint(1, len(seen)))) if routes and seen and r.random() < 0.3 else None
                spread = [(x * r.uniform(0.9, 1.1), y * r.uniform(0.9, 1.1)) for x, y in factors]
                one = _random_medium(r, f"w{b}{s}{k}", tuple(spread), most, after)
                if operation == "constant-pressure":  # ratings below its pressure are an error in the input
                    one = replace(one, differential_pressure=math.inf, inlet_pressure=math.inf)
                media.append(one)
            chosen.append(stage(f"s{b}{s}", *media, optional=routes and r.random() < 0.2))
            seen += [m.name for m in media]
        made.append(
            block(
                f"b{b}", *chosen, pressure=r.uniform(0.6, 2.5), operation=operation, static=r.choice([0.0, 0.05]),
                line=r.choice([0.0, 2e-5]), setup=r.choice([0.0, 0.4]), min_flow=r.choice([0.0, 0.0, 40.0]),
                max_flow=r.choice([math.inf, 2500.0]),
            )
        )  # fmt: skip
    return problem(
        *made, volume=r.uniform(300, 2000), time=r.uniform(2.5, 10), schedule=r.choice(["sequential", "side-by-side"]),
        objective=r.choice(["area", "cost"]), hour_rate=r.choice([0.0, 90.0]) if hours else 0.0,
        safety_factor=r.choice([1.0, 1.3]),
    )  # fmt: skip


def random_law(r: Random, tested: float) -> tuple[str, tuple[float, ...]]:
    """A law with parameters that foul strongly by the loading `tested` L/m²."""
    R0 = 10 ** r.uniform(-3.5, -2.5)
    law = r.choice(["cake", "intermediate", "standard", "complete", "quadratic", "hermia"])
    if law == "quadratic":  # dips first in some
        return law, (R0, R0 * r.uniform(-0.3, 1.0) / tested, R0 * r.uniform(0.3, 3.0) / tested**2)
    reach = {"cake": 5.0, "intermediate": 2.0, "standard": 1.2, "complete": 0.7}
    k = r.uniform(0.05, 1.0) * reach.get(law, 0.6) / tested
    return law, (R0, k, r.uniform(0.2, 1.8)) if law == "hermia" else (R0, k)


def _random_medium(r: Random, name: str, lots: tuple[Lot, ...], most: int, after: tuple[str, ...] | None) -> Medium:
    tested = r.uniform(150, 700)
    law, parameters = random_law(r, tested)
    sizes = []
    for size in range(r.randint(1, 2)):
        area = round(r.uniform(0.6, 6.0), 2)
        sizes.append((f"x{size}", area, round(area * r.uniform(80, 200), 2), r.randint(2, most)))
    return Medium(
        name, law, parameters, lots, tuple(sizes), tested / max(kappa for _, kappa in lots),
        r.choice(["loading-tested", "loading-limit"]), r.uniform(80, 500), r.choice([math.inf, r.uniform(0.4, 2.0)]),
        r.choice([math.inf, r.uniform(0.7, 2.5)]), r.choice([1.0, 0.9]), after,
    )  # fmt: skip


# --- every design, one by one ---


Combination = tuple[tuple[tuple[Candidate, int], ...], ...]
"""Per block, the used candidates with the place of the option picked, in flow order."""


def combinations(p: DesignProblem) -> Iterator[Combination]:
    """Every allowed route with every combination of options."""
    flat_stages = [(b, s) for b, one in enumerate(p.blocks) for s in one.stages]
    choices: list[list[tuple[Candidate, int] | None]] = []
    for _, s in flat_stages:
        own: list[tuple[Candidate, int] | None] = [(c, k) for c in s.candidates for k in range(len(c.options))]
        choices.append([*own, None] if s.optional else own)
    for picked in itertools.product(*choices):
        previous: str | None = None
        out: list[list[tuple[Candidate, int]]] = [[] for _ in p.blocks]
        for (b, _), pick in zip(flat_stages, picked, strict=True):
            if pick is None:
                continue
            if pick[0].after is not None and previous not in pick[0].after:
                break
            previous = pick[0].medium
            out[b].append(pick)
        else:
            yield tuple(tuple(one) for one in out)


def shortest_time(p: DesignProblem, one: Block, picks: Sequence[tuple[Candidate, int]]) -> float:
    """The shortest time of a block, h, from every limit, demands computed from the curves again."""
    line, least = one.line * p.volume, p.volume / one.max_flow
    spent = np.zeros((len(picks), len(p.lots)))
    for k, (c, option) in enumerate(picks):
        loading = p.safety_factor * p.volume / (c.scale_up * float(c.options.area[option]))
        for s, curve in enumerate(c.curves):
            flows = one.operation == "constant-flow"
            spent[k, s] = curve.demand_constant_flow(loading) if flows else curve.demand_constant_pressure(loading)
        least = max(least, p.volume / (float(c.options.area[option]) * c.flux_limit))
    for s in range(len(p.lots)):
        least = max(least, (float(spent[:, s].sum()) + line) / (one.pressure - one.static))
        for k, (c, _) in enumerate(picks):
            if one.operation == "constant-flow":
                below = float(spent[k:, s].sum()) + line
                least = max(least, float(spent[k, s]) / c.differential_pressure)
                if c.inlet_pressure < one.pressure:
                    least = max(least, below / (c.inlet_pressure - one.static))
    most = p.volume / one.min_flow if one.min_flow > 0.0 else math.inf
    return least if least <= most * (1.0 + 1e-9) else math.inf


def values(p: DesignProblem, picks: Combination) -> tuple[float, float]:
    """(objective, time needed in h) of a combination."""
    times = [shortest_time(p, one, chosen) + one.setup for one, chosen in zip(p.blocks, picks, strict=True)]
    needed = sum(times) if p.schedule == "sequential" else max(times)
    value = sum(float(c.options.weight[k]) for chosen in picks for c, k in chosen)
    return value + (p.hour_rate * sum(times) if p.objective == "cost" else 0.0), needed


def enumerated(p: DesignProblem) -> float:
    """The least objective over every combination; infinite where none meets every limit."""
    found = (values(p, picks) for picks in combinations(p))
    return min((value for value, needed in found if needed <= p.time * (1.0 + 1e-9)), default=math.inf)
