"""Where pressure and time go: each block's pressure and the whole time, the even split beside the optimum."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from trainopt.report.labels import short
from trainopt.report.numbers import PRESSURE_UNITS, Pressure, fixed, plain
from trainopt.report.style import BRICK, HATCHES, INK, MIST, STEPS, STONE, readable_on, styled

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from trainopt.train.results import BlockDesign, Design

BAR = 0.7
ROOM_FOR_A_NUMBER = 0.055
"""Share of the axis that a segment needs to hold its number."""


@dataclass(frozen=True)
class Part:
    """One segment of a bar."""

    name: str
    value: float
    color: str
    hatch: str = ""


def budget_figure(design: Design, units: str = "bar", schedule: str = "sequential") -> Figure:
    """Stacked bars of pressure (`units`, end of batch, worst lot, derated area) and of time (h).

    Blocks in sequence share one bar of time; side by side each has its own.
    """
    from matplotlib.figure import Figure

    evens = design.even_split.blocks if design.even_split is not None else ()
    pairs = [(block, _same(block, evens)) for block in design.blocks]
    times = _time_rows(design.blocks, evens, schedule)
    heights = [1 + (other is not None) + 1.2 for _, other in pairs] + [len(times) + 1.2]
    with styled():
        figure = Figure(figsize=(6.6, 0.38 * sum(heights) + 0.2), layout="constrained")
        panels = figure.subplots(len(heights), 1, gridspec_kw={"height_ratios": heights}, squeeze=False)[:, 0]
        for axes, (block, even) in zip(panels, pairs, strict=False):
            _pressure_panel(axes, block, even, units)
        _time_panel(panels[-1], times)
    return figure


def _time_rows(
    blocks: Sequence[BlockDesign], evens: Sequence[BlockDesign], schedule: str
) -> list[tuple[str, list[Part]]]:
    """Names and parts of the bars of time."""
    rows: list[tuple[str, list[Part]]] = []
    for name, ones in (("optimum", blocks), ("even split", evens)):
        parts = [
            [Part("setup", block.setup, "white"), Part(block.block, block.time, *_look(index))]
            for index, block in enumerate(ones)
        ]
        if schedule == "side-by-side":
            rows += [(name, own) for own in parts]
        elif parts:
            rows.append((name, [part for own in parts for part in own]))
    return rows


def _same(block: BlockDesign, others: Sequence[BlockDesign]) -> BlockDesign | None:
    return next((other for other in others if other.block == block.block), None)


def _pressure_panel(axes: Axes, block: BlockDesign, even: BlockDesign | None, units: str) -> None:
    factor, pressure = PRESSURE_UNITS[units], Pressure(units)
    designs = [("optimum", block)] + ([("even split", even)] if even is not None else [])
    limit = block.pressure.limit * factor
    names = list(dict.fromkeys(stage.stage for _, one in designs for stage in one.stages))
    for row, (_, one) in enumerate(designs):
        p = one.pressure
        parts = [Part("static", p.static, MIST), Part("line", p.line, STONE)]
        parts += [Part(stage.stage, stage.pressure, *_look(names.index(stage.stage))) for stage in one.stages]
        parts.append(Part("spare", p.spare, "white"))
        _bar(axes, row, parts, factor, limit, pressure.number)
    axes.axvline(limit, color=BRICK, linestyle="--", linewidth=1.0)
    _finish(axes, [name for name, _ in designs], f"{short(block.block, 50)}: pressure, {units}", limit)


def _look(index: int) -> tuple[str, str]:
    return STEPS[index % len(STEPS)], HATCHES[index % len(HATCHES)]


def _time_panel(axes: Axes, rows: list[tuple[str, list[Part]]]) -> None:
    longest = max(sum(part.value for part in parts) for _, parts in rows)
    for row, (_, parts) in enumerate(rows):
        _bar(axes, row, parts, 1.0, longest, lambda value: fixed(value, 2))
    _finish(axes, [name for name, _ in rows], "Time of the blocks, h", longest)


def _bar(axes: Axes, row: int, parts: list[Part], factor: float, full: float, number: Callable[[float], str]) -> None:
    """One bar; a segment with room carries name and number, a narrower one its number, a sliver nothing."""
    start = 0.0
    for part in parts:
        width = max(0.0, part.value * factor)
        axes.barh(row, width, BAR, start, color=part.color, edgecolor=INK, linewidth=0.7, hatch=part.hatch)
        share = width / full if full > 0.0 else 0.0
        if share > ROOM_FOR_A_NUMBER:
            text, letters = number(part.value), int(share * 66)
            one_line = letters > len(part.name) + len(text)
            label = f"{part.name} {text}" if one_line else f"{short(part.name, letters)}\n{text}"
            label = plain(label) if one_line else label if letters > 5 else text
            axes.text(
                start + 0.5 * width,
                row,
                label,
                ha="center",
                va="center",
                clip_on=True,
                fontsize=8 if "\n" not in label else 7,
                color=readable_on(part.color),
                bbox={"facecolor": part.color, "edgecolor": "none", "pad": 1.0} if part.hatch else None,
            )
        start += width


def _finish(axes: Axes, names: list[str], title: str, full: float) -> None:
    axes.set_title(title)
    axes.set_yticks(range(len(names)), names)
    axes.set_ylim(len(names) - 0.5, -0.5)
    axes.set_xlim(0.0, 1.02 * full if full > 0.0 else 1.0)
    axes.tick_params(left=False)
    axes.spines["left"].set_visible(False)
