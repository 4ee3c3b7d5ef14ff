"""Sweeps as tables for people."""

from __future__ import annotations

from typing import TYPE_CHECKING

from trainopt.report.beside_text import bought
from trainopt.report.numbers import NONE, aligned, fixed, significant
from trainopt.report.tables import WIDTH, Page

if TYPE_CHECKING:
    from collections.abc import Sequence

    from trainopt.study.axis import Axis
    from trainopt.study.results import Change, Sweep, SweepCell
    from trainopt.train.results import Pick

MOST_ROWS = 60
"""Rows of a table on a terminal: JSON and CSV hold them all."""

MOST_CHANGES = 20
"""Changes listed on a terminal: JSON holds them all."""


def sweep_text(sweep: Sweep, width: int = WIDTH, color: bool = False) -> str:
    """A sweep of one axis as a table of cells, of two as a summary; where the pick changes; why cells have no
    design."""
    page = Page()
    page.line(sweep.scenario, "bold")
    page.line(_sweep_headline(sweep))
    if len(sweep.axes) == 1:
        _cells(page, sweep)
    else:
        _map_rows(page, sweep)
    if sweep.changes:
        _changes(page, sweep)
    _reasons(page, sweep)
    return page.render(width, color)


def _sweep_headline(sweep: Sweep) -> str:
    solved = sum(cell.status == "optimal" for cell in sweep.cells)
    what = "cost per batch" if sweep.kind == "cost" else "installed area"
    text = f"Least {what} in {solved} of {len(sweep.cells)} cells, each proven optimal"
    missing = sum(cell.status == "not-computed" for cell in sweep.cells)
    return text + (f"; {missing} were not computed, the sweep was stopped." if missing else ".")


def _axis_name(axis: Axis) -> str:
    return f"{axis.field}\n{axis.unit}" if axis.unit else axis.field


def _value(axis: Axis, value: float) -> str:
    return f"{axis.shown(value):.6g}"


def _cells(page: Page, sweep: Sweep) -> None:
    page.heading("Designs")
    axis = sweep.axes[0]
    cells = _thinned(sweep.cells)
    areas, evens = (
        aligned(cell.area for cell in cells),
        aligned(None if cell.even_split is None else cell.even_split.area for cell in cells),
    )
    rows = [
        (
            _value(axis, cell.at[0]),
            bought(cell.picks) if cell.picks or cell.status == "optimal" else cell.status.replace("-", " "),
            area,
            even,
            fixed(cell.cost, 0),
            fixed(cell.time, 2),
            fixed(min(cell.spare), 3) if cell.spare else NONE,
        )
        for cell, area, even in zip(cells, areas, evens, strict=True)
    ]
    currency = f"\n{sweep.currency}" if sweep.currency else ""
    headings = (_axis_name(axis), "Pick", "Area\nm²", "Even\nm²", f"Cost{currency}", "Time\nh", "Spare\nbar")
    page.table(headings, rows, 2)
    _left_out(page, len(sweep.cells), len(cells), "cells")


def _thinned(items: Sequence[SweepCell]) -> Sequence[SweepCell]:
    """At most `MOST_ROWS` cells, evenly taken, ends included."""
    if len(items) <= MOST_ROWS:
        return items
    step = (len(items) - 1) / (MOST_ROWS - 1)
    return [items[round(k * step)] for k in range(MOST_ROWS)]


def _left_out(page: Page, total: int, shown: int, what: str, where: str = "--json and --csv hold all") -> None:
    if shown < total:
        page.line(f"  {shown} of {total} {what} shown; {where}.")


def _map_rows(page: Page, sweep: Sweep) -> None:
    """One row per value of the first axis: the range of the objective over the second, and where designs exist."""
    first, second = sweep.axes
    page.heading(f"By {first.field}, over {second.field}")
    rows = []
    groups = [[cell for cell in sweep.cells if cell.at[0] == value] for value in first.values]
    for value, cells in list(zip(first.values, groups, strict=True))[:MOST_ROWS]:
        solved = [cell for cell in cells if cell.status == "optimal" and cell.objective is not None]
        best = [cell.objective for cell in solved if cell.objective is not None]
        at = sorted(cell.at[1] for cell in solved)
        rows.append(
            (
                _value(first, value),
                f"{_value(second, at[0])} to {_value(second, at[-1])}" if at else "no design",
                significant(min(best), 4) if best else NONE,
                significant(max(best), 4) if best else NONE,
                str(len({cell.picks for cell in solved})),
            )
        )
    unit = sweep.currency if sweep.kind == "cost" else "m²"
    page.table((_axis_name(first), f"{second.field} with a design, {second.unit}".rstrip(", "),
                f"Least\n{unit}", f"Most\n{unit}", "Picks"), rows, 2)  # fmt: skip
    _left_out(page, len(first.values), len(rows), "rows")


def _changes(page: Page, sweep: Sweep) -> None:
    page.heading(f"Where the pick changes ({len(sweep.changes)} times)")
    rows = [_change_row(sweep, change) for change in sweep.changes[:MOST_CHANGES]]
    headings = ["Field", "Changes between", "To"]
    if len(sweep.axes) > 1:
        headings.insert(2, "At")
    page.table(headings, rows, len(headings))
    _left_out(page, len(sweep.changes), len(rows), "changes", "--json holds all")


def _change_row(sweep: Sweep, change: Change) -> list[str]:
    axis = next(axis for axis in sweep.axes if axis.field == change.axis)
    low, high = (_value(axis, value) for value in change.between)
    row = [change.axis, f"{low} and {high} {axis.unit}".rstrip()]
    others = [other for other in sweep.axes if other is not axis]
    if others:
        row.append(
            ", ".join(f"{o.field} {_value(o, v)} {o.unit}".rstrip() for o, v in zip(others, change.others, strict=True))
        )
    row.append(_difference(change.before, change.after))
    return row


def _difference(before: Sequence[Pick], after: Sequence[Pick]) -> str:
    """What is bought after a change, only the stages that differ."""
    if not after:
        return "no design"
    old = {pick.stage: pick for pick in before}
    return bought([pick for pick in after if old.get(pick.stage) != pick]) if before else bought(after)


def _reasons(page: Page, sweep: Sweep) -> None:
    reasons: dict[str, list[SweepCell]] = {}
    for cell in sweep.cells:
        if cell.reason and cell.status in ("infeasible", "invalid"):
            reasons.setdefault(cell.reason, []).append(cell)
    if not reasons:
        return
    page.heading("Cells without a design")
    texts = []
    for reason, cells in list(reasons.items())[:12]:
        where = " ".join(
            f"{axis.field} {_value(axis, value)} {axis.unit}".rstrip()
            for axis, value in zip(sweep.axes, cells[0].at, strict=True)
        )
        more = f" (and {len(cells) - 1} more)" if len(cells) > 1 else ""
        texts.append(f"{where}{more}: {reason}")
    if len(reasons) > len(texts):
        texts.append(f"{len(reasons) - len(texts)} more reasons; --json and --csv hold all")
    page.items(texts)
