"""Bench files as labs really record them give what the clean file gives, or an error that names the
candidates.
"""

from __future__ import annotations

import datetime
from collections.abc import Callable
from pathlib import Path

import numpy as np
import openpyxl
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.bench.lab import AREA, Lab, reduced, write_rows, write_text
from trainopt.bench.table import read_table
from trainopt.bench.units import split_header, unit_of
from trainopt.errors import InputError

LAB = Lab(noise=0.01, n=41)
Rows = list[list[str]]


def sheet(path: Path, rows: Rows, name: str = "run", others: tuple[str, ...] = ()) -> Path:
    book = openpyxl.Workbook()
    page = book.active
    assert page is not None
    page.title = name
    for row in rows:
        page.append(
            [float(cell) if cell.replace(".", "", 1).replace("-", "", 1).isdigit() else cell or None for cell in row]
        )
    for other in others:
        book.create_sheet(other).append(["notes", "nothing here"])
    book.save(path)
    return path


def semicolons(path: Path, rows: Rows) -> Path:
    body = [";".join(cell.replace(".", ",") if i else cell for cell in row) for i, row in enumerate(rows)]
    return write_text(path, "\n".join(body) + "\n")


def titled(path: Path, rows: Rows) -> Path:
    title = "Run 12;of the fifth\nOperator: J.\nArea;23 cm2\nDate;2026-03-01\n\n".replace(";", ",")
    notes = "\nfilter was warm to the touch\nstopped by hand, no more feed\n"
    return write_text(path, title + "\n".join(",".join(row) for row in rows) + "\n" + notes)


def units_row(path: Path, rows: Rows) -> Path:
    head = [["t", "V", "P", "turbidity"], ["min", "mL", "psi", "NTU"]]
    return write_rows(path, head + rows[1:])


def marked(path: Path, rows: Rows) -> Path:
    path.write_bytes(b"\xef\xbb\xbf" + "\n".join(",".join(row) for row in rows).replace("\n", "\r\n").encode())
    return path


def commented(path: Path, rows: Rows) -> Path:
    lines = [",".join(row) for row in rows]
    lines.insert(4, "# pump tubing changed")
    lines.insert(9, "")
    lines.insert(12, ",,,")
    return write_text(path, "# a comment\n" + "\n".join(lines))


def tabs(path: Path, rows: Rows) -> Path:
    return write_rows(path, rows, "\t")


def wide(path: Path, rows: Rows) -> Path:
    """Extra columns: an index, a remark, the pump's setting, a feed volume."""
    head = ["no", *rows[0], "remark", "set flow (mL/min)", "feed volume (L)"]
    body = [
        [str(i), *row, "ok" if i % 5 else "", "5.75", f"{float(row[1]) / 1000:.6f}"] for i, row in enumerate(rows[1:])
    ]
    return write_rows(path, [head, *body])


def utf16(path: Path, rows: Rows) -> Path:
    path.write_bytes("\n".join("\t".join(row) for row in rows).encode("utf-16"))
    return path


def clock(path: Path, rows: Rows) -> Path:
    """Time of day over midnight, to the millisecond (the run starts at 22:40)."""
    body = []
    for row in rows[1:]:
        seconds = (22 * 60 + 40) * 60 + float(row[0]) * 60.0
        hours, rest = divmod(seconds, 3600.0)
        minutes, second = divmod(rest, 60.0)
        body.append([f"{int(hours) % 24}:{int(minutes):02d}:{second:09.6f}", *row[1:]])
    return write_rows(path, [["clock time", *rows[0][1:]], *body])


def stamps(path: Path, rows: Rows) -> Path:
    """Dates with times, as a logger writes them, over a change of month."""
    start = datetime.datetime(2026, 2, 28, 23, 40)
    body = [[(start + datetime.timedelta(minutes=float(row[0]))).isoformat(" "), *row[1:]] for row in rows[1:]]
    return write_rows(path, [["timestamp", *rows[0][1:]], *body])


VARIANTS: dict[str, Callable[[Path, Rows], Path]] = {
    "semicolon-decimal-comma": semicolons,
    "title-lines-and-notes": titled,
    "units-row": units_row,
    "byte-order-mark-and-crlf": marked,
    "comments-and-blank-rows": commented,
    "tabs": tabs,
    "extra-columns": wide,
    "utf-16": utf16,
    "clock-over-midnight": clock,
    "clock-with-dates": stamps,
}


@pytest.mark.parametrize("name", VARIANTS)
def test_a_messy_file_gives_what_the_clean_one_gives(tmp_path: Path, name: str) -> None:
    rows = LAB.table()
    clean = reduced(write_rows(tmp_path / "clean.csv", rows))
    messy = reduced(VARIANTS[name](tmp_path / "messy.csv", rows))
    np.testing.assert_allclose(messy.loading, clean.loading, rtol=1e-12)
    np.testing.assert_allclose(messy.resistance, clean.resistance, rtol=1e-6 if name.startswith("clock") else 1e-9)
    np.testing.assert_array_equal(messy.turbidity, clean.turbidity)


def test_what_was_taken_for_granted_is_said(tmp_path: Path) -> None:
    rows = LAB.table()
    said = [flag.text for flag in reduced(titled(tmp_path / "a.csv", rows)).flags if flag.code == "assumed"]
    assert said == [
        "4 lines above the header taken as a title",
        "text after the data (from line 49) taken as notes",
    ]
    assert [flag.text for flag in reduced(semicolons(tmp_path / "b.csv", rows)).flags] == ["decimal comma"]


def test_row_numbers_are_those_of_the_file(tmp_path: Path) -> None:
    run = reduced(commented(tmp_path / "a.csv", LAB.table()))
    lines = (tmp_path / "a.csv").read_text().splitlines()
    for row, time in zip(run.rows, run.time, strict=True):
        assert float(lines[row - 1].split(",")[0]) == pytest.approx(time * 60.0)


def test_spreadsheet(tmp_path: Path) -> None:
    rows = LAB.table()
    clean = reduced(write_rows(tmp_path / "clean.csv", rows))
    run = reduced(sheet(tmp_path / "a.xlsx", rows))
    np.testing.assert_allclose(run.resistance, clean.resistance, rtol=1e-12)
    np.testing.assert_array_equal(run.rows, clean.rows)
    several = sheet(tmp_path / "b.xlsx", rows, others=("setup", "notes"))
    with pytest.raises(InputError, match=r"b.xlsx: has several sheets \(run, setup, notes\); expected `sheet:`"):
        reduced(several)
    named = reduced(several, sheet="run")
    np.testing.assert_array_equal(named.resistance, run.resistance)
    assert named.name == "b.xlsx (run)"
    with pytest.raises(InputError, match="has no sheet 'Run'; expected one of run, setup, notes"):
        reduced(several, sheet="Run")


def test_spreadsheet_with_durations(tmp_path: Path) -> None:
    rows = LAB.table()
    book = openpyxl.Workbook()
    page = book.active
    assert page is not None
    page.append(["elapsed time", *rows[0][1:]])
    for row in rows[1:]:
        page.append([datetime.timedelta(minutes=float(row[0])), *(float(cell) if cell else None for cell in row[1:])])
    book.save(tmp_path / "a.xlsx")
    run = reduced(tmp_path / "a.xlsx")
    np.testing.assert_allclose(run.time, LAB.rows["time"], atol=1e-8)


def test_a_file_that_is_no_spreadsheet(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="cannot be read as XLSX"):
        reduced(write_text(tmp_path / "a.xlsx", "hello"))


@pytest.mark.parametrize(("form", "per"), [("mm:ss", 60.0), ("h:mm", 1.0)])
def test_two_part_times_need_their_form(tmp_path: Path, form: str, per: float) -> None:
    """'0:30' may be half an hour or half a minute: refused unless the header says which."""
    rows = [["time", "V (mL)", "P (psi)"], *([f"{i // 2}:{30 * (i % 2):02d}", str(3 * i), "5"] for i in range(9))]
    with pytest.raises(InputError, match=r"a.csv:2: column 'time': '0:00' may be h:mm or mm:ss; expected the header"):
        reduced(write_rows(tmp_path / "a.csv", rows))
    rows[0][0] = f"time ({form})"
    np.testing.assert_allclose(reduced(write_rows(tmp_path / "a.csv", rows)).time, np.arange(9) / 2.0 / per)


def test_a_file_that_may_not_be_read(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(_: Path) -> bytes:
        raise PermissionError(13, "Permission denied")

    path = write_rows(tmp_path / "a.csv", LAB.table())
    monkeypatch.setattr(Path, "read_bytes", refuse)
    with pytest.raises(InputError, match=r"a.csv: cannot be read: Permission denied"):
        reduced(path)


def test_balance_with_a_tare(tmp_path: Path) -> None:
    rows = LAB.table()
    clean = reduced(write_rows(tmp_path / "clean.csv", rows))
    rows[0][1] = "balance (g)"
    for row in rows[1:]:
        row[1] = f"{float(row[1]) * 1.02 + 152.3:.6f}"
    path = write_rows(tmp_path / "a.csv", rows)
    for run in (reduced(path, density=1.02), reduced(path, density=1.02, tare=0.1523)):
        np.testing.assert_allclose(run.loading, clean.loading, atol=1e-6)
        np.testing.assert_allclose(run.resistance, clean.resistance, rtol=1e-4)
    assert [flag.text for flag in reduced(path, density=1.02).flags] == ["152.3 g at time 0 taken as the tare"]


@pytest.mark.parametrize("double", [False, True], ids=["read-once", "read-twice-at-the-swap"])
def test_swapped_cylinder(tmp_path: Path, double: bool) -> None:
    """A 200 mL cylinder is emptied when nearly full; the reading after counts from the new one."""
    rows = LAB.table()
    clean = reduced(write_rows(tmp_path / "clean.csv", rows))
    head, body = rows[0], rows[1:]
    at = next(i for i, row in enumerate(body) if float(row[1]) > 190.0)
    start = float(body[at - 1][1]) if double else float(body[at - 1][1]) + 2.0
    later = [[row[0], f"{float(row[1]) - start:.6f}", *row[2:]] for row in body[at:]]
    twice = [[body[at - 1][0], "0", body[at - 1][2], ""]] if double else []
    run = reduced(write_rows(tmp_path / "a.csv", [head, *body[:at], *twice, *later]))
    assert run.loading[-1] == pytest.approx(clean.loading[-1], rel=2e-4)
    [flag] = [flag for flag in run.flags if flag.code == "cylinder-swap"]
    assert flag.rows == (at + 1, at + 2)
    used = run.used
    np.testing.assert_allclose(run.flux[used], 150.0, rtol=0.01)


def test_gauges_in_series(tmp_path: Path) -> None:
    """One inline run, three gauges: each stage's medium names its two."""
    rows = [["t (min)", "V (mL)", "P1 (psi)", "P2 (psi)", "P3 (psi)"]]
    rows += [[str(2 * i), str(12 * i), f"{9 + i / 10:.1f}", f"{4 + i / 20:.2f}", "1.0"] for i in range(20)]
    path = write_rows(tmp_path / "inline.csv", rows)
    with pytest.raises(InputError, match=r"'P1 .psi.' and 'P2 .psi.' and 'P3 .psi.' could each be the pressure"):
        reduced(path)
    with pytest.raises(InputError, match="could each be the outlet pressure"):
        reduced(path, columns={"pressure": "P1 (psi)"})
    first = reduced(path, columns={"pressure": "P1 (psi)", "outlet_pressure": "P2 (psi)"})
    last = reduced(path, columns={"pressure": "P3 (psi)"})
    assert first.pressure[0] == pytest.approx(5.0 * 0.0689476, rel=1e-5)
    assert last.pressure[0] == pytest.approx(1.0 * 0.0689476, rel=1e-5)
    alone = reduced(path, columns={"pressure": "P1 (psi)", "outlet_pressure": "none"})
    assert alone.pressure[0] == pytest.approx(9.0 * 0.0689476, rel=1e-5)


def test_inlet_and_outlet_by_name(tmp_path: Path) -> None:
    rows = [["time_min", "volume_mL", "pressure_in_bar", "pressure_out_bar"]]
    rows += [[str(i), str(5 * i), "1.2", "0.2"] for i in range(8)]
    np.testing.assert_allclose(reduced(write_rows(tmp_path / "a.csv", rows)).pressure, 1.0)


def test_a_long_run_is_averaged_in_blocks(tmp_path: Path) -> None:
    lab = Lab(noise=0.02, n=60_001)
    rows = lab.table(4)
    path = write_rows(tmp_path / "a.csv", [row[:3] for row in rows])
    assert path.stat().st_size < 4 << 20
    small = reduced(path)
    assert len(small.rows) <= 2000
    assert [flag.code for flag in small.flags] == ["averaged"]
    used = small.used & (small.loading > 1.0)
    truth = np.interp(small.loading, lab.rows["loading"], lab.rows["resistance"])
    np.testing.assert_allclose(small.resistance[used], truth[used], rtol=0.02)


def test_a_large_file_reads_the_same_as_a_small_one(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    rows = Lab(n=3001).table()
    path = write_text(tmp_path / "a.csv", "Run 12\n# logger\n\n" + "\n".join(",".join(row) for row in rows) + "\n")
    careful = read_table(path)
    monkeypatch.setattr("trainopt.bench.table.LARGE", 1000)
    quick = read_table(path)
    assert quick.numbers is not None
    assert careful.numbers is None
    assert quick.header == careful.header
    np.testing.assert_array_equal(quick.lines, careful.lines)
    expected = [[float(cell) if cell else np.nan for cell in row] for row in careful.cells]
    np.testing.assert_allclose(quick.numbers, expected, rtol=1e-15)
    bad = write_text(tmp_path / "b.csv", path.read_text().replace("\n30.00", "\nabout 30.00"))
    with pytest.raises(InputError, match=r"b.csv:1\d\d\d: column 'time \(min\)': 'about 30.00"):
        reduced(bad)


@pytest.mark.parametrize(
    "name", ["clock-over-midnight", "clock-with-dates", "extra-columns", "semicolon-decimal-comma"]
)
def test_large_files_of_every_kind_read_the_same(tmp_path: Path, name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    path = VARIANTS[name](tmp_path / "a.csv", Lab(n=601).table())
    careful = reduced(path)
    monkeypatch.setattr("trainopt.bench.table.LARGE", 1000)
    assert read_table(path).numbers is not None
    quick = reduced(path)
    for field in ("time", "loading", "pressure", "resistance", "turbidity"):
        np.testing.assert_allclose(getattr(quick, field), getattr(careful, field), rtol=1e-9, atol=1e-12)


HEADERS = [
    ("time (min)", "time", "min", "time"),
    ("Time [s]", "Time", "s", "time"),
    ("pressure_in_psi", "pressure_in", "psi", "pressure"),
    ("P / kPa", "P", "kPa", "pressure"),
    ("Filtrate volume, mL", "Filtrate volume", "mL", "volume"),
    ("Pressure in bar", "Pressure", "bar", "pressure"),
    ("PRESSURE (PSIG)", "PRESSURE", "PSIG", "pressure"),
    ("mass_kg", "mass", "kg", "mass"),
    ("P_in", "P_in", "", ""),
    ("V", "V", "", ""),
    ("Volume (ML)", "Volume", "ML", ""),
    ("p (Mpa)", "p", "Mpa", ""),
]


@pytest.mark.parametrize(("header", "name", "unit", "dimension"), HEADERS)
def test_headers(header: str, name: str, unit: str, dimension: str) -> None:
    assert split_header(header) == (name, unit)
    found = unit_of(unit) if unit else None
    assert (found.dimension if found else "") == dimension


CELLS = st.text(alphabet="0123456789.,;-+eE:/ \t\"'#%()[]abcmLpsiNTUµ²", max_size=12)


@settings(max_examples=300, deadline=None)
@given(lines=st.lists(st.lists(CELLS, min_size=1, max_size=5), max_size=12), delimiter=st.sampled_from(",;\t"))
def test_any_text_is_read_or_refused_without_a_traceback(
    tmp_path_factory: pytest.TempPathFactory, lines: Rows, delimiter: str
) -> None:
    path = tmp_path_factory.mktemp("fuzz") / "a.csv"
    head = "time (min),volume (mL),pressure (psi)".replace(",", delimiter)
    for text in (
        "\n".join(delimiter.join(line) for line in lines),
        head + "\n" + "\n".join(delimiter.join(x) for x in lines),
    ):
        write_text(path, text)
        try:
            run = reduced(path)
        except InputError as error:
            assert error.problems
            assert all(problem.text and problem.line >= 0 for problem in error.problems)
        else:
            assert np.all(np.isfinite(run.loading))


@settings(max_examples=200, deadline=None)
@given(
    time=st.sampled_from(["min", "s", "h", "sec", "hours"]),
    volume=st.sampled_from(["mL", "L", "cm3", "µL"]),
    pressure=st.sampled_from(["psi", "bar", "kPa", "mbar", "psig"]),
    form=st.sampled_from(["{} ({})", "{} [{}]", "{}_{}", "{} / {}"]),
)
def test_no_unit_is_ever_read_as_another(
    tmp_path_factory: pytest.TempPathFactory, time: str, volume: str, pressure: str, form: str
) -> None:
    """Every unit against its definition (NIST SP 811: 1 psi = 6.894757e3 Pa; 1 bar = 1e5 Pa)."""
    hours = {"min": 1 / 60, "s": 1 / 3600, "sec": 1 / 3600, "h": 1.0, "hours": 1.0}[time]
    liters = {"mL": 1e-3, "cm3": 1e-3, "L": 1.0, "µL": 1e-6}[volume]
    bars = {"psi": 0.06894757, "psig": 0.06894757, "bar": 1.0, "kPa": 0.01, "mbar": 1e-3}[pressure]
    path = tmp_path_factory.mktemp("units") / "a.csv"
    head = [form.format("t", time), form.format("V", volume), form.format("p", pressure)]
    write_rows(path, [head, *([str(2 * i), str(3 * i), str(5 + i)] for i in range(8))], ";")
    run = reduced(path)
    np.testing.assert_allclose(run.time, 2 * hours * np.arange(8))
    np.testing.assert_allclose(run.loading * AREA, 3 * liters * np.arange(8))
    np.testing.assert_allclose(run.pressure, bars * (5 + np.arange(8)), rtol=1e-6)
