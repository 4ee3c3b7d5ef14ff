"""The map of a sweep over two fields: regions of one pick, labeled, shaded by what they cost."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from trainopt.report.numbers import plain
from trainopt.report.style import INK, MIST, PAPER, STONE, styled

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from trainopt.study.axis import Axis
    from trainopt.study.results import Sweep, SweepCell
    from trainopt.train.results import Pick

Floats = NDArray[np.float64]


def axis_label(axis: Axis) -> str:
    """The field of an axis with its unit."""
    return plain(axis.field) + (f", {plain(axis.unit)}" if axis.unit else "")


def objective_label(sweep: Sweep) -> str:
    """What was made least, with its unit."""
    if sweep.kind == "cost":
        return "Cost per batch" + (f", {plain(sweep.currency)}" if sweep.currency else "")
    return "Installed area, m²"


def edges(x: Floats) -> Floats:
    """The middles between neighbors, closed by the ends themselves: shape (n + 1,)."""
    middle = 0.5 * (x[1:] + x[:-1])
    return np.concatenate([[x[0]], middle, [x[-1]]]) if len(x) > 1 else np.array([x[0] - 0.5, x[0] + 0.5])


def _outer_edges(axis: Axis, x: Floats) -> Floats:
    if _is_log(axis):
        return np.exp(_outward(np.log(x)))
    return _outward(x)


def _outward(x: Floats) -> Floats:
    bounds = edges(x)
    if len(x) > 1:
        bounds[0], bounds[-1] = x[0] - (bounds[1] - x[0]), x[-1] + (x[-1] - bounds[-2])
    return bounds


def map_figure(sweep: Sweep) -> Figure:
    """A sweep of two axes: the objective by shade, regions of one pick with their borders, a label where there
    is room."""
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
        bar.set_label(objective_label(sweep))
        bar.outline.set_visible(False)
        axes.set_xlabel(axis_label(first))
        axes.set_ylabel(axis_label(second))
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
            lines[-1] += f" {part}" if lines[-1].endswith(":") else f", {part}"
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
    from matplotlib.patheffects import withStroke
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
        color, behind = (PAPER, INK) if dark else (INK, PAPER)
        halo = withStroke(linewidth=1.4, foreground=behind, alpha=0.6)
        axes.text(*at, text, ha="center", va="center", fontsize=6.5, color=color, path_effects=[halo])
