"""Results in a notebook: tables that show themselves, figures to work with."""

from __future__ import annotations

import warnings
from pathlib import Path

import pytest

with warnings.catch_warnings():
    warnings.simplefilter("ignore")
    import html5lib

import trainopt
from tests.report import results
from tests.report.dossiers import HOSTILE, dossier, hostile
from trainopt.report.notebook import curve_html, design_html, install
from trainopt.report.render import report_figures

ROOT = Path(__file__).parents[2]


def parsed(fragment: str) -> str:
    tree = html5lib.HTMLParser(strict=True, namespaceHTMLElements=False).parseFragment(fragment)
    return " ".join("".join(tree.itertext()).split())


def test_a_design_shows_itself() -> None:
    install()
    text = parsed(results.design()._repr_html_())  # type: ignore[attr-defined]
    for words in ("Least area, proven optimal", "oat-coarse-09", "11.7", "Against the even split"):
        assert words in text


def test_no_design_says_why() -> None:
    assert "2.31 bar where 1.4 bar is allowed" in parsed(design_html(results.infeasible()))


def test_a_curve_shows_itself() -> None:
    text = parsed(curve_html(results.curve()))
    assert "Law intermediate" in text
    assert "0.000340" in text


def test_hostile_names_are_text() -> None:
    fragment = design_html(hostile())
    assert "<script>" not in fragment
    assert HOSTILE[0] in parsed(fragment)


def test_the_public_names_bring_the_tables(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)
    curve = trainopt.fit_curve(trainopt.load_medium("models/media/oat-open.yaml"))
    assert "Law cake" in parsed(curve._repr_html_())  # type: ignore[attr-defined]


def test_the_report_s_figures_by_name() -> None:
    figures = report_figures(dossier(results.design()))
    assert list(figures) == ["train", "budget", "curve-1", "curve-2", "curve-3", "course", "volume"]
    assert all(figure.axes for figure in figures.values())
