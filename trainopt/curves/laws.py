"""Resistance laws R(l): how a filter's resistance grows with its loading (model.md, section 2).

Loading l in L/m², resistance R in bar/LMH, the k's in m²/L, S(l) = ∫₀ˡ R dl in bar·h. All take a scalar or
an array of loadings, never negative, and are infinite at and past a law's pole. Every mechanistic law is R0
times a shape that is 1 at l = 0. The algebra stands in `blocking.py`, `combined.py` and `polynomial.py`.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import overload

import numpy as np

from trainopt.curves import blocking, combined, polynomial
from trainopt.curves.blocking import Floats

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
        return _guarded(self.shape, loading, self.pole(*p), *self.split(p))

    @overload
    def integral(self, loading: float, *p: float) -> float: ...
    @overload
    def integral(self, loading: Floats, *p: float) -> Floats: ...
    def integral(self, loading: float | Floats, *p: float) -> float | Floats:
        """S(l) = ∫₀ˡ R dl in bar·h, in closed form; infinite at and past the pole."""
        return _guarded(self.area, loading, self.pole(*p), *self.split(p))

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
        for top in polynomial.maxima(p):
            out = np.where(l >= top, np.maximum(out, self.resistance(top, *p)), out)
        return out.item() if np.ndim(loading) == 0 else out

    def split(self, p: tuple[float, ...]) -> tuple[float, tuple[float, ...]]:
        """The factor before the shape, and the shape's own parameters."""
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


def _no_pole(*_: float) -> float:
    return float("inf")


def _one_constant(name: str, about: str, pole: Callable[..., float]) -> Law:
    shape, area, slopes, area_slopes = (
        getattr(blocking, name + suffix) for suffix in ("", "_area", "_slopes", "_area_slopes")
    )
    units = (RESISTANCE_UNIT, PER_LOADING_UNIT)
    return Law(name, about, ("R0", "k"), units, shape, area, slopes, area_slopes, pole)


def _two_constants(name: str, about: str, constants: tuple[str, str], law: combined.Combined) -> Law:
    units = (RESISTANCE_UNIT, PER_LOADING_UNIT, PER_LOADING_UNIT)
    parts = (law.shape, law.area, law.slopes, law.area_slopes, law.pole)
    return Law(name, f"{about} (Bolton and others 2006)", ("R0", *constants), units, *parts)


def _polynomial(name: str, degree: int) -> Law:
    units = (RESISTANCE_UNIT, *(f"bar/LMH/(L/m2){power}" for power in ("", "^2", "^3")))[: degree + 1]
    return Law(
        name,
        f"degree {degree}, kept positive and non-decreasing on the tested range (common practice)",
        tuple(f"c{power}" for power in range(degree + 1)),
        units,
        polynomial.polynomial,
        polynomial.polynomial_area,
        polynomial.polynomial_slopes,
        polynomial.polynomial_area_slopes,
        polynomial.first_root,
        degree,
    )


_COMPLETE, _INTERMEDIATE = combined.Inner("complete"), combined.Inner("intermediate")

_ALL = (
    _one_constant("cake", "deposit on the surface, R grows by the same per loading (Hermia 1982, n = 0)", _no_pole),
    _one_constant("intermediate", "particles settle on pores and each other (Hermia 1982, n = 1)", _no_pole),
    _one_constant("standard", "pores narrow from inside (Hermia 1982, n = 3/2)", blocking.standard_pole),
    _one_constant("complete", "each particle closes a pore (Hermia 1982, n = 2)", blocking.complete_pole),
    Law(
        "hermia",
        "the general case, dR/dl = k·R0·(R/R0)ⁿ with n from 0 to 2 (Hermia 1982)",
        ("R0", "k", "n"),
        (RESISTANCE_UNIT, PER_LOADING_UNIT, ""),
        blocking.hermia,
        blocking.hermia_area,
        blocking.hermia_slopes,
        blocking.hermia_area_slopes,
        blocking.hermia_pole,
    ),
    _two_constants("cake-complete", "pores close, a cake grows", ("k_c", "k_b"), combined.CakeOver(_COMPLETE)),
    _two_constants(
        "cake-intermediate",
        "pores close in part, a cake grows",
        ("k_c", "k_i"),
        combined.CakeOver(_INTERMEDIATE),
    ),
    _two_constants("cake-standard", "pores narrow, a cake grows", ("k_c", "k_s"), combined.CakeBeside()),
    _two_constants("complete-standard", "pores close and narrow", ("k_b", "k_s"), combined.StandardUnder(_COMPLETE)),
    _two_constants(
        "intermediate-standard",
        "pores close in part and narrow",
        ("k_i", "k_s"),
        combined.StandardUnder(_INTERMEDIATE),
    ),
    _polynomial("quadratic", 2),
    _polynomial("cubic", 3),
)

LAWS: Mapping[str, Law] = MappingProxyType({law.name: law for law in _ALL})
