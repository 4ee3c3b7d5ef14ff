"""A recorded run exported to a spreadsheet, with decimal commas, in other units or under a title: the same
curve to 1e-9.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import openpyxl
import pytest

from tests.bench.lab import Lab, RunEntry, fitted, write_rows, write_text
from trainopt.curves.curve import Curve

Rows = list[list[str]]


def recorded(seed: int) -> Rows:
    """A run as a lab records it: full mL, a gauge of 0.1 psi, 2 % noise, a slipping pump."""
    rows = Lab(noise=0.02, seed=seed, slip=(40, 47, 0.6), law="standard", parameters=(1.5e-3, 0.007)).table()
    for row in rows[1:]:
        row[0] = f"{float(row[0]):.2f}"
        row[1] = f"{round(float(row[1]))}"
        row[2] = f"{round(float(row[2]), 1):.1f}"
    return rows


def spreadsheet(folder: Path, rows: Rows) -> Path:
    book = openpyxl.Workbook()
    page = book.active
    assert page is not None
    for i, row in enumerate(rows):
        page.append([cell if i == 0 else float(cell) if cell else None for cell in row])
    book.save(folder / "run.xlsx")
    return folder / "run.xlsx"


def decimal_commas(folder: Path, rows: Rows) -> Path:
    return write_text(folder / "run.csv", "\n".join(";".join(cell.replace(".", ",") for cell in row) for row in rows))


def other_units(folder: Path, rows: Rows) -> Path:
    head = ["t [h]", "V [L]", "p [kPa]", "NTU"]
    psi = 6.894757293168361
    body = [[repr(float(r[0]) / 60), repr(float(r[1]) / 1000), repr(float(r[2]) * psi), r[3]] for r in rows[1:]]
    return write_rows(folder / "run.csv", [head, *body])


def odd_units(folder: Path, rows: Rows) -> Path:
    head = ["time_s", "volume_m3", "pressure_mbar", "turbidity_NTU"]
    mbar = 68.94757293168361
    body = [[repr(float(r[0]) * 60), repr(float(r[1]) * 1e-6), repr(float(r[2]) * mbar), r[3]] for r in rows[1:]]
    return write_rows(folder / "run.csv", [head, *body], ";")


def under_a_title(folder: Path, rows: Rows) -> Path:
    return write_text(
        folder / "run.csv", "Run 7\nDisc,23 cm2\n\n" + "\n".join(",".join(row) for row in rows) + "\n\nend\n"
    )


EXPORTS: list[Callable[[Path, Rows], Path]] = [spreadsheet, decimal_commas, other_units, odd_units, under_a_title]


def numbers(curve: Curve) -> list[float]:
    lots = [(lot.resistance, lot.fouling) for lot in curve.lots.values()]
    errors = [estimate.se or 0.0 for estimate in curve.parameters.values()]
    values = [estimate.value for estimate in curve.parameters.values()]
    assert curve.turbidity_loading is not None
    tested = [curve.tested_loading, curve.tested_flux, curve.turbidity_loading]
    return [*values, *errors, *np.ravel(lots), *tested, *(one.aicc for one in curve.alternatives)]


@pytest.mark.parametrize("export", EXPORTS)
@pytest.mark.parametrize("operation", ["constant-flow", "constant-pressure"])
def test_same_curve(tmp_path: Path, export: Callable[[Path, Rows], Path], operation: str) -> None:
    from tests.bench.lab import Limits

    limits = Limits(turbidity=4.0)
    plain, exported = [], []
    for seed, lot in enumerate("ab"):
        rows = recorded(seed)
        folder = tmp_path / lot
        folder.mkdir()
        plain.append(RunEntry(write_rows(folder / "plain.csv", rows), lot=lot, operation=operation))
        exported.append(RunEntry(export(folder, rows), lot=lot, operation=operation))
    one, other = fitted(*plain, limits=limits), fitted(*exported, limits=limits)
    assert other.law == one.law
    np.testing.assert_allclose(numbers(other), numbers(one), rtol=1e-9)
    assert [point.excluded for point in other.points] == [point.excluded for point in one.points]
