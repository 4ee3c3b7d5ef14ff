"""A stage's curve with what the design asks of it: readings, curve, tested range, design point."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from trainopt.report.labels import short
from trainopt.report.numbers import PRESSURE_UNITS
from trainopt.report.style import BAND, BRICK, DASHES, INK, MARKS, MIST, PINE, QUIET, styled

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from trainopt.curves.curve import Curve, LotCurve

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class StageCurve:
    """What a stage's picture needs.

    `curve` as fitted at the bench, `lots` each lot's curve in the plant by name (viscosity included),
    `worst_lot` the one that the design is held to, `loading` at the installed area and `design_loading`
    with the safety factor (L/m²), `cap` the highest loading allowed and `cap_words` why; `band` the 90 % band
    on the worst lot's curve (loading, low, high, each of shape (n,)), where there are runs to say.
    """

    stage: str
    curve: Curve
    lots: tuple[tuple[str, LotCurve], ...]
    worst_lot: str
    loading: float
    design_loading: float
    cap: float | None = None
    cap_words: str = ""
    band: tuple[Floats, Floats, Floats] | None = None


def stage_figure(stage: StageCurve, units: str = "bar") -> Figure:
    """Resistance (`units` per LMH) against loading (L/m²) for one stage of a design."""
    from matplotlib.figure import Figure

    factor = PRESSURE_UNITS[units]
    with styled():
        figure = Figure(figsize=(6.6, 3.3), layout="constrained")
        axes = figure.subplots()
        reach = max(stage.curve.tested_loading, stage.design_loading)
        axes.axvspan(0.0, stage.curve.tested_loading, facecolor=MIST, edgecolor="none", zorder=0)
        if stage.band is not None:
            l, low, high = stage.band
            label = "90 % band, worst lot"
            axes.fill_between(l, low * factor, high * factor, facecolor=BAND, edgecolor="none", label=label)
        _readings(axes, stage.curve, factor)
        _curves(axes, stage, reach, factor)
        _design_point(axes, stage, factor)
        _cap(axes, stage)
        axes.set_title(f"{short(stage.stage, 22)}: {short(stage.curve.medium, 22)}, law {stage.curve.law}")
        axes.set_xlabel("Loading, L/m² (shaded: tested)")
        axes.set_ylabel(f"Resistance, {units}/LMH")
        axes.set_xlim(0.0, 1.08 * reach)
        axes.set_ylim(bottom=0.0)
        axes.grid(axis="y")
        axes.legend(loc="upper left", fontsize=8)
    return figure


def _readings(axes: Axes, curve: Curve, factor: float) -> None:
    for index, lot in enumerate(sorted({point.lot for point in curve.points})):
        used = [point for point in curve.points if point.lot == lot and point.excluded is None]
        axes.plot(
            [point.loading for point in used],
            [point.resistance * factor for point in used],
            MARKS[index % len(MARKS)],
            color=QUIET,
            markeredgewidth=0.7,
            markersize=3.5,
            markerfacecolor="none",
            label=f"bench, lot {short(lot, 16)}",
        )


def _curves(axes: Axes, stage: StageCurve, reach: float, factor: float) -> None:
    for index, (lot, curve) in enumerate(stage.lots):
        worst = lot == stage.worst_lot
        # Beyond what was seen of the shape (κ·l) a curve says nothing, unless the design goes there.
        seen = max(stage.curve.tested_loading / curve.fouling_factor, stage.design_loading)
        end = min(reach, 0.999 * curve.pole, seen)
        l = np.linspace(0.0, end, 200)
        axes.plot(
            l,
            factor * curve.resistance(l),
            color=PINE if worst else INK,
            linewidth=2.2 if worst else 0.9,
            linestyle="-" if worst else DASHES[1 + index % (len(DASHES) - 1)],
            label=f"plant, lot {short(lot, 16)}" + (" (worst)" if worst and len(stage.lots) > 1 else ""),
        )


def _design_point(axes: Axes, stage: StageCurve, factor: float) -> None:
    worst = dict(stage.lots).get(stage.worst_lot)
    if worst is None:
        return
    l = np.array([stage.loading, stage.design_loading])
    r = factor * np.asarray(worst.peak(l))
    axes.plot(l[:1], r[:1], "o", color=BRICK, markersize=7, zorder=6, label="the batch")
    if stage.design_loading > stage.loading:
        label = "with the safety factor"
        axes.plot(l[1:], r[1:], "*", color=BRICK, markersize=11, zorder=6, label=label)


def _cap(axes: Axes, stage: StageCurve) -> None:
    if stage.cap is not None and stage.cap <= axes.get_xlim()[1]:
        axes.axvline(stage.cap, color=BRICK, linestyle="--", linewidth=1.0, label=f"most allowed ({stage.cap_words})")
