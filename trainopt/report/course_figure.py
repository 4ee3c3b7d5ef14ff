"""The course of pressure over the batch: each block's worst lot by stage, and the other lots' totals.

A block that holds its pressure has its falling flow in a panel below.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from trainopt.report.labels import short
from trainopt.report.numbers import PRESSURE_UNITS
from trainopt.report.style import BRICK, DASHES, HATCHES, INK, MIST, PINE, STEPS, styled

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

Floats = NDArray[np.float64]

PRESSURE_HEIGHT, FLOW_HEIGHT = 2.5, 1.3
"""Heights of the panels, inches."""


@dataclass(frozen=True, eq=False)
class Course:
    """One block's batch with one lot: `time` h, `base` static and line bar, `stages` bar, `flow` L/h, each (n,).

    `worst`: the lot that the design is held to; `derated`: all areas divided by the safety factor.
    """

    block: str
    lot: str
    worst: bool
    limit: float
    time: Floats
    base: Floats
    stages: tuple[tuple[str, Floats], ...]
    flow: Floats
    derated: bool = False

    @property
    def total(self) -> Floats:
        """Pressure at the pump, bar, shape (n,)."""
        return np.asarray(self.base + sum(values for _, values in self.stages))

    @property
    def flow_falls(self) -> bool:
        """Whether the flow changes over the batch: the pressure is held instead."""
        return bool(np.ptp(self.flow) > 1e-9 * np.max(self.flow))


def course_figure(courses: Sequence[Course], units: str = "bar") -> Figure:
    """One panel per block: pressure (`units`) against time (h); below it the flow (L/h) where that falls."""
    from matplotlib.figure import Figure

    blocks = {name: [course for course in courses if course.block == name] for name in (c.block for c in courses)}
    falling = {name: any(course.flow_falls for course in own) for name, own in blocks.items()}
    heights = [height for name in blocks for height in ((PRESSURE_HEIGHT, FLOW_HEIGHT)[: 1 + falling[name]])]
    with styled():
        figure = Figure(figsize=(6.6, sum(heights)), layout="constrained")
        panels = figure.subplots(len(heights), 1, squeeze=False, gridspec_kw={"height_ratios": heights})[:, 0]
        below = iter(panels)
        for name, own in blocks.items():
            axes = next(below)
            _panel(axes, own, PRESSURE_UNITS[units])
            axes.set_title(short(name, 60))
            axes.set_ylabel(f"Pressure, {units}")
            if falling[name]:
                axes.tick_params(labelbottom=False)
                _flow_panel(next(below), own, axes.get_xlim())
        panels[-1].set_xlabel("Time since the block's start, h")
        figure.align_ylabels()
    return figure


def _worst(courses: Sequence[Course]) -> Course:
    """The course that is filled: the worst lot's at the installed area."""
    return next((course for course in courses if course.worst and not course.derated), courses[0])


def _others(courses: Sequence[Course]) -> Iterator[tuple[Course, str, dict[str, Any]]]:
    """The other courses, each with its label and the look of its line, the same in every panel."""
    worst = _worst(courses)
    for index, course in enumerate(course for course in courses if course is not worst):
        label = f"lot {short(course.lot, 12)}" + (", derated" if course.derated else "")
        color = BRICK if course.derated else INK
        yield course, label, {"color": color, "linewidth": 1.0, "linestyle": DASHES[1 + index % (len(DASHES) - 1)]}


def _flow_panel(axes: Axes, courses: Sequence[Course], span: tuple[float, float]) -> None:
    worst = _worst(courses)
    axes.plot(worst.time, worst.flow, color=PINE, linewidth=2.0)
    for course, _, look in _others(courses):
        axes.plot(course.time, course.flow, **look)
    axes.set_xlim(span)
    axes.set_ylim(0.0, 1.08 * max(float(course.flow.max()) for course in courses))
    axes.set_ylabel("Flow, L/h")


def _panel(axes: Axes, courses: Sequence[Course], factor: float) -> None:
    worst = _worst(courses)
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
    for course, label, look in _others(courses):
        axes.plot(course.time, course.total * factor, label=label, **look)
    axes.axhline(worst.limit * factor, color=BRICK, linestyle="--", linewidth=1.0, label="limit")
    axes.set_xlim(0.0, max(float(course.time[-1]) for course in courses))
    axes.set_ylim(0.0, 1.08 * max(worst.limit * factor, float(level.max())))
    axes.legend(loc="center left", bbox_to_anchor=(1.0, 0.5), fontsize=8)
