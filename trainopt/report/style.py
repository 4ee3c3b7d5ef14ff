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

MIST = "#e3eaeb"
"""Areas: tested ranges, bands, blocks."""

PAPER = "#ffffff"

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
    "legend.frameon": False,
    "figure.facecolor": PAPER,
    "svg.fonttype": "none",
    "svg.hashsalt": "trainopt",
    "text.parse_math": False,  # a dollar sign in a name is a dollar sign
}


@contextmanager
def styled() -> Iterator[None]:
    """Draw in the common style inside the block, and leave matplotlib's settings as they were."""
    import matplotlib

    with matplotlib.rc_context(RC):
        yield
