"""A resistance curve as text for people: reduced readings, law, lots, alternatives, flags."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from trainopt.report.numbers import NONE, PRESSURE_UNITS, fixed, percent, significant
from trainopt.report.tables import WIDTH, Page

if TYPE_CHECKING:
    from trainopt.curves.curve import Curve, Estimate, Point


LEVEL = 0.9


def curve_text(
    curve: Curve, units: str = "bar", width: int = WIDTH, color: bool = False, at: float | None = None
) -> str:
    """The curve as tables at most `width` columns wide; resistances in `units` (bar, psi or kPa) per LMH.

    `at` is a resistance in bar/LMH whose loading is asked for.
    """
    page = Page()
    page.line(curve.medium, "bold")
    page.line(sentence(curve))
    for run in dict.fromkeys(point.run for point in curve.points):
        _readings(page, run, [point for point in curve.points if point.run == run], units)
    _parameters(page, curve, units)
    _lots(page, curve)
    _band(page, curve, units)
    if at is not None:
        _loading_at(page, curve, at, units)
    _alternatives(page, curve)
    if curve.flags:
        page.heading("Flags")
        page.items((flag_words(flag.run, flag.rows, flag.text) for flag in curve.flags), "yellow")
    return page.render(width, color)


def sentence(curve: Curve) -> str:
    """Law, tested range and, where there is one, the loading at which turbidity ends it."""
    tested = f"tested to {significant(curve.tested_loading)} L/m² at {significant(curve.tested_flux)} LMH"
    origin = "given by its parameters" if curve.source == "parameters" else "fitted"
    text = f"Law {curve.law}, {origin}, {tested}"
    if curve.turbidity_loading is not None:
        text += f"; the turbidity limit was reached at {significant(curve.turbidity_loading)} L/m²"
    return text + "."


def flag_words(run: str, rows: tuple[int, int] | None, text: str) -> str:
    """A flag with its place."""
    if rows is None:
        return f"{run}: {text}"
    place = f"row {rows[0]}" if rows[0] == rows[1] else f"rows {rows[0]} to {rows[1]}"
    return f"{run}, {place}: {text}"


MOST_READINGS = 100


def _readings(page: Page, run: str, points: Sequence[Point], units: str) -> None:
    every = -(-len(points) // MOST_READINGS)
    page.heading(f"{run}, lot {points[0].lot}")
    if every > 1:
        page.line(f"{len(points)} readings, one in {every} shown; --json has them all.")
        points = points[::every]
    rows = [
        (
            point.excluded or "",
            str(point.row),
            fixed(point.loading, 1),
            significant(point.flux),
            significant(point.resistance * PRESSURE_UNITS[units]),
            NONE if point.turbidity is None else significant(point.turbidity, 2),
        )
        for point in points
    ]
    page.table(("Left out", "Row", "Loading\nL/m²", "Flux\nLMH", f"Resistance\n{units}/LMH", "Turbidity\nNTU"), rows)


def _parameters(page: Page, curve: Curve, units: str) -> None:
    page.heading(f"Law {curve.law}")
    rows = [(name, *_estimate(estimate, units)) for name, estimate in curve.parameters.items()]
    page.table(("Parameter", "Unit", "Value", "Standard error"), rows, 2)


def _estimate(estimate: Estimate, units: str) -> tuple[str, str, str]:
    per_bar = estimate.unit.startswith("bar/")
    factor = PRESSURE_UNITS[units] if per_bar else 1.0
    unit = units + estimate.unit[3:] if per_bar else estimate.unit
    error = None if estimate.se is None else estimate.se * factor
    return unit, significant(estimate.value * factor, 4), significant(error, 2)


def _lots(page: Page, curve: Curve) -> None:
    if not curve.lots:
        return
    page.heading("Lots, against their geometric mean")
    rows = [
        (
            lot,
            fixed(effect.resistance, 3),
            fixed(effect.resistance_se, 3),
            fixed(effect.fouling, 3),
            fixed(effect.fouling_se, 3),
        )
        for lot, effect in curve.lots.items()
    ]
    page.table(("Lot", "Resistance", "Standard error", "Fouling", "Standard error"), rows)
    from trainopt.curves.uncertainty import lot_spread

    spread = lot_spread(curve)
    if spread is not None:
        page.line(
            f"Between lots: resistance varies by {percent(100.0 * spread.log_resistance)}, fouling by "
            f"{percent(100.0 * spread.log_fouling)} (standard deviation over {spread.lots} lots)."
        )


def _band(page: Page, curve: Curve, units: str) -> None:
    """The pooled curve with its band at a few loadings, where it was fitted."""
    if curve.evidence is None:
        return
    import numpy as np

    from trainopt.curves.uncertainty import band

    loading = np.linspace(0.0, curve.tested_loading, 5)
    low, high = band(curve, loading, level=LEVEL)
    middle = curve.lot_curve(None).resistance(loading)
    factor = PRESSURE_UNITS[units]
    page.heading(f"Pooled curve with its {100 * LEVEL:.0f} % band (bootstrap over runs and errors)")
    rows = [
        (fixed(l, 1), *(significant(factor * value, 4) for value in values))
        for l, *values in zip(loading, middle, low, high, strict=True)
    ]
    page.table(("Loading\nL/m²", f"Resistance\n{units}/LMH", "From", "To"), rows, 0)


def _loading_at(page: Page, curve: Curve, at: float, units: str) -> None:
    """Where each lot's curve reaches a resistance, with its interval where the curve was fitted."""
    from trainopt.curves.uncertainty import loading_at, reach

    page.heading(f"Loading where the resistance reaches {significant(at * PRESSURE_UNITS[units])} {units}/LMH")
    rows = []
    for lot in (None, *curve.lots):
        if curve.evidence is None:
            value, low, high = reach(curve.lot_curve(lot), at), None, None
        else:
            found = loading_at(curve, at, lot, LEVEL)
            value, low, high = found.value, found.low, found.high
        beyond = "beyond what was tested" if value > curve.tested_loading else ""
        rows.append((lot or "pooled", beyond, *(significant(number, 4) for number in (value, low, high))))
    page.table(("Lot", "", "Loading\nL/m²", "From", "To"), rows, 2)


def _alternatives(page: Page, curve: Curve) -> None:
    if not curve.alternatives:
        return
    from trainopt.curves.uncertainty import left_out_errors

    left_out = left_out_errors(curve)
    page.heading("Laws by the evidence, best first")
    best = curve.alternatives[0].aicc
    rows = [
        (
            f"{other.law} (chosen)" if other.law == curve.law else other.law,
            fixed(other.aicc - best, 1),
            percent(100.0 * other.weight),
            percent(100.0 * other.relative_error),
            *((percent(100.0 * left_out[other.law]),) if other.law in left_out else ()),
        )
        for other in curve.alternatives
    ]
    page.table(("Law", "AICc above best", "Weight", "Error", *(("Run left out",) if left_out else ())), rows)
