"""One visual language for every picture: colors that differ in lightness, marks that differ in shape.

Pictures are matplotlib figures made without pyplot, so that nothing global changes and no window opens.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

INK = "#16262e"
"""Text, axes, the one curve that matters."""

PINE = "#1d5f63"
"""The optimum, what is chosen."""

OCHRE = "#c98b1b"
"""The even split, what is compared."""

BRICK = "#9c3b24"
"""Limits and what lies beyond them."""

STONE = "#8fa1a6"
"""What is there but not at issue."""

QUIET = "#4c5f66"
"""Captions, units, bench readings: there to be read second."""

MIST = "#e3eaeb"
"""Areas: tested ranges, bands, blocks."""

BAND = "#9dbdbb"
"""Uncertainty about the optimum's color."""

PAPER = "#ffffff"

STEPS = (PINE, "#d9c9a3", "#7fa7a3", "#f0e8d8", "#3f6f8f", "#b9cfcb")
HATCHES = ("", "////", "", "....", "", "\\\\\\\\")
"""Fills of neighbors in a stack: they differ in lightness, every other one in texture too."""

LOTS = (PINE, OCHRE, BRICK, "#56757c", "#6b5a8e", "#3a3a3a")
MARKS = ("o", "s", "^", "D", "v", "P")
DASHES = ("-", "--", "-.", ":", (0, (5, 1, 1, 1, 1, 1)), (0, (1, 1)))

RC: dict[Any, Any] = {
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans"],
    "font.size": 9.0,
    "text.color": INK,
    "axes.edgecolor": STONE,
    "axes.labelcolor": INK,
    "axes.titlesize": 10.0,
    "axes.titlelocation": "left",
    "axes.titleweight": "bold",
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.axisbelow": True,
    "xtick.color": INK,
    "ytick.color": INK,
    "grid.color": MIST,
    "hatch.linewidth": 0.6,
    "legend.frameon": False,
    "figure.facecolor": PAPER,
    "svg.fonttype": "none",
    "svg.hashsalt": "trainopt",
    "text.parse_math": False,  # a dollar sign in a name is a dollar sign
}


def luminance(color: str) -> float:
    """Relative luminance of a color from 0 (black) to 1 (white), W3C WCAG 2.1."""
    from matplotlib.colors import to_rgb

    parts = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in to_rgb(color)]
    return 0.2126 * parts[0] + 0.7152 * parts[1] + 0.0722 * parts[2]


def contrast(one: str, other: str) -> float:
    """Contrast ratio of two colors, from 1 to 21, W3C WCAG 2.1."""
    low, high = sorted((luminance(one), luminance(other)))
    return (high + 0.05) / (low + 0.05)


def readable_on(color: str) -> str:
    """The one of ink and paper that reads better on `color`."""
    return INK if contrast(INK, color) >= contrast(PAPER, color) else PAPER


@contextmanager
def styled() -> Iterator[None]:
    """Draw in the common style inside the block, and leave matplotlib's settings as they were."""
    import matplotlib

    with matplotlib.rc_context(RC):
        yield
