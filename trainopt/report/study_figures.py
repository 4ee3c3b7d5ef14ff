"""Pictures of studies: sweeps as lines with steps or maps of regions, courses of a batch, both splits side by
side."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from trainopt.report.numbers import PRESSURE_UNITS, fixed, plain
from trainopt.report.study_map import axis_label, edges, map_figure, objective_label
from trainopt.report.style import BRICK, DASHES, HATCHES, INK, MIST, OCHRE, PAPER, PINE, STEPS, STONE, styled

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from trainopt.study.audit import Audit, CaseAudit
    from trainopt.study.results import Sweep, SweepCell
    from trainopt.study.simulate import BlockCourse, LotCourse, Simulation

Floats = NDArray[np.float64]


def sweep_figure(sweep: Sweep) -> Figure:
    """A sweep of one axis as a line, of two axes as a map; the objective in m² or the catalog's currency."""
    return _line_figure(sweep) if len(sweep.axes) == 1 else map_figure(sweep)


def _line_figure(sweep: Sweep) -> Figure:
    from matplotlib.figure import Figure

    axis = sweep.axes[0]
    cells = sorted(sweep.cells, key=lambda cell: cell.at[0])
    x = np.array([axis.shown(cell.at[0]) for cell in cells])
    best = np.array([math.nan if cell.objective is None else cell.objective for cell in cells])
    even = np.array([_even(sweep, cell) for cell in cells])
    with styled():
        figure = Figure(figsize=(6.6, 3.4), layout="constrained")
        axes = figure.subplots()
        axes.plot(
            x, even, "s--", color=OCHRE, markersize=3.5, markeredgecolor=INK, markeredgewidth=0.5, label="even split"
        )
        _steps(axes, sweep, cells, x, best)
        _shade_gaps(axes, x, np.isnan(best))
        axes.set_xlabel(axis_label(axis))
        axes.set_ylabel(objective_label(sweep))
        low = float(np.nanmin(np.concatenate([best, even]))) if np.isfinite(best).any() else 0.0
        # From zero, unless the whole course would be a flat line at the top.
        high = float(np.nanmax(np.concatenate([best, even]))) if np.isfinite(best).any() else 1.0
        axes.set_ylim(
            0.0 if high > 1.6 * low else max(0.0, low - 0.6 * (high - low) - 1e-9), high + 0.08 * (high - low or high)
        )
        margin = 0.012 * float(x[-1] - x[0])
        axes.set_xlim(float(x[0]) - margin, float(x[-1]) + margin)
        axes.grid(axis="y")
        axes.legend(loc="best")
    return figure


def _even(sweep: Sweep, cell: SweepCell) -> float:
    even = cell.even_split
    value = None if even is None else (even.cost if sweep.kind == "cost" else even.area)
    return math.nan if value is None else value


def _steps(axes: Axes, sweep: Sweep, cells: Sequence[SweepCell], x: Floats, best: Floats) -> None:
    """The optimum: flat where the pick stays, a step where it changes once, a slope where it changes more often
    between two marks."""
    axis = sweep.axes[0]
    changes = sorted(0.5 * sum(axis.shown(v) for v in change.between) for change in sweep.changes)
    path_x: list[float] = [float(x[0])]
    path_y: list[float] = [float(best[0])]
    for k in range(1, len(x)):
        inside = [at for at in changes if x[k - 1] < at < x[k]]
        if sweep.kind == "area" and len(inside) == 1:
            path_x += [inside[0], inside[0]]
            path_y += [float(best[k - 1]), float(best[k])]
        path_x.append(float(x[k]))
        path_y.append(float(best[k]))
    axes.plot(path_x, path_y, color=PINE, linewidth=1.8)
    many = len(cells) > 60
    axes.plot(x, best, "o", color=PINE, markersize=1.8 if many else 4.0)
    axes.plot([], [], "o-", color=PINE, markersize=4.0, linewidth=1.8, label="optimum")
    if changes:
        axes.plot(changes, [0.012] * len(changes), "|", transform=axes.get_xaxis_transform(), color=BRICK, markersize=7,
                  markeredgewidth=0.7, label="pick changes")  # fmt: skip


def _shade_gaps(axes: Axes, x: Floats, missing: NDArray[np.bool_]) -> None:
    """Hatch the stretches around cells that have no design."""
    bounds = edges(x)
    label: str | None = "no design"
    for k in np.flatnonzero(missing):
        axes.axvspan(
            float(bounds[k]),
            float(bounds[k + 1]),
            facecolor=MIST,
            edgecolor=STONE,
            hatch="////",
            linewidth=0.0,
            label=label,
        )
        label = None


def simulate_figure(simulation: Simulation, units: str = "bar") -> Figure:
    """The course of a batch: per block the pressures (stages of the worst lot, totals of all lots) and the flow
    against time in h."""
    from matplotlib.figure import Figure

    count = len(simulation.blocks)
    with styled():
        figure = Figure(figsize=(7.6, 2.7 * count + 0.3), layout="constrained")
        panels = figure.subplots(count, 2, squeeze=False, gridspec_kw={"width_ratios": [1.5, 1.0]})
        for row, block in zip(panels, simulation.blocks, strict=True):
            _pressure_panel(row[0], block, units)
            _flow_panel(row[1], block)
        for axes in panels[-1]:
            axes.set_xlabel("Time since the block's start, h")
    return figure


def _worst(block: BlockCourse) -> LotCourse:
    return max(
        block.lots, key=lambda lot: (lot.needed, float(np.nanmax(lot.course.total)), float(-lot.course.flow[-1]))
    )


def _known(lot: LotCourse) -> NDArray[np.bool_]:
    """The readings up to where a stage plugs."""
    course = lot.course
    return np.asarray(np.isfinite(course.time) & np.isfinite(course.total) & np.isfinite(course.flow))


def _pressure_panel(axes: Axes, block: BlockCourse, units: str) -> None:
    from matplotlib.patheffects import withStroke

    factor = PRESSURE_UNITS[units]
    worst = _worst(block)
    course, known = worst.course, _known(worst)
    at, pressure = course.time[known], course.pressure[:, known] * factor
    halo = withStroke(linewidth=2.6, foreground=PAPER)
    level = course.total[known] * factor - pressure.sum(axis=0)
    axes.fill_between(at, 0.0, level, facecolor=MIST, edgecolor="none", label="static and line")
    for k, name in enumerate(course.stages):
        above = level + pressure[k]
        axes.fill_between(at, level, above, facecolor=STEPS[k % len(STEPS)], hatch=HATCHES[k % len(HATCHES)],
                          edgecolor=INK, linewidth=0.5, label=plain(name))  # fmt: skip
        level = above
    axes.plot(at, course.total[known] * factor, color=INK, linewidth=1.8, label=f"lot {plain(worst.lot)}, worst")
    highest = [float(course.total[known].max(initial=0.0))]
    for k, lot in enumerate(lot for lot in block.lots if lot is not worst):
        here = _known(lot)
        axes.plot(lot.course.time[here], lot.course.total[here] * factor, color=INK, linewidth=1.0,
                  linestyle=_dashes(k), label=f"lot {plain(lot.lot)}", path_effects=[halo])  # fmt: skip
        highest.append(float(lot.course.total[here].max(initial=0.0)))
    axes.axhline(block.limit * factor, color=BRICK, linestyle="--", linewidth=1.1, label="limit")
    _time_line(axes, block)
    # What lies far beyond the limit would flatten all that matters.
    axes.set_ylim(0.0, 1.36 * factor * min(max(block.limit, *highest), 2.5 * block.limit))
    axes.set_ylabel(f"Pressure, {units}")
    axes.set_title(plain(block.block))
    axes.legend(loc="upper left", fontsize=6.5, ncols=4)


def _dashes(k: int) -> Any:
    """The line of the k-th lot that is not the worst."""
    return DASHES[1 + k % (len(DASHES) - 1)]


def _flow_panel(axes: Axes, block: BlockCourse) -> None:
    worst = _worst(block)
    highest = 0.0
    for k, lot in enumerate([worst, *(lot for lot in block.lots if lot is not worst)]):
        here = _known(lot)
        look: dict[str, Any] = {"linewidth": 1.8} if not k else {"linewidth": 0.9, "linestyle": _dashes(k - 1)}
        axes.plot(lot.course.time[here], lot.course.flow[here], color=INK, label=f"lot {plain(lot.lot)}", **look)
        highest = max(highest, float(lot.course.flow[here].max(initial=0.0)))
    _time_line(axes, block)
    axes.set_ylim(0.0, 1.1 * highest or 1.0)
    axes.set_ylabel("Flow, L/h")
    axes.legend(loc="lower left", fontsize=6.5)


def _time_line(axes: Axes, block: BlockCourse) -> None:
    ends = [float(lot.course.time[_known(lot)].max(initial=0.0)) for lot in block.lots]
    axes.axvline(block.time, color=STONE, linestyle=":", linewidth=1.2, label="block time")
    axes.set_xlim(0.0, 1.02 * max([block.time, *ends]))


def audit_figure(audit: Audit) -> Figure:
    """Both splits side by side: installed area in m² by stage, the optimum above the even split, one pair per
    case."""
    from matplotlib.figure import Figure
    from matplotlib.patches import Patch

    cases = [case for case in audit.cases if case.design.blocks]
    stages = list(dict.fromkeys(s.stage for case in cases for block in case.design.blocks for s in block.stages))
    looks: dict[str, dict[str, Any]] = {
        stage: {"facecolor": STEPS[k % len(STEPS)], "hatch": HATCHES[k % len(HATCHES)]}
        for k, stage in enumerate(stages)
    }
    with styled():
        figure = Figure(figsize=(7.2, 0.95 * max(len(cases), 1) + 1.0), layout="constrained")
        axes = figure.subplots()
        for row, case in enumerate(cases):
            _pair(axes, row, case, looks)
        handles = [Patch(edgecolor=INK, linewidth=0.7, label=plain(stage), **looks[stage]) for stage in stages]
        axes.set_ylim(len(cases) - 0.4, -0.6)
        axes.set_yticks([])
        axes.spines["left"].set_visible(False)
        axes.set_xlabel("Installed area, m²")
        if cases:
            axes.set_xlim(0.0, 1.3 * max(_total(case) for case in cases))
            figure.legend(handles=handles, loc="outside upper left", ncols=min(len(stages), 6))
    return figure


def _total(case: CaseAudit) -> float:
    even = case.design.even_split
    return max(case.design.area or 0.0, (even.area if even is not None else None) or 0.0)


def _pair(axes: Axes, row: int, case: CaseAudit, looks: dict[str, dict[str, Any]]) -> None:
    even = case.design.even_split
    names = [("optimum", case.design.area, case.design.blocks)]
    names.append(("even split", None if even is None else even.area, () if even is None else even.blocks))
    axes.text(0.0, row - 0.45, plain(case.file), fontsize=8, va="center", fontweight="bold")
    for k, (name, total, blocks) in enumerate(names):
        at, left = row - 0.2 + 0.34 * k, 0.0
        for block in blocks:
            for stage in block.stages:
                look = looks.get(stage.stage, {"facecolor": STONE})
                axes.barh(at, stage.area, 0.28, left, edgecolor=INK, linewidth=0.7, **look)
                left += stage.area
        text = f" {fixed(total, 1)} m², {name}" if total is not None else f" {name}: no design"
        axes.text(left, at, text, va="center", fontsize=8)
