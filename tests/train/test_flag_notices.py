"""A curve's flags as a design says them: once per medium and code, with no run and no reading left out of account."""

from __future__ import annotations

import shutil
from pathlib import Path

import trainopt
from trainopt.bench.run import Flag
from trainopt.train.flag_notices import flag_notices

ROOT = Path(__file__).parents[2]


def said(*flags: Flag) -> list[tuple[str, str]]:
    return [(notice.code, notice.text) for notice in flag_notices("rye", flags)]


def test_one_flag_is_said_as_it_stands() -> None:
    assert said(Flag("averaged", "a.csv", None, "averaged")) == [("averaged", "rye, a.csv: averaged")]
    assert said(Flag("pump-slip", "a.csv", (3, 9), "slips")) == [("pump-slip", "rye, a.csv: rows 3 to 9: slips")]
    assert said(Flag("outlier", "a.csv", (3, 3), "off")) == [("outlier", "rye, a.csv: row 3: off")]
    assert said(Flag("law-not-unique", "rye", None, "cake fits too")) == [("law-not-unique", "rye: cake fits too")]
    assert said(Flag("turbidity-limit-changed", "", None, "changed")) == [("turbidity-limit-changed", "rye: changed")]
    assert said() == []


def test_the_same_words_of_several_runs_are_said_once() -> None:
    flags = [Flag("assumed", f"{lot}.csv", None, "decimal comma") for lot in "abc"]
    other = Flag("averaged", "b.csv", None, "averaged")
    assert said(flags[0], other, *flags[1:]) == [
        ("assumed", "rye, a.csv, b.csv, c.csv: decimal comma"),
        ("averaged", "rye, b.csv: averaged"),
    ]


def test_other_numbers_in_the_same_words_name_their_runs() -> None:
    flags = (
        Flag("assumed", "a.csv", None, "5 mL at the start taken as the tare"),
        Flag("assumed", "b.csv", None, "7.5 mL at the start taken as the tare"),
    )
    assert said(*flags) == [("assumed", "rye, a.csv: 5 mL at the start taken as the tare; likewise b.csv")]
    rows = [Flag("outlier", "a.csv", (row, row), f"is +{row}% off") for row in range(10, 20)]
    ((_, text),) = said(*rows)
    assert text == (
        "rye, a.csv: row 10: is +10% off; likewise a.csv row 11, a.csv row 12, a.csv row 13, a.csv row 14, "
        "a.csv row 15, a.csv row 16 and 3 more"
    )


def test_other_words_of_one_code_share_its_line() -> None:
    flags = (
        Flag("assumed", "a.csv", None, "decimal comma"),
        Flag("assumed", "a.csv", None, "5 mL taken as the tare"),
        Flag("assumed", "b.csv", None, "decimal comma"),
        Flag("assumed", "b.csv", None, "6 mL taken as the tare"),
    )
    assert said(*flags) == [
        ("assumed", "rye: a.csv, b.csv: decimal comma; a.csv: 5 mL taken as the tare; likewise b.csv")
    ]


def test_a_design_says_each_code_of_a_medium_once_and_curve_every_flag(tmp_path: Path) -> None:
    for part in ("models", "scenarios"):
        shutil.copytree(ROOT / part, tmp_path / part)
    runs = sorted((tmp_path / "models" / "bench").glob("oat-coarse-*.csv"))
    assert len(runs) > 1
    for run in runs:  # a title above the header is taken as one, and said
        run.write_text("bench log\n" + run.read_text(encoding="utf-8"), encoding="utf-8")
    case = trainopt.load_case(tmp_path / "scenarios" / "harvest.yaml")
    flags = trainopt.fit_curve(case.workspace.media["oat-coarse"]).flags
    assert [flag.run for flag in flags if flag.code == "assumed"] == [run.name for run in runs]
    told = [notice for notice in trainopt.design(case).warnings if notice.code == "assumed"]
    assert [notice.text for notice in told] == [
        f"oat-coarse, {', '.join(run.name for run in runs)}: 1 line above the header taken as a title"
    ]
