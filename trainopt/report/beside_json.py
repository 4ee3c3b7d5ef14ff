"""What stands beside a design, as JSON: its reliability, other routes, near designs, and the proof."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Iterable

    from trainopt.train.results import (
        Alternatives,
        Chance,
        Design,
        Gain,
        Limits,
        LongerRun,
        Pick,
        Proof,
        ReliabilityResult,
        RouteDesigns,
    )

Document = dict[str, Any]


def beside_document(design: Design) -> Document:
    """The keys of what was asked for or applies; a design without them has none of them."""
    document: Document = {}
    if design.limits is not None:
        document["limits"] = limits_document(design.limits)
    if design.reliability is not None:
        document["reliability"] = reliability_document(design.reliability)
    if design.routes is not None:
        document["routes"] = _routes(design.routes)
    if design.alternatives is not None:
        document["alternatives"] = _alternatives(design.alternatives)
    if design.proof is not None:
        document["solver"] = proof_document(design.proof)
    return document


def picks_document(picks: Iterable[Pick]) -> list[list[object]]:
    """[stage, medium, module, count] of each pick."""
    return [[pick.stage, pick.medium, pick.module, pick.count] for pick in picks]


def _ends(chance: Chance | None) -> list[float] | None:
    return None if chance is None else [chance.low, chance.high]


def _share(chance: Chance | None) -> float | None:
    return None if chance is None else chance.share


def reliability_document(sure: ReliabilityResult) -> Document:
    """Shares of sampled lots that finish inside every limit; intervals are Wilson's at 95 %."""
    usual = sure.usual
    return {
        "target": sure.target,
        "in_sample": sure.in_sample,
        "fresh": sure.fresh.share,
        "fresh_interval": _ends(sure.fresh),
        "samples": sure.samples,
        "fresh_samples": sure.fresh_samples,
        "even_split_fresh": _share(sure.even_split),
        "even_split_interval": _ends(sure.even_split),
        "equivalent_safety_factor": sure.equivalent_safety_factor,
        "safety_factor_design": None
        if usual is None
        else {
            "safety_factor": usual.safety_factor,
            "area_m2": usual.area,
            "cost": usual.cost,
            "fresh": _share(usual.fresh),
            "fresh_interval": _ends(usual.fresh),
        },
        "seed": sure.seed,
    }


def _routes(routes: RouteDesigns) -> Document:
    return {
        "allowed": routes.allowed,
        "proven": routes.proven,
        "designs": [
            {
                "media": [list(pair) for pair in route.media],
                "status": "infeasible" if route.objective is None else "optimal",
                "objective": route.objective,
                "area_m2": route.area,
                "cost": route.cost,
                "picks": picks_document(route.picks),
            }
            for route in routes.designs
        ],
    }


def _alternatives(near: Alternatives) -> Document:
    return {
        "gap": near.gap,
        "asked": near.asked,
        "proven": near.proven,
        "designs": [
            {
                "objective": one.objective,
                "area_m2": one.area,
                "cost": one.cost,
                "picks": picks_document(one.picks),
                "blocks": [
                    {"block": block.block, "time_h": block.time, "spare_bar": block.pressure} for block in one.blocks
                ],
                "spare_time_h": one.spare_time,
                "safety_factor": one.safety_factor,
            }
            for one in near.designs
        ],
    }


def proof_document(proof: Proof) -> Document:
    """How the optimum was proven."""
    return {
        "name": proof.solver,
        "version": proof.solver_version,
        "modeler": proof.modeler,
        "modeler_version": proof.modeler_version,
        "seed": proof.seed,
        "threads": proof.threads,
        "time_limit_s": proof.time_limit,
        "relative_gap": proof.relative_gap,
        "feasibility_tolerance_h": proof.feasibility_tolerance,
        "solves": proof.solves,
        "rows": proof.rows,
        "columns": proof.columns,
    }


def limits_document(limits: Limits) -> Document:
    """What binds, and where it was asked for what a little more of each limit would gain."""
    document: Document = {
        "blocks": [
            {
                "block": block.block,
                "limited_by": block.limited_by,
                "stage": block.stage,
                "used": block.used,
                "head_bar": block.head,
                "spare_bar": block.spare,
                "stages": dict(block.stages),
                "text": block.text,
            }
            for block in limits.blocks
        ]
    }
    if limits.searched:
        document["gains"] = [_gain(gain) for gain in limits.gains]
        document["longer_runs"] = [_longer_run(run) for run in limits.longer_runs]
    return document


def _gain(gain: Gain) -> Document:
    return {
        "field": gain.field,
        "unit": gain.unit,
        "now": gain.now,
        "needs": gain.needs,
        "objective": gain.objective,
        "saves": gain.saves,
        "picks": picks_document(gain.picks),
        "text": gain.text,
    }


def _longer_run(run: LongerRun) -> Document:
    return {
        "medium": run.medium,
        "tested_L_m2": run.tested,
        "loading_L_m2": run.loading,
        "flux_LMH": run.flux,
        "pressure_bar": run.pressure,
        "objective": run.objective,
        "saves": run.saves,
        "picks": picks_document(run.picks),
        "text": run.text,
    }
