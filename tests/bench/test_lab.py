"""The stand-ins of these tests are what the files room hands over."""

from __future__ import annotations

from dataclasses import fields

from tests.bench.lab import Limits, RunEntry, Spec
from trainopt import files
from trainopt.bench.columns import DIMENSIONS
from trainopt.curves.laws import LAWS
from trainopt.files import medium


def test_run_entries_have_the_fields_and_defaults_of_a_run() -> None:
    known = files.Run.model_fields
    assert {field.name for field in fields(RunEntry)} == set(known)
    for field in fields(RunEntry):
        if not known[field.name].is_required():
            assert known[field.name].default == field.default, field.name


def test_specs_and_limits_have_no_field_of_their_own() -> None:
    assert {field.name for field in fields(Spec)} == set(files.CurveSpec.model_fields)
    assert {field.name for field in fields(Limits)} <= set(files.Limits.model_fields)


def test_files_know_the_same_laws_and_columns() -> None:
    assert {name: law.parameters for name, law in LAWS.items()} == medium.LAWS
    assert tuple(DIMENSIONS) == medium.COLUMN_ROLES
