"""The fields of a file for people: what each means, what is written there, what holds without it."""

from __future__ import annotations

from collections.abc import Sequence

from trainopt.files.reference import FieldNote
from trainopt.report.tables import WIDTH, Page

_FILES = {
    "medium": "Medium: models/media/NAME.yaml",
    "catalog": "Catalog: models/catalog.yaml",
    "scenario": "Scenario: scenarios/NAME.yaml",
}


def fields_text(kind: str, notes: Sequence[FieldNote], width: int = WIDTH, color: bool = False) -> str:
    """One file's fields as a table; "" where there are none."""
    if not notes:
        return ""
    page = Page()
    page.line(_FILES[kind], "bold")
    page.table(("Field", "Meaning; what to write"), [row for note in notes for row in _rows(note)], left=2)
    return page.render(width, color)


def _rows(note: FieldNote) -> tuple[tuple[str, str], tuple[str, str]]:
    """The meaning beside the field, and below it what is written there."""
    without = "required" if note.required else f"default {note.default}" if note.default else "optional"
    parts = [without, f"{note.holds}, {note.allowed}" if note.allowed else note.holds]
    if note.example:
        parts.append(f"example: {note.example}")
    return (note.path, note.meaning), ("", f"({'; '.join(parts)})")
