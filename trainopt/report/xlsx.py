"""The design report as a workbook: one sheet per section, numbers as numbers, units in the headings."""

from __future__ import annotations

import datetime
import re
import zipfile
from io import BytesIO
from typing import TYPE_CHECKING, Any

from trainopt.report.content import Cell, Column, Section, Table
from trainopt.report.numbers import plain
from trainopt.report.sections import sections
from trainopt.report.style import INK, MIST

if TYPE_CHECKING:
    from openpyxl.worksheet.worksheet import Worksheet

    from trainopt.report.dossier import Dossier

WIDEST = 48
"""Characters beyond which a column wraps."""

_FORBIDDEN = re.compile(r"[\[\]:*?/\\]")
_STAMP = re.compile(rb"(<dcterms:(created|modified)[^>]*>)[^<]*(</dcterms:)")


def report_xlsx(dossier: Dossier, units: str = "bar") -> bytes:
    """The workbook as bytes, the same for the same dossier."""
    from openpyxl import Workbook

    book = Workbook()
    book.remove(book.active)  # type: ignore[arg-type]
    book.properties.title = plain(dossier.design.scenario)
    book.properties.creator = "trainopt"
    for section in sections(dossier, units):
        _sheet(book.create_sheet(_FORBIDDEN.sub(" ", section.title)[:31]), section)
    out = BytesIO()
    book.save(out)
    return _dated(out.getvalue(), dossier.date)


def _sheet(sheet: Worksheet, section: Section) -> None:
    from openpyxl.styles import Alignment, Font

    row = 1
    _write(sheet.cell(row, 1), section.title).font = Font(bold=True, size=14, color=INK.lstrip("#"))
    row += 1
    for text in (*section.paragraphs, *section.items):
        _write(sheet.cell(row, 1), text).alignment = Alignment(vertical="top")
        row += 1
    widths: dict[int, int] = {}
    for table in section.tables:
        row = _table(sheet, table, row + 1, widths)
    for column, width in widths.items():
        sheet.column_dimensions[_letter(column)].width = min(WIDEST, width + 2)
    sheet.sheet_view.showGridLines = False
    sheet.page_setup.fitToWidth = 1
    sheet.page_setup.fitToHeight = 0
    sheet.page_setup.orientation = "landscape"
    if sheet.sheet_properties.pageSetUpPr is not None:
        sheet.sheet_properties.pageSetUpPr.fitToPage = True


def _table(sheet: Worksheet, table: Table, row: int, widths: dict[int, int]) -> int:
    """Write a table from `row` on; returns the first row after it."""
    from openpyxl.styles import Alignment, Border, Font, PatternFill, Side

    ink = INK.lstrip("#")
    _write(sheet.cell(row, 1), table.caption).font = Font(bold=True, color=ink)
    for index, column in enumerate(table.columns, start=1):
        cell = _write(sheet.cell(row + 1, index), column.heading)
        cell.font = Font(bold=True, color=ink)
        cell.fill = PatternFill("solid", fgColor=MIST.lstrip("#"))
        cell.border = Border(bottom=Side("thin", color=ink))
        side = "left" if column.kind == "text" else "right"
        cell.alignment = Alignment(wrap_text=True, vertical="bottom", horizontal=side)
        widths[index] = max(widths.get(index, 8), min(len(column.heading), 14))
    for offset, values in enumerate(table.rows, start=row + 2):
        last = table.total and offset == row + 1 + len(table.rows)
        for index, (column, value) in enumerate(zip(table.columns, values, strict=True), start=1):
            cell = _value(sheet.cell(offset, index), column, value)
            cell.font = Font(bold=last, color=ink)
            widths[index] = max(widths[index], len(str(value)) if isinstance(value, str) else 10)
    return row + 2 + len(table.rows)


def _value(cell: Any, column: Column, value: Cell) -> Any:
    from openpyxl.styles import Alignment

    if isinstance(value, str):
        _write(cell, value)
        cell.alignment = Alignment(wrap_text=True, vertical="top")
    elif value is not None and value == value and abs(value) != float("inf"):
        cell.value = value
        cell.number_format = _format(column, value)
        cell.alignment = Alignment(vertical="top")
    return cell


def _format(column: Column, value: float) -> str:
    if column.kind == "whole":
        return "#,##0"
    if column.kind == "decimal":
        return "#,##0." + "0" * column.decimals if column.decimals else "#,##0"
    if value == 0.0 or 100.0 <= abs(value) < 1e9:
        return "#,##0"
    if abs(value) < 1e-4:
        return "0.00E+00"
    return "0." + "0" * (2 if abs(value) >= 1.0 else 6)


def _write(cell: Any, text: str) -> Any:
    """Text that stays text, whatever it begins with."""
    cell.value = plain(text)
    cell.data_type = "s"
    cell.quotePrefix = text[:1] in ("=", "+", "-", "@")
    return cell


def _letter(column: int) -> str:
    from openpyxl.utils import get_column_letter

    return get_column_letter(column)


def _dated(book: bytes, date: str) -> bytes:
    """The same workbook with `date` for every time that stands in it."""
    moment = datetime.datetime.fromisoformat(date).astimezone(datetime.UTC)
    stamp = moment.strftime("%Y-%m-%dT%H:%M:%SZ").encode()
    out = BytesIO()
    with zipfile.ZipFile(BytesIO(book)) as old, zipfile.ZipFile(out, "w", zipfile.ZIP_DEFLATED) as new:
        for name in old.namelist():
            content = old.read(name)
            if name == "docProps/core.xml":
                content = _STAMP.sub(rb"\g<1>" + stamp + rb"\g<3>", content)
            entry = zipfile.ZipInfo(name, (1980, 1, 1, 0, 0, 0))
            entry.compress_type = zipfile.ZIP_DEFLATED
            new.writestr(entry, content)
    return out.getvalue()
