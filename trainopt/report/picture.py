"""A figure as the bytes of a file, the same bytes for the same figure."""

from __future__ import annotations

import warnings
from io import BytesIO
from typing import TYPE_CHECKING

from trainopt.report.style import styled

if TYPE_CHECKING:
    from matplotlib.figure import Figure

_METADATA: dict[str, dict[str, str | None]] = {
    "svg": {"Date": None, "Creator": "trainopt"},
    "pdf": {"CreationDate": None, "Creator": "trainopt", "Producer": None},
    "png": {"Software": None},
}


def picture_bytes(figure: Figure, suffix: str) -> bytes:
    """The figure as ".svg" (text stays text), ".png" or ".pdf"."""
    kind = suffix.lower().lstrip(".")
    out = BytesIO()
    with styled(), warnings.catch_warnings():
        # A letter that the font lacks is left to the reader's own fonts.
        warnings.filterwarnings("ignore", message="Glyph .* missing from font")
        figure.savefig(out, format=kind, dpi=160, metadata=_METADATA[kind])
    return out.getvalue()
