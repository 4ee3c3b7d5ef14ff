"""Viscosity of water: a resistance measured at one temperature holds at another in its proportion.

Source: IAPWS R12-08, Release on the IAPWS Formulation 2008 for the Viscosity of Ordinary Water Substance,
without the critical enhancement (below 1e-6 of the value between 0 and 100 degC). Density at atmospheric
pressure: Kell, J. Chem. Eng. Data 20 (1975) 97.
"""

from __future__ import annotations

import math

_DILUTE = (1.67752, 2.20462, 0.6366564, -0.241605)
_DENSE = {
    (0, 0): 5.20094e-1, (1, 0): 8.50895e-2, (2, 0): -1.08374, (3, 0): -2.89555e-1,
    (0, 1): 2.22531e-1, (1, 1): 9.99115e-1, (2, 1): 1.88797, (3, 1): 1.26613, (5, 1): 1.20573e-1,
    (0, 2): -2.81378e-1, (1, 2): -9.06851e-1, (2, 2): -7.72479e-1, (3, 2): -4.89837e-1, (4, 2): -2.57040e-1,
    (0, 3): 1.61913e-1, (1, 3): 2.57399e-1, (0, 4): -3.25372e-2, (3, 4): 6.98452e-2, (4, 5): 8.72102e-3,
    (3, 6): -4.35673e-3, (5, 6): -5.93264e-4,
}  # fmt: skip


def viscosity_at_density(temperature: float, density: float) -> float:
    """Viscosity of water in µPa·s at `temperature` in K and `density` in kg/m³ (IAPWS R12-08, eq. 10 without μ̄2)."""
    t, d = temperature / 647.096, density / 322.0
    dilute = 100.0 * math.sqrt(t) / sum(h / t**i for i, h in enumerate(_DILUTE))
    return dilute * math.exp(d * sum(h * (1.0 / t - 1.0) ** i * (d - 1.0) ** j for (i, j), h in _DENSE.items()))


def water_density(temperature: float) -> float:
    """Density of water in kg/m³ at atmospheric pressure and `temperature` in degC, 0 to 100 (Kell 1975)."""
    t = temperature
    top = 999.83952 + t * (
        16.945176 + t * (-7.9870401e-3 + t * (-46.170461e-6 + t * (105.56302e-9 - t * 280.54253e-12)))
    )
    return top / (1.0 + 16.879850e-3 * t)


def water_viscosity(temperature: float) -> float:
    """Viscosity of water in mPa·s at atmospheric pressure and `temperature` in degC; `ValueError` outside
    0 to 100.
    """
    if not 0.0 <= temperature <= 100.0:
        raise ValueError(
            f"{temperature:g} degC is outside 0 to 100 degC, where water at atmospheric pressure is liquid"
        )
    return viscosity_at_density(temperature + 273.15, water_density(temperature)) / 1000.0


def viscosity_ratio(process: float | None, test: float | None) -> float:
    """What a resistance measured at `test` degC is multiplied with at `process` degC; 1 where either is not known."""
    if process is None or test is None or process == test:
        return 1.0
    return water_viscosity(process) / water_viscosity(test)
