"""The curve of a medium file: from its bench runs, or from the parameters it gives."""

from __future__ import annotations

from collections import Counter
from collections.abc import Collection, Iterable, Sequence
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from trainopt.bench.reduce import reduce_run
from trainopt.bench.run import Floats, ReducedRun
from trainopt.curves.curve import Alternative, Curve, Estimate, LotEffect, Point
from trainopt.curves.endpoint import turbidity_loading
from trainopt.curves.evidence import Evidence, seen, weigh
from trainopt.curves.fit import Fit
from trainopt.curves.given import given_curve
from trainopt.curves.laws import LAWS
from trainopt.curves.notes import curve_flags
from trainopt.curves.readings import fit_readings
from trainopt.curves.viscosity import viscosity_ratio
from trainopt.errors import InputError, Problem

if TYPE_CHECKING:
    from trainopt.files import Medium


def fit_curve(medium: Medium) -> Curve:
    """The resistance curve of a medium; raises `InputError` with every problem in its runs."""
    if not medium.curve.runs:
        return given_curve(medium)
    runs, problems = reduced_runs(medium)
    if problems:
        raise InputError(problems)
    reference = _reference_temperature(runs)
    runs = [_at_temperature(run, reference) for run in runs]
    evidence = weigh(fit_readings(runs), _names(medium.curve.law))
    if evidence is None:
        total = sum(int(run.used.sum()) for run in runs)
        text = f"{total} usable readings are too few for law '{medium.curve.law}'; expected a longer run"
        raise InputError([medium.source.at(("curve", "runs"), text)])
    if not evidence.decided:
        raise InputError([medium.source.at(("curve", "law"), _undecided(evidence))])
    return _fitted(medium, runs, evidence, reference)


def _reference_temperature(runs: Sequence[ReducedRun]) -> float | None:
    """The median of the runs' temperatures, degC; None where none is given."""
    known = [run.temperature for run in runs if run.temperature is not None]
    return float(np.median(known)) if known else None


def _at_temperature(run: ReducedRun, reference: float | None) -> ReducedRun:
    """The run as it would have resisted at the reference temperature, by the viscosity of water."""
    ratio = viscosity_ratio(reference, run.temperature)
    if ratio == 1.0:
        return run
    return replace(run, resistance=run.resistance * ratio, pressure_time=run.pressure_time * ratio)


def _undecided(evidence: Evidence) -> str:
    """Why `auto` refuses to pick, and what would let it."""
    names = ", ".join(sorted({evidence.chosen.law, *(rival.law for rival in evidence.rivals)}))
    return (
        f"auto cannot tell between {names}: they fit the runs equally well (within 2 AICc units) but differ by up "
        f"to {evidence.spread:.0%} in resistance inside the tested range; expected a longer run, more readings or a "
        "second lot, or one of these laws by name"
    )


def reduced_runs(medium: Medium, files: Collection[Path] | None = None) -> tuple[list[ReducedRun], list[Problem]]:
    """A medium's runs, those of `files` alone where given, as far as they can be reduced, and their problems."""
    runs: list[ReducedRun] = []
    problems: list[Problem] = []
    for index, run in enumerate(medium.curve.runs):
        if files is not None and run.file not in files:
            continue

        def where(loc: tuple[str, ...], text: str, index: int = index) -> Problem:
            return medium.source.at(("curve", "runs", index, *loc), text)

        try:
            reduced = reduce_run(run, where)
        except InputError as error:
            problems.extend(error.problems)
            continue
        if not reduced.used.any():
            problems.append(where(("file",), _unusable(reduced)))
        runs.append(reduced)
    return runs, problems


def _unusable(run: ReducedRun) -> str:
    """Why nothing of a run is left to fit: the commonest reason among its readings."""
    counted = Counter(reason for reason in run.excluded if reason)
    because = f": most readings are left out ({counted.most_common(1)[0][0]})" if counted else ""
    return f"run '{run.name}' holds no usable reading{because}; expected filtrate beyond the hold-up under a pressure"


def _names(law: str) -> tuple[str, ...]:
    return tuple(LAWS) if law == "auto" else (law,)


def _fitted(medium: Medium, runs: Sequence[ReducedRun], evidence: Evidence, reference: float | None) -> Curve:
    fit = evidence.chosen
    law = LAWS[fit.law]
    k = len(fit.parameters)
    errors = np.sqrt(np.diag(fit.covariance))
    lots = tuple(sorted({run.lot for run in runs}))
    limits = medium.limits
    return Curve(
        medium=medium.medium,
        law=fit.law,
        parameters={
            name: Estimate(value, _known(error), unit)
            for name, value, error, unit in zip(law.parameters, fit.parameters, errors, law.units, strict=False)
        },
        covariance=tuple(tuple(float(value) for value in row) for row in fit.covariance[:k, :k]),
        tested_loading=seen(evidence.readings, fit),
        tested_flux=max(float(np.median(run.flux[run.used])) for run in runs),
        tested_temperature=reference,
        turbidity_loading=turbidity_loading(runs, limits.turbidity, limits.pool_turbidity),
        feed_loading=_feed_loading(runs),
        lots=_lot_effects(lots, fit, errors[k:]),
        alternatives=_alternatives(evidence.fits),
        points=tuple(_points(runs)),
        flags=(
            *(flag for run in runs for flag in run.flags),
            *curve_flags(medium.medium, runs, evidence, limits.differential_pressure, limits.turbidity),
        ),
        source="runs",
        evidence=evidence,
    )


def _known(error: float) -> float | None:
    return float(error) if np.isfinite(error) else None


def _lot_effects(lots: tuple[str, ...], fit: Fit, errors: Floats) -> dict[str, LotEffect]:
    rho, kappa, n = np.exp(fit.log_rho), np.exp(fit.log_kappa), len(lots)
    return {
        lot: LotEffect(float(rho[i]), _known(rho[i] * errors[i]), float(kappa[i]), _known(kappa[i] * errors[n + i]))
        for i, lot in enumerate(lots)
    }


def _alternatives(fits: tuple[Fit, ...]) -> tuple[Alternative, ...]:
    """All laws tried, best first, with Akaike weights."""
    evidence = np.exp(-0.5 * (np.array([fit.aicc for fit in fits]) - fits[0].aicc))
    weights = evidence / evidence.sum()
    return tuple(
        Alternative(fit.law, fit.aicc, float(weight), fit.error) for fit, weight in zip(fits, weights, strict=True)
    )


def _feed_loading(runs: Sequence[ReducedRun]) -> float | None:
    """How far the filter upstream was loaded for every lot's feed: least over lots, farthest within each."""
    said: dict[str, float] = {}
    for run in runs:
        if run.feed_loading is not None:
            said[run.lot] = max(run.feed_loading, said.get(run.lot, 0.0))
    return min(said.values(), default=None)


def _points(runs: Iterable[ReducedRun]) -> Iterable[Point]:
    for run in runs:
        columns = (run.rows, run.loading, run.flux, run.resistance, run.turbidity, run.pool_turbidity)
        rows = zip(*(column.tolist() for column in columns), strict=True)
        for (row, loading, flux, resistance, turbidity, pooled), excluded in zip(rows, run.excluded, strict=True):
            read = turbidity if turbidity == turbidity else None
            pool = pooled if pooled == pooled else None
            yield Point(run.name, row, run.lot, loading, flux, resistance, read, excluded, pool)
