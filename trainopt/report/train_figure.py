"""The train drawn to be read: flow from left to right, modules in parallel, pressure falling along it.

One row per block: a tank, a pump, the stages in series with their modules between two headers, a tank. Below
it the pressure at the end of the batch, worst lot, derated area, from the pump's limit down to the outlet.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from trainopt.report.labels import wrapped
from trainopt.report.numbers import PRESSURE_UNITS, Pressure, fixed, trimmed
from trainopt.report.style import BRICK, INK, MIST, PINE, STONE, styled

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from trainopt.train.results import BlockDesign, StageDesign

WIDTH = 6.6
ROW = 2.75
HALF = 0.3
"""Half the width of a stage, in slots."""


def train_figure(blocks: Sequence[BlockDesign], units: str = "bar") -> Figure:
    """The blocks of a design, one row each; pressures in `units`."""
    from matplotlib.figure import Figure

    with styled():
        figure = Figure(figsize=(WIDTH, ROW * len(blocks)), layout="constrained")
        grid = figure.add_gridspec(2 * len(blocks), 1, height_ratios=[1.45, 1.0] * len(blocks))
        slots = max(len(block.stages) for block in blocks) + 2
        for index, block in enumerate(blocks):
            drawing = figure.add_subplot(grid[2 * index])
            profile = figure.add_subplot(grid[2 * index + 1], sharex=drawing)
            _draw_block(drawing, block, slots, first=index == 0)
            _draw_pressure(profile, block, slots, units)
    return figure


def _draw_block(axes: Axes, block: BlockDesign, slots: int, first: bool) -> None:
    axes.set_xlim(0.0, slots)
    axes.set_ylim(-0.05, 1.75)
    axes.set_axis_off()
    axes.set_title(
        f"{wrapped(block.block, 34, 1)}, {block.operation.replace('-', ' ')}, {fixed(block.flow, 0)} L/h"
        + (" on average" if block.operation == "constant-pressure" else "")
    )
    end = len(block.stages) + 1
    axes.plot([0.43, end + 0.53], [0.5, 0.5], color=INK, linewidth=1.4, zorder=1)
    _tank(axes, 0.28, "feed" if first else "tank")
    _pump(axes, 0.78)
    width = max(8, int((70 if slots <= 6 else 88) / slots))
    for index, stage in enumerate(block.stages):
        _stage(axes, index + 1.5, stage, width)
    axes.plot([end + 0.3], [0.5], marker=">", markersize=7, color=INK)
    _tank(axes, end + 0.68, "tank")


def _tank(axes: Axes, x: float, name: str) -> None:
    axes.plot([x - 0.15, x - 0.15, x + 0.15, x + 0.15], [0.85, 0.2, 0.2, 0.85], color=INK, linewidth=1.4)
    axes.fill_between([x - 0.14, x + 0.14], 0.22, 0.62, color=MIST, zorder=0)
    axes.text(x, 0.02, name, ha="center", va="center", fontsize=8)


def _pump(axes: Axes, x: float) -> None:
    axes.plot([x], [0.5], marker="o", markersize=15, color="white", markeredgecolor=INK, markeredgewidth=1.4)
    axes.plot([x], [0.5], marker=">", markersize=7, color=INK)
    axes.text(x, 0.02, "pump", ha="center", va="center", fontsize=8)


def _stage(axes: Axes, x: float, stage: StageDesign, width: int) -> None:
    """The modules as bars between the header that feeds them and the one that collects from them."""
    from matplotlib.patches import Rectangle

    low, high = (0.1, 0.9) if stage.count > 1 else (0.4, 0.6)
    pitch = (high - low) / stage.count
    thick = min(0.72 * pitch, 0.2)
    for index in range(stage.count):
        middle = low + (index + 0.5) * pitch
        corner = (x - HALF, middle - 0.5 * thick)
        axes.add_patch(Rectangle(corner, 2 * HALF, thick, facecolor=PINE, edgecolor="none", zorder=3))
    axes.add_patch(Rectangle((x - HALF, low), 2 * HALF, high - low, facecolor="white", edgecolor="none", zorder=2))
    for edge in (x - HALF, x + HALF):
        axes.plot([edge, edge], [low, high], color=INK, linewidth=1.4, zorder=4)
    axes.text(
        x,
        1.0,
        f"{wrapped(stage.stage, width, 2)}\n{wrapped(f'{stage.count} × {stage.module}', width, 2)}\n"
        f"{trimmed(stage.area)} m²",
        ha="center",
        va="bottom",
        fontsize=8 if width > 11 else 7,
        linespacing=1.15,
    )


def _draw_pressure(axes: Axes, block: BlockDesign, slots: int, units: str) -> None:
    factor, pressure = PRESSURE_UNITS[units], Pressure(units)
    p = block.pressure
    level = (p.static + p.line + p.stages) * factor
    end = len(block.stages) + 1
    x, y = [0.78, 1.0, 1.0 + 0.5 - HALF], [level, level - p.line * factor, level - p.line * factor]
    axes.plot([0.78, end + 0.68], [p.limit * factor] * 2, color=BRICK, linestyle="--", linewidth=1.0)
    axes.text(
        end + 0.95,
        p.limit * factor,
        f"limit {pressure.number(p.limit)}",
        color=BRICK,
        ha="right",
        va="bottom",
        fontsize=8,
    )
    for index, stage in enumerate(block.stages):
        middle, fall = index + 1.5, stage.pressure * factor
        x += [middle - HALF, middle + HALF]
        y += [y[-1], y[-1] - fall]
        _label_fall(axes, middle, y[-1] + 0.5 * fall, p.limit * factor, pressure.number(stage.pressure))
    x.append(end + 0.68)
    y.append(y[-1])
    axes.plot(x, y, color=PINE, linewidth=2.0)
    axes.fill_between(x, y, color=MIST, zorder=0)
    axes.set_xlim(0.0, slots)
    axes.set_ylim(0.0, 1.22 * p.limit * factor)
    axes.set_ylabel(units)
    axes.tick_params(bottom=False, labelbottom=False)
    axes.spines["bottom"].set_color(STONE)


def _label_fall(axes: Axes, x: float, y: float, limit: float, number: str) -> None:
    """What a stage takes, above its slope, or below it where the limit's line is near."""
    below = y > 0.72 * limit
    axes.text(
        x - 0.06 if below else x + 0.06,
        y,
        f"−{number}",
        ha="right" if below else "left",
        va="top" if below else "bottom",
        fontsize=8,
    )
