"""Pictures of studies: sweeps as lines with steps or maps of regions, courses of a batch, both splits side by
side."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from trainopt.report.numbers import PRESSURE_UNITS, fixed, plain
from trainopt.report.style import BRICK, DASHES, HATCHES, INK, MIST, OCHRE, PAPER, PINE, STEPS, STONE, styled

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from trainopt.study.audit import Audit, CaseAudit
    from trainopt.study.axis import Axis
    from trainopt.study.results import Sweep, SweepCell
    from trainopt.study.simulate import BlockCourse, LotCourse, Simulation
    from trainopt.train.results import Pick

Floats = NDArray[np.float64]


def sweep_figure(sweep: Sweep) -> Figure:
    """A sweep of one axis as a line, of two axes as a map; the objective in m² or the catalog's currency."""
    return _line_figure(sweep) if len(sweep.axes) == 1 else _map_figure(sweep)


def _axis_label(axis: Axis) -> str:
    return plain(axis.field) + (f", {plain(axis.unit)}" if axis.unit else "")


def _objective_label(sweep: Sweep) -> str:
    if sweep.kind == "cost":
        return "Cost per batch" + (f", {plain(sweep.currency)}" if sweep.currency else "")
    return "Installed area, m²"


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
        axes.set_xlabel(_axis_label(axis))
        axes.set_ylabel(_objective_label(sweep))
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
    edges = _edges(x)
    label: str | None = "no design"
    for k in np.flatnonzero(missing):
        axes.axvspan(
            float(edges[k]),
            float(edges[k + 1]),
            facecolor=MIST,
            edgecolor=STONE,
            hatch="////",
            linewidth=0.0,
            label=label,
        )
        label = None


def _edges(x: Floats) -> Floats:
    middle = 0.5 * (x[1:] + x[:-1])
    return np.concatenate([[x[0]], middle, [x[-1]]]) if len(x) > 1 else np.array([x[0] - 0.5, x[0] + 0.5])


def _outer_edges(axis: Axis, x: Floats) -> Floats:
    if _is_log(axis):
        return np.exp(_outward(np.log(x)))
    return _outward(x)


def _outward(x: Floats) -> Floats:
    edges = _edges(x)
    if len(x) > 1:
        edges[0], edges[-1] = x[0] - (edges[1] - x[0]), x[-1] + (x[-1] - edges[-2])
    return edges


def _map_figure(sweep: Sweep) -> Figure:
    from matplotlib.colors import LinearSegmentedColormap
    from matplotlib.figure import Figure

    first, second = sweep.axes
    grid = {cell.at: cell for cell in sweep.cells}
    rows, columns = sorted(second.values), sorted(first.values)
    table = [[grid[u, v] for u in columns] for v in rows]
    value = np.array([[math.nan if c.objective is None else c.objective for c in row] for row in table])
    with styled():
        figure = Figure(figsize=(7.2, 5.0), layout="constrained")
        axes = figure.subplots()
        shades = LinearSegmentedColormap.from_list("objective", ["#f4efdf", "#9fc0b5", "#2f6f73", "#12343a"])
        x, y = (
            _outer_edges(a, np.array([a.shown(v) for v in values])) for a, values in ((first, columns), (second, rows))
        )
        axes.set_facecolor(MIST)
        mesh = axes.pcolormesh(x, y, np.ma.masked_invalid(value), cmap=shades, shading="flat", rasterized=True)
        _no_design(axes, x, y, np.isnan(value))
        numbers = _region_numbers(table)
        _borders(axes, x, y, numbers)
        letters = _letters(sweep)
        _labels(axes, x, y, table, numbers, letters, value)
        bar = figure.colorbar(mesh, ax=axes, pad=0.02)
        bar.set_label(_objective_label(sweep))
        bar.outline.set_visible(False)
        axes.set_xlabel(_axis_label(first))
        axes.set_ylabel(_axis_label(second))
        for name, is_log in ((first, _is_log(first)), (second, _is_log(second))):
            if is_log:
                (axes.set_xscale if name is first else axes.set_yscale)("log")
        axes.set_title(_key(sweep, letters), fontsize=7.5, fontweight="normal", loc="left")
    return figure


def _is_log(axis: Axis) -> bool:
    values = np.array(sorted(axis.values))
    if len(values) < 4 or values[0] <= 0.0 or values[-1] < 5.0 * values[0]:
        return False
    ratios = values[1:] / values[:-1]
    return bool(ratios.max() < 1.02 * ratios.min())


def _no_design(axes: Axes, x: Floats, y: Floats, missing: NDArray[np.bool_]) -> None:
    from matplotlib.patches import Rectangle

    if not missing.any():
        return
    for j in range(missing.shape[0]):
        start = 0
        # One hatched bar per run of cells in a row.
        while start < missing.shape[1]:
            if not missing[j, start]:
                start += 1
                continue
            end = start
            while end < missing.shape[1] and missing[j, end]:
                end += 1
            corner, wide, high = (x[start], y[j]), x[end] - x[start], y[j + 1] - y[j]
            axes.add_patch(Rectangle(corner, wide, high, facecolor=MIST, edgecolor=STONE, hatch="////", linewidth=0.0))
            start = end
    row, column = (float(np.mean(places)) for places in np.nonzero(missing))
    at = (float(np.interp(column + 0.5, range(len(x)), x)), float(np.interp(row + 0.5, range(len(y)), y)))
    if missing.mean() > 0.02:
        axes.text(
            *at,
            "no design",
            ha="center",
            va="center",
            fontsize=8,
            color=INK,
            bbox={"facecolor": PAPER, "edgecolor": "none", "pad": 1.5},
        )


def _region_numbers(table: list[list[SweepCell]]) -> NDArray[np.int64]:
    known: dict[tuple[Pick, ...], int] = {}
    return np.array(
        [[known.setdefault(cell.picks, len(known)) if cell.picks else -1 for cell in row] for row in table],
        dtype=np.int64,
    )


def _borders(axes: Axes, x: Floats, y: Floats, numbers: NDArray[np.int64]) -> None:
    """Lines between neighbors whose picks differ."""
    from matplotlib.collections import LineCollection

    lines: list[list[tuple[float, float]]] = []
    for j, i in zip(*np.nonzero(numbers[:, 1:] != numbers[:, :-1]), strict=True):
        lines.append([(x[i + 1], y[j]), (x[i + 1], y[j + 1])])
    for j, i in zip(*np.nonzero(numbers[1:] != numbers[:-1]), strict=True):
        lines.append([(x[i], y[j + 1]), (x[i + 1], y[j + 1])])
    dense = len(lines) > 0.5 * numbers.size
    axes.add_collection(LineCollection(lines, colors=PAPER, linewidths=0.35 if dense else 0.8))


def _letters(sweep: Sweep) -> dict[str, dict[str, str]]:
    """A letter for each module of a stage where a sweep picks more than one there."""
    modules: dict[str, set[str]] = {}
    for cell in sweep.cells:
        for pick in cell.picks:
            modules.setdefault(pick.stage, set()).add(pick.module)
    return {
        stage: {module: chr(ord("a") + k % 26) if len(names) > 1 else "" for k, module in enumerate(sorted(names))}
        for stage, names in modules.items()
    }


def _label(picks: Sequence[Pick], letters: dict[str, dict[str, str]]) -> str:
    return "·".join(f"{pick.count}{letters[pick.stage][pick.module]}" for pick in picks)


def _key(sweep: Sweep, letters: dict[str, dict[str, str]]) -> str:
    parts = []
    for stage, modules in letters.items():
        names = ", ".join(
            f"{letter} {plain(module)}" if letter else plain(module) for module, letter in modules.items()
        )
        parts.append(f"{plain(stage)} ({names})")
    picks = len({cell.picks for cell in sweep.cells if cell.picks})
    lines = [f"{picks} picks; labels count the modules of:"]
    for part in parts:
        if len(lines[-1]) + len(part) < 105:
            lines[-1] += f" {part}"
        else:
            lines.append(part)
    return "\n".join(lines)


def _labels(
    axes: Axes,
    x: Floats,
    y: Floats,
    table: list[list[SweepCell]],
    numbers: NDArray[np.int64],
    letters: dict[str, dict[str, str]],
    value: Floats,
) -> None:
    """A label in every region that has room for it."""
    from scipy.ndimage import binary_erosion

    high, wide = numbers.shape
    lowest, highest = (
        float(np.nanmin(value)) if np.isfinite(value).any() else 0.0,
        float(np.nanmax(value)) if np.isfinite(value).any() else 1.0,
    )
    for number in range(int(numbers.max()) + 1):
        mask = numbers == number
        j, i = (places[0] for places in np.nonzero(mask))
        text = _label(table[j][i].picks, letters)
        room = np.ones((max(1, math.ceil(0.036 * high)), max(1, math.ceil(0.0125 * len(text) * wide))))
        inner = binary_erosion(mask, room)
        if not inner.any():
            continue
        rows, columns = np.nonzero(inner)
        middle = int(np.argmin((rows - rows.mean()) ** 2 + (columns - columns.mean()) ** 2))
        j, i = int(rows[middle]), int(columns[middle])
        dark = highest > lowest and (value[j, i] - lowest) / (highest - lowest) > 0.5
        # Erosion with an even room leaves the middle half a cell off.
        at = (
            0.5 * (x[i] + x[i + 1]) if room.shape[1] % 2 else x[i],
            0.5 * (y[j] + y[j + 1]) if room.shape[0] % 2 else y[j],
        )
        axes.text(*at, text, ha="center", va="center", fontsize=6.5, color=PAPER if dark else INK)


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
