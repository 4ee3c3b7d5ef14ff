"""A fitted curve as a medium file by its parameters: the same designs, without the runs."""

from __future__ import annotations

import os
from pathlib import Path
from typing import TYPE_CHECKING, Any

import yaml

from trainopt.curves.curve import Curve
from trainopt.curves.laws import LAWS
from trainopt.errors import InputError, Problem
from trainopt.files.source import file_hash, shown_path

if TYPE_CHECKING:
    from trainopt.files import Medium


def frozen_text(medium: Medium, curve: Curve, target: Path) -> str:
    """YAML of `medium` with its curve by parameters, for the file `target`; its name becomes the medium's.

    Floats are written with all their digits, so that the designs are the same. All else the file says is
    kept.
    """
    if curve.source != "runs":
        text = "is given by its parameters already; expected a medium with bench runs to freeze"
        raise InputError([medium.source.at(("curve",), text)])
    if target.suffix.lower() not in {".yaml", ".yml"}:
        raise InputError([Problem(shown_path(target), 0, "expected a name that ends in .yaml")])
    kept = {key: _plain(value) for key, value in medium.source.data.items() if key not in {"medium", "curve"}}
    about = {"about": kept.pop("about")} if "about" in kept else {}
    document = {"medium": target.stem, **about, "curve": _curve(medium, curve, target), **kept}
    head = (
        f"# Frozen by trainopt from {medium.source.shown}: the curve by its parameters, as the runs named below "
        "gave it.\n"
    )
    return head + yaml.dump(document, Dumper=_Dumper, sort_keys=False, allow_unicode=True, width=110)


class _Dumper(yaml.SafeDumper):
    """Block style for nested mappings, one line for flat ones."""

    def represent_mapping(self, tag: str, mapping: Any, flow_style: bool | None = None) -> yaml.MappingNode:
        flat = all(not isinstance(value, dict | list) for value in mapping.values())
        return super().represent_mapping(tag, mapping, flow_style=flat if flow_style is None else flow_style)

    def ignore_aliases(self, data: Any) -> bool:  # noqa: ARG002 (a name of the library)
        return True


def _plain(value: Any) -> Any:
    """What the file said, in plain types; numbers as they were written."""
    if isinstance(value, dict):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, tuple | list):
        return [_plain(item) for item in value]
    if isinstance(value, bool):
        return value
    if isinstance(value, int):
        return int(value)
    return float(value) if isinstance(value, float) else value


def _amount(value: float, unit: str) -> str | float:
    return f"{value!r} {unit}" if unit else value


def _curve(medium: Medium, curve: Curve, target: Path) -> dict[str, Any]:
    estimates = curve.parameters
    values = {name: _amount(estimate.value, estimate.unit) for name, estimate in estimates.items()}
    polynomial = LAWS[curve.law].polynomial
    tested = {"loading": _amount(curve.tested_loading, "L/m2"), "flux": _amount(curve.tested_flux, "LMH")}
    if curve.tested_temperature is not None:
        tested["temperature"] = _amount(curve.tested_temperature, "degC")
    out: dict[str, Any] = {"law": curve.law}
    out["coefficients" if polynomial else "parameters"] = list(values.values()) if polynomial else values
    out["tested"] = tested
    out["lots"] = {name: {"resistance": lot.resistance, "fouling": lot.fouling} for name, lot in curve.lots.items()}
    out["origin"] = _origin(medium, curve, target)
    return out


def _origin(medium: Medium, curve: Curve, target: Path) -> dict[str, Any]:
    limits = medium.limits
    out: dict[str, Any] = {
        "runs": [
            {
                "file": Path(os.path.relpath(run.file, target.absolute().parent)).as_posix(),
                "lot": run.lot,
                "sha256": f"sha256:{file_hash(run.file)}",
            }
            for run in medium.curve.runs
        ],
        "standard_errors": {
            name: _amount(one.se, one.unit) for name, one in curve.parameters.items() if one.se is not None
        },
        "lots": {
            name: _known({"resistance": lot.resistance_se, "fouling": lot.fouling_se})
            for name, lot in curve.lots.items()
        },
        "turbidity": limits.turbidity,
        "pool_turbidity": limits.pool_turbidity,
        "turbidity_loading": None if curve.turbidity_loading is None else _amount(curve.turbidity_loading, "L/m2"),
        "feed_loading": None if curve.feed_loading is None else _amount(curve.feed_loading, "L/m2"),
    }
    return _known(out)


def _known(values: dict[str, Any]) -> dict[str, Any]:
    return {key: value for key, value in values.items() if value is not None}
