"""Tables for people: they fit, they align, they obey nothing that stands in a name."""

from __future__ import annotations

import re
from collections import Counter

import pytest

from tests.report import results
from trainopt.report.curve_text import curve_text
from trainopt.report.notices import grouped
from trainopt.report.numbers import (
    Pressure,
    aligned,
    duration,
    fixed,
    limit_words,
    money,
    percent,
    plain,
    significant,
    trimmed,
)
from trainopt.report.text import design_text, even_split_sentence, headline
from trainopt.train.results import EvenSplit, Notice, Objective, Saving

LONG = "a-very-long-name-" * 12
HOSTILE = "[bold red]x[/] \x1b[31m\x07 :smile: $x_1$ \u202eabc\nnext"


def wide(**changes: object) -> object:
    stages = [
        results.stage(f"{LONG}{i}", LONG, 10_000 + i, module=LONG, holders={LONG: 1000, "rack": 3}) for i in range(6)
    ]
    return results.design(blocks=(results.block(LONG, *stages), results.block("guard", *stages)), **changes)


@pytest.mark.parametrize("units", ["bar", "psi", "kPa"])
@pytest.mark.parametrize("width", [80, 100, 300])
def test_everything_fits(units: str, width: int) -> None:
    texts = [
        design_text(results.design(), units, width),
        design_text(results.infeasible(), units, width),
        curve_text(results.curve(), units, width),
        curve_text(results.curve(medium=LONG), units, width),
    ]
    for text in texts:
        assert max(len(line) for line in text.splitlines()) <= min(width, 100)
    huge = design_text(wide(scenario=LONG), units, width)  # type: ignore[arg-type]
    assert max(len(line) for line in huge.splitlines()) <= 100


@pytest.mark.parametrize("width", [10, 40, 60, 80])
def test_a_number_is_never_cut(width: int) -> None:
    def numbers(text: str) -> Counter[str]:
        return Counter(re.findall(r"(?<![\w-])[\d,.]+(?![\w-])", text))

    assert numbers(design_text(results.design(), "psi", width)) == numbers(design_text(results.design(), "psi"))
    assert numbers(curve_text(results.curve(), "psi", width)) == numbers(curve_text(results.curve(), "psi"))


def test_long_names_are_shown_whole() -> None:
    text = design_text(wide())  # type: ignore[arg-type]
    assert "…" not in text
    letters = "".join(text.split())
    assert letters.count("a-very-long-name") > 0


def test_a_name_gives_no_orders_to_the_terminal() -> None:
    text = design_text(results.design(scenario=HOSTILE, currency="\x1b[2J"))
    assert "\x1b" not in text
    assert "\x07" not in text
    assert "\u202e" not in text
    assert "[bold red]x[/]" in text
    assert ":smile:" in text


def test_color_codes_only_where_asked_for() -> None:
    assert "\x1b[" not in design_text(results.design())
    assert "\x1b[" in design_text(results.design(), color=True)


def test_the_bill_names_what_to_buy() -> None:
    text = design_text(results.design())
    (row,) = [line for line in text.splitlines() if line.split()[:2] == ["primary", "oat-coarse-09"]]
    assert row.split() == [
        "primary",
        "oat-coarse-09",
        "oat-coarse",
        "2",
        "×",
        "rack-10",
        "13",
        "11.7",
        "9,880",
    ]


def test_pressure_is_shown_in_the_unit_asked_for() -> None:
    bar, psi, kpa = (design_text(results.design(), unit) for unit in ("bar", "psi", "kPa"))
    assert "1.40" in bar
    assert "20.3" in psi  # 1.4 bar, NIST SP 811
    assert "140" in kpa
    assert "bar" not in psi.replace("bar·h", "")


def test_headline_says_what_is_proven() -> None:
    assert headline(results.design()).startswith("Least area, proven optimal: 34.2 m² in 38 modules, 6 h")
    stopped = results.design(status="limit", objective=Objective("area", 34.2, 30.0, 0.123))
    assert "not proven (gap 12 %)" in headline(stopped)
    empty = results.design(status="limit", objective=None, area=None, cost=None, time=None, blocks=())
    assert headline(empty).startswith("No design was found before a limit stopped the search")
    assert headline(results.infeasible()) == "No design meets every limit."


def test_even_split_sentence() -> None:
    assert even_split_sentence(results.design()) == (
        "Against the even split of pressure and time this saves 1.8 m² (5.0 %) of area and 1,500 EUR (4.7 %) per batch."
    )
    same = results.design(saving=Saving(0.0, 0.0, 0.0, 0.0))
    assert even_split_sentence(same).startswith("The even split costs nothing here")
    none = results.design(
        even_split=EvenSplit("infeasible", None, None, None, None, (), "guard would need 2 bar"), saving=None
    )
    assert even_split_sentence(none).endswith("yields no design here: guard would need 2 bar")
    by_cost = results.design(objective=Objective("cost", 1.0, 1.0, 0.0))
    assert "saves 1,500 EUR (4.7 %) per batch and 1.8 m²" in even_split_sentence(by_cost)


def test_no_design_names_what_would_do() -> None:
    text = design_text(results.infeasible())
    assert "2.31 bar where 1.4 bar is allowed" in text
    assert "clarification.pressure_bar" in text
    assert "no value alone is enough" in text
    assert "What to buy" not in text


def test_cautions_stand_under_every_design() -> None:
    text = design_text(results.design())
    for word in ("weakest component", "relief", "at scale", "qualified engineer", "Local codes"):
        assert word in " ".join(text.split())


def test_curve_names_law_range_readings_and_flags() -> None:
    text = curve_text(results.curve(turbidity_loading=150.0))
    flat = " ".join(text.split())
    assert "Law intermediate, fitted, tested to 203 L/m² at 110 LMH" in flat
    assert "turbidity limit was reached at 150 L/m²" in flat
    assert "the hold-up is still being displaced" in flat
    assert "a.csv, rows 12 to 15: flow falls" in flat
    assert "intermediate (chosen)" in flat


def test_numbers_are_sensible() -> None:
    assert [significant(v) for v in (0.0, 0.00034, 1.0, 181.23, 15234.0, 3.2e-7, None, float("inf"))] == [
        "0", "0.000340", "1.00", "181", "15,234", "3.20e-07", "–", "–"
    ]  # fmt: skip
    assert [fixed(v, 1) for v in (-0.01, 1234.56, None)] == ["0.0", "1,234.6", "–"]
    assert [trimmed(v) for v in (34.0, 34.25, 100.0)] == ["34", "34.25", "100"]
    assert aligned([11.7, 9.0, None, 1200.25]) == ["11.70", "9.00", "–", "1,200.25"]
    assert aligned([11.7, 9.0]) == ["11.7", "9.0"]
    assert aligned([30.0, 10.0]) == ["30", "10"]
    assert [percent(v) for v in (0.0, 9.94, 9.96, 47.3)] == ["0.0 %", "9.9 %", "10 %", "47 %"]
    assert [duration(v) for v in (6.0, 3.84, 0.5, 2.9999)] == ["6 h", "3 h 50 min", "30 min", "3 h"]
    assert money(1234.5, "") == "1,234"
    assert Pressure("psi").text(1.0) == "14.5 psi"
    assert limit_words("module-size") == "module size"
    assert limit_words("something-new") == "something new"
    assert plain("a\tb\u200bc") == "a\ufffdb\ufffdc"


def test_what_holds_for_several_media_is_said_once() -> None:
    notices = (
        Notice("viscosity", "oat: scaled to 18 degC"),
        Notice("slip", "oat: scaled to 18 degC"),
        Notice("viscosity", "rye: scaled to 18 degC"),
        Notice("files", "no colon here"),
    )
    assert grouped(notices) == (
        ("viscosity", "oat, rye: scaled to 18 degC"),
        ("slip", "oat: scaled to 18 degC"),
        ("files", "no colon here"),
    )
