"""YAML text to data: scalars of the YAML 1.2 core schema, lines of every part, problems for the rest."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tests.files.broken_cases import CASE, CASE_FILE, CATALOG_FILE, OAT, OAT_FILE, RYE_FILE, SOUND, write_workspace
from trainopt.errors import InputError
from trainopt.files import check, load_case
from trainopt.files.document import read_document, scalar

# YAML 1.2.2, section 10.3.2 (core schema), read from memory: the forms of null, bool, int and float.
CORE_SCHEMA = [
    ("null", None), ("~", None), ("", None), ("Null", None),
    ("true", True), ("False", False), ("TRUE", True),
    ("0", 0), ("-12", -12), ("+12", 12), ("007", 7), ("0o14", 12), ("0xC", 12),
    ("1e-6", 1e-6), ("1E6", 1e6), (".5", 0.5), ("12.", 12.0), ("-1.5e+3", -1500.0), ("0.", 0.0),
    (".inf", math.inf), ("-.Inf", -math.inf),
]  # fmt: skip
TEXT = [
    "no",
    "yes",
    "on",
    "off",
    "y",
    "n",
    "12:30",
    "1:30:00",
    "0b11",
    "1_000",
    "2026-12-01",
    "1e",
    "e6",
    ".",
    "-",
    "=",
    "<<",
    "0o8",
    "1.2.3",
]


@pytest.mark.parametrize(("text", "value"), CORE_SCHEMA)
def test_core_schema_scalars(text: str, value: object) -> None:
    read = read_document(f"a: {text}\n", "x.yaml").data["a"]
    assert read == value
    assert type(read) is type(value) or isinstance(read, type(value))


def test_not_a_number_is_read_as_one() -> None:
    assert math.isnan(scalar(".nan"))


@pytest.mark.parametrize("text", TEXT)
def test_what_older_versions_converted_stays_text(text: str) -> None:
    assert scalar(text) == text


def test_quoted_scalars_are_text() -> None:
    assert read_document("a: '1'\nb: \"true\"\n", "x.yaml").data == {"a": "1", "b": "true"}


def test_numbers_remember_how_they_were_written() -> None:
    data = read_document("a: 007\nb: 1.10\n", "x.yaml").data
    assert (data["a"].text, data["b"].text) == ("007", "1.10")


def test_every_part_has_its_line() -> None:
    document = read_document("a: 1\nb:\n  - c: 2\n  - d:\n      e: 3\nf: {g: 4,\n  h: 5}\n", "x.yaml")
    lines = {loc: line for loc, (_, line) in document.places.items()}
    assert lines[("a",)] == 1
    assert lines[("b", 0)] == lines[("b", 0, "c")] == 3
    assert lines[("b", 1, "d", "e")] == 5
    assert (lines[("f", "g")], lines[("f", "h")]) == (6, 7)


def test_carriage_returns_and_a_byte_order_mark_do_no_harm(tmp_path: Path) -> None:
    scenario = write_workspace(tmp_path)
    scenario.write_bytes(b"\xef\xbb\xbf" + CASE.replace("\n", "\r\n").encode())
    assert load_case(scenario).scenario.batch.volume == 500.0


def test_bytes_that_are_no_text(tmp_path: Path) -> None:
    scenario = write_workspace(tmp_path)
    scenario.write_bytes(CASE.encode().replace(b"rye", b"r\xffe", 1))
    with pytest.raises(InputError, match=r"case\.yaml:1: is not UTF-8"):
        load_case(scenario)


@pytest.mark.parametrize(
    "text", ["[" * 100_000, "{a: " * 50_000, "- " * 50_000 + "x", "a: &b [*b]", "a: &x [1]\nb: *x"]
)
def test_nesting_and_aliases_cannot_blow_up(text: str) -> None:
    document = read_document(text, "x.yaml")
    assert document.data is None
    assert len(document.problems) == 1


def test_all_duplicates_and_tags_of_a_file_are_told_at_once() -> None:
    document = read_document("a: 1\na: 2\nb: !!str 3\nc: {d: 1, d: 2}\n", "x.yaml")
    assert [problem.line for problem in document.problems] == [2, 3, 4]
    assert document.data["a"] == 1


YAMLISH = st.text(st.sampled_from(list("ab:-[]{}'\"#&*!|>%@`,?\n\t 01.e_~\\")), max_size=80)


@settings(max_examples=400, deadline=None)
@given(YAMLISH | st.text(max_size=60))
def test_any_text_is_read_or_refused(text: str) -> None:
    document = read_document(text, "x.yaml")
    assert document.problems or document.data is not None or text.strip("\ufeff \n")
    for problem in document.problems:
        assert 0 <= problem.line <= text.count("\n") + 2 + text.count("\r") + text.count("\x85") + text.count("\u2028")


LINES = st.sampled_from(
    [*CASE.splitlines(), *OAT.splitlines(), "  x: 1", "- a", "\tb: 2", "batch: [1, 2]", "blocks: 3"]
)
PIECES = st.lists(LINES | YAMLISH, max_size=30).map("\n".join)


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.sampled_from([CASE_FILE, OAT_FILE, "models/catalog.yaml"]), PIECES)
def test_a_file_of_any_text_gives_input_errors_only(tmp_path: Path, file: str, text: str) -> None:
    scenario = write_workspace(tmp_path)
    (tmp_path / file).write_text(text, encoding="utf-8")
    try:
        load_case(scenario)
    except InputError as error:
        assert all(": " in str(problem) for problem in error.problems)
    check([tmp_path])


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.data())
def test_a_file_with_a_value_replaced_gives_input_errors_only(tmp_path: Path, data: st.DataObject) -> None:
    scenario = write_workspace(tmp_path)
    file = data.draw(st.sampled_from([CASE_FILE, OAT_FILE, RYE_FILE, CATALOG_FILE]))
    lines = [*SOUND[file].splitlines(), "extends: x"][: None if file == CASE_FILE else -1]
    at = data.draw(st.integers(0, len(lines) - 1))
    head, colon, _ = lines[at].partition(":")
    value = data.draw(
        YAMLISH
        | st.sampled_from(["1e400 L", "-1", "~", "[]", "{}", "nan", ".nan", "9" * 400, "0x" + "f" * 50, "1/0 L"])
        | st.sampled_from(["7", "007", "{a: 1}", "[[]]", "{medium: ~}", "[oat, ~]", "{true: 2}", "case.yaml", "."])
    )
    lines[at] = f"{head}{colon} {value}"
    (tmp_path / file).write_text("\n".join(lines), encoding="utf-8")
    try:
        load_case(scenario)
    except InputError as error:
        assert all("expected" in problem.text or "did you mean" in problem.text for problem in error.problems)
