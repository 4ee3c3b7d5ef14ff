"""Results that show themselves as tables in a notebook."""

from __future__ import annotations

from typing import TYPE_CHECKING

from trainopt.report.content import Table
from trainopt.report.notices import grouped
from trainopt.report.numbers import plain

if TYPE_CHECKING:
    from markupsafe import Markup

    from trainopt.curves.curve import Curve
    from trainopt.train.results import Design


def install() -> None:
    """Give designs and curves the method that notebooks look for."""
    from trainopt.curves.curve import Curve
    from trainopt.train.results import Design

    Design._repr_html_ = design_html  # type: ignore[attr-defined]
    Curve._repr_html_ = curve_html  # type: ignore[attr-defined]


def design_html(design: Design) -> str:
    """Headline, bill of modules, stages, and what the even split would have cost, as HTML."""
    from markupsafe import Markup

    from trainopt.report.sections import bill_table, stage_table
    from trainopt.report.text import even_split_sentence, headline

    parts = [_paragraph(design.scenario, "strong"), _paragraph(headline(design))]
    if design.blocks:
        parts += [table_html(bill_table(design)), table_html(stage_table(design))]
        parts.append(_paragraph(even_split_sentence(design)))
    parts += [_paragraph(reason.text) for reason in design.reasons]
    parts += [_paragraph(f"Warning: {text}") for _, text in grouped(design.warnings)]
    return str(Markup("\n").join(parts))


def curve_html(curve: Curve) -> str:
    """Law, tested range, parameters and alternatives, as HTML."""
    from markupsafe import Markup

    from trainopt.report.curve_sections import parameter_table
    from trainopt.report.curve_text import sentence

    parts = [_paragraph(curve.medium, "strong"), _paragraph(sentence(curve))]
    parts.append(table_html(parameter_table({curve.medium: curve})))
    return str(Markup("\n").join(parts))


def _paragraph(text: str, tag: str = "span") -> Markup:
    from markupsafe import Markup, escape

    return Markup("<p><{0}>{1}</{0}></p>").format(Markup(tag), escape(plain(text)))


def table_html(table: Table) -> Markup:
    """A table as HTML that brings no style of its own but the side its numbers stand on."""
    from markupsafe import Markup, escape

    def cell(tag: str, index: int, text: str) -> Markup:
        side = "left" if table.columns[index].kind == "text" else "right"
        return Markup('<{0} style="text-align: {1}">{2}</{0}>').format(Markup(tag), side, escape(plain(text)))

    heads = Markup("").join(cell("th", i, column.heading) for i, column in enumerate(table.columns))
    rows = [Markup("").join(cell("td", i, text) for i, text in enumerate(row)) for row in table.texts()]
    body = Markup("").join(Markup("<tr>{}</tr>").format(row) for row in rows)
    caption = Markup("<caption>{}</caption>").format(escape(plain(table.caption)))
    return Markup("<table>{}<thead><tr>{}</tr></thead><tbody>{}</tbody></table>").format(caption, heads, body)
