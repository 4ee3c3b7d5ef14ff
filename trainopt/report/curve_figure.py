"""The picture of a curve: resistance against loading, readings by lot, the fitted curve, the tested range."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from trainopt.report.numbers import PRESSURE_UNITS, plain, significant
from trainopt.report.style import BRICK, DASHES, INK, LOTS, MARKS, MIST, STONE, styled

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from trainopt.curves.curve import Curve


def curve_figure(curve: Curve, units: str = "bar") -> Figure:
    """Resistance (`units` per LMH) against loading (L/m²), lots by the shape of their marks and dashes."""
    from matplotlib.figure import Figure

    with styled():
        figure = Figure(figsize=(6.6, 4.2), layout="constrained")
        axes = figure.subplots()
        factor = PRESSURE_UNITS[units]
        axes.axvspan(0.0, curve.tested_loading, color=MIST, zorder=0, label="tested by all that is known")
        for index, lot in enumerate(_lots(curve)):
            _lot(axes, curve, lot, index, factor)
        _excluded(axes, curve, factor)
        _pooled(axes, curve, factor)
        if curve.turbidity_loading is not None:
            axes.axvline(curve.turbidity_loading, color=BRICK, linestyle="--", label="turbidity limit reached")
        axes.set_title(f"{plain(curve.medium)}: {curve.law}, tested to {significant(curve.tested_loading)} L/m²")
        axes.set_xlabel("Loading, L/m²")
        axes.set_ylabel(f"Resistance, {units}/LMH")
        axes.set_xlim(left=0.0)
        axes.set_ylim(bottom=0.0)
        axes.grid(axis="y")
        axes.legend(loc="upper left")
    return figure


def _lots(curve: Curve) -> list[str]:
    return sorted({point.lot for point in curve.points} | set(curve.lots))


def _lot(axes: Axes, curve: Curve, lot: str, index: int, factor: float) -> None:
    color, mark = LOTS[index % len(LOTS)], MARKS[index % len(MARKS)]
    used = [point for point in curve.points if point.lot == lot and point.excluded is None]
    axes.plot(
        [point.loading for point in used],
        [point.resistance * factor for point in used],
        mark,
        color=color,
        markersize=4,
        markerfacecolor="none",
        label=f"lot {plain(lot)}" if used else None,
    )
    reach = max((point.loading for point in used), default=curve.tested_loading)
    l = np.linspace(0.0, reach, 200)
    dashes = DASHES[(index + 1) % len(DASHES)]
    axes.plot(l, factor * curve.lot_curve(lot).resistance(l), color=color, linestyle=dashes, linewidth=1.0)


def _excluded(axes: Axes, curve: Curve, factor: float) -> None:
    out = [p for p in curve.points if p.excluded is not None and p.loading >= 0.0]
    if out:
        resistances = [p.resistance * factor for p in out]
        axes.plot([p.loading for p in out], resistances, "x", color=STONE, markersize=5, label="left out")


def _pooled(axes: Axes, curve: Curve, factor: float) -> None:
    l = np.linspace(0.0, curve.tested_loading, 200)
    axes.plot(l, factor * curve.lot_curve(None).resistance(l), color=INK, linewidth=2.0, label="pooled curve")
