"""The demo workspace: its designs as recorded, why the even split loses in one scenario and not in the other.

When a change moves a recorded value, the commit that does so says why.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import trainopt
from trainopt.files import Case
from trainopt.optimize.design import Prepared, prepare
from trainopt.optimize.index import index_problem
from trainopt.optimize.model import build_model
from trainopt.optimize.solve import compile_model
from trainopt.train.build import prune

ROOT = Path(__file__).parents[1]

PICKS = {
    "harvest": [
        ("primary", "oat-coarse", "oat-coarse-09", 14),
        ("secondary", "rye-fine", "rye-fine-09", 16),
        ("membrane", "quill-02", "quill-02-06", 9),
    ],
    "redundant-guard": [
        ("first-guard", "quill-02", "quill-02-06", 9),
        ("second-guard", "quill-02", "quill-02-06", 9),
    ],
    "harvest-cost": [
        ("primary", "oat-coarse", "oat-coarse-09", 13),
        ("secondary", "rye-fine", "rye-fine-09", 14),
        ("membrane", "quill-02", "quill-02-06", 8),
    ],
}


@pytest.fixture(scope="module")
def prepared() -> dict[str, Prepared]:
    return {name: prepare(case(name)) for name in PICKS}


@pytest.fixture(scope="module")
def designs(prepared: dict[str, Prepared]) -> dict[str, trainopt.Design]:
    return {name: trainopt.design(prepared[name]) for name in PICKS}


def case(name: str) -> Case:
    return trainopt.load_case(ROOT / "scenarios" / f"{name}.yaml")


@pytest.mark.parametrize("name", list(PICKS))
def test_recorded_picks(designs: dict[str, trainopt.Design], name: str) -> None:
    design = designs[name]
    assert design.status == "optimal"
    assert [(p.stage, p.medium, p.module, p.count) for p in design.picks] == PICKS[name]
    assert design.objective is not None
    assert design.objective.gap == 0.0


def test_recorded_objectives(designs: dict[str, trainopt.Design]) -> None:
    values = {name: design.objective.value for name, design in designs.items() if design.objective is not None}
    assert values["harvest"] == pytest.approx(32.4, abs=1e-9)
    assert values["redundant-guard"] == pytest.approx(10.8, abs=1e-9)
    assert values["harvest-cost"] == pytest.approx(32951.5, abs=1.0)  # the guard's hours hang on the fit


def test_recorded_model(prepared: dict[str, Prepared]) -> None:
    """Options that pruning leaves per stage and medium, and the size of the model that the solver gets."""
    index = index_problem(prune(prepared["harvest"].problem))
    left = {
        (stage.name, candidate.medium): len(candidate.options)
        for block in index.problem.blocks
        for stage in block.stages
        for candidate in stage.candidates
    }
    assert left == {
        ("primary", "oat-coarse"): 29,
        ("primary", "oat-open"): 19,
        ("secondary", "rye-fine"): 27,
        ("secondary", "rye-dense"): 24,
        ("membrane", "quill-02"): 9,
    }
    rows, columns = compile_model(build_model(index)).A.shape
    assert (rows, columns) == (17, 118)  # 108 options, 2 times, 8 arcs of the routes


def test_the_even_split_loses_in_the_harvest(designs: dict[str, trainopt.Design]) -> None:
    """Because the two stages foul differently: secondary turns pressure into less area than primary can use it for."""
    design = designs["harvest"]
    assert design.even_split is not None
    assert design.even_split.area == pytest.approx(36.3, abs=1e-9)
    assert design.saving is not None
    assert design.saving.area == pytest.approx(3.9, abs=1e-9)
    assert design.saving.cost > 0.0
    ours = {stage.stage: stage for block in design.blocks for stage in block.stages}
    theirs = {stage.stage: stage for block in design.even_split.blocks for stage in block.stages}
    assert ours["secondary"].pressure > 1.2 * theirs["secondary"].pressure
    assert ours["primary"].pressure < ours["secondary"].pressure
    assert design.blocks[1].time < 0.75 * design.even_split.blocks[1].time  # the guard needs little of the time


def test_pressure_decides_in_the_harvest(designs: dict[str, trainopt.Design]) -> None:
    limits = {stage.limited_by for block in designs["harvest"].blocks for stage in block.stages}
    assert limits == {"pressure"}


def test_the_even_split_loses_nothing_where_the_stages_foul_alike(designs: dict[str, trainopt.Design]) -> None:
    design = designs["redundant-guard"]
    assert design.even_split is not None
    assert design.even_split.area == design.area
    assert design.saving is not None
    assert design.saving.area == 0.0
    first, second = design.blocks[0].stages
    assert first.pressure == pytest.approx(second.pressure)


def test_cost_decides_in_the_third(designs: dict[str, trainopt.Design]) -> None:
    design = designs["harvest-cost"]
    assert design.objective is not None
    assert design.objective.kind == "cost"
    assert design.saving is not None
    assert design.saving.cost > 0.0
    assert design.cost == pytest.approx(design.cost_parts.total if design.cost_parts else None)


def test_the_picks_against_every_pair_of_sizes(prepared: dict[str, Prepared]) -> None:
    """The harvest's least area by plain search over all sizes, from R(l) alone: D = L·R(L), worst lot, times added."""
    problem = prepared["harvest"].problem
    volume, factor = problem.volume, problem.safety_factor
    clarification, guard = problem.blocks

    def sizes(block: int, stage: int, medium: str) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        place = problem.blocks[block].stages[stage]
        candidate = next(c for c in place.candidates if c.medium == medium)
        catalog = {"oat-coarse": [(0.9, 40), (0.3, 12)], "oat-open": [(0.9, 40)], "rye-fine": [(0.9, 40), (0.3, 12)],
                   "rye-dense": [(0.9, 40)], "quill-02": [(0.6, 16), (0.2, 16)]}[medium]  # fmt: skip
        areas = np.array(sorted({round(a * n, 9) for a, most in catalog for n in range(1, most + 1)}))
        loading = factor * volume / areas
        areas, loading = areas[loading <= candidate.loading_cap], loading[loading <= candidate.loading_cap]
        demand = np.array([loading * curve.resistance(loading) for curve in candidate.curves])
        return areas, demand, volume / (areas * candidate.flux_limit)

    def time(block: int, demand: np.ndarray, shortest: np.ndarray) -> np.ndarray:
        b = problem.blocks[block]
        return np.maximum((demand.max(axis=0) + b.line * volume) / (b.pressure - b.static), shortest)

    best = np.inf
    left = problem.time - clarification.setup - guard.setup
    for one, two in (("oat-coarse", "rye-fine"), ("oat-coarse", "rye-dense"), ("oat-open", "rye-dense")):
        a1, d1, s1 = sizes(0, 0, one)
        a2, d2, s2 = sizes(0, 1, two)
        a3, d3, s3 = sizes(1, 0, "quill-02")
        t12 = time(0, d1[:, :, None] + d2[:, None, :], np.maximum(s1[:, None], s2[None, :]))
        total = t12[:, :, None] + time(1, d3, s3)[None, None, :]
        area = a1[:, None, None] + a2[None, :, None] + a3[None, None, :]
        best = min(best, float(area[total <= left].min(initial=np.inf)))
    assert best == pytest.approx(32.4, abs=1e-9)


def test_five_lines_in_a_notebook(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)
    lines = """
import trainopt
case = trainopt.load_case("scenarios/harvest.yaml")
design = trainopt.design(case)
print(design.area, [(s.stage, s.module, s.count) for b in design.blocks for s in b.stages])
print(design.even_split.area, design.saving.area_percent)
"""
    names: dict[str, object] = {}
    exec(lines, names)
    assert names["design"].area == pytest.approx(32.4)  # type: ignore[attr-defined]


@pytest.mark.parametrize(
    "path", sorted((ROOT / "models").rglob("*.*")) + sorted((ROOT / "scenarios").glob("*")), ids=lambda p: p.name
)
def test_every_file_says_that_it_is_invented(path: Path) -> None:
    assert "invented" in path.read_text(encoding="utf-8").lower()


def test_the_demo_is_as_large_as_promised() -> None:
    workspace = trainopt.load_workspace(ROOT)
    assert len(workspace.catalog.modules) >= 5
    assert workspace.catalog.holders
    harvest = case("harvest").scenario
    stages = [stage for block in harvest.blocks for stage in block.stages]
    assert (len(harvest.blocks), len(stages)) == (2, 3)
    assert sum(len(stage.media) >= 2 for stage in stages) == 2
    runs = [run for medium in workspace.media.values() for run in medium.curve.runs]
    assert {run.lot for run in runs} == {"a", "b", "c"}
    flags = {flag.code for medium in workspace.media.values() for flag in trainopt.fit_curve(medium).flags}
    assert "pump-slip" in flags


def test_the_reliable_harvest_needs_less_than_the_blanket_factor(designs: dict[str, trainopt.Design]) -> None:
    """19 of 20 batches against a factor of 1.5 for every one: the samples say what the factor is worth."""
    reliable, blanket = trainopt.design(case("harvest-reliable")), designs["harvest"]
    sure = reliable.reliability
    assert sure is not None
    assert reliable.area is not None
    assert blanket.area is not None
    assert 23.0 < reliable.area < 26.0 < blanket.area
    assert sure.in_sample >= 0.95
    assert sure.equivalent_safety_factor == pytest.approx(1.2, abs=0.05)
