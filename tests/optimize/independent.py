"""Random trains as plain numbers, written out as a user's files, and their optimum by other means than the package.

Nothing here imports trainopt: laws, costs, limits and the even split are written again from the algebra in
models/README.md, on scalars, so that an error would have to be made twice.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from random import Random
from typing import Any

import yaml
from algebra import INFINITE, NAMES, WATER, demand


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
    temperature: float | None = None


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
    names = NAMES[m["law"]]
    units = {"R0": "bar/LMH", "c0": "bar/LMH", "n": "", **{f"c{i}": f"bar/LMH/(L/m2)^{i}" for i in (1, 2, 3)}}
    written = [
        value if name == "n" else f"{value!r} {units.get(name, 'm2/L')}"
        for name, value in zip(names, m["parameters"], strict=True)
    ]
    if names[0] == "c0":
        curve["coefficients"] = written
    else:
        curve["parameters"] = dict(zip(names, written, strict=True))
    curve["tested"] = {"loading": f"{m['tested']} L/m2", "flux": f"{m['flux']} LMH"}
    if m.get("temperature") is not None:
        curve["tested"]["temperature"] = f"{m['temperature']} degC"
    if m["lots"]:
        curve["lots"] = {lot: {"resistance": rho, "fouling": kappa} for lot, (rho, kappa) in m["lots"].items()}
    limits = {}
    if m["limit"] is not None:
        limits["loading"] = f"{m['limit']} L/m2"
    if m["dp"] is not None:
        limits["differential_pressure"] = f"{m['dp']} bar"
    if m["inlet"] is not None:
        limits["inlet_pressure"] = f"{m['inlet']} bar"
    if m.get("own_flux") is not None:
        limits["flux"] = f"{m['own_flux']} LMH"
    if m.get("turbid") is not None:
        limits["turbidity"] = 8.0
        curve["origin"] = {"turbidity": 8.0, "turbidity_loading": f"{m['turbid']} L/m2"}
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
                **{key: s[key] for key in ("fix", "count") if s.get(key) is not None},
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
    batch = {"volume": f"{spec.volume} L", "time": f"{spec.time} h"}
    if spec.temperature is not None:
        batch["temperature"] = f"{spec.temperature} degC"
    return {
        "scenario": "random", "batch": batch,
        "objective": spec.objective, "safety_factor": spec.safety_factor, "basis": spec.basis,
        "schedule": spec.schedule,
        "blocks": blocks,
        "costs": {"hour": spec.hour, "flush": spec.flush,
                  "product": {"titer": f"{titer} g/L", "value": value, "recovered": recovered}},
    }  # fmt: skip


# --- the algebra again ---


def multipliers(spec: Spec, medium: str) -> list[tuple[float, float]]:
    """(ρ, κ) of one medium for every lot of the basis, viscosity in ρ; a lot not run on it is its worst."""
    m = spec.media[medium]
    known = m["lots"]
    test = m.get("temperature")
    thick = WATER[spec.temperature] / WATER[test] if spec.temperature is not None and test is not None else 1.0
    names = lot_names(spec)
    if not names or not known:
        return [(thick, 1.0)] * max(len(names), 1)
    worst = (max(rho for rho, _ in known.values()), max(kappa for _, kappa in known.values()))
    return [(thick * known.get(name, worst)[0], known.get(name, worst)[1]) for name in names]


def lot_names(spec: Spec) -> list[str]:
    """Lots run on any medium that some stage may use; none on the pooled basis."""
    if spec.basis == "pooled":
        return []
    return sorted({n for b in spec.blocks for s in b["stages"] for m, _ in s["media"] for n in spec.media[m]["lots"]})


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
    holder: tuple[str, int] | None = None


def holder_of(spec: Spec, module: str, count: int) -> tuple[str, int] | None:
    """Name and number of the cheapest holders for a count, if no other stage used those that are owned."""
    offers = [
        (max(math.ceil(count / h["slots"]) - h.get("owned", 0), 0) * h["price"] / h["batches"],
         math.ceil(count / h["slots"]), name)
        for name, h in spec.holders.items()
        if module in h["modules"]
    ]  # fmt: skip
    if not offers:
        return None
    _, number, name = min(offers)
    return name, number


def shared_holders(spec: Spec) -> dict[str, dict[str, Any]]:
    """The holders of which some are owned and that several stages may use."""
    stages = [stage for block in spec.blocks for stage in block["stages"]]

    def uses(stage: dict[str, Any], holder: dict[str, Any]) -> bool:
        served = [m for m in holder["modules"] if spec.modules[m]["medium"] in dict(stage["media"])]
        return any(len(counts_of(stage, m, spec.modules[m]["max_count"])) for m in served)

    return {
        name: h for name, h in spec.holders.items() if h.get("owned") and sum(uses(stage, h) for stage in stages) >= 2
    }


def holder_cost(spec: Spec, holder: tuple[str, int] | None, shared: dict[str, dict[str, Any]]) -> float:
    """What a stage's holders cost per batch; of shared ones all, for what is owned is counted once over the train."""
    if holder is None:
        return 0.0
    h = spec.holders[holder[0]]
    free = 0 if holder[0] in shared else h.get("owned", 0)
    return max(holder[1] - free, 0) * h["price"] / h["batches"]


def shared_saving(spec: Spec, picks: list[Option]) -> float:
    """What the shared holders that are owned save a train, one after the other as its stages use them up."""
    saved = 0.0
    for name, h in shared_holders(spec).items():
        left = h["owned"]
        for pick in picks:
            if pick.holder is not None and pick.holder[0] == name:
                free = min(left, pick.holder[1])
                saved, left = saved + free * h["price"] / h["batches"], left - free
    return saved


def counts_of(stage: dict[str, Any], module: str, most: int) -> range:
    """Counts of a module that a stage may have, by the catalog and its own `fix` or `count`."""
    fix, bounds = stage.get("fix"), stage.get("count")
    if fix is not None:
        if fix.get("module", module) != module:
            return range(0)
        return range(fix["count"], fix["count"] + 1) if "count" in fix else range(1, most + 1)
    return range(1, most + 1) if bounds is None else range(bounds[0], min(bounds[1], most) + 1)


def options_of(spec: Spec, block: dict[str, Any], stage: dict[str, Any]) -> list[Option]:
    """Every option inside the caps, dominated or not."""
    out = []
    titer, value, recovered = spec.product
    shared = shared_holders(spec)
    for medium, after in stage["media"]:
        m = spec.media[medium]
        lots = multipliers(spec, medium)
        cap = m["limit"] if m["limit"] is not None else m["tested"] / max(kappa for _, kappa in lots)
        cap = min(cap, m.get("turbid") or INFINITE)
        for module, entry in spec.modules.items():
            for count in counts_of(stage, module, entry["max_count"]) if entry["medium"] == medium else ():
                area = entry["area"] * count
                loading = spec.safety_factor * spec.volume / (m["scale_up"] * area)
                if loading > cap * (1 + 1e-12):
                    continue
                spent = tuple(demand(m, lot, loading, block["operation"]) for lot in lots)
                if not all(map(math.isfinite, spent)):
                    continue
                holder = holder_of(spec, module, count)
                cost = (
                    entry["price"] * count + holder_cost(spec, holder, shared) + (m["flush"] or 0.0) * area * spec.flush
                    + (1 - recovered) * titer * value * entry["hold_up"] * count
                )  # fmt: skip
                tau = spec.volume / (area * (m.get("own_flux") or m["flux"]))
                upstream = tuple(after) if after else None
                out.append(Option(medium, upstream, module, count, area, cost, tau, spent, loading, holder))
    return out


def least_time(spec: Spec, block: dict[str, Any], picks: list[Option]) -> float:
    """Shortest time of a block, h, from every limit it has."""
    line, static, volume = block["line"], block["static"], spec.volume
    low, high = block["pump"] or (None, None)
    least = volume / high if high else 0.0
    for s in range(max(len(lot_names(spec)), 1)):
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
    return sum(p.cost for p in picks) - shared_saving(spec, picks) + spec.hour * sum(spent)


def best_value(spec: Spec) -> float:
    """The least objective over every combination; infinite where none is allowed."""
    return min((value_of(spec, blocks) for blocks in routes(spec)), default=INFINITE)
