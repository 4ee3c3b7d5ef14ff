"""Shared owned holders beside other types for the same module: the choice by rule is said."""

from __future__ import annotations

from pathlib import Path

import pytest

import trainopt

ROOT = Path(__file__).parents[2]


@pytest.mark.parametrize(("owned", "said"), [(0, False), (2, True)])
def test_a_choice_of_shared_holders_by_rule_is_said(owned: int, said: bool, tmp_path: Path) -> None:
    (tmp_path / "models").mkdir()
    for part in ("media", "bench"):
        (tmp_path / "models" / part).symlink_to(ROOT / "models" / part)
    catalog = (ROOT / "models" / "catalog.yaml").read_text(encoding="utf-8")
    assert "rack-10: {" in catalog
    changed = catalog.replace("rack-10: {", f"rack-10: {{owned: {owned}, ")
    (tmp_path / "models" / "catalog.yaml").write_text(changed, encoding="utf-8")
    (tmp_path / "scenarios").symlink_to(ROOT / "scenarios")
    design = trainopt.design(trainopt.load_case(tmp_path / "scenarios" / "harvest.yaml"))
    assert any(notice.code == "owned-holder-choice" for notice in design.warnings) is said
