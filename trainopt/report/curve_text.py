"""A resistance curve as text for people: reduced readings, law, lots, alternatives, flags."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from trainopt.report.numbers import NONE, PRESSURE_UNITS, fixed, percent, significant
from trainopt.report.tables import WIDTH, Page

if TYPE_CHECKING:
    from trainopt.curves.curve import Curve, Estimate, Point


def curve_text(curve: Curve, units: str = "bar", width: int = WIDTH, color: bool = False) -> str:
    """The curve as tables at most `width` columns wide; resistances in `units` (bar, psi or kPa) per LMH."""
    page = Page()
    page.line(curve.medium, "bold")
    page.line(sentence(curve))
    for run in dict.fromkeys(point.run for point in curve.points):
        _readings(page, run, [point for point in curve.points if point.run == run], units)
    _parameters(page, curve, units)
    _lots(page, curve)
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


def _readings(page: Page, run: str, points: Sequence[Point], units: str) -> None:
    page.heading(f"{run}, lot {points[0].lot}")
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


def _alternatives(page: Page, curve: Curve) -> None:
    if not curve.alternatives:
        return
    page.heading("Laws by the evidence, best first")
    best = curve.alternatives[0].aicc
    rows = [
        (
            f"{other.law} (chosen)" if other.law == curve.law else other.law,
            fixed(other.aicc - best, 1),
            percent(100.0 * other.weight),
            percent(100.0 * other.relative_error),
        )
        for other in curve.alternatives
    ]
    page.table(("Law", "AICc above best", "Weight", "Error"), rows)
