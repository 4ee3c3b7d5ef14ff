"""Numbers of a case changed by the dotted path of their field."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tests.files.broken_cases import CASE, CATALOG, CATALOG_FILE, write_workspace
from trainopt.errors import InputError
from trainopt.files import Case, load_case
from trainopt.files.change import field_dimension, find_field, set_field

PSI = 0.06894757293168361


@pytest.fixture
def case(tmp_path: Path) -> Case:
    return load_case(write_workspace(tmp_path))


PATHS = [
    ("batch.volume", "1000 L", 1000.0, "volume"),
    ("batch.time", "90 min", 1.5, "time"),
    ("batch.temperature", "68 degF", 20.0, "temperature"),
    ("safety_factor", "1.25", 1.25, ""),
    ("costs.hour", "90", 90.0, ""),
    ("costs.product.titer", "2 mg/mL", 2.0, "titer"),
    ("feed_variability.fouling", "0.3", 0.3, ""),
    ("blocks.clarification.pressure", "25 psi", 25 * PSI, "pressure"),
    ("clarification.pressure", "25 psi", 25 * PSI, "pressure"),
    ("clarification.line", "1e-5 bar/(L/h)", 1e-5, "line"),
    ("clarification.pump.max_flow", "10 L/min", 600.0, "flow"),
    ("blocks.clarification.setup", "1 h", 1.0, "time"),
    ("stages.primary.limits.loading", "120 L/m2", 120.0, "loading"),
    ("stages.polish.limits.flux", "100 LMH", 100.0, "flux"),
    ("installed.primary.count", "7", 7, "count"),
    ("media.oat.limits.turbidity", "5 NTU", 5.0, "turbidity"),
    ("media.oat.limits.turbidity", "5", 5.0, "turbidity"),
    ("media.oat.scale_up", "0.9", 0.9, ""),
    ("media.oat.flush.volume", "50 L/m2", 50.0, "loading"),
    ("media.oat.variability.fouling", "0.4", 0.4, ""),
    ("media.rye.variability.fouling", "0.4", 0.4, ""),
    ("media.oat.curve.parameters.k", "0.02 m2/L", 0.02, "per_loading"),
    ("media.oat.curve.tested.flux", "150 LMH", 150.0, "flux"),
    ("media.oat.curve.lots.b.fouling", "1.5", 1.5, ""),
    ("modules.oat-11.price", "1000", 1000.0, ""),
    ("modules.rye-05.area", "0.4 m2", 0.4, "area"),
    ("modules.rye-05.max_count", "12", 12, "count"),
    ("holders.rack-10.batches", "100", 100, "count"),
]


@pytest.mark.parametrize(("path", "text", "value", "dimension"), PATHS)
def test_a_number_changes_and_nothing_else(case: Case, path: str, text: str, value: float, dimension: str) -> None:
    field = find_field(case, path)
    before = field.value(case)
    changed = set_field(case, path, text)
    assert field.value(changed) == pytest.approx(value, rel=1e-12)
    assert field.value(case) == before
    assert field_dimension(case, path) == dimension
    assert changed != case
    again = set_field(changed, path, before) if before is not None else None
    if again is not None:
        assert again.scenario == case.scenario
        assert again.workspace.catalog == case.workspace.catalog
        assert again.workspace.media == case.workspace.media
    assert changed.scenario.source is case.scenario.source
    assert [m.source for m in changed.media.values()] == [m.source for m in case.media.values()]


def test_a_canonical_number_does_as_well(case: Case) -> None:
    assert set_field(case, "batch.volume", 750.0).scenario.batch.volume == 750.0
    assert set_field(case, "installed.primary.count", 7.0).scenario.installed["primary"].count == 7  # type: ignore[index]


def test_units_of_fields(case: Case) -> None:
    assert find_field(case, "clarification.pressure").unit == "bar"
    assert find_field(case, "safety_factor").unit == ""


REFUSED = [
    ("batch.volum", "1 L", "unknown 'volum'; did you mean 'volume'?"),
    ("bath.volume", "1 L", "unknown 'bath'; did you mean 'batch'?"),
    ("clarificaton.pressure", "1 bar", "did you mean 'clarification'?"),
    ("blocks.clarificaton.pressure", "1 bar", "did you mean 'clarification'?"),
    ("stages.primry.limits.flux", "1 LMH", "unknown stage 'primry'; did you mean 'primary'?"),
    ("stages.primary.limits.fluxx", "1 LMH", "did you mean 'flux'?"),
    ("media.oats.scale_up", "1", "unknown medium 'oats'; did you mean 'oat'?"),
    ("media.oat.curve.parameters.kk", "1 m2/L", "unknown parameter 'kk'"),
    ("modules.oat-12.price", "1", "did you mean 'oat-11'?"),
    ("batch", "1 L", "is not a number; expected one of its fields: volume, time, temperature"),
    ("batch.volume.more", "1 L", "expected the path to end at 'volume'"),
    ("objective", "1", "expected the path of a numeric field"),
    ("scenario", "1", "expected the path of a numeric field"),
    ("blocks", "1", "is not a number"),
    ("blocks.clarification", "1", "is not a number"),
    ("stages", "1", "unknown stage ''"),
    ("", "1", "unknown ''"),
    ("basis.reliability", "0.9", "stands as 'worst-lot' in the file; expected a mapping with 'reliability'"),
    ("batch.volume", "1000", "1000 has no unit; expected a volume"),
    ("batch.volume", "0 L", "outside its range; expected a value above 0 L"),
    ("safety_factor", "2 L", "'2 L' is not a bare number"),
    ("safety_factor", "0.5", "expected a number at least 1"),
    ("installed.primary.count", "2.5", "expected a whole number"),
    ("clarification.static", "2.5 bar", "leaves no pressure"),
    ("clarification.pump.min_flow", "2000 L/h", "above max_flow"),
]


@pytest.mark.parametrize(("path", "text", "words"), REFUSED)
def test_refused_with_the_nearest_name_or_the_range(case: Case, path: str, text: str, words: str) -> None:
    with pytest.raises(InputError) as raised:
        set_field(case, path, text)
    (problem,) = raised.value.problems
    assert words in problem.text
    assert f"field '{path}'" in problem.text
    assert problem.file.endswith("case.yaml")


PIECES = sorted(
    {part for path, *_ in PATHS for part in path.split(".")} | {"", "x", "runs", "coefficients", "after", "0"}
)


@settings(max_examples=300, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    st.lists(st.sampled_from(PIECES), max_size=6).map(".".join) | st.text(max_size=20),
    st.floats() | st.text(max_size=8),
)
def test_any_path_and_value_is_a_change_or_an_input_error(case: Case, path: str, value: float | str) -> None:
    try:
        changed = set_field(case, path, value)
    except InputError as error:
        assert error.problems
    else:
        assert find_field(changed, path).value(changed) is not None


def test_a_field_that_is_not_given_yet(tmp_path: Path) -> None:
    scenario = write_workspace(tmp_path)
    pump = CASE[CASE.index("    pump:") : CASE.index("    stages:")]
    product = CASE[CASE.index("  product:") : CASE.index("feed_variability:")]
    scenario.write_text(CASE.replace(pump, "").replace(product, ""))
    case = load_case(scenario)
    changed = set_field(case, "clarification.pump.max_flow", "900 L/h")
    assert changed.scenario.blocks[0].pump is not None
    assert changed.scenario.blocks[0].pump.max_flow == 900.0
    assert find_field(case, "clarification.pump.max_flow").value(case) is None
    with pytest.raises(InputError, match="'product' is not given"):
        set_field(case, "costs.product.titer", "1 g/L")


def test_a_reliability_basis(tmp_path: Path) -> None:
    scenario = write_workspace(tmp_path)
    scenario.write_text(CASE.replace("basis: worst-lot", "basis: {reliability: 0.95}"))
    changed = set_field(load_case(scenario), "basis.reliability", "0.9")
    assert changed.scenario.basis.reliability == 0.9  # type: ignore[union-attr]


def test_a_limit_of_a_stage_whose_medium_serves_elsewhere(tmp_path: Path) -> None:
    scenario = write_workspace(tmp_path)
    scenario.write_text(CASE.replace("after: [oat]", "after: [oat]\n          - oat"))
    case = load_case(scenario)
    with pytest.raises(InputError, match=r"serves stage 'polish' too; expected media\.oat\.limits"):
        set_field(case, "stages.primary.limits.flux", "100 LMH")
    assert set_field(case, "media.oat.limits.flux", "100 LMH").media["oat"].limits.flux == 100.0


def test_names_with_dots(tmp_path: Path) -> None:
    scenario = write_workspace(tmp_path)
    (tmp_path / CATALOG_FILE).write_text(CATALOG.replace("oat-11", "oat-1.1"))
    scenario.write_text(CASE.replace("oat-11", "oat-1.1").replace("block: clarification", "block: clear.1"))
    case = load_case(scenario)
    assert set_field(case, "modules.oat-1.1.price", "5").workspace.catalog.modules["oat-1.1"].price == 5.0
    assert set_field(case, "clear.1.pressure", "1 bar").scenario.blocks[0].pressure == 1.0


def test_checks_between_files_are_made_again(tmp_path: Path) -> None:
    scenario = write_workspace(tmp_path)
    scenario.write_text(CASE.replace("operation: constant-flow", "operation: constant-pressure"))
    case = load_case(scenario)
    with pytest.raises(InputError, match="rated for 2 bar"):
        set_field(case, "clarification.pressure", "2.6 bar")


def test_warnings_follow_the_change(tmp_path: Path) -> None:
    scenario = write_workspace(tmp_path)
    scenario.write_text(CASE.replace("safety_factor: 1.5\n", ""))
    case = load_case(scenario)
    assert len(case.warnings) == 1
    assert len(set_field(case, "batch.volume", "10 L").warnings) == 1
    assert set_field(case, "safety_factor", "1.5").warnings == ()


def test_runs_stay_as_they_were(case: Case) -> None:
    changed = set_field(case, "media.rye.limits.loading", "80 L/m2")
    assert changed.media["rye"].curve is case.media["rye"].curve
