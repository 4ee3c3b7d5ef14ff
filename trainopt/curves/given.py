"""The curve of a medium file that gives its parameters, perhaps frozen from runs earlier."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from trainopt.bench.run import Flag
from trainopt.curves.curve import Curve, Estimate, LotEffect
from trainopt.curves.laws import LAWS, Law
from trainopt.errors import InputError
from trainopt.files.source import file_hash

if TYPE_CHECKING:
    from trainopt.files import Medium, Origin


def given_curve(medium: Medium) -> Curve:
    """The curve by its parameters, checked to be a resistance up to its tested loading."""
    spec = medium.curve
    law = LAWS[spec.law]
    values = _values(medium, law)
    tested, origin = spec.tested, spec.origin
    assert tested is not None, "the file's schema asks for the tested range"
    pole = law.pole(*values)
    if values[0] <= 0.0 or tested.loading >= pole:
        text = f"law '{spec.law}' with these parameters is not finite and positive up to the tested loading"
        field = "coefficients" if law.polynomial else "parameters"
        if values[0] > 0.0:
            text += f"; expected `tested: loading` below {pole:.4g} L/m2"
        raise InputError([medium.source.at(("curve", field), text)])
    errors = (origin.standard_errors if origin else None) or {}
    return Curve(
        medium=medium.medium,
        law=spec.law,
        parameters={
            name: Estimate(value, errors.get(name), unit)
            for name, value, unit in zip(law.parameters, values, law.units, strict=True)
        },
        covariance=None,
        tested_loading=tested.loading,
        tested_flux=tested.flux,
        tested_temperature=tested.temperature,
        turbidity_loading=origin.turbidity_loading if origin else None,
        feed_loading=origin.feed_loading if origin else None,
        lots=_lots(medium),
        alternatives=(),
        points=(),
        flags=tuple(_origin_flags(medium, origin)) if origin else (),
        source="parameters",
    )


def _values(medium: Medium, law: Law) -> tuple[float, ...]:
    spec = medium.curve
    if spec.coefficients is not None:
        return spec.coefficients
    given = spec.parameters or {}
    return tuple(given[name] for name in law.parameters)


def _lots(medium: Medium) -> dict[str, LotEffect]:
    spec = medium.curve
    errors = (spec.origin.lots if spec.origin else None) or {}
    out = {}
    for name, lot in sorted((spec.lots or {}).items()):
        known = errors.get(name)
        rho_error, kappa_error = (known.resistance, known.fouling) if known else (None, None)
        out[name] = LotEffect(lot.resistance, rho_error, lot.fouling, kappa_error)
    return out


def _origin_flags(medium: Medium, origin: Origin) -> Iterator[Flag]:
    """What no longer is as it was when the curve was frozen."""
    for run in origin.runs:
        if not run.file.is_file():
            text = "this run is no longer there; the curve was fitted to it when it was frozen"
            yield Flag("run-missing", run.file.name, None, text)
        elif f"sha256:{file_hash(run.file)}" != run.sha256:
            text = "this run has changed since the curve was frozen; fit and freeze again if the change matters"
            yield Flag("run-changed", run.file.name, None, text)
    limits = medium.limits
    if (limits.turbidity, limits.pool_turbidity) != (origin.turbidity, origin.pool_turbidity):
        text = (
            "the turbidity limits have changed since the curve was frozen: the loading where they are reached "
            "still is that of the old ones; fit and freeze again"
        )
        yield Flag("turbidity-limit-changed", "", None, text)
