"""Random workspaces over every feature that a user's files have; everything about one follows from its seed."""

from __future__ import annotations

from random import Random
from typing import Any

from algebra import WATER
from independent import Spec

REACH = {
    "cake": (5.0,), "intermediate": (2.0,), "standard": (1.2,), "complete": (0.7,), "hermia": (0.8,),
    "cake-complete": (2.0, 0.6), "cake-intermediate": (2.0, 1.2), "cake-standard": (2.0, 1.0),
    "complete-standard": (0.5, 0.7), "intermediate-standard": (0.9, 0.7), "quadratic": (), "cubic": (),
}  # fmt: skip
"""Largest k·l at the loading tested, by law, inside every pole."""


def random_workspace(seed: int, *, stages: int = 4, counts: int = 12) -> Spec:
    """One to three blocks of up to `stages` stages in all; up to `counts` of two module types for each medium."""
    r = Random(seed)
    media = {f"m{k}": _medium(r) for k in range(5)}
    modules = {f"{name}-s{size}": _module(r, name, counts) for name in media for size in range(r.randint(1, 2))}
    blocks = _blocks(r, sorted(media), r.randint(1, stages))
    for block in blocks:
        for stage in block["stages"]:
            _choose_equipment(r, stage, modules, counts)
    _bear_pressure(blocks, media)
    return Spec(
        media=media, modules=modules, holders=_holders(r, modules, blocks), blocks=blocks,
        volume=round(r.uniform(200, 2500), 1), time=round(r.uniform(0.8, 10), 2),
        safety_factor=r.choice([1.0, 1.25, 1.5]), objective=r.choice(["area", "cost"]),
        basis=r.choice(["worst-lot", "worst-lot", "pooled"]), schedule=r.choice(["sequential", "side-by-side"]),
        hour=r.choice([0.0, 40.0, 180.0]), flush=r.choice([0.0, 0.03]),
        product=r.choice([(0.0, 0.0, 1.0), (2.0, 15.0, 0.7)]),
        temperature=r.choice([None, *WATER]),
    )  # fmt: skip


def alike_workspace(seed: int) -> Spec:
    """A random workspace where much is alike: few areas, prices by area, media with one curve; so designs tie."""
    r = Random(seed)
    spec = random_workspace(seed)
    for module in spec.modules.values():
        module["area"] = r.choice([1.0, 1.0, 2.0])
        module.update(price=100.0 * module["area"], hold_up=module["area"])
    for name, medium in spec.media.items():
        if r.random() < 0.6:
            spec.media[name] = {**spec.media["m0"], "dp": medium["dp"], "inlet": medium["inlet"]}
    _bear_pressure(spec.blocks, spec.media)
    return spec


def _medium(r: Random) -> dict[str, Any]:
    law = r.choice(sorted(REACH))
    tested = round(r.uniform(150, 900), 1)
    r0 = r.uniform(2e-4, 3e-3)
    parameters = [r0, *(r.uniform(0.05, 1.0) * reach / tested for reach in REACH[law])]
    if law == "hermia":
        parameters.append(r.choice([0.0, 2.0, round(r.uniform(0.1, 1.9), 3)]))
    if law in ("quadratic", "cubic"):  # some dip before they rise
        parameters += [r0 * r.uniform(-0.3, 1.0) / tested, r0 * r.uniform(0.3, 3.0) / tested**2]
        parameters += [r0 * r.uniform(0.0, 1.0) / tested**3] if law == "cubic" else []
    names = r.choice(["", "a", "ab", "abc", "abc", "bc"])
    return {
        "law": law, "parameters": parameters, "tested": tested, "flux": round(r.uniform(80, 600), 1),
        "lots": {name: (round(r.uniform(0.8, 1.3), 4), round(r.uniform(0.7, 1.3), 4)) for name in names},
        "limit": r.choice([None, None, round(tested * r.uniform(0.5, 0.95), 1)]),
        "turbid": r.choice([None, None, round(tested * r.uniform(0.5, 1.0), 1)]),
        "own_flux": r.choice([None, None, round(r.uniform(40, 400), 1)]),
        "dp": r.choice([None, round(r.uniform(0.3, 2.0), 3)]), "inlet": r.choice([None, round(r.uniform(0.6, 3.0), 3)]),
        "scale_up": r.choice([1.0, 0.9, 1.1]), "flush": r.choice([None, 60.0]),
        "temperature": r.choice([None, *WATER]),
    }  # fmt: skip


def _module(r: Random, medium: str, counts: int) -> dict[str, Any]:
    area = round(r.uniform(0.4, 5.0), 2)
    return {
        "medium": medium, "area": area, "price": round(area * r.uniform(60, 400), 2),
        "hold_up": round(r.uniform(0, 4), 2), "max_count": r.randint(max(1, counts // 4), counts),
    }  # fmt: skip


def _blocks(r: Random, media: list[str], number: int) -> list[dict[str, Any]]:
    blocks: list[dict[str, Any]] = []
    upstream: set[str] = set()
    for k in range(number):
        if not blocks or (len(blocks) < 3 and r.random() < 0.35):
            pump = r.choice([None, None, (None, 1500.0), (60.0, None), (80.0, 2000.0)])
            blocks.append({
                "block": f"b{len(blocks)}", "pressure": round(r.uniform(0.6, 3.0), 3),
                "static": r.choice([0.0, 0.05, 0.2]), "line": r.choice([0.0, 2e-5, 1e-4]),
                "setup": r.choice([0.0, 0.5]), "pump": pump,
                "operation": r.choice(["constant-flow", "constant-flow", "constant-pressure"]), "stages": [],
            })  # fmt: skip
        choices = []
        for medium in r.sample(media, r.choice([1, 2, 2, 3])):
            after = None
            if upstream and r.random() < 0.35:
                after = r.sample(sorted(upstream), r.randint(1, len(upstream)))
            choices.append((medium, after))
        blocks[-1]["stages"].append({"stage": f"s{k}", "media": choices, "optional": r.random() < 0.25})
        upstream.update(medium for medium, _ in choices)
    return blocks


def _choose_equipment(r: Random, stage: dict[str, Any], modules: dict[str, Any], counts: int) -> None:
    """Sometimes what a stage must use, or how many."""
    served = [name for name, module in modules.items() if module["medium"] in dict(stage["media"])]
    what = r.random()
    if what < 0.08:
        stage["fix"] = {"module": r.choice(served)}
    elif what < 0.16:
        stage["fix"] = {"count": r.randint(max(1, counts // 2), counts + 3)}
    elif what < 0.22:
        stage["fix"] = {"module": r.choice(served), "count": r.randint(max(1, counts // 2), counts + 3)}
    elif what < 0.35:
        low = r.randint(1, max(1, counts // 2))
        stage["count"] = [low, r.randint(low, counts + 3)]


def _bear_pressure(blocks: list[dict[str, Any]], media: dict[str, dict[str, Any]]) -> None:
    """Constant pressure asks for media rated for it: a rating below is wrong in the files."""
    for block in blocks:
        if block["operation"] == "constant-pressure":
            for medium in {medium for stage in block["stages"] for medium, _ in stage["media"]}:
                for rating in ("dp", "inlet"):
                    if media[medium][rating] is not None:
                        media[medium][rating] = max(media[medium][rating], block["pressure"])


def _holders(r: Random, modules: dict[str, Any], blocks: list[dict[str, Any]]) -> dict[str, Any]:
    """Holders; some are owned already, by one stage that can use them or shared by several."""
    holders: dict[str, Any] = {}
    for k in range(r.randint(0, 5)):
        chosen = r.sample(sorted(modules), r.randint(1, 3))
        holders[f"h{k}"] = {
            "modules": chosen, "slots": r.randint(1, 6), "price": round(r.uniform(500, 6000), 2),
            "batches": r.randint(1, 60),
        }  # fmt: skip
        served = {modules[name]["medium"] for name in chosen}
        users = [s for b in blocks for s in b["stages"] if served & set(dict(s["media"]))]
        # Shared ones have a stream of their own: what is drawn next stays as it is.
        own = r if len(users) == 1 else Random(f"{k} {holders[f'h{k}']['price']}")
        if users and own.random() < (0.7 if len(users) == 1 else 0.4):
            holders[f"h{k}"]["owned"] = own.randint(1, 3)
    return holders
