"""Objects from files: values in canonical units, warnings, checks of several paths, positions for other rooms."""

from __future__ import annotations

import hashlib
from pathlib import Path

import pytest

from tests.files.broken_cases import (
    CASE,
    CASE_FILE,
    CATALOG,
    CATALOG_FILE,
    OAT,
    OAT_FILE,
    RYE_FILE,
    SOUND,
    write_workspace,
)
from trainopt.bench.columns import DIMENSIONS
from trainopt.curves.check import check as check_with_runs
from trainopt.curves.laws import LAWS
from trainopt.errors import InputError
from trainopt.files import (
    BlockSpec,
    CurveSpec,
    Limits,
    Medium,
    MediumChoice,
    ReliabilityBasis,
    Scenario,
    StageSpec,
    check,
    load_case,
    load_medium,
    load_workspace,
)
from trainopt.files import medium as medium_schema

ROOT = Path(__file__).parents[2]


def test_values_are_canonical(tmp_path: Path) -> None:
    case = load_case(write_workspace(tmp_path))
    scenario, (block,) = case.scenario, case.scenario.blocks
    assert (scenario.batch.volume, scenario.batch.time, scenario.batch.temperature) == (500.0, 6.0, 18.0)
    assert (block.pressure, block.static, block.line, block.setup) == (2.0, 0.05, 2e-5, 0.5)
    assert block.pump is not None
    assert (block.pump.min_flow, block.pump.max_flow) == (50.0, 1200.0)
    assert block.stages[0].media == (MediumChoice(medium="oat"),)
    assert block.stages[0].count == (1, 30)
    assert block.stages[1].media == (MediumChoice(medium="rye", after=("oat",)),)
    rye, oat = case.media["rye"], case.media["oat"]
    assert rye.curve.runs[0].area == pytest.approx(0.0023)
    assert (rye.curve.runs[0].hold_up, rye.curve.runs[0].tare) == (0.012, 0.005)
    assert rye.curve.runs[0].file == (tmp_path / "models/bench/rye-a.csv").resolve()
    assert oat.curve.parameters == {"R0": 0.0008, "k": 0.012}
    assert oat.flush is not None
    assert oat.flush.volume == 100.0
    assert (rye.lots, oat.lots) == (("a", "b"), ("a", "b"))
    assert case.workspace.catalog.modules["oat-11"].price == 940.0
    assert case.workspace.catalog.holders["rack-10"].modules == ("oat-11", "rye-05")


def test_coefficients_and_other_units(tmp_path: Path) -> None:
    scenario = write_workspace(tmp_path)
    head, tail = OAT[: OAT.index("  law:")], OAT[OAT.index("  tested:") :]
    numbers = "  law: quadratic\n  coefficients: [0.01 psi/LMH, 1e-5 bar/LMH/(L/m2), -1e-8 bar/LMH/(L/m2)^2]\n"
    (tmp_path / OAT_FILE).write_text(head + numbers + tail.replace("2 bar", "30 psi"))
    oat = load_case(scenario).media["oat"]
    assert oat.curve.coefficients == pytest.approx((0.0006894757293168361, 1e-5, -1e-8))
    assert oat.limits.differential_pressure == pytest.approx(2.0684, rel=1e-4)


def test_a_reliability_basis(tmp_path: Path) -> None:
    scenario = write_workspace(tmp_path)
    scenario.write_text(CASE.replace("basis: worst-lot", "basis: {reliability: 0.95, samples: 200, seed: 7}"))
    assert load_case(scenario).scenario.basis == ReliabilityBasis(reliability=0.95, samples=200, seed=7)


def test_names_that_look_like_numbers_stay_as_written(tmp_path: Path) -> None:
    scenario = write_workspace(tmp_path)
    (tmp_path / RYE_FILE).write_text((tmp_path / RYE_FILE).read_text().replace("lot: a", "lot: 007"))
    assert load_case(scenario).media["rye"].curve.runs[0].lot == "007"


def test_objects_can_be_built_in_python_from_canonical_floats() -> None:
    stage = StageSpec(stage="one", media=(MediumChoice(medium="oat"),))
    block = BlockSpec(block="b", pressure=2.0, stages=(stage,))
    assert (block.pressure, block.static) == (2.0, 0.0)
    curve = CurveSpec(
        law="cake", parameters={"R0": 1e-3, "k": 0.01}, tested=medium_schema.Tested(loading=100.0, flux=150.0)
    )
    medium = Medium(medium="oat", curve=curve, limits=Limits(flux=200.0))
    assert medium.source.problem(("curve",), "x").file == "(built in Python)"
    with pytest.raises(ValueError, match="above 0 bar"):
        BlockSpec(block="b", pressure=-2.0, stages=(stage,))


def test_objects_do_not_change_and_know_no_other_keys() -> None:
    limits = Limits(flux=200.0)
    with pytest.raises(ValueError, match="frozen"):
        limits.flux = 100.0  # type: ignore[misc]
    with pytest.raises(ValueError, match="Extra inputs"):
        Limits(fluxx=200.0)  # type: ignore[call-arg]


def test_laws_and_column_roles_are_those_of_the_other_rooms() -> None:
    assert {name: law.parameters for name, law in LAWS.items()} == medium_schema.LAWS
    assert set(medium_schema.POLYNOMIALS) == {name for name, law in LAWS.items() if law.polynomial}
    assert set(medium_schema.COLUMN_ROLES) == set(DIMENSIONS)


def test_every_problem_of_every_file_at_once(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    scenario = write_workspace(tmp_path)
    (tmp_path / OAT_FILE).write_text(OAT.replace("scale_up: 1.0", "scale_up: 0").replace("k: 0.012 m2/L", "k: 0.012"))
    (tmp_path / CATALOG_FILE).write_text(CATALOG.replace("slots: 10", "slots: 0").replace("area: 0.5 m2", "area: 0.5"))
    scenario.write_text(CASE.replace("time: 6 h", "time: 6").replace("media: [oat]", "media: [oats]"))
    with pytest.raises(InputError) as raised:
        load_case(scenario)
    places = [(p.file, p.line) for p in raised.value.problems]
    assert places == sorted([(CATALOG_FILE, 11), (CATALOG_FILE, 17), (OAT_FILE, 7), (OAT_FILE, 21), (CASE_FILE, 4)])
    assert str(raised.value).startswith(
        "models/catalog.yaml:11: module 'rye-05': area: 0.5 has no unit; expected an area"
    )


def test_paths_are_shown_as_a_user_would_type_them(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    scenario = write_workspace(tmp_path)
    (tmp_path / "elsewhere").mkdir()
    monkeypatch.chdir(tmp_path / "elsewhere")
    source = load_case(scenario).scenario.source
    assert source.shown == str(scenario)
    monkeypatch.chdir(tmp_path / "scenarios")
    assert load_case("case.yaml").scenario.source.shown == "case.yaml"


def test_a_source_places_fields_for_other_rooms(tmp_path: Path) -> None:
    rye = load_case(write_workspace(tmp_path)).media["rye"]
    assert rye.source.line("curve", "runs", 1, "lot") == 21
    assert rye.source.line("curve", "runs", 1, "hold_up") == 20  # not written: the run itself
    assert rye.source.words("curve", "runs", 1, "lot") == "run 2: lot"
    assert str(rye.source.at(("curve", "runs", 1), "is short")).endswith("rye.yaml:20: run 2: is short")
    assert rye.source.problem(("curve",), "x").line == 2


def test_inputs_name_every_file_with_its_hash(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    inputs = load_case(write_workspace(tmp_path)).inputs()
    assert list(inputs) == sorted(
        [CASE_FILE, CATALOG_FILE, OAT_FILE, RYE_FILE, "models/bench/rye-a.csv", "models/bench/rye-b.csv"]
    )
    for name, digest in inputs.items():
        assert digest == f"sha256:{hashlib.sha256(Path(name).read_bytes()).hexdigest()}"


WARNED = [
    (CASE_FILE, "safety_factor: 1.5\n", "", "no safety_factor"),
    (RYE_FILE, "lot: b", "lot: c", "medium 'oat': lot c not run on it"),
]


@pytest.mark.parametrize(("file", "old", "new", "words"), WARNED)
def test_warnings(tmp_path: Path, file: str, old: str, new: str, words: str) -> None:
    scenario = write_workspace(tmp_path)
    path = tmp_path / file
    path.write_text(path.read_text().replace(old, new))
    warnings = load_case(scenario).warnings
    assert [words in warning.text for warning in warnings].count(True) == 1
    assert check([tmp_path]) == ((), warnings)


def test_setups_side_by_side_each_leave_time_to_filter(tmp_path: Path) -> None:
    path = write_workspace(tmp_path)
    side_by_side = CASE.replace("schedule: sequential", "schedule: side-by-side")
    second = "  - {block: polishing, pressure: 1 bar, setup: 5.9 h, stages: [{stage: last, media: [rye]}]}\ncosts:"
    fits = side_by_side.replace("costs:", second)
    path.write_text(fits)
    assert not any("leaves no time" in problem.text for problem in check([path])[0])
    path.write_text(fits.replace("5.9 h", "6 h"))
    line = fits.splitlines().index(second.splitlines()[0]) + 1
    (found,) = [p for p in check([path])[0] if "leaves no time" in p.text]
    assert (found.line, found.text) == (
        line,
        "block 'polishing': setup: 6 h leaves no time to filter; expected less than 6 h",
    )


def test_names_may_all_look_like_numbers(tmp_path: Path) -> None:
    write_workspace(tmp_path)
    for name in SOUND:
        path = tmp_path / name
        path.write_text(path.read_text().replace("oat-11", "11").replace("oat", "007").replace("polish", "1.10"))
    (tmp_path / OAT_FILE).rename(tmp_path / "models/media/007.yaml")
    assert check([tmp_path]) == ((), ())
    case = tmp_path / CASE_FILE
    case.write_text(case.read_text().replace("media: [007]", "media: [007, 007]"))
    catalog = tmp_path / "models/catalog.yaml"
    catalog.write_text(catalog.read_text().replace("modules: [11,", "modules: [12,"))
    texts = [problem.text for problem in check([tmp_path])[0]]
    assert any("unknown module '12'" in text for text in texts)
    assert any("'007' stands twice" in text for text in texts)


def test_a_medium_file_under_another_suffix_is_told(tmp_path: Path) -> None:
    write_workspace(tmp_path)
    (tmp_path / OAT_FILE).rename(tmp_path / "models/media/oat.yml")
    assert any("expected it to be named oat.yaml" in problem.text for problem in check([tmp_path])[0])


@pytest.mark.parametrize("name", ["x" * 400, "x" * 400 + ".csv", "x" * 400 + ".yaml", "a\0b"])
def test_a_path_that_no_file_system_takes_is_a_problem(name: str) -> None:
    assert check([name])[0]
    with pytest.raises(InputError):
        load_case(name)


def test_lots_are_no_matter_on_the_pooled_basis(tmp_path: Path) -> None:
    scenario = write_workspace(tmp_path)
    (tmp_path / RYE_FILE).write_text((tmp_path / RYE_FILE).read_text().replace("lot: b", "lot: c"))
    scenario.write_text(CASE.replace("basis: worst-lot", "basis: pooled"))
    assert load_case(scenario).warnings == ()


def test_what_nothing_uses_is_a_warning(tmp_path: Path) -> None:
    scenario = write_workspace(tmp_path)
    spare = OAT.replace("medium: oat", "medium: spare")
    (tmp_path / "models/media/spare.yaml").write_text(spare)
    assert [w.text for w in load_workspace(tmp_path).warnings] == [
        "medium 'spare': no module of the catalog is built from it"
    ]
    (tmp_path / CATALOG_FILE).write_text(
        CATALOG.replace("holders:", "  spare-1: {medium: spare, area: 1 m2, price: 1, max_count: 2}\nholders:")
    )
    assert load_case(scenario).warnings == ()
    problems, warnings = check([tmp_path])
    assert problems == ()
    assert [w.text for w in warnings] == [
        "module 'spare-1': no scenario uses medium 'spare'",
        "medium 'spare': no scenario uses it",
    ]


def test_check_takes_any_kind_of_path(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    write_workspace(tmp_path)
    (tmp_path / OAT_FILE).write_text(OAT.replace("scale_up: 1.0", "scale_up: 0"))
    (tmp_path / "models/bench/rye-b.csv").write_text("t [min],V [mL],P [psi]\n0,0,0\n5,x,1\n")
    oat, run = f"{OAT_FILE}:21", "models/bench/rye-b.csv:"
    for path in (".", "models", "scenarios", CASE_FILE, CATALOG_FILE):
        problems = [str(problem) for problem in check_with_runs([path])[0]]
        assert any(text.startswith(oat) for text in problems), path
        assert any(text.startswith(run) for text in problems), path
        assert [str(p) for p in check([path])[0]] == [text for text in problems if text.startswith(oat)]
    assert [p.file for p in check_with_runs([OAT_FILE])[0]] == [OAT_FILE]
    assert {p.file for p in check_with_runs(["models/bench/rye-b.csv"])[0]} == {"models/bench/rye-b.csv"}
    assert check_with_runs(["models/bench/rye-a.csv"])[0] == ()
    both = check_with_runs([OAT_FILE, "models/bench/rye-b.csv"])[0]
    assert {p.file for p in both} == {OAT_FILE, "models/bench/rye-b.csv"}


def test_a_broken_run_is_told_with_the_faults_of_its_medium(tmp_path: Path) -> None:
    write_workspace(tmp_path)
    rye = tmp_path / RYE_FILE
    rye.write_text(rye.read_text().replace("../bench/rye-b.csv", "../bench/rye-c.csv"))
    (tmp_path / "models/bench/rye-a.csv").write_text("t [min],V [mL],P [psi]\n0,0,0\n5,x,1\n")
    names = {Path(problem.file).name for problem in check_with_runs([tmp_path])[0]}
    assert names == {"rye.yaml", "rye-a.csv"}


def test_a_tare_is_of_what_the_run_records(tmp_path: Path) -> None:
    write_workspace(tmp_path)
    rye = tmp_path / RYE_FILE
    rye.write_text(rye.read_text().replace("tare: 5 mL", "tare: 5 g"))
    (problem,) = check_with_runs([tmp_path])[0]
    assert problem.line == 19
    assert problem.text == "run 1: tare: is a mass, but the run records volume; expected the tare as a volume"


def test_check_says_what_it_cannot_look_at(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    Path("lost.yaml").write_text("scenario: x\n")
    Path("notes.docx").write_text("x")
    Path("run.csv").write_text("x")
    paths = ["lost.yaml", "missing.yaml", "missing.csv", "notes.docx", "run.csv", "."]
    texts = [str(p) for p in check(paths)[0]]
    assert any("lost.yaml:1: 'batch' is missing" in text for text in texts)
    assert "missing.yaml: no such file; expected a YAML file" in texts
    assert "missing.csv: no such file; expected a bench run" in texts
    assert any(text.startswith("notes.docx: is no .yaml") for text in texts)
    assert any("holds 'models/'" in text for text in texts)


def test_a_run_that_no_medium_names(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    write_workspace(tmp_path)
    Path("models/bench/other.csv").write_text("x\n")
    (problem,) = check(["models/bench/other.csv"])[0]
    assert "no medium names this run" in problem.text


def test_files_that_are_not_there(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="no such file"):
        load_medium(tmp_path / "oat.yaml")
    with pytest.raises(InputError, match="is a folder"):
        load_medium(tmp_path)
    with pytest.raises(InputError, match="holds 'models/'"):
        load_workspace(tmp_path)
    (tmp_path / "models").mkdir()
    with pytest.raises(InputError, match=r"catalog\.yaml: no such file") as raised:
        load_workspace(tmp_path)
    assert "holds no medium file" in str(raised.value)


@pytest.mark.parametrize("path", sorted((ROOT / "scenarios").glob("*.yaml")), ids=lambda path: path.stem)
def test_the_demo_is_sound(path: Path) -> None:
    case = load_case(path)
    assert case.warnings == ()
    assert set(case.media) <= set(case.workspace.media)


def test_the_order_of_entries_does_not_matter(tmp_path: Path) -> None:
    scenario = write_workspace(tmp_path)
    before = load_case(scenario)
    text = CATALOG[CATALOG.index("  oat-11:") : CATALOG.index("  rye-05:")]
    (tmp_path / CATALOG_FILE).write_text(CATALOG.replace(text, "").replace("holders:", text + "holders:"))
    after = load_case(scenario)
    assert after.workspace.catalog.model_dump() == before.workspace.catalog.model_dump()
    assert list(after.workspace.media) == list(before.workspace.media)


def test_a_scenario_knows_its_stages(tmp_path: Path) -> None:
    scenario: Scenario = load_case(write_workspace(tmp_path)).scenario
    assert [stage.stage for stage in scenario.stages] == ["primary", "polish"]
