"""Sections on what the design could be otherwise: shown for what was computed, left out for what was not."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from trainopt.report.content import Section

if TYPE_CHECKING:
    from trainopt.report.dossier import Dossier


def insight_sections(dossier: Dossier, units: str) -> Iterator[Section | None]:
    """Where the area goes, what limits, near-optimal designs, what-if on volume, reliability."""
    yield from ()
