"""Where the area goes: a staircase of parts that adds up to what is installed."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from trainopt.report.labels import wrapped
from trainopt.report.numbers import aligned
from trainopt.report.style import INK, OCHRE, PINE, STONE, styled

if TYPE_CHECKING:
    from matplotlib.figure import Figure


def parts_figure(parts: Sequence[tuple[str, float]], unit: str, beside: tuple[str, float] | None) -> Figure:
    """Parts (name, amount in `unit`) one upon the other, their sum, and what stands `beside` it."""
    from matplotlib.figure import Figure

    total = sum(amount for _, amount in parts)
    names = [name for name, _ in parts] + ["installed"] + ([beside[0]] if beside else [])
    numbers = aligned(
        [*(amount for _, amount in parts), total, *([beside[1]] if beside else [])], 1 if total < 1000.0 else 0
    )
    starts, ends = [], []
    level = 0.0
    for _, amount in parts:
        starts.append(level)
        level += amount
        ends.append(level)
    starts += [0.0] + ([0.0] if beside else [])
    ends += [total] + ([beside[1]] if beside else [])
    with styled():
        figure = Figure(figsize=(6.6, 0.36 * len(names) + 0.75), layout="constrained")
        axes = figure.subplots()
        for row, (start, end) in enumerate(zip(starts, ends, strict=True)):
            part = row < len(parts)
            color = STONE if part and row else PINE if row <= len(parts) else OCHRE
            hatch = "////" if row > len(parts) else ""
            axes.barh(row, end - start, 0.66, start, color=color, edgecolor=INK, linewidth=0.7, hatch=hatch)
            sign = "+" if 0 < row < len(parts) and end >= start else ""
            axes.text(max(start, end), row, f" {sign}{numbers[row]}".replace("-", "−"), va="center", fontsize=8)
            if part:
                axes.plot([end, end], [row, row + 1], color=INK, linewidth=0.7)
        axes.set_yticks(range(len(names)), [wrapped(name, 34) for name in names])
        axes.set_ylim(len(names) - 0.5, -0.5)
        axes.set_xlim(0.0, 1.15 * max(*ends, *starts))
        axes.set_xlabel(unit)
        axes.tick_params(left=False)
    return figure
