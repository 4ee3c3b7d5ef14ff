"""Sweeps: every cell is what `design` gives, with workers, resumed and interrupted too; changes are where they
are said to be."""

from __future__ import annotations

import importlib
import json
import math
import os
import signal
import subprocess
import sys
import time
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import trainopt
from tests.study.trains import random_case
from trainopt.errors import InputError
from trainopt.files import ReliabilityBasis, set_field
from trainopt.optimize.levers import Levers
from trainopt.report.json import dumps
from trainopt.report.study_csv import sweep_csv
from trainopt.report.study_json import sweep_document
from trainopt.study import sweep as driver
from trainopt.study.results import Sweep, SweepCell
from trainopt.train.problem import DesignProblem
from trainopt.train.results import Reason

ROOT = Path(__file__).parents[2]


def assert_is_design(cell: SweepCell, design: trainopt.Design) -> None:
    assert cell.status == design.status
    assert cell.picks == design.picks
    if design.objective is None or design.area is None:
        assert cell.reason
        return
    assert cell.objective == pytest.approx(design.objective.value, rel=1e-9)
    assert cell.area == pytest.approx(design.area, rel=1e-12)
    assert cell.cost == pytest.approx(design.cost, rel=1e-9)
    assert cell.time == pytest.approx(design.time, rel=1e-9)
    even = design.even_split
    assert even is not None
    assert cell.even_split is not None
    assert cell.even_split.status == even.status
    if even.area is not None:
        assert cell.even_split.area == pytest.approx(even.area, rel=1e-12)
        assert cell.even_split.cost == pytest.approx(even.cost, rel=1e-9)
    for block, spare in zip(design.blocks, cell.spare, strict=True):
        if block.operation == "constant-flow":
            assert spare == pytest.approx(block.pressure.spare, abs=1e-9)


FIELDS = {
    "batch.volume": (200.0, 1800.0, "L"),
    "batch.time": (3.0, 15.0, "h"),
    "safety_factor": (1.0, 1.9, ""),
    "b0.pressure": (0.6, 2.5, "bar"),
    "b0.setup": (0.0, 1.0, "h"),
    "blocks.b0.line": (0.0, 0.0002, "bar/(L/h)"),
    "costs.hour": (0.0, 400.0, ""),
    "media.fine.limits.flux": (20.0, 200.0, "LMH"),
    "media.fine.scale_up": (0.8, 1.3, ""),
}


@settings(max_examples=125, deadline=None, derandomize=True)
@given(
    seed=st.integers(0, 10**6),
    fields=st.lists(st.sampled_from(sorted(FIELDS)), min_size=1, max_size=2, unique=True),
    ends=st.lists(st.floats(0.0, 1.0), min_size=4, max_size=4),
)
def test_every_cell_is_the_design(seed: int, fields: list[str], ends: list[float]):
    # 125 sweeps of four cells: lines of four values, or maps of two by two.
    case = random_case(seed)
    count = 4 if len(fields) == 1 else 2
    vary = []
    for k, name in enumerate(fields):
        low, high, unit = FIELDS[name]
        a, b = (low + (high - low) * round(part, 3) for part in sorted(ends[2 * k : 2 * k + 2]))
        b = b if b > a else a + 0.1 * (high - low)
        vary.append(f"{name}={a:.6g} {unit}..{b:.6g} {unit}/{count}")
    found = trainopt.sweep(case, vary, changes=False)
    assert len(found.cells) == 4
    assert found.complete
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(designer, "reasons", impossible)
        for cell in found.cells:
            at = case
            for axis, value in zip(found.axes, cell.at, strict=True):
                at = set_field(at, axis.field, value)
            assert_is_design(cell, trainopt.design(at))


designer = importlib.import_module("trainopt.optimize.design")  # its package offers a function of the same name


def impossible(problem: DesignProblem) -> tuple[Reason, ...]:
    """That no design exists, by the closed form; what each limit would have to be, the larger part of the work, is
    not asked for here."""
    levers = Levers(problem)
    return () if levers.possible(levers.setting) else (Reason("no design", {}),)


def test_changes_straddle_a_change_and_leave_none_out(harvest: trainopt.Case):
    found = trainopt.sweep(harvest, ["clarification.pressure=1.2 bar..1.6 bar/5"])
    assert found.changes
    for change in found.changes:
        low, high = change.between
        assert 0.0 < high - low <= 1e-3 * 0.4 * (1 + 1e-9)
        sides = [trainopt.design(set_field(harvest, change.axis, value)).picks for value in change.between]
        assert sides == [change.before, change.after]
        assert change.before != change.after
    # From cell to cell, the changes in between lead from one pick to the next.
    for one, other in zip(found.cells, found.cells[1:], strict=False):
        here = [c for c in found.changes if one.at[0] <= c.between[0] and c.between[1] <= other.at[0]]
        path = [one.picks, *(c.after for c in here)]
        assert [c.before for c in here] == path[:-1]
        assert path[-1] == other.picks


def test_changes_along_the_time_of_a_map(harvest: trainopt.Case):
    found = trainopt.sweep(harvest, ["batch.volume=1500 L, 2000 L", "batch.time=5 h..7 h/3"])
    assert {change.axis for change in found.changes} == {"batch.time"}
    assert {change.others for change in found.changes} == {(1500.0,), (2000.0,)}
    change = found.changes[-1]
    at = set_field(harvest, "batch.volume", change.others[0])
    sides = [trainopt.design(set_field(at, "batch.time", value)).picks for value in change.between]
    assert sides == [change.before, change.after]
    everywhere = trainopt.sweep(harvest, ["batch.volume=1950 L, 2000 L", "batch.time=6 h, 6.2 h"], changes=True)
    assert {change.axis for change in everywhere.changes} == {"batch.volume", "batch.time"}
    assert trainopt.sweep(harvest, ["batch.time=5 h..7 h/3"], changes=False).changes == ()


def test_a_value_that_the_files_refuse_is_a_cell_that_says_so(harvest: trainopt.Case):
    found = trainopt.sweep(harvest, ["clarification.static=0.05 bar, 1.5 bar"], changes=False)
    assert [cell.status for cell in found.cells] == ["optimal", "invalid"]
    assert "leaves no pressure" in found.cells[1].reason


def test_cells_beyond_every_option_say_which_stage_and_limit(harvest: trainopt.Case):
    (cell,) = trainopt.sweep(harvest, ["batch.volume=9000 L"]).cells
    assert cell.status == "infeasible"
    assert "stage 'primary'" in cell.reason
    assert "L/m2" in cell.reason


def test_a_reliability_basis_is_swept_cell_by_cell_like_design(harvest: trainopt.Case):
    scenario = harvest.scenario.model_copy(update={"basis": ReliabilityBasis(reliability=0.9, samples=20, seed=1)})
    scenario.__pydantic_private__ = harvest.scenario.__pydantic_private__
    case = replace(harvest, scenario=scenario)
    found = trainopt.sweep(case, ["batch.time=4 h, 6 h, 7 h", "basis.reliability=0.6, 0.9"], changes=False)
    assert len(found.cells) == 6
    for cell in found.cells:
        other = set_field(set_field(case, "batch.time", cell.at[0]), "basis.reliability", cell.at[1])
        assert_is_design(cell, trainopt.design(other))
    objectives = {cell.at: cell.objective for cell in found.cells}
    assert objectives[6.0, 0.6] < objectives[6.0, 0.9]  # type: ignore[operator]


def test_the_objective_can_be_another(harvest: trainopt.Case):
    found = trainopt.sweep(harvest, ["batch.volume=1000 L, 2000 L"], objective="cost", changes=False)
    assert found.kind == "cost"
    assert_is_design(found.cells[1], trainopt.design(harvest, objective="cost"))


def test_axes_that_make_no_sense(harvest: trainopt.Case):
    with pytest.raises(InputError, match="did you mean 'volume'"):
        trainopt.sweep(harvest, ["batch.volum=1 L, 2 L"])
    with pytest.raises(ValueError, match="varies twice"):
        trainopt.sweep(harvest, ["batch.volume=1 L, 2 L", "batch.volume=3 L, 4 L"])
    with pytest.raises(ValueError, match="nothing varies"):
        trainopt.sweep(harvest, [])


LINE = ["batch.volume=1000 L..2600 L/9", "batch.time=5 h..7 h/3"]


@pytest.fixture(scope="module")
def whole(harvest: trainopt.Case) -> Sweep:
    """The sweep over `LINE`, by one worker and never interrupted."""
    return trainopt.sweep(harvest, LINE)


def test_workers_change_nothing(harvest: trainopt.Case, whole: Sweep, monkeypatch: pytest.MonkeyPatch):
    monkeypatch.setattr(driver, "_TRIAL", -1.0)
    monkeypatch.setattr(driver, "_WORTH", -1.0)
    told = []
    shared = trainopt.sweep(harvest, LINE, workers=2, progress=lambda done, total: told.append((done, total)))
    assert (shared.cells, shared.changes) == (whole.cells, whole.changes)
    assert told[-1] == (9, 9)
    assert [done for done, _ in told] == list(range(1, 10))


class Stopped:
    """A progress that presses Ctrl-C after so many jobs."""

    def __init__(self, jobs: int) -> None:
        self.jobs = jobs

    def __call__(self, done: int, _total: int) -> None:
        if done >= self.jobs:
            raise KeyboardInterrupt


def test_ctrl_c_leaves_what_is_done(harvest: trainopt.Case, whole: Sweep, tmp_path: Path):
    journal = tmp_path / "sweep.journal"
    part = trainopt.sweep(harvest, LINE, journal=journal, progress=Stopped(4))
    assert not part.complete
    assert [cell.status == "not-computed" for cell in part.cells] == [False] * 12 + [True] * 15
    assert part.cells[:12] == whole.cells[:12]
    resumed = trainopt.sweep(harvest, LINE, journal=journal)
    assert resumed.complete
    assert (resumed.cells, resumed.changes) == (whole.cells, whole.changes)


def test_a_line_cut_short_is_done_again(harvest: trainopt.Case, tmp_path: Path):
    journal = tmp_path / "sweep.journal"
    whole = trainopt.sweep(harvest, LINE, journal=journal)
    data = journal.read_bytes()
    journal.write_bytes(data[: len(data) - 700])
    assert trainopt.sweep(harvest, LINE, journal=journal).cells == whole.cells
    assert sorted(journal.read_bytes().splitlines()) == sorted(data.splitlines())


def test_a_journal_of_another_sweep_is_refused(harvest: trainopt.Case, tmp_path: Path):
    journal = tmp_path / "sweep.journal"
    trainopt.sweep(harvest, ["batch.volume=1000 L"], journal=journal)
    with pytest.raises(InputError, match="belongs to another sweep"):
        trainopt.sweep(harvest, ["batch.volume=1001 L"], journal=journal)
    with pytest.raises(InputError, match="belongs to another sweep"):
        trainopt.sweep(set_field(harvest, "batch.time", 7.0), ["batch.volume=1000 L"], journal=journal)
    other = tmp_path / "notes.txt"
    other.write_text("batch 12: 2000 L\n")
    with pytest.raises(InputError, match="is not the journal of a sweep"):
        trainopt.sweep(harvest, ["batch.volume=1000 L"], journal=other)
    assert other.read_text() == "batch 12: 2000 L\n"


COMMAND = [sys.executable, "-m", "trainopt", "sweep", str(ROOT / "scenarios" / "harvest.yaml")]


def started(*arguments: str) -> subprocess.Popen[str]:
    return subprocess.Popen([*COMMAND, *arguments], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, cwd=ROOT)


def lines_reached(journal: Path, count: int, process: subprocess.Popen[str]) -> None:
    deadline = time.monotonic() + 30.0
    while process.poll() is None and time.monotonic() < deadline:
        if journal.exists() and journal.read_bytes().count(b"\n") > count:
            return
        time.sleep(0.005)
    raise AssertionError(f"the journal never reached {count} jobs: {process.communicate()}")


def test_resumed_after_a_kill_it_is_the_same_document(tmp_path: Path):
    vary = ["--vary", "batch.volume=800 L..2800 L/120", "--no-changes", "--json"]
    journal = tmp_path / "sweep.journal"
    first = started(*vary, "--resume", str(journal))
    lines_reached(journal, 10, first)
    first.kill()
    first.communicate()
    assert first.returncode == -signal.SIGKILL
    done = journal.read_bytes().count(b"\n") - 1
    assert 10 <= done < 120
    second = started(*vary, "--resume", str(journal))
    text, complaints = second.communicate(timeout=60)
    assert (second.returncode, complaints) == (0, "")
    assert journal.read_bytes().count(b"\n") == 121
    case = trainopt.load_case(ROOT / "scenarios" / "harvest.yaml")
    assert text == dumps(sweep_document(trainopt.sweep(case, [vary[1]], changes=False)))  # never interrupted
    document = json.loads(text)
    assert document["complete"] is True
    assert len(document["cells"]) == 120


@pytest.mark.skipif(os.name == "nt", reason="Ctrl-C is sent as a signal")
def test_ctrl_c_on_the_command_line_prints_what_is_done(tmp_path: Path):
    journal = tmp_path / "sweep.journal"
    process = started("--vary", "batch.volume=800 L..2800 L/400", "--json", "--resume", str(journal))
    lines_reached(journal, 5, process)
    process.send_signal(signal.SIGINT)
    text, complaints = process.communicate(timeout=60)
    document = json.loads(text)
    assert process.returncode == 130
    assert "--resume" in complaints
    assert "Traceback" not in complaints
    assert document["complete"] is False
    assert {"optimal", "not-computed"} <= {cell["status"] for cell in document["cells"]}


def test_the_document_is_the_contracts(harvest: trainopt.Case):
    found = trainopt.sweep(harvest, ["batch.volume=1900 L, 2000 L, 9000 L"])
    document = sweep_document(found)
    assert document["schema"] == "trainopt.sweep/1"
    assert document["axes"] == [{"field": "batch.volume", "unit": "L", "values": [1900.0, 2000.0, 9000.0]}]
    cell = document["cells"][1]
    wanted = {"at", "status", "objective", "area_m2", "cost", "time_h", "picks", "even_split"}
    assert wanted <= set(cell)
    assert cell["at"] == [2000.0]
    assert cell["picks"][0] == ["primary", "oat-coarse", "oat-coarse-09", cell["picks"][0][3]]
    assert set(cell["even_split"]) == {"status", "area_m2", "cost"}
    change = document["changes"][0]
    assert {"axis", "between", "from", "to"} <= set(change)
    assert document["cells"][2]["reason"]
    lines = sweep_csv(found).splitlines()
    assert len(lines) == 4
    assert lines[0].startswith("batch.volume (L),status,objective,area (m2)")
    assert math.isclose(float(lines[2].split(",")[3]), cell["area_m2"])


def test_a_map_is_drawn_and_told(harvest: trainopt.Case):
    from trainopt.report.picture import picture_bytes
    from trainopt.report.study_figures import sweep_figure
    from trainopt.report.study_sweep_text import sweep_text

    found: Sweep = trainopt.sweep(harvest, ["batch.volume=1000 L..4600 L/7", "batch.time=4 h..8 h/5"])
    text = sweep_text(found)
    assert max(map(len, text.splitlines())) <= 100
    assert "no design" in text
    figure = picture_bytes(sweep_figure(found), ".svg").decode()
    assert "no design" in figure
    assert "Installed area" in figure
    line = trainopt.sweep(harvest, ["batch.volume=1000 L..4600 L/7"], changes=False)
    assert max(map(len, sweep_text(line).splitlines())) <= 100
    assert "even split" in picture_bytes(sweep_figure(line), ".svg").decode()
