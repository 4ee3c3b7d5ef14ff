"""How sure a design is, beside the even split and the safety-factor design: shares of fresh lots, with intervals."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from trainopt.report.labels import wrapped
from trainopt.report.style import BRICK, INK, MARKS, OCHRE, PINE, STONE, styled

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from trainopt.train.results import Chance

COLORS = (PINE, OCHRE, STONE)


def reliability_figure(rows: Sequence[tuple[str, Chance | None]], target: float) -> Figure:
    """One line a design: its share of batches that finish, %, with the 95 % interval; dashed, the share asked for."""
    from matplotlib.figure import Figure

    shown = [(name, chance) for name, chance in rows if chance is not None]
    with styled():
        figure = Figure(figsize=(6.6, 0.42 * len(shown) + 0.85), layout="constrained")
        axes = figure.subplots()
        for row, (name, chance) in enumerate(shown):
            share = 100.0 * chance.share
            ends = [[share - 100.0 * chance.low], [100.0 * chance.high - share]]
            color = COLORS[row % len(COLORS)]
            axes.errorbar(
                share, row, xerr=ends, fmt=MARKS[row % len(MARKS)], color=INK, markerfacecolor=color,
                markeredgecolor=INK, markersize=8, capsize=4, linewidth=1.4, label=name,
            )  # fmt: skip
        axes.axvline(100.0 * target, color=BRICK, linestyle="--", linewidth=1.2)
        axes.text(100.0 * target, -0.62, "asked for ", color=BRICK, fontsize=8, ha="right", va="bottom")
        axes.set_yticks(range(len(shown)), [wrapped(name, 30) for name, _ in shown])
        axes.set_ylim(len(shown) - 0.5, -0.65)
        lowest = min([target, *(chance.low for _, chance in shown)])
        axes.set_xlim(100.0 * max(0.0, lowest - 0.15 * (1.0 - lowest) - 0.005), 100.4)
        axes.set_xlabel("Batches that finish inside every limit, % of fresh sampled lots")
        axes.grid(axis="x")
        axes.tick_params(left=False)
    return figure
