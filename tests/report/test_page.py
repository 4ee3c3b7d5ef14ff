"""The report as a page: well formed, complete, readable, and deaf to what stands in a name."""

from __future__ import annotations

import re
import warnings
from functools import cache
from itertools import pairwise
from xml.etree.ElementTree import Element

import pytest

with warnings.catch_warnings():
    warnings.simplefilter("ignore")
    import html5lib

from tests.report.dossiers import HOSTILE, LONG, shapes
from trainopt.report.cautions import CAUTIONS
from trainopt.report.html import COLORS, breakable, report_html
from trainopt.report.numbers import plain
from trainopt.report.sections import sections
from trainopt.report.style import INK, PAPER, STEPS, contrast, readable_on

SHAPES = shapes()


@cache
def page(name: str) -> str:
    return report_html(SHAPES[name])


def parsed(html: str) -> Element:
    parser = html5lib.HTMLParser(strict=True, namespaceHTMLElements=False)
    tree: Element = parser.parse(html)
    return tree


@cache
def tree_of(name: str) -> Element:
    return parsed(page(name))


def words(element: Element) -> str:
    return " ".join("".join(element.itertext()).split())


@pytest.fixture(params=list(SHAPES))
def tree(request: pytest.FixtureRequest) -> Element:
    return tree_of(request.param)


def test_headings_come_in_order(tree: Element) -> None:
    levels = [int(e.tag[1]) for e in tree.iter() if isinstance(e.tag, str) and re.fullmatch("h[1-6]", e.tag)]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(after - before <= 1 for before, after in pairwise(levels))


def test_every_figure_has_a_caption_and_words_for_those_who_cannot_see_it(tree: Element) -> None:
    for figure in tree.iter("figure"):
        (caption,) = figure.iter("figcaption")
        (picture,) = [e for e in figure.iter() if isinstance(e.tag, str) and e.tag.endswith("svg")]
        assert len(words(caption)) > 40
        assert picture.get("role") == "img"
        assert len(picture.get("aria-label") or "") > 30


def test_text_in_pictures_is_text() -> None:
    figures = re.findall(r"<svg.*?</svg>", page("usual"), flags=re.DOTALL)
    assert len(figures) == 8
    assert all("<text" in figure for figure in figures)
    assert "primary" in figures[0]


def test_tables_have_header_cells_and_captions(tree: Element) -> None:
    tables = list(tree.iter("table"))
    assert tables
    for table in tables:
        assert words(table.find("caption"))  # type: ignore[arg-type]
        heads = list(table.find("thead").iter("th"))  # type: ignore[union-attr]
        assert all(cell.get("scope") == "col" for cell in heads)
        for row in table.find("tbody").iter("tr"):  # type: ignore[union-attr]
            cells = list(row)
            assert len(cells) == len(heads)
            assert cells[0].tag == "th"
            assert cells[0].get("scope") == "row"


def test_ids_are_unique_and_links_lead_somewhere(tree: Element) -> None:
    ids = [e.get("id") for e in tree.iter() if e.get("id")]
    assert len(ids) == len(set(ids))
    links = [e.get("href") or "" for e in tree.iter() if e.get("href")]
    links += [e.get("{http://www.w3.org/1999/xlink}href") or "#" + str(ids[0]) for e in tree.iter()]
    assert all(link.startswith("#") and link[1:] in ids for link in links)
    used = re.findall(r"url\(#([^)]*)\)", " ".join(str(v) for e in tree.iter() for v in e.attrib.values()))
    assert set(used) <= set(ids)


def test_nothing_is_fetched_and_nothing_runs(tree: Element) -> None:
    tags = {e.tag for e in tree.iter() if isinstance(e.tag, str)}
    assert not tags & {"script", "link", "img", "iframe", "object", "embed", "form", "base"}
    for element in tree.iter():
        for name, value in element.attrib.items():
            assert not str(name).startswith("on")
            if name in {"src", "href", "style", "action", "data"}:
                assert not re.match(r"\s*(https?|javascript|data|file):", value)


def test_hostile_names_stand_as_they_are() -> None:
    text = "".join(tree_of("hostile").itertext()).replace("\u200b", "")
    for name in HOSTILE:
        if name == LONG:
            continue
        assert plain(name) in text
    assert LONG in text
    assert "49{%" not in text
    assert "\u202e" not in page("hostile")
    assert "\x1b" not in page("hostile")


def test_contrast() -> None:
    for name in ("ink", "pine", "brick", "quiet"):
        for ground in ("paper", "mist"):
            assert contrast(COLORS[name], COLORS[ground]) >= 4.5, f"{name} on {ground}"
    for fill in STEPS:
        assert contrast(readable_on(fill), fill) >= 4.5
    assert contrast("#000000", "#ffffff") == pytest.approx(21.0)  # W3C WCAG 2.1, the extremes
    assert contrast("#777777", "#ffffff") == pytest.approx(4.48, abs=0.01)  # from memory: the gray just too light


def test_the_page_colors_text_only_with_what_was_checked() -> None:
    css = page("usual").split("<style>")[1].split("</style>")[0]
    colors = set(re.findall(r"(?<![-\w])color:\s*([^;}]+)", css))
    assert colors <= {"var(--ink)", "var(--pine)", "var(--quiet)", "inherit"}
    fills = set(re.findall(r"<text[^>]*fill: (#[0-9a-f]{6})", page("usual")))
    assert fills <= {INK, PAPER, COLORS["brick"]}


def test_sections_come_in_reading_order() -> None:
    titles = [words(e) for e in tree_of("usual").iter("h2")]
    expected = [
        "Answer",
        "Train",
        "Where pressure and time go",
        "Curves of the stages",
        "Pressure over the batch",
        "Where the area goes",
        "What limits, and what more buys",
        "Other batch volumes",
        "Cost per batch",
        "Assumptions and warnings",
        "Cautions",
        "Provenance",
    ]
    assert [title for title in titles if title in expected] == expected
    assert [words(e) for e in tree_of("no-design").iter("h2")] == ["Answer", "Assumptions and warnings", "Provenance"]


def test_cautions_and_provenance_are_there() -> None:
    text = words(tree_of("usual"))
    for caution in CAUTIONS:
        assert caution in text
    for fact in ("2026-01-02T03:04:05+00:00", "highspy", "sha256:00", "Lower bound", "Gap"):
        assert fact in text


def test_no_design_says_what_would_do() -> None:
    text = words(tree_of("no-design"))
    assert "No design meets every limit" in text
    assert "2.31 bar where 1.4 bar is allowed" in text
    assert not list(tree_of("no-design").iter("figure"))


def test_the_same_dossier_gives_the_same_page() -> None:
    assert report_html(shapes()["usual"]) == page("usual")


def test_pressure_in_the_unit_asked_for() -> None:
    psi = report_html(SHAPES["usual"], "psi")
    assert "20.3" in psi
    table = words(next(iter(parsed(psi).find(".//section[@id='budget']").iter("table"))))  # type: ignore[union-attr]
    assert "psi" in table
    assert "bar" not in table


def test_long_words_may_break() -> None:
    assert str(breakable("<b>" * 8)) == "&lt;b&gt;&lt;b&gt;&lt;b&gt;&lt;b&gt;&lt;b&gt;&lt;<wbr>b&gt;&lt;b&gt;&lt;b&gt;"
    assert str(breakable("oat-coarse sheet")) == "oat-coarse sheet"


def test_parts_add_up_and_gains_are_named() -> None:
    (parts,) = [s for s in sections(SHAPES["usual"]) if s.key == "parts"]
    *rows, total = parts.tables[0].rows
    assert sum(row[1] for row in rows) == pytest.approx(total[1])  # type: ignore[misc, arg-type]
    text = words(tree_of("usual"))
    assert "0.12 bar more for 'clarification' (1.52 bar) saves 0.9 m2: 1 × m fewer in secondary" in text
    assert "'clarification' leaves 0.04 of 1.35 bar unused" in text
    assert "clarification: pressure" in text
    assert "12 × oat-coarse-09" in text
    psi = report_html(SHAPES["usual"], "psi")
    assert "0.12 bar more" not in psi
    assert "1.8 psi more for" in psi
    assert "22.0" in psi
