"""Sweeps, ratings, courses and audits as JSON documents; every key of a dimensional number carries its unit."""

from __future__ import annotations

from typing import TYPE_CHECKING

from trainopt.report.beside_json import limits_document, picks_document
from trainopt.report.json import Document, block_document, design_document
from trainopt.version import __version__

if TYPE_CHECKING:
    from collections.abc import Sequence

    from trainopt.study.audit import Audit, CaseAudit
    from trainopt.study.axis import Axis
    from trainopt.study.rate import BatchRating, LotRating, Rating
    from trainopt.study.results import Change, Sweep, SweepCell
    from trainopt.study.simulate import BlockCourse, LotCourse, Simulation
    from trainopt.train.results import Chance


def sweep_document(sweep: Sweep) -> Document:
    """A sweep as the document `trainopt.sweep/1`; axis values in the units they were given in."""
    return {
        "schema": "trainopt.sweep/1",
        "scenario": sweep.scenario,
        "objective": sweep.kind,
        "currency": sweep.currency,
        "complete": sweep.complete,
        "axes": [
            {"field": axis.field, "unit": axis.unit, "values": [axis.shown(value) for value in axis.values]}
            for axis in sweep.axes
        ],
        "cells": [_cell(sweep, cell) for cell in sweep.cells],
        "changes": [_change(sweep, change) for change in sweep.changes],
        "trainopt": __version__,
        "inputs": dict(sweep.inputs),
    }


def _cell(sweep: Sweep, cell: SweepCell) -> Document:
    even = cell.even_split
    return {
        "at": _shown(sweep.axes, cell.at),
        "status": cell.status,
        "objective": cell.objective,
        "area_m2": cell.area,
        "cost": cell.cost,
        "time_h": cell.time,
        "spare_bar": dict(zip(sweep.blocks, cell.spare, strict=False)),
        "picks": picks_document(cell.picks),
        "even_split": None if even is None else {"status": even.status, "area_m2": even.area, "cost": even.cost},
        "reason": cell.reason or None,
    }


def _change(sweep: Sweep, change: Change) -> Document:
    axis = next(axis for axis in sweep.axes if axis.field == change.axis)
    others = [other for other in sweep.axes if other is not axis]
    return {
        "axis": change.axis,
        "between": [axis.shown(value) for value in change.between],
        "from": picks_document(change.before),
        "to": picks_document(change.after),
        "others": {other.field: other.shown(value) for other, value in zip(others, change.others, strict=True)},
    }


def _shown(axes: Sequence[Axis], at: Sequence[float]) -> list[float]:
    return [axis.shown(value) for axis, value in zip(axes, at, strict=True)]


def rate_document(rating: Rating) -> Document:
    """A rating as the document `trainopt.rate/1`."""
    return {
        "schema": "trainopt.rate/1",
        "scenario": rating.scenario,
        "status": rating.status,
        "volume_L": rating.volume,
        "time_h": rating.time,
        "largest_volume_L": rating.largest_volume,
        "shortest_time_h": rating.shortest_time,
        "safety_factor": rating.safety_factor,
        "derated_by": rating.derated_by,
        "limited_by": rating.limited_by,
        "picks": picks_document(rating.picks),
        "blocks": [block_document(block) for block in rating.blocks],
        "lots": [_lot(rating, lot) for lot in rating.lots],
        "batches": [_batch(batch) for batch in rating.batches],
        "chance_of_finishing": chance_document(rating.chance, rating.chance_lots),
        "warnings": [{"code": notice.code, "text": notice.text} for notice in rating.warnings],
        "trainopt": __version__,
        "inputs": dict(rating.inputs),
    }


def chance_document(chance: Chance | None, lots: int) -> Document | None:
    """A share of sampled lots with its 95 % Wilson interval; null where no variability is known."""
    if chance is None:
        return None
    return {"share": chance.share, "interval": [chance.low, chance.high], "lots": lots}


def _lot(rating: Rating, lot: LotRating) -> Document:
    names = rating.block_names
    return {
        "lot": lot.lot,
        "largest_volume_L": lot.largest_volume,
        "shortest_time_h": lot.shortest_time,
        "pressure_bar": dict(zip(names, lot.pressures, strict=True)),
    }


def _batch(batch: BatchRating) -> Document:
    return {
        "volume_L": batch.volume,
        "status": "passes" if batch.passes else "fails",
        "shortest_time_h": batch.shortest_time,
        "safety_factor": batch.safety_factor,
        "limited_by": batch.limited_by,
        "chance_of_finishing": None if batch.chance is None else batch.chance.share,
    }


def simulate_document(simulation: Simulation) -> Document:
    """The course of a batch as the document `trainopt.simulate/1`."""
    return {
        "schema": "trainopt.simulate/1",
        "scenario": simulation.scenario,
        "volume_L": simulation.volume,
        "time_h": simulation.time,
        "needed_h": simulation.needed,
        "over_run_h": simulation.over_run,
        "derated_by": simulation.derated_by,
        "picks": picks_document(simulation.picks),
        "blocks": [_block_course(block) for block in simulation.blocks],
        "trainopt": __version__,
        "inputs": dict(simulation.inputs),
    }


def _block_course(block: BlockCourse) -> Document:
    return {
        "block": block.block,
        "mode": block.mode,
        "pressure_limit_bar": block.limit,
        "time_h": block.time,
        "flow_L_per_h": block.flow,
        "lots": [_lot_course(lot) for lot in block.lots],
    }


def _lot_course(lot: LotCourse) -> Document:
    course = lot.course
    return {
        "lot": lot.lot,
        "needed_h": lot.needed,
        "over_run_h": lot.over_run,
        "limit_volume_L": lot.limit_volume,
        "time_h": course.time.tolist(),
        "volume_L": course.volume.tolist(),
        "flow_L_per_h": course.flow.tolist(),
        "total_bar": course.total.tolist(),
        "line_bar": course.line.tolist(),
        "stages": [
            {
                "stage": name,
                "pressure_bar": course.pressure[k].tolist(),
                "loading_L_m2": course.loading[k].tolist(),
                "flux_LMH": course.flux[k].tolist(),
                "turbidity_NTU": lot.turbidity[name].tolist() if name in lot.turbidity else None,
            }
            for k, name in enumerate(course.stages)
        ],
    }


def audit_document(audit: Audit) -> Document:
    """An audit as the document `trainopt.audit/1`; every case with its whole design."""
    return {
        "schema": "trainopt.audit/1",
        "cases": [_case(case) for case in audit.cases],
        "failures": [{"file": p.file, "line": p.line, "text": p.text} for p in audit.failures],
        "trainopt": __version__,
    }


def _case(case: CaseAudit) -> Document:
    waste = case.waste
    return {
        "file": case.file,
        "lever": case.lever,
        "verdict": case.verdict,
        "limits": None if case.limits is None else limits_document(case.limits),
        "modules": {"optimum": case.modules[0], "even_split": case.modules[1]},
        "pressure_bar": [
            {"block": s.block, "stage": s.stage, "optimum": s.optimum, "even_split": s.even} for s in case.shifts
        ],
        "most_waste": None
        if waste is None
        else {"even": waste.even, "ideal": waste.ideal, "percent": waste.percent, "factor": waste.factor},
        "design": design_document(case.design),
    }
