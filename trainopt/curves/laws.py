"""Resistance laws R(l): how a filter's resistance grows with its loading (model.md, section 2).

Loading l in L/m², resistance R in bar/LMH, the k's in m²/L, S(l) = ∫₀ˡ R dl in bar·h.
All take a scalar or an array of loadings, never negative, and are infinite at and past a law's pole.
Every mechanistic law is R0 times a shape that is 1 at l = 0. Source of the four blocking laws and of their
general form: Hermia, Trans. IChemE 60 (1982) 183.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import overload

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

RESISTANCE_UNIT = "bar/LMH"
PER_LOADING_UNIT = "m2/L"


@dataclass(frozen=True)
class Law:
    """One resistance law; the callables work on arrays of loadings inside the pole and know no guards.

    `shape(l, *k)` is R/R0 and `area(l, *k)` is S/R0; `slopes(l, *k)` are the derivatives of ln R by each k,
    then by l; `area_slopes(l, *k)` those of S/R0 by each k; `first_pole(*k)` the loading where R is infinite.
    `degree` is a polynomial's; None for a mechanistic law.
    """

    name: str
    about: str
    parameters: tuple[str, ...]
    units: tuple[str, ...]
    shape: Callable[..., Floats]
    area: Callable[..., Floats]
    slopes: Callable[..., tuple[Floats, ...]]
    area_slopes: Callable[..., tuple[Floats, ...]]
    first_pole: Callable[..., float]
    degree: int | None = None

    @property
    def polynomial(self) -> bool:
        """Whether the parameters are polynomial coefficients c0, c1, …"""
        return self.degree is not None

    def pole(self, *p: float) -> float:
        """Loading in L/m² at which the resistance becomes infinite (infinite where it never does)."""
        return self.first_pole(*p) if self.polynomial else self.first_pole(*p[1:])

    @overload
    def resistance(self, loading: float, *p: float) -> float: ...
    @overload
    def resistance(self, loading: Floats, *p: float) -> Floats: ...
    def resistance(self, loading: float | Floats, *p: float) -> float | Floats:
        """R(l) in bar/LMH for parameters in the order of `parameters`; infinite at and past the pole."""
        return _guarded(self.shape, loading, self.pole(*p), *self._split(p))

    @overload
    def integral(self, loading: float, *p: float) -> float: ...
    @overload
    def integral(self, loading: Floats, *p: float) -> Floats: ...
    def integral(self, loading: float | Floats, *p: float) -> float | Floats:
        """S(l) = ∫₀ˡ R dl in bar·h, in closed form; infinite at and past the pole."""
        return _guarded(self.area, loading, self.pole(*p), *self._split(p))

    @overload
    def peak(self, loading: float, *p: float) -> float: ...
    @overload
    def peak(self, loading: Floats, *p: float) -> Floats: ...
    def peak(self, loading: float | Floats, *p: float) -> float | Floats:
        """Highest R on [0, l] in bar/LMH, exact: only a polynomial can fall, and its maxima are known."""
        if not self.polynomial:
            return self.resistance(loading, *p)
        l = np.asarray(loading, dtype=float)
        out = np.maximum(np.asarray(self.resistance(l, *p)), p[0])
        for top in _maxima(p):
            out = np.where(l >= top, np.maximum(out, self.resistance(top, *p)), out)
        return out.item() if np.ndim(loading) == 0 else out

    def _split(self, p: tuple[float, ...]) -> tuple[float, tuple[float, ...]]:
        return (1.0, p) if self.polynomial else (p[0], p[1:])


def _guarded(
    function: Callable[..., Floats], loading: float | Floats, pole: float, factor: float, k: tuple[float, ...]
) -> float | Floats:
    """factor·function(l, *k) inside the pole, infinity elsewhere, without a warning from numpy."""
    l = np.asarray(loading, dtype=float)
    inside = l < pole
    with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
        if inside.all():
            out = factor * function(l, *k)
        else:
            out = np.where(inside, factor * function(np.where(inside, l, 0.0), *k), np.inf)
    return float(out) if np.ndim(loading) == 0 else np.asarray(out, dtype=float)


def _maxima(coefficients: tuple[float, ...]) -> list[float]:
    """Loadings above zero where a polynomial of degree 3 or less has a local maximum, in closed form."""
    c1, c2, c3 = (*coefficients[1:], 0.0, 0.0, 0.0)[:3]
    a, b, c = 3.0 * c3, 2.0 * c2, c1
    if a == 0.0:
        return [-c / b] if b < 0.0 < c else []
    discriminant = b * b - 4.0 * a * c
    if discriminant <= 0.0:
        return []
    q = -0.5 * (b + np.copysign(np.sqrt(discriminant), b))
    roots = [q / a] + ([c / q] if q != 0.0 else [])
    return [float(x) for x in roots if x > 0.0 and 2.0 * a * x + b < 0.0]


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


def _cake(l: Floats, k: float) -> Floats:
    return 1.0 + k * l


def _cake_area(l: Floats, k: float) -> Floats:
    return l * (1.0 + 0.5 * k * l)


def _cake_slopes(l: Floats, k: float) -> tuple[Floats, ...]:
    r = 1.0 + k * l
    return l / r, k / r


def _cake_area_slopes(l: Floats, k: float) -> tuple[Floats, ...]:
    return (0.5 * l * l + 0.0 * k,)


# --- intermediate: R/R0 = exp(k·l) ---


def _intermediate(l: Floats, k: float) -> Floats:
    return np.exp(k * l)


def _intermediate_area(l: Floats, k: float) -> Floats:
    return l * exponential_ratio(np.asarray(k * l))


def _intermediate_slopes(l: Floats, k: float) -> tuple[Floats, ...]:
    return l, np.full_like(l, k)


def _intermediate_area_slopes(l: Floats, k: float) -> tuple[Floats, ...]:
    return (_by_k(l, _intermediate(l, k), _intermediate_area(l, k), k),)


# --- standard: R/R0 = (1 − k·l/2)⁻² ---


def _standard(l: Floats, k: float) -> Floats:
    return (1.0 - 0.5 * k * l) ** -2


def _standard_area(l: Floats, k: float) -> Floats:
    return l / (1.0 - 0.5 * k * l)


def _standard_slopes(l: Floats, k: float) -> tuple[Floats, ...]:
    a = 1.0 - 0.5 * k * l
    return l / a, k / a


def _standard_area_slopes(l: Floats, k: float) -> tuple[Floats, ...]:
    return (0.5 * (l / (1.0 - 0.5 * k * l)) ** 2,)


# --- complete: R/R0 = (1 − k·l)⁻¹ ---


def _complete(l: Floats, k: float) -> Floats:
    return 1.0 / (1.0 - k * l)


def _complete_area(l: Floats, k: float) -> Floats:
    return l * _log_ratio(np.asarray(-k * l))


def _complete_slopes(l: Floats, k: float) -> tuple[Floats, ...]:
    a = 1.0 - k * l
    return l / a, k / a


def _complete_area_slopes(l: Floats, k: float) -> tuple[Floats, ...]:
    return (-l * l * _log_ratio_slope(np.asarray(-k * l)),)


# --- hermia: dR/dl = k·R0·(R/R0)ⁿ, so R/R0 = (1 + (1 − n)·k·l)^(1/(1 − n)) ---


def _hermia_log(l: Floats, k: float, n: float) -> Floats:
    """ln(R/R0), smooth through n = 1."""
    x = k * l
    return x * _log_ratio(np.asarray((1.0 - n) * x))


def _hermia(l: Floats, k: float, n: float) -> Floats:
    return np.exp(_hermia_log(l, k, n))


def _hermia_area(l: Floats, k: float, n: float) -> Floats:
    g = _hermia_log(l, k, n)
    return l * _log_ratio(np.asarray((1.0 - n) * k * l)) * exponential_ratio(np.asarray((2.0 - n) * g))


def _hermia_slopes(l: Floats, k: float, n: float) -> tuple[Floats, ...]:
    x = k * l
    u = (1.0 - n) * x
    return l / (1.0 + u), -x * x * _log_ratio_slope(u), k / (1.0 + u)


def _hermia_area_slopes(l: Floats, k: float, n: float) -> tuple[Floats, ...]:
    """By k from the scaling S = s(k·l)/k; by n by integrating its effect on R (Gauss–Legendre, 20 points)."""
    r, s = _hermia(l, k, n), _hermia_area(l, k, n)
    at = 0.5 * (_NODES + 1.0) * np.asarray(l)[..., None]
    inner = _hermia(at, k, n) * _hermia_slopes(at, k, n)[1]
    return _by_k(l, r, s, k), 0.5 * l * (inner @ _WEIGHTS)


def _by_k(l: Floats, r: Floats, s: Floats, k: float) -> Floats:
    """dS/dk of a law whose only loading scale is 1/k: (l·R − S)/k, and l²/2 at k = 0."""
    return (l * r - s) / k if k > 1e-9 / max(float(np.max(l, initial=0.0)), 1e-300) else 0.5 * l * l


def _pole_at(scale: float) -> Callable[..., float]:
    return lambda k: scale / k if k > 0.0 else float("inf")


def _hermia_pole(k: float, n: float) -> float:
    return 1.0 / ((n - 1.0) * k) if n > 1.0 and k > 0.0 else float("inf")


def _no_pole(*_: float) -> float:
    return float("inf")


_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(20)

_K = (("R0", "k"), (RESISTANCE_UNIT, PER_LOADING_UNIT))

_BLOCKING = (
    Law("cake", "deposit on the surface, R grows by the same amount per loading (Hermia 1982, n = 0)", *_K,
        _cake, _cake_area, _cake_slopes, _cake_area_slopes, _no_pole),
    Law("intermediate", "particles settle on pores and on each other (Hermia 1982, n = 1)", *_K,
        _intermediate, _intermediate_area, _intermediate_slopes, _intermediate_area_slopes, _no_pole),
    Law("standard", "pores narrow from inside (Hermia 1982, n = 3/2)", *_K,
        _standard, _standard_area, _standard_slopes, _standard_area_slopes, _pole_at(2.0)),
    Law("complete", "each particle closes a pore (Hermia 1982, n = 2)", *_K,
        _complete, _complete_area, _complete_slopes, _complete_area_slopes, _pole_at(1.0)),
    Law("hermia", "the general case, dR/dl = k·R0·(R/R0)ⁿ with n from 0 to 2 (Hermia 1982)",
        ("R0", "k", "n"), (RESISTANCE_UNIT, PER_LOADING_UNIT, ""),
        _hermia, _hermia_area, _hermia_slopes, _hermia_area_slopes, _hermia_pole),
)  # fmt: skip


# --- polynomials: R = c0 + c1·l + c2·l² + c3·l³ (common practice) ---


def _polynomial(l: Floats, *c: float) -> Floats:
    out = np.full_like(l, c[-1])
    for coefficient in c[-2::-1]:
        out = out * l + coefficient
    return out


def _polynomial_area(l: Floats, *c: float) -> Floats:
    return l * _polynomial(l, *(coefficient / (power + 1) for power, coefficient in enumerate(c)))


def _polynomial_slopes(l: Floats, *c: float) -> tuple[Floats, ...]:
    r = _polynomial(l, *c)
    along = _polynomial(l, *(power * c[power] for power in range(1, len(c))))
    return *(l**power / r for power in range(len(c))), along / r


def _polynomial_area_slopes(l: Floats, *c: float) -> tuple[Floats, ...]:
    return tuple(l ** (power + 1) / (power + 1) for power in range(len(c)))


def _first_root(*c: float) -> float:
    """First loading above zero where the polynomial is no longer positive: it means nothing from there on."""
    if all(coefficient >= 0.0 for coefficient in c):
        return float("inf")
    roots = np.roots(np.trim_zeros(np.array(c[::-1]), "f"))
    real = [float(root.real) for root in roots if abs(root.imag) <= 1e-12 * abs(root) and root.real > 0.0]
    return min(real, default=float("inf"))


def _polynomial_law(name: str, degree: int) -> Law:
    units = tuple(("bar/LMH", "bar/LMH/(L/m2)", "bar/LMH/(L/m2)^2", "bar/LMH/(L/m2)^3")[: degree + 1])
    about = f"degree {degree}, kept positive and non-decreasing on the tested range (common practice)"
    return Law(name, about, tuple(f"c{power}" for power in range(degree + 1)), units,
               _polynomial, _polynomial_area, _polynomial_slopes, _polynomial_area_slopes, _first_root,
               degree=degree)  # fmt: skip


_POLYNOMIALS = (_polynomial_law("quadratic", 2), _polynomial_law("cubic", 3))

LAWS: Mapping[str, Law] = MappingProxyType({law.name: law for law in (*_BLOCKING, *_POLYNOMIALS)})
