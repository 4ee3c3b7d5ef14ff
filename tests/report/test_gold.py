"""Fragments of text and page as they were last looked at.

When a change means to move one: `UPDATE_GOLD=1 pytest tests/report/test_gold.py` writes them anew; read the
difference before it is committed.
"""

from __future__ import annotations

import os
import re
from collections.abc import Callable
from pathlib import Path

import pytest

from tests.report import results
from tests.report.dossiers import shapes
from trainopt.report.curve_text import curve_text
from trainopt.report.html import report_html
from trainopt.report.json import curve_document, design_document, dumps
from trainopt.report.text import design_text

GOLD = Path(__file__).parent / "gold"


def section(key: str, shape: str = "usual") -> str:
    """One section of the page, its pictures left out (they hang on the drawing library's version)."""
    page = report_html(shapes()[shape])
    (found,) = re.findall(rf'<section id="{key}".*?</section>', page, flags=re.DOTALL)
    return re.sub(r"<svg.*?</svg>", "<svg></svg>", found, flags=re.DOTALL) + "\n"


FRAGMENTS: dict[str, Callable[[], str]] = {
    "design.txt": lambda: design_text(results.design()),
    "design-psi-80.txt": lambda: design_text(results.design(), "psi", 80),
    "no-design.txt": lambda: design_text(results.infeasible()),
    "curve.txt": lambda: curve_text(results.curve(turbidity_loading=150.0)),
    "design.json": lambda: dumps(design_document(results.design())),
    "curve.json": lambda: dumps(curve_document(results.curve())),
    "answer.html": lambda: section("answer"),
    "budget.html": lambda: section("budget"),
    "provenance.html": lambda: section("provenance"),
    "answer-no-design.html": lambda: section("answer", "no-design"),
}


@pytest.mark.parametrize("name", list(FRAGMENTS))
def test_fragment_is_as_it_was(name: str) -> None:
    made = FRAGMENTS[name]()
    path = GOLD / name
    if os.environ.get("UPDATE_GOLD"):
        path.parent.mkdir(exist_ok=True)
        path.write_text(made, encoding="utf-8")
    assert made == path.read_text(encoding="utf-8")


def test_every_gold_file_is_used() -> None:
    assert {path.name for path in GOLD.iterdir()} == set(FRAGMENTS)
