"""The reference says about each field what the loader does with it."""

from __future__ import annotations

from pathlib import Path
from types import SimpleNamespace

import pytest

from tests.files.broken_cases import CASE_FILE, CATALOG_FILE, OAT_FILE, write_workspace
from trainopt.errors import InputError
from trainopt.files.document import read_document
from trainopt.files.reference import FILES, FieldNote, fields, file_fields, plain_path
from trainopt.files.schema import field_at, rule_of

EVERY = fields()
IDS = [f"{note.file}.{note.path}" for note in EVERY]


def one(kind: str, path: str) -> FieldNote:
    (found,) = [note for note in file_fields(kind) if note.path == path]
    return found


def test_fields_say_what_they_mean_in_a_sentence() -> None:
    for note in EVERY:
        assert note.meaning[0].isupper(), note
        assert note.meaning.endswith((".", ".)")), note
        assert note.holds, note


@pytest.mark.parametrize("note", EVERY, ids=IDS)
def test_every_example_and_default_is_read_by_the_loader(note: FieldNote, tmp_path: Path) -> None:
    loc = tuple(0 if part == "[]" else part for part in note.path.replace("[]", ".[]").replace("NAME", "x").split("."))
    field = field_at(FILES[note.file], loc)
    assert field is not None
    rule = rule_of(field)
    if rule is None:
        assert note.example == ""
        return
    info = SimpleNamespace(context={"folder": tmp_path})
    example = note.example.split("' or '")[0].strip("'")
    for text in (example, note.default):
        if text:
            data = read_document(f"x: {text}\n", "x").data
            rule.read(data["x"], info)  # type: ignore[arg-type]


def test_notes_of_known_fields() -> None:
    flow = one("scenario", "blocks[].pump.max_flow")
    assert flow.holds == "flow with unit: L/h, L/min, mL/min"
    assert (flow.required, flow.default, flow.allowed, flow.example) == (False, "", "above 0 L/h", "1200 L/h")
    assert one("scenario", "batch.volume").required
    assert one("scenario", "blocks[].setup").default == "0 h"
    assert one("scenario", "objective").holds == "one of area, cost"
    assert one("scenario", "basis").holds == "one of pooled, worst-lot, or a mapping"
    assert one("catalog", "modules.NAME.max_count").allowed == "at least 1 and at most 10000"
    assert one("medium", "curve.runs[].keep").default == "false"
    assert one("scenario", "installed.NAME.count").required


def test_every_field_that_files_may_hold_is_there() -> None:
    seen = {(note.file, plain_path(note)) for note in EVERY}
    for kind, path in [
        ("medium", "variability.resistance"),
        ("medium", "limits.pool_turbidity"),
        ("medium", "curve.runs.feed_loading"),
        ("catalog", "holders.owned"),
        ("scenario", "blocks.stages.fix.module"),
        ("scenario", "blocks.stages.media.after"),
        ("scenario", "basis.samples"),
        ("scenario", "costs.product.recovered"),
    ]:
        assert (kind, path) in seen


def test_topics(tmp_path: Path) -> None:
    write_workspace(tmp_path)
    assert fields("medium") == file_fields("medium")
    assert fields(str(tmp_path / OAT_FILE)) == file_fields("medium")
    assert fields(str(tmp_path / CATALOG_FILE)) == file_fields("catalog")
    assert fields(str(tmp_path / CASE_FILE)) == file_fields("scenario")
    pump = ["blocks[].pump", "blocks[].pump.min_flow", "blocks[].pump.max_flow"]
    for topic in ("blocks.pump", "scenario.blocks.pump", "blocks[].pump"):
        assert [note.path for note in fields(topic)] == pump
    assert [note.file for note in fields("scenario.scenario")] == ["scenario"]


@pytest.mark.parametrize(
    ("topic", "near"),
    [
        ("scenari", "scenario"),
        ("blocks.pumps", "blocks.pump"),
        ("medium.limit", "medium.limits"),
        ("zzz", "expected one of"),
    ],
)
def test_an_unknown_topic_offers_the_nearest(topic: str, near: str) -> None:
    with pytest.raises(InputError, match="is no file and no field") as raised:
        fields(topic)
    assert near in str(raised.value)


def test_a_file_that_is_not_there() -> None:
    with pytest.raises(InputError, match="no such file"):
        fields("nowhere.yaml")
