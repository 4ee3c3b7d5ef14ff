"""A figure as SVG to stand inside a page: text as text, its own ids, sized by the page."""

from __future__ import annotations

import re
from html import escape
from typing import TYPE_CHECKING

from trainopt.report.picture import picture_bytes

if TYPE_CHECKING:
    from matplotlib.figure import Figure

_HEAD = re.compile(r"^.*?(?=<svg\b)", re.DOTALL)
_METADATA = re.compile(r"\s*<metadata>.*?</metadata>", re.DOTALL)
_COMMENT = re.compile(r"\s*<!--.*?-->", re.DOTALL)
_SIZE = re.compile(r'<svg\b[^>]*?viewBox="(?P<box>[^"]*)"[^>]*>', re.DOTALL)
_ID = re.compile(r'\bid="(?P<id>[^"]*)"')
_URL = re.compile(r"url\(#(?P<id>[^)]*)\)")
_LINK = re.compile(r'(?:xlink:)?href="#(?P<id>[^"]*)"')
_FONT = re.compile(r"(?P<font>font:[^;\"]*?px) [^;\"]*")


def inline_svg(figure: Figure, name: str, alt: str) -> str:
    """The figure as one `<svg>` element; `name` makes its ids unique in the page, `alt` describes it."""
    text = picture_bytes(figure, ".svg").decode("utf-8")
    text = _COMMENT.sub("", _METADATA.sub("", _HEAD.sub("", text)))
    prefix = re.sub(r"[^A-Za-z0-9_-]", "_", name)
    used = {match["id"] for match in _URL.finditer(text)} | {match["id"] for match in _LINK.finditer(text)}
    text = _ID.sub(lambda m: f'id="{prefix}-{m["id"]}"' if m["id"] in used else "", text)
    text = _URL.sub(lambda m: f"url(#{prefix}-{m['id']})", text)
    text = _LINK.sub(lambda m: f'href="#{prefix}-{m["id"]}"', text)
    text = _FONT.sub(lambda m: f"{m['font']} var(--letters, sans-serif)", text)
    head = _SIZE.search(text)
    assert head is not None, "matplotlib writes a viewBox"
    opening = f'<svg role="img" aria-label="{escape(alt, quote=True)}" viewBox="{head["box"]}">'
    return re.sub(r"\s+>", ">", opening + text[head.end() :]).strip()
