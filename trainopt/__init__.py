"""Sizes a filtration train from bench runs: the public Python API.

    import trainopt
    case = trainopt.load_case("scenarios/harvest.yaml")
    design = trainopt.design(case)

Names are imported when they are first used, so that `import trainopt` costs next to nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

from trainopt.version import __version__

if TYPE_CHECKING:
    from trainopt.bench.sheet import plan_run as plan_run
    from trainopt.curves.check import check as check
    from trainopt.curves.curve import Curve as Curve
    from trainopt.curves.freeze import frozen_text as frozen_text
    from trainopt.curves.medium import fit_curve as fit_curve
    from trainopt.curves.uncertainty import band as band
    from trainopt.curves.uncertainty import left_out_errors as left_out_errors
    from trainopt.curves.uncertainty import loading_at as loading_at
    from trainopt.curves.uncertainty import lot_spread as lot_spread
    from trainopt.errors import DefectError as DefectError
    from trainopt.errors import InputError as InputError
    from trainopt.errors import Problem as Problem
    from trainopt.files import Case as Case
    from trainopt.files import Workspace as Workspace
    from trainopt.files import load_case as load_case
    from trainopt.files import load_medium as load_medium
    from trainopt.files import load_workspace as load_workspace
    from trainopt.files import set_field as set_field
    from trainopt.optimize import design as design
    from trainopt.optimize.limits import what_limits as what_limits
    from trainopt.report.curve_figure import curve_figure as curve_figure
    from trainopt.report.curve_page import curve_page as curve_page
    from trainopt.report.dossier import Dossier as Dossier
    from trainopt.report.gather import gather as gather
    from trainopt.report.json import curve_document as curve_document
    from trainopt.report.json import design_document as design_document
    from trainopt.report.render import report_bytes as report_bytes
    from trainopt.report.render import report_figures as report_figures
    from trainopt.study.audit import audit as audit
    from trainopt.study.rate import rate as rate
    from trainopt.study.simulate import simulate as simulate
    from trainopt.study.sweep import sweep as sweep
    from trainopt.train.results import Design as Design

_HOMES = {
    "Case": "trainopt.files",
    "Curve": "trainopt.curves.curve",
    "DefectError": "trainopt.errors",
    "Design": "trainopt.train.results",
    "InputError": "trainopt.errors",
    "Problem": "trainopt.errors",
    "Workspace": "trainopt.files",
    "audit": "trainopt.study.audit",
    "rate": "trainopt.study.rate",
    "simulate": "trainopt.study.simulate",
    "sweep": "trainopt.study.sweep",
    "check": "trainopt.curves.check",
    "curve_document": "trainopt.report.json",
    "Dossier": "trainopt.report.dossier",
    "band": "trainopt.curves.uncertainty",
    "curve_figure": "trainopt.report.curve_figure",
    "curve_page": "trainopt.report.curve_page",
    "frozen_text": "trainopt.curves.freeze",
    "left_out_errors": "trainopt.curves.uncertainty",
    "loading_at": "trainopt.curves.uncertainty",
    "lot_spread": "trainopt.curves.uncertainty",
    "plan_run": "trainopt.bench.sheet",
    "design": "trainopt.optimize",
    "gather": "trainopt.report.gather",
    "report_bytes": "trainopt.report.render",
    "report_figures": "trainopt.report.render",
    "design_document": "trainopt.report.json",
    "fit_curve": "trainopt.curves.medium",
    "load_case": "trainopt.files",
    "load_medium": "trainopt.files",
    "load_workspace": "trainopt.files",
    "set_field": "trainopt.files",
    "what_limits": "trainopt.optimize.limits",
}

_SHOWN = {"Curve", "Design", "design", "fit_curve", "gather"}
"""Names whose results show themselves as tables in a notebook."""

__all__ = ["__version__", *sorted(_HOMES)]


def __getattr__(name: str) -> object:
    if name not in _HOMES:
        raise AttributeError(f"module 'trainopt' has no attribute {name!r}")
    value = getattr(import_module(_HOMES[name]), name)
    globals()[name] = value
    if name in _SHOWN:
        import_module("trainopt.report.notebook").install()
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
