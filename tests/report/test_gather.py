"""What a report gathers agrees with the design it is about."""

from __future__ import annotations

import re
import shutil
from pathlib import Path

import numpy as np
import pytest

import trainopt
from trainopt.report.course_figure import course_figure
from trainopt.report.curve_sections import course_section
from trainopt.report.gather import now
from trainopt.report.json import report_document
from trainopt.train.results import StageDesign

ROOT = Path(__file__).parents[2]
SCENARIOS = ("harvest", "harvest-cost", "redundant-guard")


@pytest.fixture(scope="module")
def dossiers() -> dict[str, trainopt.Dossier]:
    return {name: trainopt.gather(trainopt.load_case(ROOT / "scenarios" / f"{name}.yaml")) for name in SCENARIOS}


def stages(dossier: trainopt.Dossier) -> list[StageDesign]:
    return [stage for block in dossier.design.blocks for stage in block.stages]


@pytest.mark.parametrize("name", SCENARIOS)
def test_the_derated_course_ends_at_the_design_s_pressures(dossiers: dict[str, trainopt.Dossier], name: str) -> None:
    """The march's end and the design's closed form: two ways to the same number."""
    dossier = dossiers[name]
    derated = {course.block: course for course in dossier.courses if course.derated}
    for block in dossier.design.blocks:
        course = derated[block.block]
        assert course.lot == block.worst_lot
        assert course.time[-1] == pytest.approx(block.time)
        for (stage, pressures), shown in zip(course.stages, block.stages, strict=True):
            assert stage == shown.stage
            assert pressures[-1] == pytest.approx(shown.pressure, rel=1e-9)
        assert course.total[-1] == pytest.approx(block.pressure.limit - block.pressure.spare, rel=1e-9)


@pytest.mark.parametrize("name", SCENARIOS)
def test_no_lot_s_course_passes_the_limit(dossiers: dict[str, trainopt.Dossier], name: str) -> None:
    for course in dossiers[name].courses:
        assert course.total.max() <= course.limit * (1.0 + 1e-9)
        assert np.all(np.diff(course.total) >= -1e-12)


@pytest.mark.parametrize("name", SCENARIOS)
def test_stage_curves_carry_the_design_s_loadings(dossiers: dict[str, trainopt.Dossier], name: str) -> None:
    dossier = dossiers[name]
    for curve, stage in zip(dossier.stage_curves, stages(dossier), strict=True):
        assert (curve.stage, curve.curve.medium, curve.loading) == (stage.stage, stage.medium, stage.loading)
        assert curve.design_loading == pytest.approx(dossier.volume * dossier.safety_factor / stage.area)
        assert curve.cap is not None
        assert curve.design_loading <= curve.cap * (1.0 + 1e-9)
        assert curve.band is not None
        loading, low, high = curve.band
        fitted = dict(curve.lots)[curve.worst_lot].resistance(loading)
        assert np.all(low <= high)
        assert np.mean((low <= fitted) & (fitted <= high)) > 0.8


@pytest.mark.parametrize("name", SCENARIOS)
def test_the_batch_itself_is_among_the_other_volumes(dossiers: dict[str, trainopt.Dossier], name: str) -> None:
    dossier = dossiers[name]
    (own,) = [point for point in dossier.volumes if point.volume == pytest.approx(dossier.volume)]
    assert dossier.design.objective is not None
    assert own.objective == pytest.approx(dossier.design.objective.value, rel=1e-9)
    best = [point.objective for point in dossier.volumes if point.objective is not None]
    assert best == sorted(best)
    assert all(p.even_split >= p.objective - 1e-9 for p in dossier.volumes if p.even_split and p.objective)


@pytest.mark.parametrize("name", SCENARIOS)
def test_parts_add_up(dossiers: dict[str, trainopt.Dossier], name: str) -> None:
    dossier = dossiers[name]
    assert dossier.area_parts is not None
    assert sum(part.area for part in dossier.area_parts.parts) == pytest.approx(dossier.design.area)
    assert sum(part.cost for part in dossier.area_parts.parts) == pytest.approx(dossier.design.cost)


def test_the_date_can_be_fixed(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("SOURCE_DATE_EPOCH", "0")
    assert now() == "1970-01-01T00:00:00+00:00"
    monkeypatch.delenv("SOURCE_DATE_EPOCH")
    assert re.fullmatch(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d\+00:00", now())


@pytest.mark.parametrize("kind", [".html", ".xlsx", ".json"])
def test_bytes_repeat_from_the_files_on(kind: str, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("SOURCE_DATE_EPOCH", "1767323045")
    case = trainopt.load_case(ROOT / "scenarios" / "redundant-guard.yaml")
    assert trainopt.report_bytes(trainopt.gather(case), kind) == trainopt.report_bytes(trainopt.gather(case), kind)


HELD = """\
extends: harvest.yaml
scenario: guard at constant pressure
blocks: [{block: guard, operation: constant-pressure, pressure: 0.8 bar}]
"""

SKIPPED = """\
extends: harvest.yaml
scenario: nothing asks for the guard
blocks: [{block: guard, stages: [{stage: membrane, optional: true}]}]
"""


def changed_demo(folder: Path, text: str) -> trainopt.Case:
    for part in ("models", "scenarios"):
        shutil.copytree(ROOT / part, folder / part)
    path = folder / "scenarios" / "changed.yaml"
    path.write_text(text, encoding="utf-8")
    return trainopt.load_case(path)


def test_the_flow_falls_where_the_pressure_is_held(tmp_path: Path) -> None:
    dossier = trainopt.gather(changed_demo(tmp_path, HELD))
    for course in dossier.courses:
        passed = np.trapezoid(course.flow, course.time)
        assert passed == pytest.approx(dossier.volume, rel=1e-4)  # the area below the flow is the batch
        assert course.flow_falls == (course.block == "guard")
        if course.block == "guard":
            assert np.all(np.diff(course.flow) < 0.0)
    documents = report_document(dossier)["courses"]
    assert [entry["flow_L_per_h"] for entry in documents] == [course.flow.tolist() for course in dossier.courses]

    panels = course_figure(dossier.courses).axes
    assert [axes.get_ylabel() for axes in panels] == ["Pressure, bar", "Pressure, bar", "Flow, L/h"]
    drawn = [tuple(line.get_ydata()) for line in panels[-1].lines]
    assert sorted(drawn) == sorted(tuple(course.flow) for course in dossier.courses if course.block == "guard")
    section = course_section(dossier, "bar")
    assert section is not None
    (picture,), (table,) = section.pictures, section.tables
    assert "the flow falls" in picture.caption
    names = [column.name for column in table.columns]
    starts, ends = (names.index(f"Flow at the {end}") for end in ("start", "end"))
    for course, row in zip(dossier.courses, table.rows, strict=True):
        assert (row[starts], row[ends]) == (course.flow[0], course.flow[-1])


def test_no_flow_is_drawn_where_it_is_constant(dossiers: dict[str, trainopt.Dossier]) -> None:
    panels = course_figure(dossiers["harvest"].courses).axes
    assert [axes.get_ylabel() for axes in panels] == ["Pressure, bar", "Pressure, bar"]


def test_a_block_that_is_not_used_has_no_course(tmp_path: Path) -> None:
    dossier = trainopt.gather(changed_demo(tmp_path, SKIPPED))
    assert [block.block for block in dossier.design.blocks if not block.stages] == ["guard"]
    assert {course.block for course in dossier.courses} == {"clarification"}
