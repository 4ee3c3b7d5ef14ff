"""The course of pressure over the batch: each block's worst lot by stage, and the other lots' totals."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from trainopt.report.labels import short
from trainopt.report.numbers import PRESSURE_UNITS
from trainopt.report.style import BRICK, DASHES, HATCHES, INK, MIST, PINE, STEPS, styled

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Course:
    """One block's batch with one lot: `time` h, `base` static and line bar, `stages` bar by name, each (n,).

    `worst`: the lot that the design is held to; `derated`: all areas divided by the safety factor.
    """

    block: str
    lot: str
    worst: bool
    limit: float
    time: Floats
    base: Floats
    stages: tuple[tuple[str, Floats], ...]
    derated: bool = False

    @property
    def total(self) -> Floats:
        """Pressure at the pump, bar, shape (n,)."""
        return np.asarray(self.base + sum(values for _, values in self.stages))


def course_figure(courses: Sequence[Course], units: str = "bar") -> Figure:
    """One panel per block: pressure (`units`) against time (h)."""
    from matplotlib.figure import Figure

    blocks = list(dict.fromkeys(course.block for course in courses))
    with styled():
        figure = Figure(figsize=(6.6, 2.5 * len(blocks)), layout="constrained")
        panels = figure.subplots(len(blocks), 1, squeeze=False)[:, 0]
        for axes, block in zip(panels, blocks, strict=True):
            _panel(axes, [course for course in courses if course.block == block], PRESSURE_UNITS[units])
            axes.set_title(short(block, 60))
            axes.set_ylabel(f"Pressure, {units}")
        panels[-1].set_xlabel("Time since the block's start, h")
    return figure


def _panel(axes: Axes, courses: Sequence[Course], factor: float) -> None:
    worst = next((course for course in courses if course.worst and not course.derated), courses[0])
    level = worst.base * factor
    axes.fill_between(worst.time, 0.0, level, facecolor=MIST, edgecolor="none", label="static and line")
    for index, (name, values) in enumerate(worst.stages):
        above = level + values * factor
        axes.fill_between(
            worst.time,
            level,
            above,
            facecolor=STEPS[index % len(STEPS)],
            hatch=HATCHES[index % len(HATCHES)],
            edgecolor=INK,
            linewidth=0.5,
            label=short(name, 20),
        )
        level = above
    axes.plot(worst.time, level, color=PINE, linewidth=2.0, label=f"lot {short(worst.lot, 12)}, worst")
    others = [course for course in courses if course is not worst]
    for index, course in enumerate(others):
        dashes = DASHES[1 + index % (len(DASHES) - 1)]
        label = f"lot {short(course.lot, 12)}" + (", derated" if course.derated else "")
        color = BRICK if course.derated else INK
        axes.plot(course.time, course.total * factor, color=color, linewidth=1.0, linestyle=dashes, label=label)
    axes.axhline(worst.limit * factor, color=BRICK, linestyle="--", linewidth=1.0, label="limit")
    axes.set_xlim(0.0, max(float(course.time[-1]) for course in courses))
    axes.set_ylim(0.0, 1.08 * max(worst.limit * factor, float(level.max())))
    axes.legend(loc="center left", bbox_to_anchor=(1.0, 0.5), fontsize=8)
