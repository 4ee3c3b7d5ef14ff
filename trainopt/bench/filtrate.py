"""Cumulative filtrate from what was read: mass over density, tare off, a swapped cylinder counted on."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from trainopt.bench.run import Flag, Floats

NOISE = 0.02
"""A fall of more than this part of a run's filtrate is no reading noise."""


def time_faults(time: Floats, swaps: NDArray[np.bool_], rows: NDArray[np.int64]) -> list[tuple[int, str]]:
    """Rows whose time does not increase; at a swapped cylinder the time may repeat."""
    out = []
    step = np.diff(time)
    for index in np.flatnonzero((step < 0.0) | ((step == 0.0) & ~swaps[1:])):
        how = "repeats" if step[index] == 0.0 else "goes back behind"
        text = f"time {how} that of line {rows[index]}; expected times that increase"
        out.append((int(rows[index + 1]), text))
    return out


def swapped(amount: Floats) -> NDArray[np.bool_]:
    """Readings at which a new cylinder (or a tared balance) starts: it falls to near nothing and grows on from there.

    Near nothing: at most a fifth of the reading before, or one and a half of the run's usual steps; and the reading
    after it must be within five usual steps, or the small one is a slip of the pen.
    """
    out = np.zeros(len(amount), dtype=bool)
    if len(amount) < 2:
        return out
    step = np.diff(amount)
    growth = float(np.median(step[step > 0.0])) if np.any(step > 0.0) else 0.0
    for index in np.flatnonzero(step < -NOISE * max(float(np.ptp(amount)), 1e-12)):
        after = amount[index + 1]
        small = after <= max(0.2 * amount[index], 1.5 * growth) and after < 0.5 * amount[index]
        follows = index + 2 >= len(amount) or after < amount[index + 2] <= after + 5.0 * growth
        out[index + 1] = small and follows
    return out


def fall_faults(amount: Floats, swaps: NDArray[np.bool_], rows: NDArray[np.int64], role: str) -> list[tuple[int, str]]:
    """Rows at which a cumulative amount falls by more than noise without a new cylinder."""
    if len(amount) < 2:
        return []
    low = np.diff(amount) < -NOISE * max(float(np.ptp(amount)), 1e-12)
    return [
        (int(rows[index + 1]), f"{role} falls below that of line {rows[index]}; expected a cumulative {role}")
        for index in np.flatnonzero(low & ~swaps[1:])
    ]


def joined(
    time: Floats, volume: Floats, swaps: NDArray[np.bool_], name: str, rows: NDArray[np.int64]
) -> tuple[Floats, list[Flag]]:
    """Volume counted on over swapped cylinders, in L.

    What ran between the last reading of the old cylinder and the first of the new one is the time between
    them at the flow of the readings before (up to four).
    """
    out, flags = volume.copy(), []
    for index in map(int, np.flatnonzero(swaps)):
        first = max(index - 5, 0)
        gap = time[index] - time[index - 1]
        span = time[index - 1] - time[first]
        flow = (out[index - 1] - out[first]) / span if span > 0.0 else 0.0
        added = out[index - 1] + flow * gap - volume[index]
        later = np.flatnonzero(swaps[index + 1 :])
        end = int(index + 1 + later[0]) if len(later) else len(out)
        out[index:end] = volume[index:end] + added
        text = (
            f"the volume restarts at {volume[index] * 1000.0:.4g} mL: taken as a new cylinder, {added * 1000.0:.4g} "
            "mL added from here on (flow of the readings before, over the time between)"
        )
        flags.append(Flag("cylinder-swap", name, (int(rows[index - 1]), int(rows[index])), text))
    return out, flags


def tare(time: Floats, amount: Floats, given: float | None, what: str) -> tuple[float, str | None]:
    """What the balance or cylinder showed before any filtrate, and what was assumed.

    A run that starts at time 0 with something already on the balance was not tared: that reading is taken
    as the tare.
    """
    if given is not None:
        return given, None
    if time[0] == 0.0 and amount[0] > 0.0:
        unit, factor = ("g", 1000.0) if what == "mass" else ("mL", 1000.0)
        return float(amount[0]), f"{amount[0] * factor:.4g} {unit} at time 0 taken as the tare"
    return 0.0, None


def pressure_time(time: Floats, volume: Floats, pressure: Floats) -> Floats:
    """∫ΔP dt in bar·h from the first filtrate (volume 0) to each reading, by trapezoids; negative before it."""
    area = np.concatenate([[0.0], np.cumsum(0.5 * (pressure[1:] + pressure[:-1]) * np.diff(time))])
    before = np.flatnonzero(volume <= 0.0)
    if not len(before):
        return np.asarray(area + pressure[0] * time[0])
    last = int(before[-1])
    if last + 1 >= len(time):
        return np.asarray(area - area[-1])
    share = -volume[last] / (volume[last + 1] - volume[last])
    gap = share * (time[last + 1] - time[last])
    rise = pressure[last] + 0.5 * share * (pressure[last + 1] - pressure[last])
    return np.asarray(area - area[last] - rise * gap)
