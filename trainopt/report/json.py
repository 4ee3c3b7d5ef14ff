"""Result objects as JSON: the one place that knows the documents' keys.

Every key that holds a dimensional number carries its unit. NaN and infinities become null, so that any
JSON reader takes the document.
"""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from trainopt.report.beside_json import beside_document, limits_document
from trainopt.version import __version__

if TYPE_CHECKING:
    from trainopt.curves.curve import Curve
    from trainopt.report.dossier import Dossier
    from trainopt.train.results import (
        AreaParts,
        BlockDesign,
        CostParts,
        Design,
        EvenSplit,
        Reason,
        Saving,
        StageDesign,
    )

Document = dict[str, Any]


def design_document(design: Design) -> Document:
    """A design as the document `trainopt.design/1`."""
    document: Document = {
        "schema": "trainopt.design/1",
        "scenario": design.scenario,
        "status": design.status,
        "objective": None
        if design.objective is None
        else {
            "kind": design.objective.kind,
            "value": design.objective.value,
            "bound": design.objective.bound,
            "gap": design.objective.gap,
        },
        "area_m2": design.area,
        "cost": design.cost,
        "currency": design.currency,
        "time_h": design.time,
        "cost_parts": _cost_parts(design.cost_parts),
        "blocks": [block_document(block) for block in design.blocks],
        "safety_factor": design.safety_factor,
        "even_split": _even_split(design.even_split),
        "saving": _saving(design.saving),
        "warnings": [{"code": notice.code, "text": notice.text} for notice in design.warnings],
        "trainopt": __version__,
        "inputs": dict(design.inputs),
    }
    if design.area_parts is not None:
        document["area_parts"] = _area_parts(design.area_parts)
    document |= beside_document(design)
    if design.status == "infeasible":
        document["reasons"] = [_reason(reason) for reason in design.reasons]
    return document


def _reason(reason: Reason) -> Document:
    """A reason; `module` only where it asks for a count of one."""
    document: Document = {"text": reason.text, "needs": dict(reason.needs)}
    return document if reason.module is None else {**document, "module": reason.module}


def _cost_parts(parts: CostParts | None) -> Document | None:
    if parts is None:
        return None
    return {
        "modules": parts.modules,
        "holders": parts.holders,
        "flush": parts.flush,
        "product": parts.product,
        "hours": parts.hours,
    }


def block_document(block: BlockDesign) -> Document:
    """One block of a design, an even split or a rating."""
    pressure = block.pressure
    return {
        "block": block.block,
        "operation": block.operation,
        "time_h": block.time,
        "setup_h": block.setup,
        "flow_L_per_h": block.flow,
        "starting_flow_L_per_h": block.starting_flow,
        "pressure_bar": {
            "limit": pressure.limit,
            "static": pressure.static,
            "line": pressure.line,
            "stages": pressure.stages,
            "spare": pressure.spare,
        },
        "budget_bar_h": block.budget,
        "demand_bar_h": block.demand,
        "stages": [_stage(stage) for stage in block.stages],
    }


def _stage(stage: StageDesign) -> Document:
    return {
        "stage": stage.stage,
        "medium": stage.medium,
        "module": stage.module,
        "count": stage.count,
        "holders": dict(stage.holders),
        "area_m2": stage.area,
        "ideal_area_m2": stage.ideal_area,
        "loading_L_m2": stage.loading,
        "flux_LMH": stage.flux,
        "demand_bar_h": stage.demand,
        "pressure_bar": stage.pressure,
        "pressure_share": stage.pressure_share,
        "safety_factor": stage.safety_factor,
        "limited_by": stage.limited_by,
    }


def _even_split(even: EvenSplit | None) -> Document | None:
    if even is None:
        return None
    return {
        "status": even.status,
        "area_m2": even.area,
        "cost": even.cost,
        "blocks": [block_document(block) for block in even.blocks],
    }


def _saving(saving: Saving | None) -> Document | None:
    if saving is None:
        return None
    return {
        "area_m2": saving.area,
        "area_percent": saving.area_percent,
        "cost": saving.cost,
        "cost_percent": saving.cost_percent,
    }


def curve_document(curve: Curve, uncertainty: bool = False) -> Document:
    """A curve with the points it was fitted on, as the document `trainopt.curve/1`.

    With `uncertainty` also its 90 % band, the spread between lots and the errors on runs left out.
    """
    document = _curve_document(curve)
    return {**document, **_uncertainty(curve)} if uncertainty and curve.evidence is not None else document


def _uncertainty(curve: Curve) -> Document:
    import numpy as np

    from trainopt.curves.uncertainty import band, left_out_errors, lot_spread

    loading = np.linspace(0.0, curve.tested_loading, 41)
    low, high = band(curve, loading, level=0.9)
    spread = lot_spread(curve)
    return {
        "band": {
            "level": 0.9,
            "loading_L_m2": loading.tolist(),
            "low_bar_per_LMH": low.tolist(),
            "high_bar_per_LMH": high.tolist(),
        },
        "lot_spread": None
        if spread is None
        else {"lots": spread.lots, "resistance": spread.log_resistance, "fouling": spread.log_fouling},
        "left_out_errors": left_out_errors(curve),
    }


def _curve_document(curve: Curve) -> Document:
    return {
        "schema": "trainopt.curve/1",
        "medium": curve.medium,
        "law": curve.law,
        "parameters": {
            name: {"value": estimate.value, "se": estimate.se, "unit": estimate.unit}
            for name, estimate in curve.parameters.items()
        },
        "tested": {"loading_L_m2": curve.tested_loading, "flux_LMH": curve.tested_flux},
        "turbidity_loading_L_m2": curve.turbidity_loading,
        "lots": {
            lot: {
                "resistance": effect.resistance,
                "resistance_se": effect.resistance_se,
                "fouling": effect.fouling,
                "fouling_se": effect.fouling_se,
            }
            for lot, effect in curve.lots.items()
        },
        "alternatives": [
            {"law": other.law, "aicc": other.aicc, "weight": other.weight} for other in curve.alternatives
        ],
        "points": [
            {
                "run": point.run,
                "row": point.row,
                "loading_L_m2": point.loading,
                "flux_LMH": point.flux,
                "resistance_bar_per_LMH": point.resistance,
                "excluded": point.excluded,
            }
            for point in curve.points
        ],
        "flags": [
            {
                "code": flag.code,
                "run": flag.run,
                "rows": None if flag.rows is None else list(flag.rows),
                "text": flag.text,
            }
            for flag in curve.flags
        ],
    }


def _area_parts(parts: AreaParts) -> list[Document]:
    """Parts that add up to the installed area in m² and to the cost per batch."""
    return [{"name": part.name, "m2": part.area, "cost": part.cost} for part in parts.parts]


def report_document(dossier: Dossier) -> Document:
    """A design with its curves and the course of its batch, as the document `trainopt.report/1`."""
    return {
        "schema": "trainopt.report/1",
        "date": dossier.date,
        "versions": dict(dossier.versions),
        "options": dict(dossier.options),
        "batch": {"volume_L": dossier.volume, "time_h": dossier.time_allowed, "schedule": dossier.schedule},
        "safety_factor_asked_for": dossier.safety_factor,
        "lots": list(dossier.lots),
        "assumptions": list(dossier.assumptions),
        "design": design_document(dossier.design),
        "curves": [curve_document(curve) for _, curve in sorted(dossier.curves.items())],
        "stage_loadings": [
            {
                "stage": stage.stage,
                "loading_L_m2": stage.loading,
                "derated_loading_L_m2": stage.design_loading,
                "allowed_loading_L_m2": stage.cap,
                "allowed_because_of": stage.cap_words,
            }
            for stage in dossier.stage_curves
        ],
        "area_parts": None if dossier.area_parts is None else _area_parts(dossier.area_parts),
        "limits": None if dossier.limits is None else limits_document(dossier.limits),
        "volumes": [
            {"volume_L": point.volume, "objective": point.objective, "even_split": point.even_split}
            for point in dossier.volumes
        ],
        "courses": [
            {
                "block": course.block,
                "lot": course.lot,
                "worst_lot": course.worst,
                "derated": course.derated,
                "limit_bar": course.limit,
                "time_h": course.time.tolist(),
                "flow_L_per_h": course.flow.tolist(),
                "pressure_bar": course.total.tolist(),
                "stages": [{"stage": name, "pressure_bar": values.tolist()} for name, values in course.stages],
            }
            for course in dossier.courses
        ],
    }


def dumps(document: Document) -> str:
    """The document as JSON text, non-finite numbers as null, ending in a newline."""
    return json.dumps(finite(document), ensure_ascii=False, allow_nan=False, indent=2) + "\n"


def finite(value: Any) -> Any:
    """The same plain data with every non-finite number as None, and numpy scalars as Python's own."""
    if isinstance(value, Mapping):
        return {str(key): finite(entry) for key, entry in value.items()}
    if isinstance(value, list | tuple):
        return [finite(entry) for entry in value]
    if isinstance(value, bool | str | int) or value is None:
        return value
    if isinstance(value, float):
        return float(value) if math.isfinite(value) else None
    if hasattr(value, "item"):
        return finite(value.item())
    raise TypeError(f"{type(value).__name__} has no place in a JSON document")
