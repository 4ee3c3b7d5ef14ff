"""Random cases for the tests of this room: one to three blocks, several media, lots, ratings, pumps, routes,
both objectives."""

from __future__ import annotations

import random
from pathlib import Path

from trainopt.files import Case, Workspace
from trainopt.files.catalog import Catalog
from trainopt.files.medium import Medium
from trainopt.files.scenario import Scenario

FIRST, LATER = ("coarse", "open"), ("fine", "dense", "tight")


def random_case(seed: int, blocks: int | None = None, stages: int = 2) -> Case:
    """A case that mostly has designs; everything about it follows from the seed."""
    rng = random.Random(seed)
    media = {name: _medium(rng, name) for name in (*FIRST, *LATER)}
    modules = {}
    for name in media:
        for size in rng.sample([0.3, 0.5, 0.9, 1.2], rng.randint(1, 2)):
            modules[f"{name}-{int(10 * size):02d}"] = {
                "medium": name, "area": size, "price": round(rng.uniform(300, 900) * size, 0) + rng.choice([0, 100]),
                "hold_up": rng.choice([0.0, 1.5]), "max_count": rng.randint(8, 30),
            }  # fmt: skip
    holders = {
        "rack": {"modules": tuple(sorted(modules))[::2], "slots": rng.randint(2, 6), "price": 900.0, "batches": 10}
    }
    catalog = Catalog.model_validate({"currency": "EUR", "modules": modules, "holders": holders})
    number = blocks or rng.choice([1, 1, 2, 2, 3])
    upstream: set[str] = set()
    scenario = Scenario.model_validate(
        {
            "scenario": f"train {seed}",
            "batch": {"volume": round(rng.uniform(200, 1500), 0), "time": round(rng.uniform(4, 14), 2)},
            "objective": rng.choice(["area", "cost"]),
            "safety_factor": rng.choice([1.0, 1.2, 1.5]),
            "basis": rng.choice(["pooled", "worst-lot"]),
            "schedule": rng.choice(["sequential", "sequential", "side-by-side"]),
            "blocks": tuple(_block(rng, b, stages, media, upstream) for b in range(number)),
            "costs": {"hour": rng.choice([0.0, 120.0]), "flush": 0.02,
                      "product": {"titer": 1.0, "value": 30.0, "recovered": 0.5}},
        }
    )  # fmt: skip
    return Case(Workspace(Path(), catalog, media), scenario)


def _medium(rng: random.Random, name: str) -> Medium:
    law = rng.choice(["intermediate", "cake", "complete", "quadratic"])
    R0 = 10 ** rng.uniform(-3.6, -2.6)
    tested = rng.uniform(90, 260)
    k = rng.uniform(0.2, 0.9) / tested
    curve: dict[str, object] = {"law": law, "tested": {"loading": tested, "flux": rng.uniform(80, 300)}}
    if law == "quadratic":
        curve["coefficients"] = (R0, R0 * k, R0 * k * k * rng.uniform(0, 2))
    else:
        curve["parameters"] = {"R0": R0, "k": k}
    lots = {lot: {"resistance": rng.uniform(0.8, 1.2), "fouling": rng.uniform(0.8, 1.1)} for lot in "ab"}
    curve["lots"] = lots
    limits: dict[str, float] = {}
    if rng.random() < 0.5:
        limits["differential_pressure"] = rng.uniform(0.5, 1.5)
    if rng.random() < 0.4:
        limits["inlet_pressure"] = rng.uniform(0.8, 1.8)
    if rng.random() < 0.3:
        limits["loading"] = tested * rng.uniform(0.6, 1.0)
    return Medium.model_validate(
        {"medium": name, "curve": curve, "limits": limits, "scale_up": rng.choice([1.0, 1.1]),
         "flush": {"volume": 50.0, "flux": 300.0}}
    )  # fmt: skip


def _block(rng: random.Random, b: int, most: int, known: dict[str, Medium], upstream: set[str]) -> dict[str, object]:
    """A block, and what it may use added to `upstream`; at constant pressure only where every rating allows it."""
    stages: list[dict[str, object]] = []
    pressure, used = round(rng.uniform(0.8, 2.2), 2), set()
    for i in range(rng.randint(1, most)):
        names = FIRST if b == i == 0 else LATER
        chosen = rng.sample(names, rng.randint(1, 2))
        media: list[dict[str, object]] = [{"medium": name} for name in chosen]
        if upstream and rng.random() < 0.3:
            media[0]["after"] = tuple(rng.sample(sorted(upstream), min(2, len(upstream))))
        upstream |= set(chosen)
        used |= set(chosen)
        stage: dict[str, object] = {"stage": f"s{b}{i}", "media": tuple(media)}
        if rng.random() < 0.2:
            stage["optional"] = True
        stages.append(stage)
    block: dict[str, object] = {
        "block": f"b{b}", "pressure": pressure, "setup": rng.choice([0.0, 0.25]),
        "static": rng.choice([0.0, 0.05]), "line": rng.choice([0.0, 0.00005]), "stages": tuple(stages),
    }  # fmt: skip
    if rng.random() < 0.4:
        block["pump"] = {"min_flow": rng.choice([None, 40.0]), "max_flow": rng.choice([None, 2500.0])}
    ratings = [r for n in used for r in (known[n].limits.differential_pressure, known[n].limits.inlet_pressure) if r]
    if rng.random() < 0.5 and all(rating > pressure for rating in ratings):
        block["operation"] = "constant-pressure"
    return block
