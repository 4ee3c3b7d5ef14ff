"""What-if on batch volume: what the optimum and the even split would take for smaller and larger batches."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from trainopt.report.style import BRICK, INK, OCHRE, PINE, styled

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from trainopt.report.dossier import VolumePoint


def volume_figure(points: Sequence[VolumePoint], volume: float, label: str) -> Figure:
    """The objective (`label` names it with its unit) against batch volume in L; gaps where no design exists."""
    from matplotlib.figure import Figure

    with styled():
        figure = Figure(figsize=(6.6, 3.0), layout="constrained")
        axes = figure.subplots()
        volumes = [point.volume for point in points]
        even = [np.nan if point.even_split is None else point.even_split for point in points]
        best = [np.nan if point.objective is None else point.objective for point in points]
        axes.plot(volumes, even, "s--", color=OCHRE, markeredgecolor=INK, markersize=4, label="even split")
        axes.plot(volumes, best, "o-", color=PINE, markersize=4, linewidth=2.0, label="optimum")
        axes.axvline(volume, color=BRICK, linestyle=":", linewidth=1.2, label="this batch")
        axes.set_xlabel("Batch volume, L")
        axes.set_ylabel(label)
        axes.set_ylim(bottom=0.0)
        axes.grid(axis="y")
        axes.legend(loc="upper left")
    return figure
