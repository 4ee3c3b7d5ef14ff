"""The design report as one HTML page: no script, nothing fetched, made to be printed."""

from __future__ import annotations

import re
from importlib.resources import files
from typing import TYPE_CHECKING

from trainopt.report import style
from trainopt.report.numbers import duration, fixed, money, plain, trimmed
from trainopt.report.sections import sections
from trainopt.report.svg import inline_svg

if TYPE_CHECKING:
    from markupsafe import Markup

    from trainopt.report.content import Picture
    from trainopt.report.dossier import Dossier

LONGEST = 16
"""Letters of a word in a table that stay together."""

COLORS = {
    "ink": style.INK,
    "pine": style.PINE,
    "brick": style.BRICK,
    "stone": style.STONE,
    "mist": style.MIST,
    "paper": style.PAPER,
    "quiet": style.QUIET,
}
"""The page's colors; text is ink, pine, brick or quiet, on paper or mist."""


def report_html(dossier: Dossier, units: str = "bar") -> str:
    """The report as HTML text; pressures in `units` (bar, psi or kPa)."""
    from jinja2 import Environment, FunctionLoader, StrictUndefined
    from markupsafe import Markup

    def drawn(picture: Picture) -> Markup:
        return Markup(inline_svg(picture.draw(), picture.name, plain(picture.alt)))

    environment = Environment(
        loader=FunctionLoader(_template),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
    )
    environment.filters.update(plain=plain, drawn=drawn, breakable=breakable)
    page = environment.get_template("design.html.jinja")
    return page.render(
        title=dossier.design.scenario,
        sections=sections(dossier, units),
        figures=key_figures(dossier),
        colors=COLORS,
    )


def _template(name: str) -> str:
    return (files("trainopt.report") / "templates" / name).read_text(encoding="utf-8")


def breakable(text: str) -> Markup:
    """Text as markup that may break inside its long words."""
    from markupsafe import Markup, escape

    parts = re.split(r"(?<=[\s-])", text)
    return Markup("").join(
        Markup("<wbr>").join(escape(part[i : i + LONGEST]) for i in range(0, len(part), LONGEST)) for part in parts
    )


def key_figures(dossier: Dossier) -> tuple[tuple[str, str], ...]:
    """The few numbers that stand at the top of the page."""
    design = dossier.design
    if not design.blocks:
        return ()
    modules = sum(stage.count for block in design.blocks for stage in block.stages)
    saved = "" if design.saving is None else f"{trimmed(design.saving.area)} m²"
    return (
        ("Installed area", f"{trimmed(design.area)} m²"),
        ("Modules", fixed(modules, 0)),
        ("Time with setups", duration(design.time)),
        ("Cost per batch", money(design.cost, design.currency)),
        ("Safety factor", fixed(design.safety_factor, 2)),
        *((("Saved against the even split", saved),) if saved else ()),
    )
