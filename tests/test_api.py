"""The public names: all there, all documented, none of them dear before it is used."""

from __future__ import annotations

import subprocess
import sys

import pytest

import trainopt


@pytest.mark.parametrize("name", sorted(trainopt.__all__))
def test_every_public_name_is_there(name: str) -> None:
    assert getattr(trainopt, name) is not None
    assert name in dir(trainopt)


def test_another_name_is_no_attribute() -> None:
    with pytest.raises(AttributeError, match="no attribute 'desing'"):
        _ = trainopt.desing  # type: ignore[attr-defined]


def test_import_is_light() -> None:
    script = "import sys, trainopt; print(len({'numpy', 'pyomo', 'pandas', 'pydantic'} & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "0"
