"""Random trains as plain numbers, written out as a user's files, and their optimum by other means than the package.

Nothing here imports trainopt: laws, costs, limits and the even split are written again from the algebra in
models/README.md, on scalars, so that an error would have to be made twice.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from random import Random
from typing import Any

import numpy as np
import yaml

INFINITE = math.inf


@dataclass
class Spec:
    """A workspace and one scenario, numbers in bar, L, m², h."""

    media: dict[str, dict[str, Any]]
    modules: dict[str, dict[str, Any]]
    holders: dict[str, dict[str, Any]]
    blocks: list[dict[str, Any]]
    volume: float
    time: float
    safety_factor: float
    objective: str
    basis: str
    schedule: str
    hour: float = 0.0
    flush: float = 0.0
    product: tuple[float, float, float] = (0.0, 0.0, 1.0)
    notes: dict[str, Any] = field(default_factory=dict)


# --- random trains ---


def random_spec(seed: int, *, stages: int = 3, counts: int = 4, features: bool = True, pressure: bool = False) -> Spec:
    """A random train of up to two blocks; small option sets. `pressure`: some blocks at constant pressure."""
    r = Random(seed)
    lots = {name: (r.uniform(0.8, 1.3), r.uniform(0.7, 1.4)) for name in "abc"[: r.randint(1, 3)]}
    media = {f"m{k}": _medium(r, lots) for k in range(4)}
    modules: dict[str, dict[str, Any]] = {}
    for name in media:
        for size in range(r.randint(1, 2)):
            modules[f"{name}-s{size}"] = {
                "medium": name, "area": round(r.uniform(0.5, 6.0), 2), "price": round(r.uniform(100, 1200), 2),
                "hold_up": round(r.uniform(0, 4), 2), "max_count": r.randint(1, counts),
            }  # fmt: skip
    holders = {}
    for k in range(r.randint(0, 3)):
        chosen = sorted(r.sample(sorted(modules), r.randint(1, len(modules))))
        holders[f"h{k}"] = {
            "modules": chosen, "slots": r.randint(1, 4), "price": round(r.uniform(500, 4000), 2),
            "batches": r.randint(1, 50),
        }  # fmt: skip
    n = r.randint(1, stages)
    cut = r.randint(1, n)
    names = [f"s{k}" for k in range(n)]
    blocks = []
    upstream: set[str] = set()
    for b, part in enumerate([names[:cut], names[cut:]]):
        if part:
            blocks.append(_block(r, b, part, sorted(media), features, pressure, upstream))
    return Spec(
        media=media, modules=modules, holders=holders, blocks=blocks,
        volume=round(r.uniform(200, 2500), 1), time=round(r.uniform(2, 12), 2),
        safety_factor=r.choice([1.0, 1.25, 1.5]), objective=r.choice(["area", "cost"]),
        basis=r.choice(["worst-lot", "pooled"]), schedule=r.choice(["sequential", "side-by-side"]),
        hour=r.choice([0.0, 40.0, 180.0]), flush=r.choice([0.0, 0.03]),
        product=r.choice([(0.0, 0.0, 1.0), (2.0, 15.0, 0.7)]),
    )  # fmt: skip


def _medium(r: Random, lots: dict[str, tuple[float, float]]) -> dict[str, Any]:
    law = r.choice(["cake", "intermediate", "standard", "complete", "quadratic"])
    tested = round(r.uniform(150, 900), 1)
    r0 = r.uniform(2e-4, 4e-3)
    if law == "quadratic":
        parameters = [r0, r0 * r.uniform(-0.3, 1.0) / tested, r0 * r.uniform(0.3, 3.0) / tested**2]
    else:
        reach = {"cake": 5.0, "intermediate": 2.0, "standard": 1.2, "complete": 0.7}[law]
        parameters = [r0, r.uniform(0.05, 1.0) * reach / tested]
    return {
        "law": law, "parameters": parameters, "tested": tested, "flux": round(r.uniform(80, 600), 1), "lots": lots,
        "limit": r.choice([None, None, round(tested * r.uniform(0.5, 0.95), 1)]),
        "dp": r.choice([None, round(r.uniform(0.3, 2.0), 3)]), "inlet": r.choice([None, round(r.uniform(0.6, 3.0), 3)]),
        "scale_up": r.choice([1.0, 0.9]), "flush": r.choice([None, 60.0]),
    }  # fmt: skip


def _block(
    r: Random, b: int, names: list[str], media: list[str], features: bool, pressure: bool, upstream: set[str]
) -> dict[str, Any]:
    stages = []
    for k, name in enumerate(names):
        choices = []
        for medium in sorted(r.sample(media, r.randint(1, 2))):
            after = None
            if features and upstream and r.random() < 0.4:
                after = sorted(r.sample(sorted(upstream), r.randint(1, len(upstream))))
            choices.append((medium, after))
        stages.append({"stage": name, "media": choices, "optional": features and r.random() < 0.25})
        upstream.update(medium for medium, _ in choices)
        del k
    operation = "constant-pressure" if pressure and r.random() < 0.5 else "constant-flow"
    return {
        "block": f"b{b}", "pressure": round(r.uniform(0.5, 2.5), 3), "static": r.choice([0.0, 0.05]),
        "line": r.choice([0.0, 2e-5]), "setup": r.choice([0.0, 0.5]), "operation": operation,
        "pump": r.choice([None, (None, 1500.0), (60.0, None), (80.0, 2000.0)]), "stages": stages,
    }  # fmt: skip


# --- the same as files ---


def write(spec: Spec, folder: Path) -> Path:
    """Write the workspace; returns the scenario's path."""
    (folder / "models" / "media").mkdir(parents=True)
    (folder / "scenarios").mkdir()
    for name, m in spec.media.items():
        _dump(folder / "models" / "media" / f"{name}.yaml", _medium_file(name, m))
    catalog = {
        "currency": "EUR",
        "modules": {
            k: {**v, "area": f"{v['area']} m2", "hold_up": f"{v['hold_up']} L"} for k, v in spec.modules.items()
        },
        "holders": spec.holders,
    }
    _dump(folder / "models" / "catalog.yaml", catalog)
    path = folder / "scenarios" / "case.yaml"
    _dump(path, _scenario_file(spec))
    return path


def _dump(path: Path, data: dict[str, Any]) -> None:
    path.write_text(yaml.safe_dump(data, sort_keys=False), encoding="utf-8")


def _medium_file(name: str, m: dict[str, Any]) -> dict[str, Any]:
    curve: dict[str, Any] = {"law": m["law"]}
    if m["law"] == "quadratic":
        units = ["bar/LMH", "bar/LMH/(L/m2)^1", "bar/LMH/(L/m2)^2"]
        curve["coefficients"] = [f"{c!r} {unit}" for c, unit in zip(m["parameters"], units, strict=True)]
    else:
        curve["parameters"] = {"R0": f"{m['parameters'][0]!r} bar/LMH", "k": f"{m['parameters'][1]!r} m2/L"}
    curve["tested"] = {"loading": f"{m['tested']} L/m2", "flux": f"{m['flux']} LMH"}
    curve["lots"] = {lot: {"resistance": rho, "fouling": kappa} for lot, (rho, kappa) in m["lots"].items()}
    limits = {}
    if m["limit"] is not None:
        limits["loading"] = f"{m['limit']} L/m2"
    if m["dp"] is not None:
        limits["differential_pressure"] = f"{m['dp']} bar"
    if m["inlet"] is not None:
        limits["inlet_pressure"] = f"{m['inlet']} bar"
    out: dict[str, Any] = {"medium": name, "curve": curve, "limits": limits, "scale_up": m["scale_up"]}
    if m["flush"] is not None:
        out["flush"] = {"volume": f"{m['flush']} L/m2", "flux": "600 LMH"}
    return out


def _scenario_file(spec: Spec) -> dict[str, Any]:
    blocks = []
    for b in spec.blocks:
        stages = [
            {
                "stage": s["stage"], "optional": s["optional"],
                "media": [m if after is None else {"medium": m, "after": after} for m, after in s["media"]],
            }
            for s in b["stages"]
        ]  # fmt: skip
        one = {
            "block": b["block"], "pressure": f"{b['pressure']} bar", "static": f"{b['static']} bar",
            "line": f"{b['line']!r} bar/(L/h)", "setup": f"{b['setup']} h", "operation": b["operation"],
            "stages": stages,
        }  # fmt: skip
        if b["pump"] is not None:
            low, high = b["pump"]
            one["pump"] = {k: f"{v} L/h" for k, v in (("min_flow", low), ("max_flow", high)) if v is not None}
        blocks.append(one)
    titer, value, recovered = spec.product
    return {
        "scenario": "random", "batch": {"volume": f"{spec.volume} L", "time": f"{spec.time} h"},
        "objective": spec.objective, "safety_factor": spec.safety_factor, "basis": spec.basis,
        "schedule": spec.schedule,
        "blocks": blocks,
        "costs": {"hour": spec.hour, "flush": spec.flush,
                  "product": {"titer": f"{titer} g/L", "value": value, "recovered": recovered}},
    }  # fmt: skip


# --- the algebra again ---


def resistance(m: dict[str, Any], lot: tuple[float, float], loading: float) -> float:
    """R_s(l) of one lot, bar/LMH; infinite past the pole."""
    rho, kappa = lot
    x = kappa * loading
    p = m["parameters"]
    if m["law"] == "quadratic":
        return rho * (p[0] + p[1] * x + p[2] * x * x)
    k = p[1] * x
    if m["law"] == "cake":
        return rho * p[0] * (1 + k)
    if m["law"] == "intermediate":
        return rho * p[0] * math.exp(k)
    if m["law"] == "standard":
        return rho * p[0] * (1 - k / 2) ** -2 if k < 2 else INFINITE
    return rho * p[0] / (1 - k) if k < 1 else INFINITE


def demand(m: dict[str, Any], lot: tuple[float, float], loading: float, operation: str) -> float:
    """D in bar·h: L times the highest R up to L, or the integral of R (Simpson on 2,000 intervals)."""
    if operation == "constant-pressure":
        if not math.isfinite(resistance(m, lot, loading)):
            return INFINITE
        l = np.linspace(0.0, loading, 2001)
        values = np.array([resistance(m, lot, float(x)) for x in l])
        return float(loading / 6000.0 * (values[0] + values[-1] + 4 * values[1:-1:2].sum() + 2 * values[2:-1:2].sum()))
    # A convex parabola or a monotone law is highest at an end of the range.
    return loading * max(resistance(m, lot, 0.0), resistance(m, lot, loading))


def lots_of(spec: Spec) -> list[tuple[float, float]]:
    """(ρ, κ) of every lot of the basis; all media of a random train know the same lots."""
    used = {m for b in spec.blocks for s in b["stages"] for m, _ in s["media"]}
    return [(1.0, 1.0)] if spec.basis == "pooled" else list(spec.media[min(used)]["lots"].values())


@dataclass(frozen=True)
class Option:
    """One module type and count of one medium."""

    medium: str
    after: tuple[str, ...] | None
    module: str
    count: int
    area: float
    cost: float
    tau: float
    demand: tuple[float, ...]
    loading: float


def holder_cost(spec: Spec, module: str, count: int) -> float:
    """The cheapest holders for a count, per batch."""
    offers = [
        math.ceil(count / h["slots"]) * h["price"] / h["batches"]
        for h in spec.holders.values()
        if module in h["modules"]
    ]
    return min(offers, default=0.0)


def options_of(spec: Spec, block: dict[str, Any], stage: dict[str, Any]) -> list[Option]:
    """Every option inside the caps, dominated or not."""
    out = []
    titer, value, recovered = spec.product
    for medium, after in stage["media"]:
        m = spec.media[medium]
        lots = lots_of(spec)
        cap = m["limit"] if m["limit"] is not None else m["tested"] / max(kappa for _, kappa in lots)
        for module, entry in spec.modules.items():
            for count in range(1, entry["max_count"] + 1) if entry["medium"] == medium else ():
                area = entry["area"] * count
                loading = spec.safety_factor * spec.volume / (m["scale_up"] * area)
                if loading > cap * (1 + 1e-12):
                    continue
                spent = tuple(demand(m, lot, loading, block["operation"]) for lot in lots)
                if not all(map(math.isfinite, spent)):
                    continue
                cost = (
                    entry["price"] * count + holder_cost(spec, module, count) + (m["flush"] or 0.0) * area * spec.flush
                    + (1 - recovered) * titer * value * entry["hold_up"] * count
                )  # fmt: skip
                tau = spec.volume / (area * m["flux"])
                upstream = tuple(after) if after else None
                out.append(Option(medium, upstream, module, count, area, cost, tau, spent, loading))
    return out


def least_time(spec: Spec, block: dict[str, Any], picks: list[Option]) -> float:
    """Shortest time of a block, h, from every limit it has."""
    line, static, volume = block["line"], block["static"], spec.volume
    low, high = block["pump"] or (None, None)
    least = volume / high if high else 0.0
    for s in range(len(lots_of(spec))):
        total = sum(p.demand[s] for p in picks) + line * volume
        least = max(least, total / (block["pressure"] - static))
        if block["operation"] == "constant-flow":
            for k, p in enumerate(picks):
                m = spec.media[p.medium]
                if m["dp"] is not None:
                    least = max(least, p.demand[s] / m["dp"])
                if m["inlet"] is not None and m["inlet"] < block["pressure"]:
                    below = sum(q.demand[s] for q in picks[k:]) + line * volume
                    least = max(least, below / (m["inlet"] - static))
    least = max([least, *(p.tau for p in picks)])
    return least if not low or least <= volume / low * (1 + 1e-9) else INFINITE


def routes(spec: Spec) -> Iterator[list[list[Option]]]:
    """Every allowed combination of options, per block."""
    flat = [(b, s) for b, block in enumerate(spec.blocks) for s in block["stages"]]
    choices: list[list[Option | None]] = []
    for b, s in flat:
        own: list[Option | None] = list(options_of(spec, spec.blocks[b], s))
        choices.append([*own, None] if s["optional"] else own)
    for combination in itertools.product(*choices):
        previous: str | None = None
        allowed = True
        blocks: list[list[Option]] = [[] for _ in spec.blocks]
        for (b, _), option in zip(flat, combination, strict=True):
            if option is None:
                continue
            if option.after is not None and previous not in option.after:
                allowed = False
                break
            previous = option.medium
            blocks[b].append(option)
        if allowed:
            yield blocks


def value_of(spec: Spec, blocks: list[list[Option]]) -> float:
    """Objective of a combination, infinite where it meets not every limit."""
    times = [least_time(spec, block, picks) for block, picks in zip(spec.blocks, blocks, strict=True)]
    spent = [t + block["setup"] for t, block in zip(times, spec.blocks, strict=True)]
    needed = sum(spent) if spec.schedule == "sequential" else max(spent)
    if not needed <= spec.time * (1 + 1e-9):
        return INFINITE
    picks = [p for block in blocks for p in block]
    if spec.objective == "area":
        return sum(p.area for p in picks)
    return sum(p.cost for p in picks) + spec.hour * sum(spent)


def best_value(spec: Spec) -> float:
    """The least objective over every combination; infinite where none is allowed."""
    return min((value_of(spec, blocks) for blocks in routes(spec)), default=INFINITE)
