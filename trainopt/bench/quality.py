"""Quality flags: what in a run its reader should know before trusting the curve.

A flag says the rows, the numbers and what to do. Only a stated rule excludes a reading from the fit.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from trainopt.bench.run import Flag, ReducedRun

SLIP = 0.9
"""A pump slips where the flux is below this part of its set point while the pressure falls."""


def quality_flags(run: ReducedRun) -> ReducedRun:
    """The run with the flags of every check added."""
    flags = [*run.flags]
    if run.operation == "constant-flow":
        flags.extend(_pump_slip(run))
    return replace(run, flags=tuple(flags))


def _pump_slip(run: ReducedRun) -> list[Flag]:
    """Flux down by a tenth or more over readings through which the pressure backs off from its highest so
    far.

    The resistance is still right, because the flux is measured, not taken from the pump's setting; but the
    run says nothing about higher pressure, and a pump that slips on the bench may have been starved or
    worn.
    """
    used = run.used
    if used.sum() < 5:
        return []
    set_point = float(np.median(run.flux[used]))
    peak = np.maximum.accumulate(np.where(used, run.pressure, -np.inf))
    slipping = used & (run.flux < SLIP * set_point) & (run.pressure < 0.98 * peak)
    flags = []
    for first, last in _stretches(slipping, shortest=2):
        lowest = float(np.min(run.flux[first : last + 1]))
        text = (
            f"pump slip: flux falls to {lowest:.0f} LMH ({lowest / set_point:.0%} of {set_point:.0f}) as "
            f"pressure backs off from {peak[first]:.2f} to {run.pressure[first : last + 1].min():.2f} bar; "
            "resistances there use the measured flux and stay in the fit; check the pump head and tubing"
        )
        flags.append(Flag("pump-slip", run.name, (int(run.rows[first]), int(run.rows[last])), text))
    return flags


def _stretches(mask: np.ndarray[tuple[int], np.dtype[np.bool_]], shortest: int) -> list[tuple[int, int]]:
    """First and last index of each run of True at least `shortest` long."""
    edges = np.diff(np.concatenate([[0], mask.astype(int), [0]]))
    starts, ends = np.flatnonzero(edges == 1), np.flatnonzero(edges == -1) - 1
    return [(int(a), int(b)) for a, b in zip(starts, ends, strict=True) if b - a + 1 >= shortest]
