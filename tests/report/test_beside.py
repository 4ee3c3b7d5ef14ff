"""Sections on near designs, other media and reliability: page, workbook and JSON say the same."""

from __future__ import annotations

import json
from dataclasses import replace
from io import BytesIO
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from openpyxl import load_workbook

import trainopt
from tests.report.dossiers import shapes
from trainopt.report.beside_text import share
from trainopt.report.render import report_bytes
from trainopt.report.sections import sections
from trainopt.report.text import even_split_sentence
from trainopt.train.results import Saving

ROOT = Path(__file__).parents[2]
DOSSIER = shapes()["reliable"]


def sheet(title: str) -> list[list[Any]]:
    book = load_workbook(BytesIO(report_bytes(DOSSIER, ".xlsx")))
    return [[cell.value for cell in row] for row in book[title].iter_rows()]


def row_of(rows: list[list[Any]], name: str) -> list[Any]:
    return next(row for row in rows if row[0] == name)


def test_reliability_is_the_same_in_workbook_json_and_page() -> None:
    document = json.loads(report_bytes(DOSSIER, ".json"))["design"]["reliability"]
    rows = sheet("Reliability")
    own = row_of(rows, "this design")
    assert own[2] == pytest.approx(100.0 * document["fresh"])
    assert own[3:5] == pytest.approx([100.0 * end for end in document["fresh_interval"]])
    assert row_of(rows, "even split")[2] == pytest.approx(100.0 * document["even_split_fresh"])
    usual = row_of(rows, "worst lot run, safety factor 1.5")
    assert usual[1] == document["safety_factor_design"]["area_m2"]
    page = report_bytes(DOSSIER, ".html").decode()
    assert "It amounts to a safety factor of 1.21 on the pooled curve" in page
    assert "94.75" in page
    assert "95.0 % of 400 sampled lots" in page.replace("95 %", "95.0 %")


def test_near_designs_and_other_media_are_the_same_in_workbook_and_json() -> None:
    document = json.loads(report_bytes(DOSSIER, ".json"))["design"]
    near = [row for row in sheet("Near designs") if isinstance(row[1], int | float)]
    assert [row[1] for row in near] == pytest.approx([one["area_m2"] for one in document["alternatives"]["designs"]])
    spare = [one["blocks"][0]["spare_bar"] for one in document["alternatives"]["designs"]]
    assert [row[4] for row in near] == pytest.approx(spare)
    media = sheet("Other media")
    assert any("no design" in row for row in media)
    assert any(row[2] == document["routes"]["designs"][0]["area_m2"] for row in media)
    assert any("7 more allowed" in str(row[0]) for row in media)


def test_the_solver_is_on_record() -> None:
    (provenance,) = [section for section in sections(DOSSIER) if section.key == "provenance"]
    facts = dict(provenance.tables[0].rows)  # type: ignore[arg-type]
    assert facts["Seed and threads"] == "0, 1"
    assert facts["Solver"] == "HiGHS 1.0, by Pyomo 6.0"


@pytest.mark.parametrize(("value", "text"), [(0.9375, "93.8 %"), (0.9951, "99.51 %"), (1.0, "100 %"), (None, "–")])
def test_shares_have_more_digits_toward_all(value: float | None, text: str) -> None:
    assert share(value) == text


def test_a_reliability_report_shows_a_few_lots_that_hold() -> None:
    case = trainopt.set_field(trainopt.load_case(ROOT / "scenarios" / "harvest-reliable.yaml"), "basis.samples", 60)
    dossier = trainopt.gather(case)
    assert dossier.sampled == 60
    assert 3 <= len(dossier.lots) <= 7
    for course in dossier.courses:
        assert course.lot in dossier.lots
        assert float(np.max(course.total)) <= course.limit * (1.0 + 1e-6)
    worst = {block.worst_lot for block in dossier.design.blocks}
    assert worst <= set(dossier.lots)
    assert dossier.design.alternatives is not None
    assert [section.key for section in sections(dossier)].index("alternatives") > 0


def test_an_even_split_that_is_smaller_but_fails_more_is_no_saving() -> None:
    design = DOSSIER.design
    smaller = replace(design, saving=Saving(-0.6, -5.1, -836.0, -6.3))
    text = even_split_sentence(smaller)
    assert "installs 0.6 m² (5.1 %) less, but" in text
    assert "91.0 % of fresh lots finish with it, 94.8 % with this design" in text
    assert "saves" in even_split_sentence(design)
