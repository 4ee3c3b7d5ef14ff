"""The table in a bench file: header, units and cells as text, whatever stands above, between and below.

Reads CSV (comma, semicolon, tab or bar; decimal point or comma; with or without a byte-order mark) and
XLSX. Title lines above the header, a units row below it, comment lines, blank rows and notes after the data
are stepped over. Line numbers count from 1 as an editor or a spreadsheet shows them.
"""

from __future__ import annotations

import csv
import datetime
import re
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from trainopt.bench.units import unit_of
from trainopt.errors import InputError, Problem
from trainopt.files.source import shown_path

Row = tuple[int, list[str]]

COMMENTS = ("#", "%", "//")
LARGE, HEAD = 4 << 20, 1 << 16
"""Bytes above which a CSV is read by pandas, and how much of it is looked at first."""

DELIMITERS = (",", ";", "\t", "|")
NUMBER = re.compile(r"[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d+)?")
CLOCK = re.compile(r"\d{1,4}:[0-5]?\d(:[0-5]?\d(\.\d+)?)?")
STAMP = re.compile(r"\d{4}-\d{2}-\d{2}[ T]\d{2}:\d{2}(:\d{2}([.]\d+)?)?")
_DECIMAL_COMMA = re.compile(r"[+-]?\d*,\d+([eE][+-]?\d+)?")
_THOUSANDS = re.compile(r"[+-]?[1-9]\d{0,2}(,\d{3})+(\.\d*)?")


@dataclass(frozen=True, eq=False)
class Table:
    """A header, perhaps a units row, and data rows of equal width, cells stripped of blanks.

    `file` is the path as the user sees it, `assumed` what the reader took for granted, in words. A large
    file has its cells as `numbers` (rows, columns), NaN where empty, in place of text; its columns of clock times, in
    hours, are `clocks`.
    """

    file: str
    header_line: int
    header: tuple[str, ...]
    units: tuple[str, ...]
    lines: NDArray[np.int64]
    cells: tuple[tuple[str, ...], ...]
    assumed: tuple[str, ...]
    numbers: NDArray[np.float64] | None = None
    clocks: tuple[int, ...] = ()

    def column(self, index: int) -> list[str]:
        """The cells of one column."""
        return [row[index] for row in self.cells]

    def problem(self, line: int, text: str) -> Problem:
        """A problem at a line of this file."""
        return Problem(self.file, int(line), text)


def read_table(path: Path, sheet: str | None = None) -> Table:
    """The table of a CSV or XLSX file; raises `InputError` where there is none to be found."""
    file = shown_path(path)
    if not path.is_file():
        raise InputError([Problem(file, 0, "no such file; expected a bench run as CSV or XLSX")])
    try:
        return _table_of(path, file, sheet)
    except OSError as error:
        raise InputError([Problem(file, 0, f"cannot be read: {error.strerror or error}")]) from None


def _table_of(path: Path, file: str, sheet: str | None) -> Table:
    assumed: list[str] = []
    if path.suffix.lower() in {".xlsx", ".xlsm"}:
        rows = list(_spreadsheet_rows(path, file, sheet))
    elif sheet is not None:
        raise InputError([Problem(file, 0, f"has no sheets, but sheet '{sheet}' is asked for")])
    elif path.stat().st_size > LARGE:
        return _large_table(path, file) or _table(file, _text_rows(path.read_bytes(), file, assumed)[0], assumed)
    else:
        rows = _text_rows(path.read_bytes(), file, assumed)[0]
    return _table(file, rows, assumed)


def _large_table(path: Path, file: str) -> Table | None:
    """A large CSV by pandas' reader; None, for the careful reader, where it holds what that one cannot take.

    Header, delimiter, decimal mark and what each column holds are found in the first lines, as for a small file.
    Columns of words are not read (NaN).
    """
    import pandas as pd

    with path.open("rb") as stream:
        head = stream.read(HEAD)
        count = head.count(b"\n") + sum(chunk.count(b"\n") for chunk in iter(lambda: stream.read(1 << 20), b""))
    assumed: list[str] = []
    try:
        rows, delimiter = _text_rows(head[: head.rfind(b"\n") + 1], file, assumed)
        table = _table(file, rows, assumed)
    except InputError:
        return None
    first, width = int(table.lines[0]), len(table.header)
    kinds = [_kind(table.column(index)) for index in range(width)]
    used = [index for index, kind in enumerate(kinds) if kind != "words"]
    try:
        frame = pd.read_csv(
            path, sep=delimiter, skiprows=first - 1, header=None, names=list(range(width)), usecols=used,
            decimal="," if "decimal comma" in assumed else ".", na_values=[""], keep_default_na=False,
            dtype={index: np.float64 if kinds[index] == "numbers" else str for index in used},
            skip_blank_lines=True, encoding="utf-8-sig", index_col=False,
        )  # fmt: skip
        numbers = np.full((len(frame), width), np.nan)
        for index in used:
            numbers[:, index] = _hours(frame[index], kinds[index]) if kinds[index] != "numbers" else frame[index]
    except (ValueError, pd.errors.ParserError, UnicodeError):
        return None
    lines = np.arange(first, first + len(numbers))
    if np.isinf(numbers).any() or not 0 <= count - (first - 1) - len(numbers) + 1 <= 1:
        return None
    clocks = tuple(index for index in used if kinds[index] != "numbers")
    return Table(file, table.header_line, table.header, table.units, lines, (), table.assumed, numbers, clocks)


def _kind(cells: list[str]) -> str:
    """What a column holds: "numbers" (perhaps with gaps), "clock" (h:mm:ss), "stamps" (dates with times), "words"."""
    filled = [cell for cell in cells if cell]
    if all(is_number(cell) for cell in filled):
        return "numbers"
    if all(CLOCK.fullmatch(cell) and cell.count(":") == 2 for cell in filled):
        return "clock"
    if all(STAMP.fullmatch(cell) for cell in filled):
        return "stamps"
    # Two-part times and numbers with a stray word are for the careful reader.
    return "words" if not any(_is_value(cell) for cell in filled) else "numbers"


def _hours(cells: Any, kind: str) -> NDArray[np.float64]:
    """Clock times of a pandas column as hours, dates with times as hours since 2000."""
    import pandas as pd

    if kind == "clock":
        return np.asarray(pd.to_timedelta(cells.str.strip()).dt.total_seconds(), dtype=np.float64) / 3600.0
    since = pd.to_datetime(cells.str.strip(), format="ISO8601") - pd.Timestamp(2000, 1, 1)
    return np.asarray(since.dt.total_seconds(), dtype=np.float64) / 3600.0


def _text_rows(raw: bytes, file: str, assumed: list[str]) -> tuple[list[Row], str]:
    """Rows of a CSV with their line numbers, numbers with decimal points, and the delimiter."""
    text = _decoded(raw, file, assumed)
    lines = text.splitlines()
    delimiter = _delimiter(lines)
    rows: list[Row] = []
    reader = csv.reader(lines, delimiter=delimiter, skipinitialspace=True)
    try:
        rows.extend((reader.line_num, [_tidy(cell) for cell in cells]) for cells in reader)
    except csv.Error as error:
        raise InputError([Problem(file, reader.line_num, f"cannot be read as CSV: {error}")]) from None
    return _decimal_points(rows, file, assumed), delimiter


def _decoded(raw: bytes, file: str, assumed: list[str]) -> str:
    for mark, encoding in ((b"\xff\xfe", "utf-16"), (b"\xfe\xff", "utf-16")):
        if raw.startswith(mark):
            try:
                return raw.decode(encoding)
            except UnicodeDecodeError:
                break
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError:
        text = raw.decode("latin-1")
        assumed.append("the file is not UTF-8; read as Latin-1")
    if "\0" in text:
        raise InputError([Problem(file, 0, "is not a text file; expected CSV or XLSX")])
    return text


def _tidy(cell: str) -> str:
    return cell.strip().replace("−", "-").replace("\u00a0", " ")


def _delimiter(lines: list[str]) -> str:
    """The delimiter that splits the most lines into the same number of cells, at least two."""
    sample = [line for line in lines[:400] if line.strip() and not line.lstrip().startswith(COMMENTS)]

    def score(delimiter: str) -> tuple[int, int]:
        counts: dict[int, int] = {}
        for line in sample:
            width = 1 + (line.count(delimiter) if '"' not in line else _quoted_count(line, delimiter))
            if width > 1:
                counts[width] = counts.get(width, 0) + 1
        if not counts:
            return 0, 0
        width = max(counts, key=lambda w: (counts[w], w))
        return counts[width], width

    # A decimal comma also "splits" lines, so a semicolon or tab that splits as many wins.
    order = {";": 3, "\t": 2, "|": 1, ",": 0}
    return max(DELIMITERS, key=lambda d: (score(d)[0], order[d]))


def _quoted_count(line: str, delimiter: str) -> int:
    return len(next(csv.reader([line], delimiter=delimiter), [])) - 1


def _decimal_points(rows: list[Row], file: str, assumed: list[str]) -> list[Row]:
    """Numbers with a decimal point only; a comma inside a number is a decimal comma or groups thousands."""
    commas = [(line, cell) for line, cells in rows for cell in cells if "," in cell and _comma_number(cell)]
    if not commas:
        return rows
    grouped = [_THOUSANDS.fullmatch(cell) is not None for _, cell in commas]
    decimal = [_DECIMAL_COMMA.fullmatch(cell) is not None for _, cell in commas]
    if all(decimal) and not all(grouped):
        points = [(line, c) for line, cells in rows for c in cells if "." in c and NUMBER.fullmatch(c)]
        if points:
            line, cell = points[0]
            text = f"'{cell}' has a decimal point, '{commas[0][1]}' in line {commas[0][0]} a decimal comma"
            raise InputError([Problem(file, line, text + "; expected one of them throughout")])
        assumed.append("decimal comma")
        return [(line, [_swap(cell) for cell in cells]) for line, cells in rows]
    if all(grouped) and not all(decimal):
        assumed.append("a comma in a number groups thousands")
        return [(line, [_ungrouped(cell) for cell in cells]) for line, cells in rows]
    line, cell = commas[0]
    text = f"'{cell}': the comma may mark decimals or thousands; expected numbers with a decimal point"
    raise InputError([Problem(file, line, text)])


def _comma_number(cell: str) -> bool:
    return _DECIMAL_COMMA.fullmatch(cell) is not None or _THOUSANDS.fullmatch(cell) is not None


def _swap(cell: str) -> str:
    return cell.replace(",", ".") if _DECIMAL_COMMA.fullmatch(cell) else cell


def _ungrouped(cell: str) -> str:
    return cell.replace(",", "") if _THOUSANDS.fullmatch(cell) else cell


def _spreadsheet_rows(path: Path, file: str, sheet: str | None) -> Iterator[Row]:
    import openpyxl

    try:
        book = openpyxl.load_workbook(path, read_only=True, data_only=True)
    except Exception as error:  # openpyxl raises whatever its parts raise on a broken file
        raise InputError([Problem(file, 0, f"cannot be read as XLSX: {error}")]) from None
    try:
        names = book.sheetnames
        if sheet is not None and sheet not in names:
            raise InputError([Problem(file, 0, f"has no sheet '{sheet}'; expected one of {', '.join(names)}")])
        if sheet is None and len(names) > 1:
            text = f"has several sheets ({', '.join(names)}); expected `sheet:` to name the one with the run"
            raise InputError([Problem(file, 0, text)])
        for line, cells in enumerate(book[sheet or names[0]].iter_rows(values_only=True), start=1):
            yield line, [_cell_text(cell) for cell in cells]
    finally:
        book.close()


def _cell_text(cell: Any) -> str:
    if cell is None:
        return ""
    if isinstance(cell, bool):
        return str(cell)
    if isinstance(cell, float):
        return repr(int(cell)) if cell.is_integer() and abs(cell) < 1e15 else repr(cell)
    if isinstance(cell, datetime.timedelta):
        return _clock(cell.total_seconds())
    if isinstance(cell, datetime.time):
        return _clock(cell.hour * 3600 + cell.minute * 60 + cell.second + cell.microsecond * 1e-6)
    return _tidy(str(cell))


def _clock(seconds: float) -> str:
    hours, rest = divmod(seconds, 3600.0)
    minutes, rest = divmod(rest, 60.0)
    return f"{hours:.0f}:{minutes:02.0f}:{rest:09.6f}"


def is_number(cell: str) -> bool:
    """Whether a cell is a plain number with a decimal point."""
    return NUMBER.fullmatch(cell) is not None


def is_clock(cell: str) -> bool:
    """Whether a cell is a clock time (h:mm:ss) or a date with one (2026-03-01 09:30:00)."""
    return CLOCK.fullmatch(cell) is not None or STAMP.fullmatch(cell) is not None


def _is_value(cell: str) -> bool:
    return is_number(cell) or is_clock(cell)


def _table(file: str, rows: list[Row], assumed: list[str]) -> Table:
    rows = [(n, cells) for n, cells in rows if any(cells) and not cells[0].startswith(COMMENTS)]
    if not rows:
        raise InputError([Problem(file, 0, "is empty; expected a header with units and one row per reading")])
    start = _first_data_row(rows)
    if start is None:
        expected = "expected a header such as 'time (min), volume (mL), pressure (psi)' above rows of numbers"
        raise InputError([Problem(file, rows[0][0], f"no table of numbers found; {expected}")])
    units_row = rows[start - 1] if start >= 2 and _units_row(rows[start - 1][1], rows[start - 2][1]) else None
    header_at = start - 2 if units_row else start - 1
    header_line, header = rows[header_at]
    data, notes = _without_notes(rows[start:])
    if header_at:
        assumed.append(f"{header_at} line{'s' if header_at > 1 else ''} above the header taken as a title")
    if notes:
        assumed.append(f"text after the data (from line {notes[0][0]}) taken as notes")
    width = len(header)
    while width and not header[width - 1] and all(not _cell(cells, width - 1) for _, cells in data):
        width -= 1
    wide = [line for line, cells in data if any(cells[width:])]
    if wide:
        text = f"has more cells than the header in line {header_line} has columns"
        raise InputError([Problem(file, line, text) for line in wide])
    units = tuple(_cell(units_row[1], i) for i in range(width)) if units_row else ("",) * width
    cells = tuple(tuple(_cell(row, i) for i in range(width)) for _, row in data)
    lines = np.array([line for line, _ in data], dtype=np.int64)
    return Table(file, header_line, tuple(header[:width]), units, lines, cells, tuple(assumed))


def _cell(cells: list[str], index: int) -> str:
    return cells[index] if index < len(cells) else ""


def _first_data_row(rows: list[Row]) -> int | None:
    """The first row of values that stands below a row of words with at least as many cells.

    Two values make a row of values; one does where no row has two, so that a broken first row is still found.
    """
    for least in (2, 1):
        for index in range(1, len(rows)):
            values = sum(_is_value(cell) for cell in rows[index][1])
            above = [cell for cell in rows[index - 1][1] if cell]
            words = sum(not _is_value(cell) for cell in above)
            if values >= least and words >= 2 and words == len(above) and words >= values:
                return index
    return None


def _units_row(cells: list[str], above: list[str]) -> bool:
    """Whether every filled cell is a known unit, below a row of words at least as full."""
    filled = [cell for cell in cells if cell]
    names = [cell for cell in above if cell]
    known = all(unit_of(cell.strip("[]()")) is not None for cell in filled)
    return known and len(names) >= len(filled) >= 2 and not any(_is_value(cell) for cell in names)


def _without_notes(rows: list[Row]) -> tuple[list[Row], list[Row]]:
    """Split off what follows the last row that starts with a value or holds two."""
    end = len(rows)
    while end > 1 and not _reads(rows[end - 1][1]):
        end -= 1
    return rows[:end], rows[end:]


def _reads(cells: list[str]) -> bool:
    return _is_value(cells[0]) or sum(_is_value(cell) for cell in cells) >= 2
