"""The course of a batch through a chosen train, stage by stage and reading by reading (model.md, section 6).

It knows nothing of demands, options or the model: only R(l) of each stage, so that it can check them.
Volumes in L, times in h, pressures in bar, flow in L/h, flux in LMH, loading in L/m².
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from trainopt.curves.curve import LotCurve
from trainopt.train.problem import Floats

POINTS = 201
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(6)


@dataclass(frozen=True)
class MarchStage:
    """One stage of a train: its name, its curve and the area that filters, m² (derating and scale-up included)."""

    name: str
    curve: LotCurve
    area: float


@dataclass(frozen=True, eq=False)
class Course:
    """What gauges along the train would show: arrays of shape (n,), `pressure`, `loading`, `flux` of shape (stages, n).

    `pressure` is each stage's differential pressure, `total` the pump's: stages, line and static.
    `handover` is the volume at which constant flow met the pressure limit (None: never, or not asked).
    """

    stages: tuple[str, ...]
    time: Floats
    volume: Floats
    flow: Floats
    pressure: Floats
    line: Floats
    total: Floats
    loading: Floats
    flux: Floats
    handover: float | None = None

    @property
    def inlet(self) -> Floats:
        """Pressure at each stage's inlet, shape (stages, n): all that lies downstream, line and static too."""
        downstream = np.cumsum(self.pressure[::-1], axis=0)[::-1]
        rest = self.total - self.pressure.sum(axis=0)
        return np.asarray(downstream + rest)


def train_resistance(stages: Sequence[MarchStage], volume: Floats) -> Floats:
    """R_i(v/A_i)/A_i of each stage, bar/(L/h), shape (stages, n)."""
    return np.array([s.curve.resistance(np.asarray(volume / s.area)) / s.area for s in stages]).reshape(
        len(stages), np.size(volume)
    )


def constant_flow(
    stages: Sequence[MarchStage], volume: float, flow: float, line: float, static: float, points: int = POINTS
) -> Course:
    """The batch at constant flow in L/h: pressures rise as the stages foul."""
    v = np.linspace(0.0, volume, points)
    return _course(stages, v, v / flow, np.full(points, flow), line, static)


def constant_pressure(
    stages: Sequence[MarchStage],
    volume: float,
    pressure: float,
    line: float,
    static: float,
    start: float = 0.0,
    points: int = POINTS,
) -> Course:
    """The batch at constant total pressure in bar from `start` L on: the flow falls as the stages foul.

    dt = (Σ_i R_i(v/A_i)/A_i + r)/(P − Pstatic) dv, summed by Gauss–Legendre between the points. Time starts at 0;
    it is infinite where a stage is past its pole.
    """
    head = pressure - static
    v = np.linspace(start, volume, points)
    half = 0.5 * np.diff(v)
    inner = (v[:-1] + half)[:, None] + half[:, None] * _NODES
    rate = (train_resistance(stages, inner.ravel()).sum(axis=0) + line).reshape(inner.shape) / head
    time = np.concatenate([[0.0], np.cumsum(half * (rate @ _WEIGHTS))])
    with np.errstate(divide="ignore"):
        flow = head / (train_resistance(stages, v).sum(axis=0) + line)
    return _course(stages, v, time, flow, line, static)


def flow_then_pressure(
    stages: Sequence[MarchStage],
    volume: float,
    flow: float,
    pressure: float,
    line: float,
    static: float,
    points: int = POINTS,
) -> Course:
    """Constant flow in L/h until the total pressure meets `pressure` in bar, then held there to the batch's end."""
    met = limit_volume(stages, volume, flow, pressure, line, static)
    if met is None:
        return constant_flow(stages, volume, flow, line, static, points)
    first = constant_flow(stages, met, flow, line, static, points) if met > 0.0 else None
    second = constant_pressure(stages, volume, pressure, line, static, met, points)
    if first is None:
        return _joined(None, second, met)
    return _joined(first, second, met)


def limit_volume(
    stages: Sequence[MarchStage], volume: float, flow: float, pressure: float, line: float, static: float
) -> float | None:
    """Volume in L at which constant flow first needs more than `pressure` in bar; None if the batch ends before."""
    v = np.linspace(0.0, volume, 2001)
    over = np.flatnonzero(_needed(stages, v, flow, line, static) > pressure)
    if not len(over):
        return None
    if over[0] == 0:
        return 0.0
    low, high = float(v[over[0] - 1]), float(v[over[0]])
    while high - low > 1e-13 * volume:
        middle = 0.5 * (low + high)
        if not low < middle < high:
            break
        if _needed(stages, np.array([middle]), flow, line, static)[0] > pressure:
            high = middle
        else:
            low = middle
    return low


def _needed(stages: Sequence[MarchStage], v: Floats, flow: float, line: float, static: float) -> Floats:
    return np.asarray((train_resistance(stages, v).sum(axis=0) + line) * flow + static)


def _course(stages: Sequence[MarchStage], v: Floats, time: Floats, flow: Floats, line: float, static: float) -> Course:
    with np.errstate(invalid="ignore"):
        pressure = train_resistance(stages, v) * flow
        # Nothing resists a block without stages and line: its flow is infinite and costs no pressure.
        drop = line * flow if line > 0.0 else np.zeros_like(flow)
        total = pressure.sum(axis=0) + drop + static
    area = np.array([[s.area] for s in stages]).reshape(len(stages), 1)
    return Course(
        stages=tuple(s.name for s in stages),
        time=time,
        volume=v,
        flow=flow,
        pressure=pressure,
        line=drop,
        total=total,
        loading=v / area,
        flux=flow / area,
    )


def _joined(first: Course | None, second: Course, met: float) -> Course:
    if first is None:
        parts = {name: getattr(second, name) for name in _ARRAYS}
    else:
        # The hand-over is one point: the second part's first is the first part's last.
        shifted = second.time + first.time[-1]
        parts = {
            name: np.concatenate([getattr(first, name), getattr(second, name)[..., 1:]], axis=-1)
            for name in _ARRAYS
            if name != "time"
        }
        parts["time"] = np.concatenate([first.time, shifted[1:]])
    return Course(stages=second.stages, handover=met, **parts)


_ARRAYS = ("time", "volume", "flow", "pressure", "line", "total", "loading", "flux")


def end_pressures(stages: Sequence[MarchStage], volume: float, pressure: float, line: float, static: float) -> Floats:
    """Each stage's share of a constant total pressure at the end of the batch, bar, shape (stages,)."""
    resistance = train_resistance(stages, np.array([volume]))[:, 0]
    total = float(resistance.sum()) + line
    return (
        np.asarray(resistance * ((pressure - static) / total)) if math.isfinite(total) else np.full(len(stages), np.nan)
    )
