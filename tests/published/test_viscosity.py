"""Viscosity of water against published tables."""

from __future__ import annotations

import pytest

from trainopt.curves.viscosity import viscosity_at_density, viscosity_ratio, water_density, water_viscosity


# IAPWS R12-08, check table for the viscosity without critical enhancement: T [K], density [kg/m³], viscosity [µPa·s].
@pytest.mark.parametrize(
    ("temperature", "density", "viscosity"),
    [(298.15, 998.0, 889.735100), (298.15, 1200.0, 1437.649467), (373.15, 1000.0, 307.883622)],
)
def test_iapws_check_table(temperature: float, density: float, viscosity: float) -> None:
    assert viscosity_at_density(temperature, density) == pytest.approx(viscosity, abs=5e-7)


# At 0.1 MPa: three general-purpose property libraries from the package registry agree on these digits [mPa·s].
@pytest.mark.parametrize(
    ("celsius", "viscosity"),
    [(4, 1.567294), (10, 1.305901), (15, 1.137568), (20, 1.001597), (25, 0.890023), (37, 0.691303)],
)
def test_water_at_atmospheric_pressure(celsius: float, viscosity: float) -> None:
    assert water_viscosity(celsius) == pytest.approx(viscosity, rel=6e-6)


def test_density_of_water() -> None:
    # 998.2 kg/m³ at 20 degC: handbook value, from memory.
    assert water_density(20.0) == pytest.approx(998.2, abs=0.05)


def test_the_ratio_is_one_where_a_temperature_is_not_known() -> None:
    assert viscosity_ratio(None, 21.0) == 1.0
    assert viscosity_ratio(18.0, None) == 1.0
    assert viscosity_ratio(10.0, 20.0) == pytest.approx(1.305901 / 1.001597, rel=1e-5)


@pytest.mark.parametrize("celsius", [-0.1, 100.1])
def test_outside_liquid_water_is_an_error(celsius: float) -> None:
    with pytest.raises(ValueError, match="outside 0 to 100 degC"):
        water_viscosity(celsius)
