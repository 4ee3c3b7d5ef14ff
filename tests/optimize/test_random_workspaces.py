"""Three hundred random workspaces over every feature of the files, against a model written apart from the package.

The other side takes every option, dominated or not, from the raw numbers (`independent.py`, `plain.py`).
"""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import pytest
from independent import Option, Spec, best_value, options_of, shared_holders, value_of, write
from plain import best_by, scipy_solve
from workspaces import random_workspace

import trainopt

NUMBER = 300
FEW = 1500
"""Combinations up to which every one is looked at."""


def designed(spec: Spec, folder: Path) -> dict[str, Any]:
    """The JSON of the design of a spec, by way of its files."""
    return trainopt.design_document(trainopt.design(trainopt.load_case(write(spec, folder))))


def value_in(document: dict[str, Any]) -> float:
    """The objective of a design's JSON; infinite where no design exists, which then has a reason."""
    if document["status"] == "infeasible":
        assert document["reasons"]
        return math.inf
    assert document["status"] == "optimal"
    return float(document["objective"]["value"])


def value_of_picks(spec: Spec, document: dict[str, Any]) -> float:
    """The objective of the picks that a design's JSON names, in closed form."""
    named = {s["stage"]: (s["medium"], s["module"], s["count"]) for b in document["blocks"] for s in b["stages"]}
    blocks: list[list[Option]] = []
    for block in spec.blocks:
        own = [(named.get(stage["stage"]), options_of(spec, block, stage)) for stage in block["stages"]]
        blocks.append([o for name, options in own for o in options if (o.medium, o.module, o.count) == name])
    assert sum(map(len, blocks)) == len(named)
    return value_of(spec, blocks)


def combinations(spec: Spec) -> int:
    """How many picks there are."""
    stages = [(block, stage) for block in spec.blocks for stage in block["stages"]]
    return math.prod(len(options_of(spec, block, stage)) + stage["optional"] for block, stage in stages)


@pytest.mark.parametrize("first", range(0, NUMBER, 20))
def test_the_design_is_the_optimum_of_another_model(first: int, tmp_path: Path) -> None:
    seen = set()
    for seed in range(first, first + 20):
        spec = random_workspace(seed)
        document = designed(spec, tmp_path / str(seed))
        found, expected = value_in(document), best_by(spec, scipy_solve)
        assert found == pytest.approx(expected, rel=1e-6), seed
        if math.isfinite(found):
            assert value_of_picks(spec, document) == pytest.approx(found, rel=1e-6), seed
        # The figures of the viscosity are good to 1e-6, no more.
        if spec.temperature is None and combinations(spec) <= FEW:
            assert found == pytest.approx(best_value(spec), rel=1e-9), seed
        seen.add(math.isfinite(found))
    assert True in seen


def features(spec: Spec) -> set[str]:
    """What of the files' features a spec uses."""
    stages = [s for b in spec.blocks for s in b["stages"]]
    media = [spec.media[m] for s in stages for m, _ in s["media"]]
    said = {
        f"objective {spec.objective}", f"basis {spec.basis}",
        *(b["operation"] for b in spec.blocks), *(m["law"] for m in media),
        *(f"{len(spec.blocks)} blocks {spec.schedule}" for _ in spec.blocks[1:2]),
        *(key for m in media for key in ("dp", "inlet", "limit", "turbid", "own_flux", "flush") if m[key] is not None),
        *(key for s in stages for key in ("fix", "count") if s.get(key) is not None),
        *(key for b in spec.blocks for key in ("static", "line", "setup", "pump") if b[key]),
    }  # fmt: skip
    tests = {
        "both operations": len({b["operation"] for b in spec.blocks}) == 2,
        "optional": any(s["optional"] for s in stages),
        "after": any(after for s in stages for _, after in s["media"]),
        "owned": any(h.get("owned") for h in spec.holders.values()),
        "shared holders": bool(shared_holders(spec)),
        "lots missing": len({frozenset(m["lots"]) for m in media}) > 1 and spec.basis == "worst-lot",
        "scale-up": any(m["scale_up"] != 1.0 for m in media),
        "temperature": spec.temperature is not None
        and any(m["temperature"] not in (None, spec.temperature) for m in media),
        "hours": spec.objective == "cost" and spec.hour > 0.0,
        "product": spec.objective == "cost" and spec.product[0] > 0.0,
        "safety factor": spec.safety_factor > 1.0,
    }
    return said | {name for name, held in tests.items() if held}


def test_every_feature_is_in_many_of_them() -> None:
    used = [features(random_workspace(seed)) for seed in range(NUMBER)]
    rare = {name: count for name in set().union(*used) if (count := sum(name in one for one in used)) < 10}
    assert not rare
    assert len(set().union(*used)) >= 40


def test_enough_of_them_have_no_design() -> None:
    none = sum(math.isinf(best_by(random_workspace(seed), scipy_solve)) for seed in range(NUMBER))
    assert 0.1 * NUMBER <= none <= 0.5 * NUMBER
