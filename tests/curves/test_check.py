"""What `check` finds: every problem that would stop a design, each at its own file and line."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.files.sound import RYE, RYE_FILE, write_workspace
from trainopt.curves.check import check
from trainopt.errors import InputError
from trainopt.files import load_case
from trainopt.optimize.design import prepare


def test_a_column_that_a_run_lacks_is_told_at_the_line_of_the_medium(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    scenario = write_workspace(tmp_path)
    text = RYE.replace("volume: V [mL]", "volume: V [ml]").replace("pressure: P [psi]", "pressure: P1 [psi]")
    (tmp_path / RYE_FILE).write_text(text, encoding="utf-8")
    lines = {
        mark: number for number, line in enumerate(text.splitlines(), 1) for mark in ("[ml]", "P1") if mark in line
    }
    have = "models/bench/rye-a.csv; expected one of 't [min]', 'V [mL]', 'P [psi]', 'NTU'"
    told = [
        f"{RYE_FILE}:{lines['[ml]']}: run 1: columns.volume: no column is headed 'V [ml]' in {have}",
        f"{RYE_FILE}:{lines['P1']}: run 1: columns.pressure: no column is headed 'P1 [psi]' in {have}",
    ]
    assert [str(problem) for problem in check([tmp_path])[0]] == told
    with pytest.raises(InputError) as raised:
        prepare(load_case(scenario))
    assert [str(problem) for problem in raised.value.problems] == told
