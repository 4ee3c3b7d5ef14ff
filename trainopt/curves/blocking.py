"""The four blocking laws and their general form, Hermia, Trans. IChemE 60 (1982) 183 (model.md, section 2).

For a law `x`: `x(l, *k)` is R/R0, `x_area` is S/R0 = ∫₀ˡ R/R0 dl in L/m², `x_slopes` the derivatives of ln
R by each parameter and then by l, `x_area_slopes` those of S/R0 by each parameter, `x_pole(*k)` the loading
in L/m² where R becomes infinite. Loadings l in L/m² (arrays inside the pole), k in m²/L, the order n
without unit.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(20)


# --- helpers that stay accurate as their argument goes to zero ---


def _log_ratio(u: Floats) -> Floats:
    """ln(1 + u)/u, 1 at u = 0."""
    safe = np.where(u == 0.0, 1.0, u)
    return np.where(u == 0.0, 1.0, np.log1p(safe) / safe)


def _log_ratio_slope(u: Floats) -> Floats:
    """Derivative of ln(1 + u)/u; a series where the closed form would cancel."""
    small = np.abs(u) < 0.02
    v = np.where(small, 1.0, u)
    exact = (v / (1.0 + v) - np.log1p(v)) / (v * v)
    w = np.where(small, u, 0.0)
    series = np.zeros_like(w)
    for power in range(9, 0, -1):
        series = series * w + (-1.0) ** power * power / (power + 1.0)
    return np.where(small, series, exact)


def exponential_ratio(z: Floats) -> Floats:
    """(eᶻ − 1)/z, 1 at z = 0."""
    safe = np.where(z == 0.0, 1.0, z)
    return np.where(z == 0.0, 1.0, np.expm1(safe) / safe)


# --- cake: R/R0 = 1 + k·l ---


def cake(l: Floats, k: float) -> Floats:
    """R/R0 = 1 + k·l."""
    return 1.0 + k * l


def cake_area(l: Floats, k: float) -> Floats:
    """l + k·l²/2."""
    return l * (1.0 + 0.5 * k * l)


def cake_slopes(l: Floats, k: float) -> tuple[Floats, ...]:
    """d ln R by each parameter and by l."""
    r = 1.0 + k * l
    return l / r, k / r


def cake_area_slopes(l: Floats, _: float) -> tuple[Floats, ...]:
    """d(S/R0) by each parameter."""
    return (0.5 * l * l,)


# --- intermediate: R/R0 = exp(k·l) ---


def intermediate(l: Floats, k: float) -> Floats:
    """R/R0 = exp(k·l)."""
    return np.exp(k * l)


def intermediate_area(l: Floats, k: float) -> Floats:
    """(e^(k·l) − 1)/k."""
    return l * exponential_ratio(np.asarray(k * l))


def intermediate_slopes(l: Floats, k: float) -> tuple[Floats, ...]:
    """d ln R by each parameter and by l."""
    return l, np.full_like(l, k)


def intermediate_area_slopes(l: Floats, k: float) -> tuple[Floats, ...]:
    """d(S/R0) by each parameter."""
    return (_by_k(l, intermediate(l, k), intermediate_area(l, k), k),)


# --- standard: R/R0 = (1 − k·l/2)⁻² ---


def standard(l: Floats, k: float) -> Floats:
    """R/R0 = (1 − k·l/2)⁻²."""
    return (1.0 - 0.5 * k * l) ** -2


def standard_area(l: Floats, k: float) -> Floats:
    """l/(1 − k·l/2)."""
    return l / (1.0 - 0.5 * k * l)


def standard_slopes(l: Floats, k: float) -> tuple[Floats, ...]:
    """d ln R by each parameter and by l."""
    a = 1.0 - 0.5 * k * l
    return l / a, k / a


def standard_area_slopes(l: Floats, k: float) -> tuple[Floats, ...]:
    """d(S/R0) by each parameter."""
    return (0.5 * (l / (1.0 - 0.5 * k * l)) ** 2,)


# --- complete: R/R0 = (1 − k·l)⁻¹ ---


def complete(l: Floats, k: float) -> Floats:
    """R/R0 = (1 − k·l)⁻¹."""
    return 1.0 / (1.0 - k * l)


def complete_area(l: Floats, k: float) -> Floats:
    """−ln(1 − k·l)/k."""
    return l * _log_ratio(np.asarray(-k * l))


def complete_slopes(l: Floats, k: float) -> tuple[Floats, ...]:
    """d ln R by each parameter and by l."""
    a = 1.0 - k * l
    return l / a, k / a


def complete_area_slopes(l: Floats, k: float) -> tuple[Floats, ...]:
    """d(S/R0) by each parameter."""
    return (-l * l * _log_ratio_slope(np.asarray(-k * l)),)


# --- hermia: dR/dl = k·R0·(R/R0)ⁿ, so R/R0 = (1 + (1 − n)·k·l)^(1/(1 − n)) ---


def hermia_log(l: Floats, k: float, n: float) -> Floats:
    """ln(R/R0), smooth through n = 1."""
    x = k * l
    return x * _log_ratio(np.asarray((1.0 - n) * x))


def hermia(l: Floats, k: float, n: float) -> Floats:
    """R/R0 = (1 + (1−n)·k·l)^(1/(1−n)), n from 0 to 2."""
    return np.exp(hermia_log(l, k, n))


def hermia_area(l: Floats, k: float, n: float) -> Floats:
    """(r^(2−n) − 1)/((2−n)·k) with r = R/R0, written so that it is smooth through n = 2 and k = 0."""
    g = hermia_log(l, k, n)
    return l * _log_ratio(np.asarray((1.0 - n) * k * l)) * exponential_ratio(np.asarray((2.0 - n) * g))


def hermia_slopes(l: Floats, k: float, n: float) -> tuple[Floats, ...]:
    """d ln R by each parameter and by l."""
    x = k * l
    u = (1.0 - n) * x
    return l / (1.0 + u), -x * x * _log_ratio_slope(u), k / (1.0 + u)


def hermia_area_slopes(l: Floats, k: float, n: float) -> tuple[Floats, ...]:
    """By k from the scaling S = s(k·l)/k; by n by integrating its effect on R (Gauss–Legendre, 20 points)."""
    r, s = hermia(l, k, n), hermia_area(l, k, n)
    at = 0.5 * (_NODES + 1.0) * np.asarray(l)[..., None]
    inner = hermia(at, k, n) * hermia_slopes(at, k, n)[1]
    return _by_k(l, r, s, k), 0.5 * l * (inner @ _WEIGHTS)


def _by_k(l: Floats, r: Floats, s: Floats, k: float) -> Floats:
    """dS/dk of a law whose only loading scale is 1/k: (l·R − S)/k, and l²/2 at k = 0."""
    return (l * r - s) / k if k > 1e-9 / max(float(np.max(l, initial=0.0)), 1e-300) else 0.5 * l * l


def standard_pole(k: float) -> float:
    """2/k."""
    return 2.0 / k if k > 0.0 else float("inf")


def complete_pole(k: float) -> float:
    """1/k."""
    return 1.0 / k if k > 0.0 else float("inf")


def hermia_pole(k: float, n: float) -> float:
    """The pole; only n > 1 has one."""
    return 1.0 / ((n - 1.0) * k) if n > 1.0 and k > 0.0 else float("inf")
