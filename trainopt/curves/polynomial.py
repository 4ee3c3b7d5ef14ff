"""Polynomials R(l) = c0 + c1·l + c2·l² + c3·l³ (common practice; model.md, section 2).

Loadings l in L/m², coefficients in bar/LMH per (L/m²) to the power of their place.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from trainopt.curves.blocking import Floats


def polynomial(l: Floats, *c: float) -> Floats:
    """R(l) in bar/LMH."""
    out = np.full_like(l, c[-1])
    for coefficient in c[-2::-1]:
        out = out * l + coefficient
    return out


def polynomial_area(l: Floats, *c: float) -> Floats:
    """S(l) in bar·h."""
    return l * polynomial(l, *(coefficient / (power + 1) for power, coefficient in enumerate(c)))


def polynomial_slopes(l: Floats, *c: float) -> tuple[Floats, ...]:
    """d ln R by each coefficient and by l."""
    r = polynomial(l, *c)
    along = polynomial(l, *(power * c[power] for power in range(1, len(c))))
    return *(l**power / r for power in range(len(c))), along / r


def polynomial_area_slopes(l: Floats, *c: float) -> tuple[Floats, ...]:
    """dS by each coefficient."""
    return tuple(l ** (power + 1) / (power + 1) for power in range(len(c)))


@lru_cache(maxsize=1024)
def first_root(*c: float) -> float:
    """First loading above zero where the polynomial is no longer positive: it means nothing from there on."""
    if all(coefficient >= 0.0 for coefficient in c):
        return float("inf")
    with np.errstate(over="ignore", invalid="ignore"):
        roots = _roots(np.array(c[::-1]))
    real = [float(root.real) for root in roots if abs(root.imag) <= 1e-12 * abs(root) and root.real > 0.0]
    return min(real, default=float("inf"))


def _roots(descending: Floats) -> np.ndarray[tuple[int], np.dtype[np.complex128]]:
    """Roots of a polynomial; a leading coefficient too small to matter is dropped."""
    while len(descending) > 1 and abs(descending[0]) < 1e-200 * np.max(np.abs(descending)):
        descending = descending[1:]
    return np.roots(descending).astype(complex)


@lru_cache(maxsize=1024)
def maxima(coefficients: tuple[float, ...]) -> tuple[float, ...]:
    """Loadings above zero where a polynomial of degree 3 or less has a local maximum, in closed form."""
    c1, c2, c3 = (*coefficients[1:], 0.0, 0.0, 0.0)[:3]
    a, b, c = 3.0 * c3, 2.0 * c2, c1
    if a == 0.0:
        return (-c / b,) if b < 0.0 < c and c < -1e300 * b else ()
    discriminant = b * b - 4.0 * a * c
    if discriminant <= 0.0:
        return ()
    q = -0.5 * (b + np.copysign(np.sqrt(discriminant), b))
    roots = [q / a] if abs(q) < 1e300 * abs(a) else []  # else it lies beyond any loading
    if q != 0.0 and abs(c) < 1e300 * abs(q):
        roots.append(c / q)
    return tuple(float(x) for x in roots if x > 0.0 and 2.0 * a * x + b < 0.0)
