"""The stages' curves with their design points, and the course of pressure over the batch."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

from trainopt.report.content import Column, Picture, Section, Table, pressure_column, words
from trainopt.report.course_figure import course_figure
from trainopt.report.dossier import Dossier
from trainopt.report.numbers import PRESSURE_UNITS, Pressure, significant
from trainopt.report.stage_figure import StageCurve, stage_figure

if TYPE_CHECKING:
    from trainopt.curves.curve import Curve


def curves_section(dossier: Dossier, units: str) -> Section | None:
    """Each stage's curve with its readings, tested range and design point."""
    if not dossier.stage_curves:
        return None
    pictures = tuple(_curve_picture(number, stage, units) for number, stage in enumerate(dossier.stage_curves, start=1))
    rows = tuple(
        (
            stage.stage,
            stage.curve.medium,
            stage.curve.law,
            stage.curve.tested_loading,
            stage.curve.tested_flux,
            stage.curve.turbidity_loading,
            stage.loading,
            stage.design_loading,
        )
        for stage in dossier.stage_curves
    )
    columns = (
        words("Stage"),
        words("Medium"),
        words("Law"),
        Column("Tested loading", "L/m²", "significant"),
        Column("Tested flux", "LMH", "significant"),
        Column("Turbidity limit met at", "L/m²", "significant"),
        Column("Loading", "L/m²", "significant"),
        Column("Loading, derated", "L/m²", "significant"),
    )
    tables = (
        Table("Curves and what the design asks of them", columns, rows),
        parameter_table(_used_curves(dossier)),
    )
    return Section("curves", "Curves of the stages", few_of_many(dossier), pictures, tables)


def few_of_many(dossier: Dossier) -> tuple[str, ...]:
    """That the lots shown are a few of the sampled ones, where they are."""
    if not dossier.sampled:
        return ()
    return (
        f"Of {dossier.sampled} sampled lots a few are shown that the design holds for: the worst of each block, and "
        "some that ask for less.",
    )


def parameter_table(curves: Mapping[str, Curve]) -> Table:
    """Parameters of curves by medium, with their standard errors."""
    rows = tuple(
        (medium, name, estimate.unit, estimate.value, estimate.se)
        for medium, curve in sorted(curves.items())
        for name, estimate in curve.parameters.items()
    )
    columns = (
        words("Medium"),
        words("Parameter"),
        words("Unit"),
        Column("Value", "", "significant"),
        Column("Standard error", "", "significant"),
    )
    return Table("Parameters of the curves", columns, rows)


def _used_curves(dossier: Dossier) -> dict[str, Curve]:
    return {stage.curve.medium: stage.curve for stage in dossier.stage_curves}


def _curve_picture(number: int, stage: StageCurve, units: str) -> Picture:
    return Picture(
        f"curve-{number}",
        lambda: stage_figure(stage, units),
        f"Stage {stage.stage}: marks are bench readings, lines the curve as each lot meets it in the plant. "
        "The band holds nine of ten refits of the runs; where they agree it hides behind the line. "
        "The dot is the batch at the installed area, the star the same derated by the safety factor; both "
        "belong inside the shade.",
        f"Resistance of {stage.curve.medium} against loading, law {stage.curve.law}, tested to "
        f"{significant(stage.curve.tested_loading)} L/m²; the design loads it to "
        f"{significant(stage.loading)} L/m², {significant(stage.design_loading)} L/m² derated.",
    )


def course_section(dossier: Dossier, units: str) -> Section | None:
    """Pressure at the pump against time, by lot."""
    if not dossier.courses:
        return None
    pressure = Pressure(units)
    rows = tuple(
        (
            course.block,
            course.lot,
            "derated" if course.derated else "installed",
            float(course.time[-1]),
            float(course.flow[0]),
            float(course.flow[-1]),
            float(course.total[0]) * PRESSURE_UNITS[units],
            float(course.total[-1]) * PRESSURE_UNITS[units],
            course.limit * PRESSURE_UNITS[units],
        )
        for course in dossier.courses
    )
    highest = max(dossier.courses, key=lambda course: float(course.total.max()) / course.limit)
    falling = any(course.flow_falls for course in dossier.courses)
    falls = " Where the pressure is held, the flow falls as the stages foul: it stands below." if falling else ""
    picture = Picture(
        "course",
        lambda: course_figure(dossier.courses, units),
        "Filled: what each stage takes with the worst lot at the installed area, as gauges would show it. "
        "Lines: the pump's pressure for each lot, and for the worst lot with all areas "
        "derated by the safety factor." + falls,
        f"Pressure against time for each block; the highest is {pressure.text(float(highest.total.max()))} "
        f"of {pressure.text(highest.limit)} in {highest.block}, lot {highest.lot}.",
    )
    columns = (
        words("Block"),
        words("Lot"),
        words("Area"),
        Column("Time", "h"),
        Column("Flow at the start", "L/h", "significant"),
        Column("Flow at the end", "L/h", "significant"),
        pressure_column("Pressure at the start", units),
        pressure_column("Pressure at the end", units),
        pressure_column("Limit", units),
    )
    table = Table("Pressure at the pump and flow, by lot", columns, rows)
    return Section("course", "Pressure over the batch", few_of_many(dossier), (picture,), (table,))
