"""The page of a curve: readings with the fitted curve and its band, turbidity, errors of the fit, one panel per lot."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from trainopt.report.numbers import PRESSURE_UNITS, plain, significant
from trainopt.report.style import BRICK, DASHES, INK, LOTS, MARKS, MIST, QUIET, STONE, styled

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from trainopt.curves.curve import Curve, Point

LEVEL = 0.9
ACROSS = 3
"""Panels of lots in one row."""


def curve_page(curve: Curve, units: str = "bar") -> Figure:
    """Everything to judge a curve by, on one page; a curve given by its parameters has its first panel only.

    Resistance in `units` per LMH, loading in L/m², turbidity in NTU, errors in percent of the fitted value.
    """
    from matplotlib.figure import Figure

    fitted = curve.evidence is not None
    lots = sorted(curve.lots)
    rows = -(-len(lots) // ACROSS) if fitted and len(lots) > 1 else 0
    heights = [2.2, 2.2, *[2.3] * rows]
    with styled():
        figure = Figure(figsize=(9.6, sum(heights)) if fitted else (6.6, 4.2), layout="constrained")
        figure.suptitle(f"{plain(curve.medium)}: {curve.law}", x=0.01, ha="left", fontweight="bold")
        if not fitted:
            _resistance(figure.subplots(), curve, units, lots)
            return figure
        grid = figure.add_gridspec(2 + rows, 2 * ACROSS, height_ratios=heights)
        _resistance(figure.add_subplot(grid[:2, : ACROSS + 1]), curve, units, lots)
        _turbidity(figure.add_subplot(grid[0, ACROSS + 1 :]), curve, lots)
        _errors(figure.add_subplot(grid[1, ACROSS + 1 :]), curve, lots)
        for index, lot in enumerate(lots if rows else ()):
            row, place = divmod(index, ACROSS)
            _lot(figure.add_subplot(grid[2 + row, 2 * place : 2 * place + 2]), curve, units, lot, index)
    return figure


def _look(index: int) -> dict[str, Any]:
    """Mark of a lot: its shape tells it apart in black and white too."""
    color, mark = LOTS[index % len(LOTS)], MARKS[index % len(MARKS)]
    return {"color": color, "marker": mark, "linestyle": "none", "markersize": 3.5, "markerfacecolor": "none"}


def _used(curve: Curve, lot: str) -> list[Point]:
    return [point for point in curve.points if point.lot == lot and point.excluded is None]


def _band(axes: Axes, curve: Curve, factor: float, lot: str | None, reach: float) -> None:
    from trainopt.curves.uncertainty import band

    l = np.linspace(0.0, reach, 121)
    low, high = band(curve, l, lot, LEVEL)
    axes.fill_between(l, factor * low, factor * high, color=STONE, alpha=0.55, linewidth=0.0, label="90 % band")


def _resistance(axes: Axes, curve: Curve, units: str, lots: list[str]) -> None:
    factor, reach = PRESSURE_UNITS[units], curve.tested_loading
    axes.axvspan(0.0, reach, color=MIST, zorder=0, label=f"tested, to {significant(reach)} L/m²")
    for index, lot in enumerate(lots):
        used = _used(curve, lot)
        if used:
            resistances = [point.resistance * factor for point in used]
            axes.plot([point.loading for point in used], resistances, label=f"lot {plain(lot)}", **_look(index))
        l = np.linspace(0.0, max((point.loading for point in used), default=reach), 200)
        line: dict[str, Any] = {
            "color": LOTS[index % len(LOTS)],
            "linestyle": DASHES[(index + 1) % len(DASHES)],
            "linewidth": 0.9,
        }
        axes.plot(l, factor * curve.lot_curve(lot).resistance(l), **line)
    out = [point for point in curve.points if point.excluded is not None and point.loading >= 0.0]
    if out:
        resistances = [point.resistance * factor for point in out]
        axes.plot([point.loading for point in out], resistances, "x", color=QUIET, markersize=5, label="left out")
    if curve.evidence is not None:
        _band(axes, curve, factor, None, reach)
    l = np.linspace(0.0, reach, 200)
    axes.plot(l, factor * curve.lot_curve(None).resistance(l), color=INK, linewidth=1.8, label="pooled curve")
    if curve.turbidity_loading is not None:
        axes.axvline(curve.turbidity_loading, color=BRICK, linestyle="--", label="turbidity endpoint")
    _axes(axes, f"Resistance, {units}/LMH")
    axes.legend(loc="upper left")


def _turbidity(axes: Axes, curve: Curve, lots: list[str]) -> None:
    seen = False
    for index, lot in enumerate(lots):
        mine = [point for point in curve.points if point.lot == lot]
        read = [(p.loading, p.turbidity) for p in mine if p.turbidity is not None]
        pooled = [(p.loading, p.pool_turbidity) for p in mine if p.pool_turbidity is not None]
        if not read:
            continue
        axes.plot(*np.array(read).T, **_look(index))
        dashes = DASHES[(index + 1) % len(DASHES)]
        label = "pooled filtrate (lines)" if not seen else None
        axes.plot(
            *np.array(pooled).reshape(-1, 2).T,
            color=LOTS[index % len(LOTS)],
            linestyle=dashes,
            linewidth=0.9,
            label=label,
        )
        seen = True
    if curve.turbidity_loading is not None:
        axes.axvline(curve.turbidity_loading, color=BRICK, linestyle="--")
    _axes(axes, "Turbidity, NTU")
    if seen:
        axes.legend(loc="upper left")
    else:
        axes.text(0.5, 0.5, "turbidity was not read", transform=axes.transAxes, ha="center", color=QUIET)


def _errors(axes: Axes, curve: Curve, lots: list[str]) -> None:
    """Each reading over its lot's curve, in percent."""
    evidence = curve.evidence
    assert evidence is not None
    readings = evidence.readings
    off = 100.0 * np.expm1(-evidence.chosen.residuals / np.sqrt(readings.weight))
    for index, lot in enumerate(readings.lots):
        mine = readings.lot == index
        axes.plot(readings.loading[mine], off[mine], **_look(lots.index(lot)))
    axes.axhline(0.0, color=INK, linewidth=0.9)
    _axes(axes, "Reading over curve, %")
    most = float(np.max(np.abs(off))) * 1.1 + 1e-9
    axes.set_ylim(-most, most)


def _lot(axes: Axes, curve: Curve, units: str, lot: str, index: int) -> None:
    factor, used = PRESSURE_UNITS[units], _used(curve, lot)
    reach = max(point.loading for point in used)
    _band(axes, curve, factor, lot, reach)
    l = np.linspace(0.0, reach, 200)
    axes.plot(l, factor * curve.lot_curve(lot).resistance(l), color=INK, linewidth=1.2)
    axes.plot([point.loading for point in used], [point.resistance * factor for point in used], **_look(index))
    effect = curve.lots[lot]
    title = f"lot {plain(lot)}: resistance ×{effect.resistance:.2f}, fouling ×{effect.fouling:.2f}"
    axes.set_title(title, fontsize=8.5, fontweight="normal")
    _axes(axes, f"{units}/LMH")


def _axes(axes: Axes, label: str) -> None:
    axes.set_xlabel("Loading, L/m²")
    axes.set_ylabel(label)
    axes.set_xlim(left=0.0)
    axes.set_ylim(bottom=0.0)
    axes.grid(axis="y")
