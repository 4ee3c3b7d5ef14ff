"""A dossier as the bytes of a report file."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from trainopt.report.dossier import Dossier


def report_bytes(dossier: Dossier, suffix: str, units: str = "bar") -> bytes:
    """The report as ".html", ".xlsx" or ".json"; the same dossier gives the same bytes."""
    kind = suffix.lower()
    if kind == ".html":
        from trainopt.report.html import report_html

        return report_html(dossier, units).encode("utf-8", errors="replace")
    if kind == ".xlsx":
        from trainopt.report.xlsx import report_xlsx

        return report_xlsx(dossier, units)
    if kind == ".json":
        from trainopt.report.json import dumps, report_document

        return dumps(report_document(dossier)).encode("utf-8", errors="replace")
    raise ValueError(f"no report is written as {suffix!r}; expected .html, .xlsx or .json")


def report_figures(dossier: Dossier, units: str = "bar") -> dict[str, Figure]:
    """The report's pictures as matplotlib figures by name, in reading order."""
    from trainopt.report.sections import sections

    pictures = [picture for section in sections(dossier, units) for picture in section.pictures]
    return {picture.name: picture.draw() for picture in pictures}
