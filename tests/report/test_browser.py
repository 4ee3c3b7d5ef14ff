"""The report in a real browser: silent, alone, nothing wider than the window or the paper."""

from __future__ import annotations

import re
from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.report.browser import Browser, executable
from tests.report.dossiers import shapes
from trainopt.report.html import report_html

pytestmark = pytest.mark.skipif(
    executable() is None, reason="no chromium on this machine (Debian: apt install chromium)"
)

SHAPES = shapes()
PAPERS = {"A4": (8.27, 11.69), "Letter": (8.5, 11.0)}


@pytest.fixture(scope="module")
def browser() -> Iterator[Browser]:
    with Browser() as one:
        yield one


@pytest.fixture(scope="module")
def pages(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Path]:
    folder = tmp_path_factory.mktemp("pages")
    made = {}
    for name, dossier in SHAPES.items():
        made[name] = folder / f"{name}.html"
        made[name].write_text(report_html(dossier), encoding="utf-8")
    return made


TOO_WIDE = """(() => {
  const wide = [...document.querySelectorAll('body *')].filter(e => {
    if (e.closest('.wide') && !e.matches('.wide')) return false;   // scrolls inside its own frame
    return e.getBoundingClientRect().right > document.documentElement.clientWidth + 1;
  });
  return [document.documentElement.scrollWidth - document.documentElement.clientWidth,
          wide.map(e => e.tagName + '.' + e.className).join(' ')];
})()"""


@pytest.mark.parametrize("width", [1280, 390])
@pytest.mark.parametrize("shape", list(SHAPES))
def test_the_page_is_silent_alone_and_fits(browser: Browser, pages: dict[str, Path], shape: str, width: int) -> None:
    browser.open(pages[shape], width)
    assert browser.complaints() == []
    assert browser.requests() == [pages[shape].as_uri()]
    over, wide = browser.evaluate(TOO_WIDE)
    assert over <= 0, wide
    assert wide == ""


@pytest.mark.parametrize("paper", list(PAPERS))
@pytest.mark.parametrize("shape", list(SHAPES))
def test_nothing_is_wider_than_the_paper(browser: Browser, pages: dict[str, Path], shape: str, paper: str) -> None:
    width, height = PAPERS[paper]
    inside = int((width - 2 * 14 / 25.4) * 96)  # the page's own margins of 14 mm, 96 px an inch
    browser.open(pages[shape], inside)
    browser.call("Emulation.setEmulatedMedia", media="print")
    try:
        over = browser.evaluate("document.documentElement.scrollWidth - document.documentElement.clientWidth")
        assert over <= 0
        pdf = browser.pdf(width, height)
    finally:
        browser.call("Emulation.setEmulatedMedia", media="")
    assert pdf.startswith(b"%PDF")
    assert 1 <= len(re.findall(rb"/Type\s*/Page\b", pdf)) <= 20


def test_the_browser_would_notice(browser: Browser, tmp_path: Path) -> None:
    """The checks above can fail: a page that shouts, fetches and overflows is caught."""
    page = tmp_path / "bad.html"
    page.write_text(
        "<!DOCTYPE html><title>x</title><script>console.error('loud')</script>"
        "<img src='missing.png'><p style='width:3000px'>wide</p>"
    )
    browser.open(page, 390)
    assert any("loud" in complaint for complaint in browser.complaints())
    assert len(browser.requests()) == 2
    over, wide = browser.evaluate(TOO_WIDE)
    assert over > 0
    assert "P." in wide


def test_pictures_are_drawn(browser: Browser, pages: dict[str, Path]) -> None:
    browser.open(pages["usual"], 1280)
    shot = browser.picture()
    assert shot.startswith(b"\x89PNG")
    boxes = browser.evaluate("[...document.querySelectorAll('figure svg')].map(e => e.getBoundingClientRect().height)")
    assert len(boxes) == 8
    assert min(boxes) > 100
