"""The JSON documents have exactly the keys that they promise, and any JSON reader takes them."""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import trainopt
from tests.report import results
from trainopt.report.json import curve_document, design_document, dumps, finite

ROOT = Path(__file__).parents[2]
NUMBER, TEXT = "number", "text"
MAYBE = "number or null"

STAGE = {
    "stage": TEXT, "medium": TEXT, "module": TEXT, "count": "whole", "holders": {"*": "whole"},
    "area_m2": NUMBER, "ideal_area_m2": MAYBE, "loading_L_m2": NUMBER, "flux_LMH": NUMBER,
    "demand_bar_h": NUMBER, "pressure_bar": NUMBER, "pressure_share": NUMBER,
    "safety_factor": MAYBE, "limited_by": TEXT,
}  # fmt: skip
BLOCK = {
    "block": TEXT, "operation": TEXT, "time_h": NUMBER, "setup_h": NUMBER, "flow_L_per_h": NUMBER,
    "starting_flow_L_per_h": MAYBE,
    "pressure_bar": dict.fromkeys(("limit", "static", "line", "stages", "spare"), NUMBER),
    "budget_bar_h": NUMBER, "demand_bar_h": NUMBER, "stages": [STAGE],
}  # fmt: skip
COST_PARTS = dict.fromkeys(("modules", "holders", "flush", "product", "hours"), NUMBER)
DESIGN = {
    "schema": TEXT, "scenario": TEXT, "status": TEXT,
    "objective": {"kind": TEXT, "value": NUMBER, "bound": NUMBER, "gap": NUMBER},
    "area_m2": NUMBER, "cost": NUMBER, "currency": TEXT, "time_h": NUMBER,
    "cost_parts": COST_PARTS, "blocks": [BLOCK], "safety_factor": MAYBE,
    "even_split": {"status": TEXT, "area_m2": MAYBE, "cost": MAYBE, "blocks": [BLOCK]},
    "saving": {"area_m2": NUMBER, "area_percent": NUMBER, "cost": NUMBER, "cost_percent": MAYBE},
    "warnings": [{"code": TEXT, "text": TEXT}], "trainopt": TEXT, "inputs": {"*": TEXT},
}  # fmt: skip
ROUTES = {
    "allowed": "whole", "proven": "flag",
    "designs": [{"media": [[TEXT]], "status": TEXT, "objective": MAYBE, "area_m2": MAYBE, "cost": MAYBE,
                 "picks": "list"}],
}  # fmt: skip
LIMITS = {
    "blocks": [{"block": TEXT, "limited_by": TEXT, "stage": TEXT, "used": NUMBER, "head_bar": NUMBER,
                "spare_bar": NUMBER, "stages": {"*": TEXT}, "text": TEXT}],
}  # fmt: skip
GAINS = [{"field": TEXT, "unit": TEXT, "now": NUMBER, "needs": NUMBER, "objective": NUMBER, "saves": NUMBER,
          "picks": "list", "text": TEXT}]  # fmt: skip
RELIABILITY = {
    "target": NUMBER, "in_sample": NUMBER, "fresh": NUMBER, "fresh_interval": [NUMBER], "samples": "whole",
    "fresh_samples": "whole", "even_split_fresh": MAYBE, "even_split_interval": [NUMBER],
    "equivalent_safety_factor": MAYBE,
    "safety_factor_design": {"safety_factor": NUMBER, "area_m2": MAYBE, "cost": MAYBE, "fresh": MAYBE,
                             "fresh_interval": [NUMBER]},
    "seed": "whole",
}  # fmt: skip
ALTERNATIVES = {
    "gap": NUMBER, "asked": "whole", "proven": "flag",
    "designs": [{"objective": NUMBER, "area_m2": NUMBER, "cost": NUMBER, "picks": "list",
                 "blocks": [{"block": TEXT, "time_h": NUMBER, "spare_bar": NUMBER}],
                 "spare_time_h": NUMBER, "safety_factor": MAYBE}],
}  # fmt: skip
SOLVER = {
    "name": TEXT, "version": TEXT, "modeler": TEXT, "modeler_version": TEXT, "seed": "whole", "threads": "whole",
    "time_limit_s": MAYBE, "relative_gap": NUMBER, "feasibility_tolerance_h": NUMBER,
    "solves": "whole", "rows": "whole", "columns": "whole",
}  # fmt: skip
AREA_PARTS = [{"name": TEXT, "m2": NUMBER, "cost": NUMBER}]
CURVE = {
    "schema": TEXT, "medium": TEXT, "law": TEXT,
    "parameters": {"*": {"value": NUMBER, "se": MAYBE, "unit": TEXT}},
    "tested": {"loading_L_m2": NUMBER, "flux_LMH": NUMBER}, "turbidity_loading_L_m2": MAYBE,
    "lots": {"*": {"resistance": NUMBER, "resistance_se": MAYBE, "fouling": NUMBER, "fouling_se": MAYBE}},
    "alternatives": [{"law": TEXT, "aicc": MAYBE, "weight": NUMBER}],
    "points": [{"run": TEXT, "row": "whole", "loading_L_m2": NUMBER, "flux_LMH": NUMBER,
                "resistance_bar_per_LMH": MAYBE, "excluded": "text or null"}],
    "flags": [{"code": TEXT, "run": TEXT, "rows": "rows", "text": TEXT}],
}  # fmt: skip

KINDS = {
    TEXT: lambda v: isinstance(v, str),
    "text or null": lambda v: v is None or isinstance(v, str),
    NUMBER: lambda v: isinstance(v, int | float) and not isinstance(v, bool) and math.isfinite(v),
    MAYBE: lambda v: v is None or (isinstance(v, int | float) and math.isfinite(v)),
    "list": lambda v: isinstance(v, list),
    "flag": lambda v: isinstance(v, bool),
    "whole": lambda v: isinstance(v, int) and not isinstance(v, bool),
    "rows": lambda v: v is None or (len(v) == 2 and all(isinstance(row, int) for row in v)),
}


def assert_shape(value: Any, shape: Any, place: str = "$") -> None:
    """`value` has exactly the keys and kinds of `shape` ("*": any key; a list: any number of entries)."""
    if isinstance(shape, str):
        assert KINDS[shape](value), f"{place}: {value!r} is no {shape}"
    elif isinstance(shape, list):
        for index, entry in enumerate(value):
            assert_shape(entry, shape[0], f"{place}[{index}]")
    elif "*" in shape:
        for key, entry in value.items():
            assert_shape(entry, shape["*"], f"{place}.{key}")
    else:
        assert list(value) == list(shape), f"{place}: keys {list(value)}"
        for key, entry in value.items():
            assert_shape(entry, shape[key], f"{place}.{key}")


def read(text: str) -> Any:
    """JSON without the constants that are no JSON."""

    def refuse(name: str) -> None:
        raise AssertionError(f"{name} is no JSON")

    return json.loads(text, parse_constant=refuse)


def test_design_has_exactly_the_promised_keys() -> None:
    document = read(dumps(design_document(results.design())))
    assert_shape(document, DESIGN)
    assert document["schema"] == "trainopt.design/1"


def test_infeasible_design_adds_reasons_and_has_nulls_for_numbers() -> None:
    document = read(dumps(design_document(results.infeasible())))
    reasons = document.pop("reasons")
    assert list(document) == list(DESIGN)
    assert_shape(reasons[:1], [{"text": TEXT, "needs": {"*": MAYBE}}])
    assert_shape(reasons[1:], [{"text": TEXT, "needs": {"*": MAYBE}, "module": TEXT}])
    assert (reasons[1]["needs"], reasons[1]["module"]) == ({"primary.max_count": 25}, "oat-coarse-09")
    assert reasons[0]["needs"] == {"clarification.pressure_bar": 2.31, "batch.time_h": None}
    numbers = ("objective", "area_m2", "cost", "time_h", "cost_parts", "safety_factor", "saving")
    assert [document[key] for key in numbers] == [None] * len(numbers)
    assert document["blocks"] == []


def test_curve_has_exactly_the_promised_keys() -> None:
    document = read(dumps(curve_document(results.curve())))
    assert_shape(document, CURVE)
    assert document["schema"] == "trainopt.curve/1"
    assert document["flags"][0]["rows"] == [12, 15]


@pytest.mark.parametrize("number", [math.nan, math.inf, -math.inf, np.float64("nan"), np.float64("inf")])
def test_non_finite_numbers_become_null(number: float) -> None:
    document = read(dumps(design_document(results.design(area=number))))
    assert document["area_m2"] is None


def test_numbers_keep_every_digit() -> None:
    assert read(dumps({"x": 0.1 + 0.2}))["x"] == 0.1 + 0.2


def test_numpy_scalars_are_plain_numbers() -> None:
    data = finite({"a": np.float64(1.5), "b": np.int64(3), "c": np.bool_(True), "d": (1, [np.float64(2)])})
    assert data == {"a": 1.5, "b": 3, "c": True, "d": [1, [2.0]]}
    assert [type(data[key]) for key in "abc"] == [float, int, bool]


def test_what_has_no_place_in_json_is_refused() -> None:
    with pytest.raises(TypeError, match="object"):
        finite({"x": object()})


def test_a_reliable_design_and_its_alternatives_keep_their_shapes() -> None:
    case = trainopt.load_case(ROOT / "scenarios" / "harvest-reliable.yaml")
    document = json.loads(dumps(design_document(trainopt.design(case, alternatives=3, gap=0.1, limits=True))))
    assert_shape(document["limits"].pop("gains"), GAINS)
    document["limits"].pop("longer_runs")
    assert_shape(document["limits"], LIMITS)
    assert_shape(document["reliability"], RELIABILITY)
    assert_shape(document["alternatives"], ALTERNATIVES)
    sure = document["reliability"]
    assert sure["fresh_interval"][0] < sure["fresh"] < sure["fresh_interval"][1]
    assert sure["in_sample"] >= sure["target"]
    values = [one["objective"] for one in document["alternatives"]["designs"]]
    assert values == sorted(values)
    assert values[0] == document["objective"]["value"]
    assert values[-1] <= values[0] * 1.1 * (1.0 + 1e-9)
