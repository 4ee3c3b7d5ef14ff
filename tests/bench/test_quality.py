"""Each quality flag: a run that deserves it, with its rows and what happens to the readings."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from tests.bench.lab import Lab, reduced, write_rows
from trainopt.bench.run import Flag, ReducedRun

Rows = list[list[str]]


def flag(run: ReducedRun, code: str) -> Flag:
    found = [one for one in run.flags if one.code == code]
    assert len(found) == 1, run.flags
    return found[0]


def test_start_up_is_left_out_unless_kept(tmp_path: Path) -> None:
    """Air in the housing: the first readings resist more, and less with each."""
    lab = Lab(n=61)
    rows = lab.table()
    for i, factor in ((1, 3.0), (2, 2.0), (3, 1.4)):
        rows[i][2] = f"{float(rows[i][2]) * factor:.6f}"
    path = write_rows(tmp_path / "a.csv", rows)
    run = reduced(path)
    assert [run.excluded[i] for i in range(4)] == ["start-up"] * 3 + [None]
    assert flag(run, "start-up").rows == (2, 4)
    assert "`keep: true` keeps them" in flag(run, "start-up").text
    kept = reduced(path, keep=True)
    assert kept.used.all()
    assert flag(kept, "start-up").text.endswith("kept in the fit by `keep: true`; purge before loading")


def test_pressure_that_builds_up_late_is_start_up(tmp_path: Path) -> None:
    rows = Lab(n=61).table()
    rows[2][2] = f"{float(rows[2][2]) * 0.2:.6f}"
    rows[1][2] = "0"
    run = reduced(write_rows(tmp_path / "a.csv", rows))
    assert run.excluded[:3] == ("no differential pressure", "start-up", None)


def test_pump_slip_names_rows_and_numbers(tmp_path: Path) -> None:
    run = reduced(Lab(slip=(40, 46, 0.6)).write(tmp_path / "a.csv"))
    slip = flag(run, "pump-slip")
    assert slip.rows is not None
    assert 41 <= slip.rows[0] <= 43
    assert 46 <= slip.rows[1] <= 48
    assert "flux falls to 90 LMH (60% of 150)" in slip.text
    assert [one.code for one in run.flags] == ["pump-slip"]


def test_flow_off_its_set_point(tmp_path: Path) -> None:
    """The pump is turned up by a fifth for the last quarter: pressure follows, so it is no slip."""
    run = reduced(Lab(slip=(46, 61, 1.2)).write(tmp_path / "a.csv"))
    off = flag(run, "off-set-point")
    assert off.rows is not None
    assert off.rows[1] == 62
    assert "180 LMH on average against 150" in off.text
    assert flag(run, "flow-step")
    assert run.used.sum() >= 57


def test_volume_that_shrinks_a_little(tmp_path: Path) -> None:
    rows = Lab(n=200).table()
    rows[101][1] = f"{float(rows[100][1]) - 1.5:.6f}"
    run = reduced(write_rows(tmp_path / "a.csv", rows))
    assert "by up to 1.5 mL" in flag(run, "volume-falls").text


def test_breakthrough(tmp_path: Path) -> None:
    """From reading 40 on the pressure stays where it is while turbidity climbs from 1 to 9 NTU."""
    rows = Lab(n=61, turbidity=(1.0, 0.0)).table()
    for i in range(40, 61):
        rows[i + 1][2] = rows[40][2]
        rows[i + 1][3] = f"{1.0 + 0.4 * (i - 39):.2f}" if i % 3 == 0 else ""
    run = reduced(write_rows(tmp_path / "a.csv", rows))
    found = flag(run, "breakthrough")
    assert found.rows is not None
    assert 42 <= found.rows[0] <= 50
    assert "that loading is the turbidity endpoint" in found.text


def test_turbidity_that_rises_with_the_pressure_is_no_breakthrough(tmp_path: Path) -> None:
    run = reduced(Lab(n=61, turbidity=(1.0, 20.0)).write(tmp_path / "a.csv"))
    assert run.flags == ()


@pytest.mark.parametrize(("lost", "flagged"), [(0.02, False), (0.15, True), (-0.1, True)])
def test_mass_balance(tmp_path: Path, lost: float, flagged: bool) -> None:
    rows = Lab(n=31).table()
    rows[0].append("feed reservoir (mL)")
    for row in rows[1:]:
        row.append(f"{1000.0 - float(row[1]) * (1.0 + lost):.3f}")
    run = reduced(write_rows(tmp_path / "a.csv", rows))
    assert ("mass-balance" in [one.code for one in run.flags]) == flagged
    if flagged:
        assert "mL fed against 345 mL of filtrate" in flag(run, "mass-balance").text


@pytest.mark.parametrize(
    ("header", "area", "suspect"),
    [
        ("time (s),volume (mL),pressure (psi)", 0.0023, "time in minutes, not seconds"),
        ("time (min),volume (L),pressure (psi)", 0.0023, "volume in mL, not L"),
        ("time (min),volume (mL),pressure (psi)", 23.0, "area in cm2, not m2"),
        ("time (h),volume (mL),pressure (psi)", 0.0023, "time in minutes, not hours"),
        ("time (min),volume (mL),pressure (Pa)", 0.0023, "psi, not Pa"),
    ],
)
def test_unit_mix_ups_are_suspected_by_name(tmp_path: Path, header: str, area: float, suspect: str) -> None:
    rows = [header.split(","), *(row[:3] for row in Lab(n=31).table()[1:])]
    run = reduced(write_rows(tmp_path / "a.csv", rows), area=area)
    text = flag(run, "unit-suspected").text
    assert "is outside physical sense" in text
    assert suspect in text


def test_pooled_turbidity_is_volume_weighted(tmp_path: Path) -> None:
    rows: Rows = [["time (min)", "volume (mL)", "pressure (psi)", "turbidity (NTU)"]]
    rows += [[str(i), str(10 * i), "5", str(2 * i)] for i in range(11)]
    run = reduced(write_rows(tmp_path / "a.csv", rows))
    np.testing.assert_allclose(run.pool_turbidity[1:], [(2 + 0.5 * (2 + 2 * i) * (i - 1)) / i for i in range(1, 11)])
    np.testing.assert_allclose(run.pool_turbidity[10], 10.1)  # half of 20, and the first reading held from 0
