"""The demo case, and fits done once: what `study/` is tested for begins after the curves are fitted."""

from __future__ import annotations

import importlib
from collections.abc import Iterator
from pathlib import Path

import pytest

import trainopt
from trainopt.curves.curve import Curve
from trainopt.curves.medium import fit_curve
from trainopt.files import Medium
from trainopt.study import plan

designer = importlib.import_module("trainopt.optimize.design")  # its package offers a function of the same name

ROOT = Path(__file__).parents[2]


_FITTED: dict[object, Curve] = {}


def _fitted(medium: Medium) -> Curve:
    """The curve as it was first fitted; of another medium, or from a run written anew, it is fitted anew."""
    if not medium.curve.runs:
        return fit_curve(medium)
    stats = [run.file.stat() for run in medium.curve.runs]
    key = (repr(medium), *((stat.st_mtime_ns, stat.st_size) for stat in stats))
    if key not in _FITTED:
        _FITTED[key] = fit_curve(medium)
    return _FITTED[key]


@pytest.fixture(scope="module", autouse=True)
def fitted_once() -> Iterator[None]:
    """Fit each medium once in this process (a command that a test starts fits its own)."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(designer, "fit_curve", _fitted)
        patch.setattr(plan, "fit_curve", _fitted)
        yield


@pytest.fixture(scope="session")
def harvest() -> trainopt.Case:
    return trainopt.load_case(ROOT / "scenarios" / "harvest.yaml")


@pytest.fixture(scope="session")
def harvest_cost() -> trainopt.Case:
    return trainopt.load_case(ROOT / "scenarios" / "harvest-cost.yaml")
