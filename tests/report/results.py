"""Results built by hand for the tests of their rendering; the numbers are made up and mean nothing."""

from __future__ import annotations

from trainopt.bench.run import Flag
from trainopt.curves.curve import Alternative, Curve, Estimate, LotEffect, Point
from trainopt.train.results import (
    BlockDesign,
    BlockPressure,
    CostParts,
    Design,
    EvenSplit,
    Notice,
    Objective,
    Reason,
    Saving,
    StageDesign,
)


def stage(name: str = "primary", medium: str = "oat-coarse", count: int = 13, **changes: object) -> StageDesign:
    area = 0.9 * count
    values: dict[str, object] = {
        "stage": name,
        "medium": medium,
        "module": f"{medium}-09",
        "count": count,
        "holders": {"rack-10": 2},
        "area": area,
        "ideal_area": 0.97 * area,
        "loading": 2000.0 / area,
        "flux": 520.0 / area,
        "demand": 2.2,
        "pressure": 0.61,
        "pressure_share": 0.47,
        "safety_factor": 1.53,
        "limited_by": "pressure",
        "modules_cost": 760.0 * count,
        "holders_cost": 42.0,
    }
    return StageDesign(**{**values, **changes})  # type: ignore[arg-type]


def block(name: str, *stages: StageDesign, **changes: object) -> BlockDesign:
    values: dict[str, object] = {
        "block": name,
        "operation": "constant-flow",
        "time": 3.84,
        "setup": 0.5,
        "flow": 520.8,
        "pressure": BlockPressure(1.4, 0.05, 0.01, 1.3, 0.04),
        "budget": 5.18,
        "demand": 5.0,
        "worst_lot": "b",
        "stages": stages,
    }
    return BlockDesign(**{**values, **changes})  # type: ignore[arg-type]


def blocks(longer: int = 0) -> tuple[BlockDesign, ...]:
    return (
        block("clarification", stage(count=13 + longer), stage("secondary", "rye-fine", 16 + longer)),
        block("guard", stage("membrane", "quill-02", 9, holders={}, limited_by="flux", ideal_area=None)),
    )


PARTS = CostParts(28000.0, 84.0, 64.8, 906.0, 1080.0)


def design(**changes: object) -> Design:
    values: dict[str, object] = {
        "scenario": "2000 L oat-cell harvest in one shift",
        "status": "optimal",
        "objective": Objective("area", 34.2, 34.2, 0.0),
        "area": 34.2,
        "cost": PARTS.total,
        "currency": "EUR",
        "time": 6.0,
        "cost_parts": PARTS,
        "blocks": blocks(),
        "safety_factor": 1.53,
        "even_split": EvenSplit("optimal", 36.0, PARTS.total + 1500.0, PARTS, 6.0, blocks(1)),
        "saving": Saving(1.8, 5.0, 1500.0, 4.7),
        "warnings": (Notice("lot-not-tested", "medium 'rye-dense' was not tested with lot 'c'"),),
        "inputs": {"scenarios/harvest.yaml": "sha256:00"},
    }
    return Design(**{**values, **changes})  # type: ignore[arg-type]


def infeasible() -> Design:
    return design(
        status="infeasible",
        objective=None,
        area=None,
        cost=None,
        time=None,
        cost_parts=None,
        blocks=(),
        safety_factor=None,
        even_split=EvenSplit("infeasible", None, None, None, None, (), "no pressure left"),
        saving=None,
        warnings=(),
        reasons=(
            Reason(
                "block 'clarification' would need 2.31 bar where 1.4 bar is allowed",
                {"clarification.pressure_bar": 2.31, "batch.time_h": None},
            ),
            Reason("stage 'primary' would need 25 × oat-coarse-09", {"primary.max_count": 25}, "oat-coarse-09"),
        ),
    )


def curve(**changes: object) -> Curve:
    points = tuple(
        Point("a.csv", row, "a", 7.0 * row, 110.0, 0.0003 * 1.1**row, 3.0 if row % 3 == 0 else None, None)
        for row in range(4, 30)
    )
    left_out = Point("a.csv", 3, "a", -5.0, 110.0, 0.0003, None, "the hold-up is still being displaced")
    values: dict[str, object] = {
        "medium": "oat-coarse",
        "law": "intermediate",
        "parameters": {
            "R0": Estimate(0.00034, 1e-6, "bar/LMH"),
            "k": Estimate(0.0112, None, "m2/L"),
        },
        "covariance": None,
        "tested_loading": 203.0,
        "tested_flux": 110.0,
        "tested_temperature": 21.0,
        "turbidity_loading": None,
        "feed_loading": None,
        "lots": {"a": LotEffect(1.0, 0.01, 1.0, None)},
        "alternatives": (
            Alternative("intermediate", -310.2, 0.9, 0.012),
            Alternative("cubic", -305.0, 0.1, 0.02),
        ),
        "points": (left_out, *points),
        "flags": (Flag("pump-slip", "a.csv", (12, 15), "flow falls while pressure backs off"),),
        "source": "runs",
    }
    return Curve(**{**values, **changes})  # type: ignore[arg-type]
