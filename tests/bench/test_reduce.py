"""A lab's CSV becomes resistance against loading, or every problem in it is named with its line."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from tests.bench.lab import AREA, PSI, Lab, reduced, write_rows, write_text
from trainopt.errors import InputError

GOOD = "time (min),volume (mL),pressure (psi)\n" + "".join(f"{2 * i},{12 * i},{2 + 0.1 * i:.2f}\n" for i in range(12))


def problems(path: Path, **settings: object) -> list[str]:
    with pytest.raises(InputError) as caught:
        reduced(path, **settings)
    return [str(problem) for problem in caught.value.problems]


def test_resistance_against_loading(tmp_path: Path) -> None:
    lab = Lab()
    run = reduced(lab.write(tmp_path / "a.csv"), lot="a")
    np.testing.assert_allclose(run.loading, lab.rows["loading"], atol=1e-6)
    np.testing.assert_allclose(run.flux, 150.0, rtol=1e-6)
    np.testing.assert_allclose(run.resistance, lab.rows["resistance"], rtol=1e-5)
    assert list(run.rows[:3]) == [2, 3, 4]
    assert run.used.all()
    assert np.isfinite(run.turbidity).sum() == 11
    assert (run.name, run.lot, run.flags) == ("a.csv", "a", ())


def test_units_and_area_by_hand(tmp_path: Path) -> None:
    """Flux 600 LMH on 23 cm² is 23 mL/min, and 100 L/m² on it 230 mL (common practice, no source)."""
    rows = [
        ["time (min)", "volume (mL)", "pressure (psi)"],
        *([str(i), str(23 * i), "10"] for i in range(11)),
    ]
    run = reduced(write_rows(tmp_path / "a.csv", rows))
    np.testing.assert_allclose(run.flux, 600.0, rtol=1e-12)
    np.testing.assert_allclose(run.loading[10], 100.0, rtol=1e-12)
    np.testing.assert_allclose(run.resistance, 10 * PSI / 600.0, rtol=1e-12)


@pytest.mark.parametrize(
    "header",
    [
        "time (min),volume (mL),pressure (psi)",
        "Time [min],Filtrate volume [ml],Inlet pressure [psig]",
        "time_min,volume_mL,pressure_in_psi",
        "t / min,V / mL,p / psi",
        "TIME (MIN),VOLUME (mL),PRESSURE (PSI)",
        "Elapsed time (Min),Vol (mL),P_in (psi)",
        "minutes,mL,psi",
    ],
)
def test_header_spellings(tmp_path: Path, header: str) -> None:
    text = GOOD.replace(GOOD.splitlines()[0], header)
    expected = reduced(write_text(tmp_path / "plain.csv", GOOD))
    run = reduced(write_text(tmp_path / "a.csv", text))
    np.testing.assert_array_equal(run.resistance, expected.resistance)
    np.testing.assert_array_equal(run.loading, expected.loading)


def test_outlet_pressure_is_subtracted(tmp_path: Path) -> None:
    rows = [["t (s)", "V (L)", "P in (bar)", "P out (mbar)"]]
    rows += [[str(60 * i), str(0.01 * i), "1.5", "250"] for i in range(8)]
    run = reduced(write_rows(tmp_path / "a.csv", rows))
    np.testing.assert_allclose(run.pressure, 1.25)


def test_hold_up_is_subtracted_and_its_readings_left_out(tmp_path: Path) -> None:
    run = reduced(write_text(tmp_path / "a.csv", GOOD), hold_up=0.030)
    assert run.loading[3] == pytest.approx(0.006 / AREA)
    assert [reason is None for reason in run.excluded[:4]] == [False, False, False, True]
    assert run.excluded[0] == "the hold-up is still being displaced"


def test_mass_needs_a_density(tmp_path: Path) -> None:
    path = write_text(tmp_path / "a.csv", GOOD.replace("volume (mL)", "mass (g)"))
    assert problems(path) == ["medium.yaml:7: : records mass; expected `density:`, for example '1.01 kg/L'"]
    run = reduced(path, density=1.2)
    assert run.loading[5] == pytest.approx(60.0 / 1.2 / 1000.0 / AREA)


def test_two_columns_that_could_be_the_pressure(tmp_path: Path) -> None:
    path = write_text(
        tmp_path / "a.csv",
        "t (min),V (mL),PT1 (psi),PT2 (psi)\n" + "".join(f"{i},{i},2,1\n" for i in range(9)),
    )
    [text] = problems(path)
    assert text.endswith(
        "a.csv:1: 'PT1 (psi)' and 'PT2 (psi)' could each be the pressure; expected the run to say "
        'which, as in columns: {pressure: "PT1 (psi)"}'
    )
    run = reduced(path, columns={"pressure": "PT1 (psi)", "outlet_pressure": "PT2 (psi)"})
    np.testing.assert_allclose(run.pressure, PSI)


def test_columns_may_add_a_unit_that_the_header_lacks(tmp_path: Path) -> None:
    path = write_text(tmp_path / "a.csv", "t,V,P\n" + "".join(f"{i},{i},2\n" for i in range(9)))
    texts = problems(path)
    assert [text.partition("a.csv:1: ")[2] for text in texts] == [
        "column 'P' (pressure) has no unit; expected for example 'pressure (psi)'",
        "column 'V' (volume) has no unit; expected for example 'volume (mL)'",
        "column 't' (time) has no unit; expected for example 'time (min)'",
    ]
    run = reduced(path, columns={"time": "t [min]", "volume": "V [mL]", "pressure": "P [psi]"})
    np.testing.assert_allclose(run.pressure, 2 * PSI)


def test_every_bad_cell_is_named_with_its_line(tmp_path: Path) -> None:
    lines = GOOD.splitlines()
    lines[3] = "4,twenty,2.2"
    lines[5] = "8,48,2.4 psi"
    lines[9] = "nan,96,2.8"
    texts = [text.partition("a.csv:")[2] for text in problems(write_text(tmp_path / "a.csv", "\n".join(lines)))]
    assert texts == [
        "4: column 'volume (mL)': 'twenty' is not a number; expected a plain number",
        "6: column 'pressure (psi)': '2.4 psi' is not a number; expected a plain number",
        "10: column 'time (min)': 'nan' is not a number; expected a plain number",
    ]


BROKEN = {
    "empty": ("", "is empty; expected a header with units and one row per reading"),
    "no-numbers": ("time (min),volume (mL),pressure (psi)\n", "no table of numbers found"),
    "no-header": ("1,2,3\n2,3,4\n3,4,5\n", "no table of numbers found"),
    "time-back": (GOOD.replace("\n8,", "\n5,"), "time goes back behind that of line 5"),
    "time-twice": (GOOD.replace("\n8,", "\n6,"), "time repeats that of line 5"),
    "volume-back": (GOOD.replace("\n10,60,", "\n10,20,"), "volume falls below that of line 6"),
    "volume-typo": (GOOD.replace("\n10,60,", "\n10,6,"), "volume falls below that of line 6"),
    "no-time": (
        GOOD.replace("time (min)", "step"),
        "no time column found; expected for example 'time (min)'",
    ),
    "no-volume": (GOOD.replace("volume (mL)", "step"), "no volume or mass column found"),
    "no-pressure": (GOOD.replace("pressure (psi)", "step"), "has no pressure column; expected one such as"),
    "no-unit": (GOOD.replace("volume (mL)", "volume"), "column 'volume' (volume) has no unit"),
    "odd-unit": (GOOD.replace("(mL)", "(ML)"), "has the unit 'ML', which is not known"),
    "wrong-unit": (GOOD.replace("pressure (psi)", "pressure (mL)"), "has no pressure column"),
    "two-times": (GOOD.replace("pressure (psi)", "time (s)"), "could each be the time"),
    "two-volumes": (GOOD.replace("pressure (psi)", "vol (L)"), "could each be the volume"),
    "same-header": (
        GOOD.replace("time (min),volume (mL)", "time (min),time (min)"),
        "several columns are headed 'time (min)'",
    ),
    "absolute": (GOOD.replace("(psi)", "(psia)"), "is absolute; expected gauge pressure"),
    "few": ("\n".join(GOOD.splitlines()[:4]), "holds 3 complete readings; expected at least 5"),
    "wide-row": (
        GOOD.replace("\n8,48,2.40", "\n8,48,2.40,7"),
        "has more cells than the header in line 1 has columns",
    ),
    "no-time-cell": (GOOD.replace("\n8,48", "\n,48"), "column 'time (min)' is empty; expected a time"),
    "binary": ("a\0b", "is not a text file; expected CSV or XLSX"),
    "mixed-decimals": (
        GOOD.replace(",", ";").replace("2.40", "2,40"),
        "a decimal comma; expected one of them throughout",
    ),
}


@pytest.mark.parametrize("case", BROKEN)
def test_broken_files_say_what_and_where(tmp_path: Path, case: str) -> None:
    text, expected = BROKEN[case]
    found = problems(write_text(tmp_path / "a.csv", text))
    assert any(expected in problem for problem in found), found
    assert all("a.csv" in problem or problem.startswith("medium.yaml:7") for problem in found)


def test_a_missing_file_and_a_missing_column_name(tmp_path: Path) -> None:
    assert "no such file" in problems(tmp_path / "b.csv")[0]
    path = write_text(tmp_path / "a.csv", GOOD)
    assert "has no sheets" in problems(path, sheet="run 1")[0]


def test_entries_that_the_table_lacks_are_told_where_they_are_written(tmp_path: Path) -> None:
    path = write_text(tmp_path / "a.csv", GOOD)
    (missing,) = problems(path, columns={"pressure": "P"})
    assert missing.startswith("medium.yaml:7: columns.pressure: no column is headed 'P' in ")
    assert missing.endswith("a.csv; expected one of 'time (min)', 'volume (mL)', 'pressure (psi)'")
    (role,) = problems(path, columns={"press": "pressure (psi)"})
    assert role.startswith("medium.yaml:7: columns.press: 'press' is not what a column can be; expected one of time,")
    (kind,) = problems(path, columns={"pressure": "volume (mL)", "volume": "volume (mL)"})
    assert kind.startswith("medium.yaml:7: columns.pressure: in ")
    assert "a.csv, column 'volume (mL)' is a volume, not a pressure; expected for example" in kind
    twice = write_text(tmp_path / "b.csv", GOOD.replace("time (min)", "volume (mL)"))
    assert "medium.yaml:7: columns.volume: several columns are headed 'volume (mL)'" in "\n".join(
        problems(twice, columns={"volume": "volume (mL)"})
    )


def test_rows_without_a_reading_are_left_out_and_said(tmp_path: Path) -> None:
    text = GOOD.replace("\n8,48,2.40", "\n8,48,").replace("\n12,72,2.60", "\n12,,2.60")
    run = reduced(write_text(tmp_path / "a.csv", text))
    assert len(run.rows) == 10
    [flag] = run.flags
    assert (flag.code, flag.rows) == ("no-reading", (6, 8))


def test_turbidity_cells(tmp_path: Path) -> None:
    lines = ["time (min),volume (mL),pressure (psi),NTU"]
    lines += [f"{i},{i},2,{cell}" for i, cell in enumerate(["<0.5", "", "n/a", "-", "3", ">40", "7"])]
    run = reduced(write_text(tmp_path / "a.csv", "\n".join(lines)))
    np.testing.assert_array_equal(run.turbidity, [0.5, np.nan, np.nan, np.nan, 3.0, 40.0, 7.0])


def test_pump_slip_is_flagged_and_its_resistance_still_right(tmp_path: Path) -> None:
    lab = Lab(slip=(40, 46, 0.6))
    run = reduced(lab.write(tmp_path / "a.csv"))
    [flag] = [flag for flag in run.flags if flag.code == "pump-slip"]
    assert flag.rows is not None
    assert 42 <= flag.rows[0] <= 44
    assert 45 <= flag.rows[1] <= 47
    assert "flux falls to 90 LMH (60% of 150)" in flag.text
    used = run.used
    assert used.sum() >= 57
    np.testing.assert_allclose(run.resistance[used], lab.rows["resistance"][used], rtol=3e-3)


def test_a_steady_run_has_no_flag(tmp_path: Path) -> None:
    for seed in range(10):
        run = reduced(Lab(noise=0.02, seed=seed).write(tmp_path / f"{seed}.csv", decimals=2))
        assert run.flags == ()


def test_flow_from_a_coarse_cylinder(tmp_path: Path) -> None:
    """Volumes to the full mL, 6 mL apart: differences are off by a tenth, the local line by 0.5 % at most."""
    lab = Lab(n=60)
    rows = lab.table()
    for row in rows[1:]:
        row[1] = str(round(float(row[1])))
    run = reduced(write_rows(tmp_path / "a.csv", rows))
    differences = np.diff(run.loading) / np.diff(run.time)
    assert np.max(np.abs(differences / 150.0 - 1.0)) > 0.08
    np.testing.assert_allclose(run.flux, 150.0, rtol=5e-3)
    assert run.volume_step == pytest.approx(0.001)


def test_flow_that_drifts_is_followed(tmp_path: Path) -> None:
    time = np.linspace(0.0, 1.0, 61)
    flow = 400.0 * np.exp(-0.5 * time)
    volume = 800.0 * (1.0 - np.exp(-0.5 * time))
    rows = [
        ["t (h)", "V (mL)", "P (bar)"],
        *([f"{t:.6f}", f"{v:.4f}", "1"] for t, v in zip(time, volume, strict=True)),
    ]
    run = reduced(write_rows(tmp_path / "a.csv", rows))
    np.testing.assert_allclose(run.flux, flow / 1000.0 / AREA, rtol=0.02)


def test_volumes_read_at_marks_hide_no_slip(tmp_path: Path) -> None:
    """Every 15 mL the time is taken; the pump slows for four of them. The marks are no resolution of 15 mL."""
    minutes = np.cumsum([0.0, *([2.6] * 10), *([4.3] * 4), *([2.6] * 10)])
    rows = [["t (min)", "V (mL)", "P (psi)"], *([f"{t:.1f}", str(15 * i), "5"] for i, t in enumerate(minutes))]
    run = reduced(write_rows(tmp_path / "a.csv", rows))
    assert run.volume_step == 0.0
    slow, fast = 15e-3 / 4.3 * 60.0 / AREA, 15e-3 / 2.6 * 60.0 / AREA
    np.testing.assert_allclose(run.flux[[11, 12, 13]], slow, rtol=0.02)
    np.testing.assert_allclose(run.flux[[2, 5, 8, 16, 20]], fast, rtol=0.02)
