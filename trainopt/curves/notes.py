"""What a curve's reader should know beside its numbers: flags that no single reading carries."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from trainopt.bench.quality import breakthrough
from trainopt.bench.run import Flag, ReducedRun
from trainopt.curves.evidence import Evidence, seen
from trainopt.curves.laws import LAWS

ENDPOINT = 1.0
"""Bench runs go on to about 20 psi (common practice, no source); one that ends below 1 bar ended early."""

LITTLE_FOULING = 1.2
TRADE_OFF = 0.95

SMALLEST_OUTLIER = 0.005
"""Relative distance from the curve below which a reading is nothing to look at, however smooth the others are."""


def curve_flags(
    medium: str,
    runs: Sequence[ReducedRun],
    evidence: Evidence,
    endpoint: float | None,
    turbidity: float | None,
) -> Iterator[Flag]:
    """Flags of the fit as a whole; `endpoint` bar is the medium's differential pressure rating, where it has one."""
    yield from _ended_early(runs, min(endpoint or ENDPOINT, ENDPOINT), turbidity)
    yield from _outliers(evidence)
    yield from _little_fouling(medium, evidence)
    yield from _open_lots(medium, evidence)
    yield from _rivals(medium, evidence)
    yield from _trade_off(medium, evidence)
    yield from _temperatures(medium, runs)


def _ended_early(runs: Sequence[ReducedRun], endpoint: float, turbidity: float | None) -> Iterator[Flag]:
    for run in runs:
        highest = float(run.pressure[run.used].max())
        seen = run.turbidity[np.isfinite(run.turbidity)]
        stopped_by_turbidity = breakthrough(run) is not None or (
            turbidity is not None and len(seen) > 0 and float(seen.max()) >= turbidity
        )
        if run.operation == "constant-flow" and highest < 0.9 * endpoint and not stopped_by_turbidity:
            text = (
                f"ended at {highest:.2f} bar and {run.loading[run.used].max():.0f} L/m2, below the pressure "
                f"endpoint of {endpoint:.2f} bar: the medium may take more loading than this run shows; run to the "
                "endpoint"
            )
            yield Flag("ended-early", run.name, None, text)


def _outliers(evidence: Evidence) -> Iterator[Flag]:
    """Readings whose pull on the fit was halved at least: eight robust standard deviations off."""
    readings, fit = evidence.readings, evidence.chosen
    for index in np.flatnonzero(evidence.pull < 0.5):
        off = np.expm1(-fit.residuals[index] / np.sqrt(readings.weight[index]))
        if abs(off) < SMALLEST_OUTLIER:
            continue  # far off only against readings that are smoother than any gauge
        what = "∫ΔP dt" if readings.integral[index] else "resistance"
        text = (
            f"outlier: {what} at {readings.loading[index]:.1f} L/m2 is {off:+.0%} off the curve; kept, its pull on "
            f"the fit bounded to {evidence.pull[index]:.0%} of a normal reading's; check it"
        )
        row = int(readings.row[index])
        yield Flag("outlier", readings.runs[int(readings.run[index])], (row, row), text)


def _little_fouling(medium: str, evidence: Evidence) -> Iterator[Flag]:
    fit = evidence.chosen
    top = seen(evidence.readings, fit)
    law = LAWS[fit.law]
    growth = law.peak(top, *fit.parameters) / law.resistance(0.0, *fit.parameters)
    if growth < LITTLE_FOULING:
        text = (
            f"little fouling: the resistance grows {growth:.2f} times over {top:.0f} L/m2, too little to tell one "
            "law from another; a longer run would"
        )
        yield Flag("little-fouling", medium, None, text)


def _open_lots(medium: str, evidence: Evidence) -> Iterator[Flag]:
    if evidence.prior > 0.0:
        text = (
            "how fast each lot fouls can hardly be told from these runs, since the resistance grows little or is "
            "noisy; the lots' fouling multipliers are held near 1 (a standard deviation of 0.5 in ln κ); longer "
            "runs would tell"
        )
        yield Flag("lot-fouling-open", medium, None, text)


def _rivals(medium: str, evidence: Evidence) -> Iterator[Flag]:
    if evidence.rivals:
        names = ", ".join(sorted(rival.law for rival in evidence.rivals))
        text = (
            f"{names} fit(s) as well as {evidence.chosen.law} (within 2 AICc units) and differ(s) by at most "
            f"{evidence.spread:.1%} inside the tested range; a longer run or a second lot would tell them apart"
        )
        yield Flag("law-not-unique", medium, None, text)


def _trade_off(medium: str, evidence: Evidence) -> Iterator[Flag]:
    fit = evidence.chosen
    names = LAWS[fit.law].parameters
    if "n" not in names:
        return
    i, j = names.index("k"), names.index("n")
    variance = np.diag(fit.covariance)
    if not np.all(np.isfinite(variance[[i, j]])):
        text = (
            "n cannot be told from these runs: the resistance hardly grows; take a law with its own n, or a longer run"
        )
        yield Flag("n-and-k", medium, None, text)
        return
    correlation = fit.covariance[i, j] / np.sqrt(variance[i] * variance[j])
    if abs(correlation) > TRADE_OFF:
        text = (
            f"n and k trade off (correlation {correlation:+.2f}): n is {fit.parameters[j]:.2f} ± "
            f"{np.sqrt(variance[j]):.2f}, and other pairs draw nearly the same curve inside the tested range; do "
            "not read a mechanism from n alone"
        )
        yield Flag("n-and-k", medium, None, text)


def _temperatures(medium: str, runs: Sequence[ReducedRun]) -> Iterator[Flag]:
    known = [run.temperature for run in runs if run.temperature is not None]
    if known and len(known) < len(runs):
        missing = ", ".join(sorted(run.name for run in runs if run.temperature is None))
        text = f"no temperature given for {missing}: taken as run at the reference temperature of the others"
        yield Flag("temperature-missing", medium, None, text)
