"""The demo case and its curves, read and fitted once for the tests of this room."""

from __future__ import annotations

from pathlib import Path

import pytest

import trainopt

ROOT = Path(__file__).parents[2]


@pytest.fixture(scope="session")
def harvest() -> trainopt.Case:
    return trainopt.load_case(ROOT / "scenarios" / "harvest.yaml")


@pytest.fixture(scope="session")
def harvest_cost() -> trainopt.Case:
    return trainopt.load_case(ROOT / "scenarios" / "harvest-cost.yaml")
