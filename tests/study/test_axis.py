"""The axis of a sweep as a user writes it."""

from __future__ import annotations

import pytest

from trainopt.study.axis import parse_axis

DIMENSIONS = {
    "batch.volume": "volume",
    "batch.time": "time",
    "block.line": "line",
    "flux": "flux",
    "safety_factor": None,
}


def axis(text: str):
    return parse_axis(text, lambda field: DIMENSIONS[field])


def test_a_range_holds_its_ends_and_even_steps_in_the_users_unit():
    found = axis("batch.volume=500 L..5000 L/19")
    assert found.values == tuple(500.0 + 250.0 * k for k in range(19))
    assert (found.unit, found.dimension, found.span) == ("L", "volume", 4500.0)


def test_steps_are_round_in_the_users_unit_and_canonical_inside():
    found = axis("batch.time=180 min..300 min/5")
    assert found.unit == "min"
    assert [found.shown(v) for v in found.values] == pytest.approx([180, 210, 240, 270, 300], rel=1e-14)
    assert found.values == pytest.approx((3.0, 3.5, 4.0, 4.5, 5.0), rel=1e-14)


def test_the_unit_of_the_end_holds_for_the_start():
    assert axis("batch.volume=500..5000 L/2").values == (500.0, 5000.0)


def test_a_unit_with_a_slash_is_no_count():
    found = axis("block.line=1e-5 bar/(L/h)..3e-5 bar/(L/h)/3")
    assert found.values == pytest.approx((1e-5, 2e-5, 3e-5))
    assert found.unit == "bar/(L/h)"
    assert axis("flux=100 L/m2/h, 2e2 LMH").values == (100.0, 200.0)


def test_a_log_range_grows_by_a_factor():
    assert axis("batch.volume=100 L..10000 L/3 log").values == pytest.approx((100.0, 1000.0, 10000.0))


def test_a_list_keeps_its_order_and_mixes_units():
    found = axis("batch.volume=2000 L, 500000 mL, 1.5 m3")
    assert found.values == (2000.0, 500.0, 1500.0)
    assert found.unit == "L"


def test_a_bare_number_for_a_field_without_a_unit():
    found = axis("safety_factor=1..2/11")
    assert found.values == tuple(1.0 + k / 10 for k in range(11))
    assert found.unit == ""


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("batch.volume", "is not an axis; expected FIELD=VALUES"),
        ("batch.volume=", "is not an axis"),
        ("=1 L", "is not an axis"),
        ("batch.volume=500..5000/3", "has no unit"),
        ("batch.volume=500 L..5000 L/1", "expected 2 to 2000"),
        ("batch.volume=500 L..5000 L/9999", "expected 2 to 2000"),
        ("batch.volume=500 L..500 L/3", "two different ends"),
        ("batch.volume=1 L, , 2 L", "empty value"),
        ("batch.volume=1 L, 1000 mL", "names a value twice"),
        ("batch.volume=1 bar, 2 bar", "is not a unit of volume"),
        ("batch.volume=-1 L..10 L/3 log", "ends above zero"),
        ("safety_factor=1 L, 2 L", "is not a bare number"),
        ("safety_factor=inf, 2", "is not a bare number"),
    ],
)
def test_what_makes_no_sense_is_said(text: str, words: str):
    with pytest.raises(ValueError, match=words):
        axis(text)
