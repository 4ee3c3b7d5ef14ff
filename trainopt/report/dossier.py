"""Everything a design report shows, gathered once: the design, its curves, the course of its batch."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

from trainopt.report.course_figure import Course
from trainopt.report.stage_figure import StageCurve

if TYPE_CHECKING:
    from trainopt.curves.curve import Curve
    from trainopt.train.results import AreaParts, Design, Limits


@dataclass(frozen=True)
class VolumePoint:
    """One batch volume (L) of the what-if: the optimum's and the even split's objective (None: no design)."""

    volume: float
    objective: float | None
    even_split: float | None


@dataclass(frozen=True)
class Dossier:
    """A design with what it rests on.

    `volume` L and `time_allowed` h of the batch, `safety_factor` asked for, `lots` the design holds for;
    `curves` by medium; `assumptions` in words; `versions` of program and libraries; `options` the design was
    asked for with; `date` in ISO 8601. `sampled`: on a reliability basis the number of sampled lots, of which `lots`
    are a few that the design holds for. What has no entry was not computed and is not shown.
    """

    design: Design
    volume: float
    time_allowed: float
    safety_factor: float
    schedule: str
    lots: tuple[str, ...]
    curves: Mapping[str, Curve]
    stage_curves: tuple[StageCurve, ...]
    courses: tuple[Course, ...]
    assumptions: tuple[str, ...]
    versions: Mapping[str, str]
    options: Mapping[str, str]
    date: str
    volumes: tuple[VolumePoint, ...] = ()
    area_parts: AreaParts | None = None
    limits: Limits | None = None
    sampled: int = 0
