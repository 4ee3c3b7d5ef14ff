"""A planned run, the sheet it is recorded in, and the sheet read back."""

from __future__ import annotations

import io
from pathlib import Path

import numpy as np
import openpyxl
import pytest

from tests.bench.lab import Lab, reduced
from trainopt.bench.sheet import RunPlan, plan_lines, plan_run, sheet_bytes
from trainopt.errors import InputError

PLAN = plan_run(0.0023, 150.0, 150.0)


def test_settings_by_hand() -> None:
    """600 LMH on 23 cm² is 23 mL/min and 100 L/m² on it 230 mL (common practice, no source)."""
    assert PLAN.flush_flow / 60.0 * 1000.0 == pytest.approx(23.0)
    assert PLAN.flush_volume * 1000.0 == pytest.approx(230.0)
    assert PLAN.flush_time * 60.0 == pytest.approx(10.0)
    assert PLAN.flow / 60.0 * 1000.0 == pytest.approx(5.75)
    assert PLAN.hold_up * 1000.0 == pytest.approx(11.5)
    assert PLAN.duration == pytest.approx(1.0 + 0.0115 / 0.345)
    samples = sum(PLAN.sampled)
    assert PLAN.feed_volume == pytest.approx(0.345 + 0.0115 + 0.01 * samples)
    assert np.diff(PLAN.times).max() <= 2.0 / 60.0 + 1e-12
    assert 10.0 <= np.diff(np.array(PLAN.times)[list(PLAN.sampled)]).max() * 60.0 <= 15.0
    assert PLAN.times[-1] >= PLAN.duration > PLAN.times[-2]


def test_the_plan_in_words() -> None:
    lines = plan_lines(PLAN)
    assert "Run: pump at 5.75 mL/min, expected 62 min" in lines
    assert "Pressure endpoint: 20 psi differential" in lines
    assert any("relief" in line for line in lines)
    assert all(len(line) < 130 for line in lines)


@pytest.mark.parametrize("duration", [0.05, 0.5, 1.0, 3.0, 8.0, 30.0, 200.0])
def test_readings_are_neither_few_nor_many(duration: float) -> None:
    plan = plan_run(0.0023, 100.0, 100.0 * duration)
    assert len(plan.times) <= 92
    assert len(plan.times) >= 7
    assert plan.sampled[-1]


def filled_csv(plan: RunPlan, lab: Lab) -> str:
    lines = sheet_bytes(plan, "csv").decode().splitlines()
    top = next(i for i, line in enumerate(lines) if line.startswith("time (min)"))
    rows = lab.table()[1:]
    for i, row in enumerate(rows):
        cells = lines[top + 1 + i].split(",")
        assert float(cells[0]) == pytest.approx(float(row[0]))
        lines[top + 1 + i] = ",".join([cells[0], row[1], row[2], "", row[3], cells[5]])
    return "\n".join(lines) + "\n"


def test_filled_sheets_are_read_without_any_setting(tmp_path: Path) -> None:
    """The run is stopped at 50 min: the rows left empty say nothing and spoil nothing."""
    step = PLAN.times[1]
    count = int(50.0 / 60.0 / step) + 1
    lab = Lab(n=count, reach=150.0 * step * (count - 1))
    (tmp_path / "run.csv").write_text(filled_csv(PLAN, lab))
    run = reduced(tmp_path / "run.csv")
    np.testing.assert_allclose(run.loading, lab.rows["loading"], atol=1e-6)
    np.testing.assert_allclose(run.resistance, lab.rows["resistance"], rtol=1e-5)

    book = openpyxl.load_workbook(io.BytesIO(sheet_bytes(PLAN, "xlsx")))
    page = book["run"]
    top = next(row[0].row for row in page.iter_rows() if row[0].value == "time (min)")
    for i, row in enumerate(lab.table()[1:]):
        for column, cell in ((2, row[1]), (3, row[2]), (5, row[3])):
            page.cell(top + 1 + i, column).value = float(cell) if cell else None
    book.save(tmp_path / "run.xlsx")
    again = reduced(tmp_path / "run.xlsx")
    np.testing.assert_allclose(again.resistance, run.resistance, rtol=1e-12)
    np.testing.assert_array_equal(again.turbidity, run.turbidity)


def test_an_empty_sheet_is_an_error_not_a_run(tmp_path: Path) -> None:
    (tmp_path / "run.xlsx").write_bytes(sheet_bytes(PLAN, "xlsx"))
    with pytest.raises(InputError, match="holds 0 complete readings"):
        reduced(tmp_path / "run.xlsx")


def test_settings_must_be_positive() -> None:
    with pytest.raises(InputError, match="--flux: expected a value above zero"):
        plan_run(0.0023, 0.0, 100.0)
