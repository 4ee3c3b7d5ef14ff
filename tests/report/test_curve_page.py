"""The page of a curve: what it shows of a fitted curve, and what of one given by its parameters."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import trainopt
from trainopt.curves.curve import Curve
from trainopt.curves.freeze import frozen_text
from trainopt.report.curve_page import curve_page
from trainopt.report.picture import picture_bytes

MEDIA = Path(__file__).parents[2] / "models" / "media"


@pytest.fixture(scope="module")
def curve() -> Curve:
    return trainopt.fit_curve(trainopt.load_medium(MEDIA / "oat-open.yaml"))


def test_panels_of_a_fitted_curve(curve: Curve) -> None:
    figure = curve_page(curve)
    labels = [axes.get_ylabel() for axes in figure.axes]
    assert labels[:3] == ["Resistance, bar/LMH", "Turbidity, NTU", "Reading over curve, %"]
    assert [axes.get_title(loc="left").partition(":")[0] for axes in figure.axes[3:]] == ["lot a", "lot b", "lot c"]
    legend = figure.axes[0].get_legend()
    assert legend is not None
    texts = [text.get_text() for text in legend.get_texts()]
    assert {"tested, to 202 L/m²", "lot a", "90 % band", "pooled curve", "turbidity endpoint"} <= set(texts)


def test_every_used_reading_is_drawn_with_its_error(curve: Curve) -> None:
    used = [point for point in curve.points if point.excluded is None]
    drawn = sum(len(line.get_xdata()) for line in curve_page(curve).axes[2].lines[:-1])  # type: ignore[arg-type]
    assert drawn == len(used)
    errors = np.concatenate([line.get_ydata() for line in curve_page(curve).axes[2].lines[:-1]])
    expected = [100.0 * (p.resistance / curve.lot_curve(p.lot).resistance(p.loading) - 1.0) for p in used]
    np.testing.assert_allclose(np.sort(errors), np.sort(expected), atol=1e-6)


def test_units_of_the_axes(curve: Curve) -> None:
    bar, psi = curve_page(curve), curve_page(curve, "psi")
    assert psi.axes[0].get_ylabel() == "Resistance, psi/LMH"
    ratio = psi.axes[0].get_ylim()[1] / bar.axes[0].get_ylim()[1]
    assert ratio == pytest.approx(14.5038, rel=1e-4)


def test_a_given_curve_has_one_panel(curve: Curve, tmp_path: Path) -> None:
    path = tmp_path / "oat-open.yaml"
    path.write_text(frozen_text(trainopt.load_medium(MEDIA / "oat-open.yaml"), curve, path), encoding="utf-8")
    figure = curve_page(trainopt.fit_curve(trainopt.load_medium(path)))
    assert len(figure.axes) == 1


@pytest.mark.parametrize("suffix", [".svg", ".png", ".pdf"])
def test_the_same_bytes_each_time(curve: Curve, suffix: str) -> None:
    assert picture_bytes(curve_page(curve), suffix) == picture_bytes(curve_page(curve), suffix)
