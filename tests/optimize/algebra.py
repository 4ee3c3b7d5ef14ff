"""R(l) of every law and D(L) again, written from the table in models/README.md; the integral is a quadrature.

Nothing here imports trainopt. Loadings in L/m², resistances in bar/LMH, demands in bar·h.
"""

from __future__ import annotations

import itertools
import math
from typing import Any

import numpy as np

INFINITE = math.inf
Lot = tuple[float, float]
"""(ρ, κ): a lot's resistance and fouling."""

NAMES = {
    "cake": ("R0", "k"), "intermediate": ("R0", "k"), "standard": ("R0", "k"), "complete": ("R0", "k"),
    "hermia": ("R0", "k", "n"), "cake-complete": ("R0", "k_c", "k_b"), "cake-intermediate": ("R0", "k_c", "k_i"),
    "cake-standard": ("R0", "k_c", "k_s"), "complete-standard": ("R0", "k_b", "k_s"),
    "intermediate-standard": ("R0", "k_i", "k_s"), "quadratic": ("c0", "c1", "c2"),
    "cubic": ("c0", "c1", "c2", "c3"),
}  # fmt: skip
"""Parameters by law, in the order in which they are listed here; polynomials by their coefficients."""

# Viscosity of water in mPa·s by degC: IAPWS R12-08 at the density of IAPWS-95 at 0.1 MPa, computed by two general
# property libraries that agree to ten digits. Only where the package's formula for density is good to 1e-6: at
# 4 degC it moves the viscosity by 5e-6.
WATER = {25.0: 0.8900226738, 37.0: 0.6913034631}

_HALF, _WEIGHT = np.polynomial.legendre.leggauss(40)
_PANELS = 6
# Nodes on [0, 1] in panels that narrow towards 1, where the laws with a pole are steepest.
_EDGES = 1.0 - 0.4 ** np.arange(_PANELS + 1)
_EDGES[-1] = 1.0
_NODES = np.concatenate([a + (b - a) * (_HALF + 1) / 2 for a, b in itertools.pairwise(_EDGES)])
_SHARES = np.concatenate([(b - a) * _WEIGHT / 2 for a, b in itertools.pairwise(_EDGES)])


def pole(law: str, p: list[float]) -> float:
    """Loading at which R becomes infinite."""
    if law == "hermia":
        return 1 / ((p[2] - 1) * p[1]) if p[2] > 1 else INFINITE
    if law == "complete-standard":
        return (1 - math.exp(-2 * p[1] / p[2])) / p[1]
    if law == "intermediate-standard":
        return math.log(1 + 2 * p[1] / p[2]) / p[1]
    reach = {"standard": (2.0, 1), "complete": (1.0, 1), "cake-complete": (1.0, 2), "cake-standard": (2.0, 2)}
    if law not in reach:
        return INFINITE
    top, place = reach[law]
    return top / p[place]


def shape(law: str, p: list[float], x: Any) -> Any:
    """R(x) below the pole, of a number or an array."""
    if law in ("quadratic", "cubic"):
        return sum(c * x**i for i, c in enumerate(p))
    k = p[1] * x
    if law == "cake":
        return p[0] * (1 + k)
    if law == "intermediate":
        return p[0] * np.exp(k)
    if law == "standard":
        return p[0] * (1 - k / 2) ** -2
    if law == "complete":
        return p[0] / (1 - k)
    if law == "hermia":
        return p[0] * (1 + (1 - p[2]) * k) ** (1 / (1 - p[2]))
    return p[0] * _combined(law, p[1], p[2], x)


def _combined(law: str, first: float, second: float, x: Any) -> Any:
    """R/R0 of the laws of Bolton, LaCasse & Kuriyel (2006)."""
    if law == "cake-complete":
        return (1 - first / second * np.log(1 - second * x)) / (1 - second * x)
    if law == "cake-intermediate":
        grown = np.exp(second * x)
        return grown * (1 + first / second * (grown - 1))
    if law == "cake-standard":
        return (1 - second * x / 2) ** -2 + first * x
    if law == "complete-standard":
        return 1 / ((1 - first * x) * (1 + second / (2 * first) * np.log(1 - first * x)) ** 2)
    grown = np.exp(first * x)
    return grown / (1 - second / (2 * first) * (grown - 1)) ** 2


def resistance(m: dict[str, Any], lot: Lot, loading: float) -> float:
    """R_s(l) of one lot; infinite past the pole."""
    rho, kappa = lot
    x = kappa * loading
    return rho * float(shape(m["law"], m["parameters"], x)) if x < pole(m["law"], m["parameters"]) else INFINITE


def demand(m: dict[str, Any], lot: Lot, loading: float, operation: str) -> float:
    """D: L times the highest R up to L, or the integral of R (Gauss–Legendre in panels)."""
    end = resistance(m, lot, loading)
    if operation == "constant-flow" or not math.isfinite(end):
        # A random law rises, or dips once and then rises: it is highest at an end of the range.
        return loading * max(resistance(m, lot, 0.0), end)
    rho, kappa = lot
    values = shape(m["law"], m["parameters"], kappa * loading * _NODES)
    return float(rho * loading * (values @ _SHARES))
