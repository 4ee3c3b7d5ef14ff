"""A design's numbers against published and common-practice values."""

from __future__ import annotations

import math

import pytest
from factory import block, flat, problem, stage

from trainopt.optimize.design import design
from trainopt.units import convert, quantity


def test_line_resistance_of_a_tube() -> None:
    """Hagen–Poiseuille, Geankoplis, Transport Processes and Unit Operations, Ex. 2.10-1: D 2.22 mm, L 0.317 m,
    639.77 Pa and 1.13e-3 Pa·s give 1.0647e-6 m³/s (computed from the printed inputs; 1.066e-6 printed, from memory)."""
    flow = 1.0647e-6 * 1000.0 * 3600.0  # L/h
    pascal_per_flow = 128.0 * 1.13e-3 * 0.317 / (math.pi * 2.22e-3**4)  # Pa/(m³/s)
    line = quantity(f"{pascal_per_flow / 3.6e6!r} Pa/(L/h)", "line")
    one = block("b", stage("s", flat("m", 1e-6)), pressure=1.0, line=line)
    found = design(problem(one, volume=flow, time=1.0))
    assert found.blocks[0].flow == pytest.approx(flow)
    assert found.blocks[0].pressure.line == pytest.approx(639.77e-5, rel=1e-4)


def test_an_even_split_of_30_psi_over_three_filters_is_10_psi_each() -> None:
    """Common practice, no source."""
    stages = [stage(f"s{k}", flat(f"m{k}", 0.01)) for k in range(3)]
    # D = R·V/A = 0.01·1000/A; 10 psi for 1 h is 0.6895 bar·h, so 14.503 m² of 1 m² modules: 15 each.
    found = design(problem(block("b", *stages, pressure=quantity("30 psi", "pressure")), volume=1000.0, time=1.0))
    even = found.even_split
    assert even is not None
    assert [s.count for s in even.blocks[0].stages] == [15, 15, 15]
    for s in even.blocks[0].stages:
        assert convert(s.pressure, "pressure", "psi") == pytest.approx(10.0, rel=0.05)
        assert s.pressure <= quantity("10 psi", "pressure")


def test_the_starting_guess_of_area_is_the_loading_cap() -> None:
    """Common practice, no source: volume over the last loading tested; with pressure to spare it is the answer."""
    guarded = flat("m", 1e-6, cap=150.0, cap_reason="loading-tested")
    found = design(problem(block("b", stage("s", guarded)), volume=2000.0, time=5.0))
    assert found.blocks[0].stages[0].count == math.ceil(2000.0 / 150.0)
    assert found.blocks[0].stages[0].limited_by == "loading-tested"
