"""The report as a workbook and as JSON: the same values as the page, as numbers, and inert text."""

from __future__ import annotations

import json
import zipfile
from io import BytesIO

import pytest
from openpyxl import Workbook, load_workbook

from tests.report import results
from tests.report.dossiers import HOSTILE, dossier, shapes
from trainopt.report.content import Cell, Table
from trainopt.report.html import report_html
from trainopt.report.numbers import plain
from trainopt.report.render import report_bytes
from trainopt.report.sections import sections

SHAPES = shapes()


def opened(content: bytes) -> Workbook:
    return load_workbook(BytesIO(content))


def same(value: Cell) -> object:
    """What a workbook gives back: text without control codes, numbers to 15 digits."""
    if isinstance(value, str):
        return plain(value) or None
    return value if value is None else pytest.approx(value, rel=1e-14)


def read_table(book: Workbook, sheet: str, table: Table) -> list[list[Cell]]:
    """The cells of a table, found by its caption."""
    page = book[sheet]
    (start,) = [row for row in range(1, page.max_row + 1) if page.cell(row, 1).value == plain(table.caption)]
    width = range(1, len(table.columns) + 1)
    return [[page.cell(start + 2 + row, c).value for c in width] for row in range(len(table.rows))]


@pytest.mark.parametrize("shape", list(SHAPES))
def test_every_table_is_there_with_its_numbers(shape: str) -> None:
    book = opened(report_bytes(SHAPES[shape], ".xlsx"))
    assert book.sheetnames == [section.title for section in sections(SHAPES[shape])]
    for section in sections(SHAPES[shape]):
        for table in section.tables:
            for read, written in zip(read_table(book, section.title, table), table.rows, strict=True):
                for got, value in zip(read, written, strict=True):
                    assert got == same(value)


def test_headings_have_their_units() -> None:
    sheet = opened(report_bytes(SHAPES["usual"], ".xlsx"))["Train"]
    headings = {cell.value for row in sheet.iter_rows() for cell in row}
    assert {"Area, m²", "Loading, L/m²", "Flux, LMH", "Pressure, bar"} <= headings


def test_hostile_text_is_text() -> None:
    book = opened(report_bytes(SHAPES["hostile"], ".xlsx"))
    cells = [cell for sheet in book for row in sheet.iter_rows() for cell in row if cell.value is not None]
    assert {cell.data_type for cell in cells} <= {"s", "n"}
    values = {cell.value for cell in cells}
    for name in HOSTILE:
        assert plain(name) in values
    assert all(cell.quotePrefix for cell in cells if isinstance(cell.value, str) and cell.value[:1] in "=+-@")


def test_page_workbook_and_document_agree() -> None:
    usual = dossier(results.design())
    document = json.loads(report_bytes(usual, ".json"))
    book, page = opened(report_bytes(usual, ".xlsx")), report_html(usual)
    stages = [stage for block in document["design"]["blocks"] for stage in block["stages"]]
    train = sections(usual)[1].tables[0]
    for row, stage in zip(read_table(book, "Train", train), stages, strict=True):
        assert row[0] == stage["stage"]
        keys = ("area_m2", "ideal_area_m2", "loading_L_m2", "flux_LMH", "pressure_bar")
        assert row[2:7] == [same(stage[key]) for key in keys]
    for texts in train.texts():
        assert all(f">{text}<" in page for text in texts[2:])
    answer = sections(usual)[0].tables[0]
    total = read_table(book, "Answer", answer)[-1]
    assert total[5] == same(document["design"]["area_m2"])
    assert total[4] == sum(stage["count"] for stage in stages)


def test_the_document_holds_design_curves_and_courses() -> None:
    document = json.loads(report_bytes(SHAPES["usual"], ".json"))
    assert document["schema"] == "trainopt.report/1"
    assert document["design"]["schema"] == "trainopt.design/1"
    assert [curve["schema"] for curve in document["curves"]] == ["trainopt.curve/1"]
    course = document["courses"][0]
    assert len(course["time_h"]) == len(course["pressure_bar"]) == len(course["stages"][0]["pressure_bar"])


@pytest.mark.parametrize("kind", [".html", ".xlsx", ".json"])
@pytest.mark.parametrize("shape", ["usual", "hostile", "no-design"])
def test_the_same_dossier_gives_the_same_bytes(kind: str, shape: str) -> None:
    first, second = shapes()[shape], shapes()[shape]
    assert report_bytes(first, kind) == report_bytes(second, kind)


def test_the_workbook_carries_the_report_s_date_only() -> None:
    with zipfile.ZipFile(BytesIO(report_bytes(SHAPES["usual"], ".xlsx"))) as archive:
        core = archive.read("docProps/core.xml").decode()
        assert core.count("2026-01-02T03:04:05Z") == 2
        assert {entry.date_time for entry in archive.infolist()} == {(1980, 1, 1, 0, 0, 0)}


def test_an_unknown_kind_is_refused() -> None:
    with pytest.raises(ValueError, match=r"expected \.html"):
        report_bytes(SHAPES["usual"], ".docx")
