"""Sweeps and courses as CSV: one line per cell or reading, units in the headings, an empty field where a number
does not exist."""

from __future__ import annotations

import csv
import io
import math
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from trainopt.study.results import Sweep
    from trainopt.study.simulate import Simulation


def sweep_csv(sweep: Sweep) -> str:
    """A sweep, one line per cell."""
    stages = list(dict.fromkeys(pick.stage for cell in sweep.cells for pick in cell.picks))
    heading = [axis.field + (f" ({axis.unit})" if axis.unit else "") for axis in sweep.axes]
    heading += ["status", "objective", "area (m2)", "cost", "time (h)"]
    heading += [f"{block} spare (bar)" for block in sweep.blocks]
    for stage in stages:
        heading += [f"{stage} module", f"{stage} count"]
    heading += ["even split area (m2)", "even split cost", "reason"]
    rows = []
    for cell in sweep.cells:
        bought = {pick.stage: pick for pick in cell.picks}
        row: list[object] = [axis.shown(value) for axis, value in zip(sweep.axes, cell.at, strict=True)]
        row += [cell.status, cell.objective, cell.area, cell.cost, cell.time]
        row += list(cell.spare) or [None] * len(sweep.blocks)
        for stage in stages:
            pick = bought.get(stage)
            row += ["", None] if pick is None else [pick.module, pick.count]
        even = cell.even_split
        row += [None, None] if even is None else [even.area, even.cost]
        rows.append([*row, cell.reason])
    return _written(heading, rows)


def simulate_csv(simulation: Simulation) -> str:
    """The course of a batch: one line per block, lot and reading; stages of other blocks stay empty."""
    stages = [name for block in simulation.blocks for name in block.lots[0].course.stages]
    heading = ["block", "lot", "time (h)", "volume (L)", "flow (L/h)", "total (bar)", "line (bar)"]
    for stage in stages:
        heading += [
            f"{stage} pressure (bar)",
            f"{stage} loading (L/m2)",
            f"{stage} flux (LMH)",
            f"{stage} turbidity (NTU)",
        ]
    rows: list[list[object]] = []
    for block in simulation.blocks:
        for lot in block.lots:
            course = lot.course
            for k in range(len(course.time)):
                row: list[object] = [block.block, lot.lot, course.time[k], course.volume[k], course.flow[k]]
                row += [course.total[k], course.line[k]]
                for stage in stages:
                    if stage not in course.stages:
                        row += [None] * 4
                        continue
                    s = course.stages.index(stage)
                    row += [course.pressure[s, k], course.loading[s, k], course.flux[s, k]]
                    row.append(lot.turbidity[stage][k] if stage in lot.turbidity else None)
                rows.append(row)
    return _written(heading, rows)


def _written(heading: Sequence[str], rows: Iterable[Sequence[object]]) -> str:
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(heading)
    writer.writerows([_field(value) for value in row] for row in rows)
    return out.getvalue()


def _field(value: object) -> object:
    if value is None or isinstance(value, str | int):
        return "" if value is None else value
    number = float(value)  # type: ignore[arg-type]
    return repr(number) if math.isfinite(number) else ""
