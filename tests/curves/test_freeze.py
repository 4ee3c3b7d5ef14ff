"""A frozen curve gives the same designs, carries its uncertainty, and tells when its runs have changed."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

import trainopt
from trainopt.curves.curve import Curve
from trainopt.curves.freeze import frozen_text
from trainopt.errors import InputError
from trainopt.files import Medium

ROOT = Path(__file__).parents[2]


@pytest.fixture
def workspace(tmp_path: Path) -> Path:
    """A copy of the demo workspace."""
    for folder in ("models", "scenarios"):
        shutil.copytree(ROOT / folder, tmp_path / folder)
    return tmp_path


def freeze(path: Path) -> tuple[Medium, Curve]:
    medium = trainopt.load_medium(path)
    curve = trainopt.fit_curve(medium)
    text = frozen_text(medium, curve, path)
    path.write_text(text, encoding="utf-8")
    return medium, curve


@pytest.mark.parametrize("scenario", ["harvest", "harvest-cost"])
def test_the_demo_is_designed_the_same_from_frozen_curves(workspace: Path, scenario: str) -> None:
    path = workspace / "scenarios" / f"{scenario}.yaml"
    before = trainopt.design(trainopt.load_case(path))
    for medium in (workspace / "models" / "media").glob("*.yaml"):
        freeze(medium)
    after = trainopt.design(trainopt.load_case(path))
    assert after.picks == before.picks
    assert after.area == before.area
    assert after.cost == before.cost
    assert [block.time for block in after.blocks] == [block.time for block in before.blocks]
    assert [block.demand for block in after.blocks] == [block.demand for block in before.blocks]


def test_everything_that_counts_survives(workspace: Path) -> None:
    for path in sorted((workspace / "models" / "media").glob("*.yaml")):
        medium, fitted = freeze(path)
        again = trainopt.load_medium(path)
        frozen = trainopt.fit_curve(again)
        assert frozen.source == "parameters"
        for name in ("law", "parameters", "lots", "tested_loading", "tested_flux", "tested_temperature"):
            assert getattr(frozen, name) == getattr(fitted, name), name
        assert frozen.turbidity_loading == fitted.turbidity_loading
        assert frozen.flags == ()
        assert (again.limits, again.flush, again.scale_up) == (medium.limits, medium.flush, medium.scale_up)


@pytest.mark.parametrize("law", ["cubic", "hermia", "cake-complete"])
def test_every_shape_of_parameters(workspace: Path, law: str) -> None:
    path = workspace / "models" / "media" / "rye-fine.yaml"
    path.write_text(path.read_text().replace("law: auto", f"law: {law}"))
    _, fitted = freeze(path)
    frozen = trainopt.fit_curve(trainopt.load_medium(path))
    assert {name: one.value for name, one in frozen.parameters.items()} == {
        name: one.value for name, one in fitted.parameters.items()
    }


def test_a_run_that_changed_or_went_is_said(workspace: Path) -> None:
    path = workspace / "models" / "media" / "rye-fine.yaml"
    freeze(path)
    runs = workspace / "models" / "bench"
    with (runs / "rye-fine-a.csv").open("a") as file:
        file.write("# a note\n")
    (runs / "rye-fine-b.csv").unlink()
    flags = trainopt.fit_curve(trainopt.load_medium(path)).flags
    assert [(flag.code, flag.run) for flag in flags] == [
        ("run-changed", "rye-fine-a.csv"),
        ("run-missing", "rye-fine-b.csv"),
    ]


def test_a_changed_turbidity_limit_is_said(workspace: Path) -> None:
    path = workspace / "models" / "media" / "oat-open.yaml"
    freeze(path)
    text = path.read_text()
    assert "limits: {turbidity: 20," in text
    path.write_text(text.replace("limits: {turbidity: 20,", "limits: {turbidity: 15,"))
    [flag] = trainopt.fit_curve(trainopt.load_medium(path)).flags
    assert flag.code == "turbidity-limit-changed"


def test_only_runs_can_be_frozen_and_only_as_yaml(workspace: Path) -> None:
    path = workspace / "models" / "media" / "rye-fine.yaml"
    medium, curve = freeze(path)
    with pytest.raises(InputError, match=r"expected a name that ends in \.yaml"):
        frozen_text(medium, curve, path.with_suffix(".txt"))
    again = trainopt.load_medium(path)
    with pytest.raises(InputError, match="is given by its parameters already"):
        frozen_text(again, trainopt.fit_curve(again), path)


def test_a_frozen_curve_answers_for_its_turbidity_limit(workspace: Path) -> None:
    for medium in (workspace / "models" / "media").glob("*.yaml"):
        freeze(medium)
    design = trainopt.design(trainopt.load_case(workspace / "scenarios" / "harvest.yaml"))
    assert "turbidity-not-tested" not in [notice.code for notice in design.warnings]
