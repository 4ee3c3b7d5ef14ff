"""Quality flags: what in a run its reader should know before trusting the curve.

A flag says the rows, the numbers and what to do. Only the rules of `exclusion.py` leave a reading out of
the fit.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from trainopt.bench import exclusion
from trainopt.bench.run import Flag, ReducedRun

SLIP = 0.9
"""A pump slips where the flux is below this part of its set point while the pressure falls."""

OFF_SET_POINT = 0.1
BALANCE = 0.05
LEVEL = 0.25
"""Pressure has leveled off where it grows at less than this part of its rate before."""

SENSIBLE_FLUX = (5.0, 5000.0)
"""LMH; bench runs of depth filters go at about 50 to 1000 (common practice, no source)."""

SENSIBLE_RESISTANCE = (1e-6, 1.0)
"""bar/LMH, clean: water through an open sheet to a tight membrane (common practice, no source)."""


def checked(run: ReducedRun, keep: bool) -> ReducedRun:
    """The run with its readings excluded by rule and every check's flags added; `keep` keeps what can be kept."""
    reasons = exclusion.impossible(run)
    usable = np.array([reason is None for reason in reasons], dtype=bool)
    flags = [*run.flags]
    if run.operation == "constant-flow":
        stepping = exclusion.flow_steps(run) & usable
        starting = exclusion.start_up(run, usable & ~stepping)
        for mask, reason in ((stepping, "the flow is changing at this reading"), (starting, "start-up")):
            for index in np.flatnonzero(mask):
                reasons[index] = None if keep else reasons[index] or reason
        slipping = _slipping(run, usable)
        flags.extend(_start_up(run, starting, keep))
        flags.extend(_flow_steps(run, stepping, slipping, keep))
        flags.extend(_pump_slip(run, slipping, stepping, keep))
        flags.extend(_off_set_point(run, usable & ~starting & ~stepping & ~slipping))
    marked = replace(run, excluded=tuple(reasons))
    flags.extend(_shrinking(marked))
    flags.extend(_breakthrough(marked))
    flags.extend(_mass_balance(marked))
    flags.extend(_physical_sense(marked))
    return replace(marked, flags=tuple(flags))


def _left_out(keep: bool) -> str:
    return "kept in the fit by `keep: true`" if keep else "left out of the fit (`keep: true` keeps them)"


def _place(run: ReducedRun, first: int, last: int) -> tuple[int, int]:
    return int(run.rows[first]), int(run.rows[last])


def _start_up(run: ReducedRun, starting: NDArray[np.bool_], keep: bool) -> Iterator[Flag]:
    at = np.flatnonzero(starting)
    if len(at):
        settled = run.resistance[min(int(at[-1]) + 1, len(run.time) - 1)]
        text = (
            f"start-up or air purge: {len(at)} reading(s) up to {run.loading[at[-1]]:.3g} L/m2 resist "
            f"{run.resistance[at[0]] / settled:.2g} times the first settled one; {_left_out(keep)}; purge before "
            "loading"
        )
        yield Flag("start-up", run.name, _place(run, int(at[0]), int(at[-1])), text)


def _flow_steps(
    run: ReducedRun, stepping: NDArray[np.bool_], slipping: NDArray[np.bool_], keep: bool
) -> Iterator[Flag]:
    """Steps of the flow that are not the edge of a pump slip, which says so itself."""
    for first, last in _stretches(stepping, shortest=1):
        if slipping[max(first - 1, 0) : last + 2].any():
            continue
        around = run.flux[[max(first - 1, 0), min(last + 1, len(run.flux) - 1)]]
        text = (
            f"the flow steps from {around[0]:.0f} to {around[1]:.0f} LMH; {last - first + 1} reading(s) "
            f"{_left_out(keep)}"
        )
        yield Flag("flow-step", run.name, _place(run, first, last), text)


def _slipping(run: ReducedRun, usable: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Flux down by a tenth or more while the pressure is below its highest so far."""
    if usable.sum() < 5:
        return np.zeros(len(usable), dtype=bool)
    peak = np.maximum.accumulate(np.where(usable, run.pressure, -np.inf))
    low = run.flux < SLIP * np.median(run.flux[usable])
    return np.asarray(usable & low & (run.pressure < 0.98 * peak))


def _pump_slip(run: ReducedRun, slipping: NDArray[np.bool_], stepping: NDArray[np.bool_], keep: bool) -> Iterator[Flag]:
    """The resistance is still right, because flux is measured; but a slipping pump was starved or worn."""
    for first, last in _stretches(slipping, shortest=2):
        set_point = float(np.median(run.flux))
        lowest = float(np.min(run.flux[first : last + 1]))
        highest = float(np.max(run.pressure[: first + 1]))
        edges = int(stepping[max(first - 1, 0) : last + 2].sum())
        text = (
            f"pump slip: flux falls to {lowest:.0f} LMH ({lowest / set_point:.0%} of {set_point:.0f}) as pressure "
            f"backs off from {highest:.2f} to {run.pressure[first : last + 1].min():.2f} bar; resistances there use "
            f"the measured flux; {edges} reading(s) where the flow changes {_left_out(keep)}; check the pump head "
            "and tubing"
        )
        yield Flag("pump-slip", run.name, _place(run, first, last), text)


def _off_set_point(run: ReducedRun, steady: NDArray[np.bool_]) -> Iterator[Flag]:
    if steady.sum() < 5:
        return
    set_point = float(np.median(run.flux[steady]))
    off = steady & (np.abs(run.flux / set_point - 1.0) > OFF_SET_POINT)
    for first, last in _stretches(off, shortest=3):
        mean = float(np.mean(run.flux[first : last + 1]))
        text = (
            f"flow off its set point: {mean:.0f} LMH on average against {set_point:.0f} for the run; resistances "
            "use the measured flux and stay in the fit"
        )
        yield Flag("off-set-point", run.name, _place(run, first, last), text)


def _shrinking(run: ReducedRun) -> Iterator[Flag]:
    fall = -np.diff(run.volume)
    at = np.flatnonzero(fall > max(2.0 * run.volume_step, 1e-9))
    if len(at):
        text = (
            f"the filtrate shrinks {len(at)} time(s), by up to {fall[at].max() * 1000.0:.3g} mL: taken as reading "
            "noise; check balance and tubing"
        )
        yield Flag("volume-falls", run.name, _place(run, int(at[0]), int(at[-1]) + 1), text)


def breakthrough(run: ReducedRun) -> int | None:
    """The reading from which pressure has leveled off while turbidity rises for good; None where it does
    not.

    Turbidity stays above twice the median of the readings before, and the resistance grows at less than a
    quarter of its rate over as much loading before.
    """
    read = np.flatnonzero(np.isfinite(run.turbidity) & run.used)
    if len(read) < 6:
        return None
    for place in range(3, len(read) - 1):
        first = int(read[place])
        base = float(np.median(run.turbidity[read[:place]]))
        if not np.all(run.turbidity[read[place:]] > max(2.0 * base, base + 0.5)):
            continue
        before, after = _growth(run, first)
        return first if before > 0.0 and after < LEVEL * before else None
    return None


def _growth(run: ReducedRun, first: int) -> tuple[float, float]:
    """Slope of resistance in loading before and after a reading, over equal spans where they exist."""
    used = np.flatnonzero(run.used)
    after = used[used >= first]
    span = run.loading[after[-1]] - run.loading[first]
    before = used[(used < first) & (run.loading[used] >= run.loading[first] - max(span, 0.3 * run.loading[first]))]
    return tuple(  # type: ignore[return-value]
        float(np.polyfit(run.loading[at], run.resistance[at], 1)[0]) if len(at) >= 3 else 0.0 for at in (before, after)
    )


def _breakthrough(run: ReducedRun) -> Iterator[Flag]:
    first = breakthrough(run)
    if first is not None:
        text = (
            f"breakthrough: from {run.loading[first]:.1f} L/m2 on the pressure levels off while turbidity rises to "
            f"{np.nanmax(run.turbidity[first:]):.3g} NTU; that loading is the turbidity endpoint"
        )
        yield Flag("breakthrough", run.name, _place(run, first, len(run.rows) - 1), text)


def _mass_balance(run: ReducedRun) -> Iterator[Flag]:
    read = np.flatnonzero(np.isfinite(run.feed))
    if len(read) < 2:
        return
    last = int(read[-1])
    fed = float(run.feed[last] - run.feed[read[0]])
    out = float(run.volume[last] - run.volume[read[0]])
    if fed > 0.0 and abs(fed - out) > BALANCE * fed:
        text = (
            f"mass balance: {fed * 1000.0:.0f} mL fed against {out * 1000.0:.0f} mL of filtrate "
            f"({out / fed - 1.0:+.0%}) between the same readings; look for a leak, a wrong density or tare, or a "
            "vessel that was not read"
        )
        yield Flag("mass-balance", run.name, _place(run, int(read[0]), last), text)


_FLUX_MIX_UPS = {
    "time in seconds, not minutes": 60.0,
    "time in minutes, not hours": 60.0,
    "time in minutes, not seconds": 1.0 / 60.0,
    "time in hours, not minutes": 1.0 / 60.0,
    "volume in mL, not L": 1e-3,
    "volume in L, not mL": 1e3,
    "area in m2, not cm2": 1e-4,
    "area in cm2, not m2": 1e4,
}
"""What the values may really be in, and what the flux then changes by."""

_PRESSURE_MIX_UPS = {
    "psi, not bar": 0.0689,
    "kPa, not bar": 0.01,
    "mbar, not bar": 1e-3,
    "Pa, not bar": 1e-5,
    "psi, not kPa": 6.89,
    "psi, not mbar": 68.9,
    "psi, not Pa": 6890.0,
    "bar, not psi": 14.5,
    "bar, not kPa": 100.0,
    "bar, not Pa": 1e5,
}


def _physical_sense(run: ReducedRun) -> Iterator[Flag]:
    used = run.used
    if not used.any():
        return
    flux = float(np.median(run.flux[used & (run.flux > 0.0)])) if np.any(used & (run.flux > 0.0)) else 0.0
    low, high = SENSIBLE_FLUX
    if flux > 0.0 and not low <= flux <= high:
        fits = sorted({name for name, factor in _FLUX_MIX_UPS.items() if 20.0 <= flux * factor <= 1500.0})
        suspects = f"; a unit mix-up is suspected: {' or '.join(fits)}" if fits else "; check units and area"
        text = f"flux of {flux:.3g} LMH is outside physical sense ({low:g} to {high:g}){suspects}"
        yield Flag("unit-suspected", run.name, None, text)
        return
    clean = float(np.median(run.resistance[used][: max(int(used.sum()) // 10, 1)]))
    low, high = SENSIBLE_RESISTANCE
    if np.isfinite(clean) and not low <= clean <= high:
        fits = sorted(name for name, factor in _PRESSURE_MIX_UPS.items() if 1e-5 <= clean * factor <= 0.1)
        suspects = f"; a pressure unit mix-up is suspected: {' or '.join(fits)}" if fits else "; check units and area"
        text = f"resistance of {clean:.3g} bar/LMH is outside physical sense ({low:g} to {high:g}){suspects}"
        yield Flag("unit-suspected", run.name, None, text)


def _stretches(mask: NDArray[np.bool_], shortest: int) -> list[tuple[int, int]]:
    """First and last index of each run of True at least `shortest` long."""
    edges = np.diff(np.concatenate([[0], mask.astype(int), [0]]))
    starts, ends = np.flatnonzero(edges == 1), np.flatnonzero(edges == -1) - 1
    return [(int(a), int(b)) for a, b in zip(starts, ends, strict=True) if b - a + 1 >= shortest]
