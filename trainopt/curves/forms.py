"""How a law's parameters are searched: scaled, bounded, with starting values.

A form maps its own coordinates θ to the law's natural parameters. Mechanistic laws have one: θ = (ln R0,
k·L, …) with k ≥ 0 and the order n from 0 to 2. Polynomials must be positive and non-decreasing on [0, L].
The derivative of a quadratic is a straight line: both its ends are kept non-negative. The derivative of a
cubic is q(z) = b0·(1−z)² + 2·b1·z·(1−z) + b2·z², z = l/L, and is non-negative on [0, 1] exactly when b0 ≥
0, b2 ≥ 0 and b1 ≥ −√(b0·b2) (the quadratic case of the Markov–Lukács theorem). Where the free minimum is
outside, the constrained one is on that set's edge: either with all b ≥ 0, or with q = g·(z − z0)².
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np

from trainopt.curves.blocking import Floats
from trainopt.curves.laws import Law


@dataclass(frozen=True, eq=False)
class Form:
    """Coordinates θ (size,) of a law: `natural(θ)` the parameters, `slopes(θ)` their derivatives (k, size).

    `allows(θ)` says whether an answer may be used, `final` that no further form needs to be tried after it.
    """

    law: Law
    lower: Floats
    upper: Floats
    starts: tuple[Floats, ...]
    natural: Callable[[Floats], tuple[float, ...]]
    slopes: Callable[[Floats], Floats]
    allows: Callable[[Floats], bool]
    final: bool

    @property
    def size(self) -> int:
        """Number of coordinates."""
        return len(self.lower)


def forms(law: Law, reach: float, loading: Floats, resistance: Floats) -> Iterator[Form]:
    """The forms to try, in order, for a fit over loadings up to `reach` L/m²."""
    first, last = _ends(loading, resistance)
    if law.polynomial:
        yield from _polynomial_forms(law, reach, first, last, loading, resistance)
    elif law.name == "cake":
        line = np.stack([np.ones_like(loading), loading / reach], axis=1)
        r0, rise = np.maximum(_relative_least_squares(line, resistance), 1e-3 * first)
        yield _mechanistic_form(law, reach, float(r0), float(r0 + rise))
    else:
        yield _mechanistic_form(law, reach, first, last)


def _relative_least_squares(columns: Floats, resistance: Floats) -> Floats:
    """Coefficients that make the sum of squared relative errors of a linear law least, lots as one."""
    solution = np.linalg.lstsq(columns / resistance[:, None], np.ones(len(resistance)), rcond=None)[0]
    return np.asarray(solution)


def _ends(loading: Floats, resistance: Floats) -> tuple[float, float]:
    """Typical resistance, bar/LMH, of the least and of the most loaded tenth of the readings."""
    order = np.argsort(loading, kind="stable")
    tenth = max(len(order) // 10, 1)
    first = float(np.median(resistance[order[:tenth]]))
    last = float(np.median(resistance[order[-tenth:]]))
    return first, max(last, first * 1.05)


def _always(_: Floats) -> bool:
    return True


def _mechanistic_form(law: Law, reach: float, first: float, last: float) -> Form:
    constants = len(law.parameters) - 1
    scale = np.array([1.0 if name == "n" else 1.0 / reach for name in law.parameters[1:]])
    lower = np.array([-np.inf, *[0.0] * constants])
    upper = np.array([np.inf, *[2.0 if name == "n" else np.inf for name in law.parameters[1:]]])

    def natural(theta: Floats) -> tuple[float, ...]:
        return (float(np.exp(theta[0])), *(float(value) for value in theta[1:] * scale))

    def slopes(theta: Floats) -> Floats:
        return np.diag(np.array([np.exp(theta[0]), *scale]))

    starts = tuple(np.array([np.log(first), *values]) for values in _constants(law.name, last / first))
    return Form(law, lower, upper, starts, natural, slopes, _always, True)


_ALONE: dict[str, Callable[[float], float]] = {
    "cake": lambda ratio: ratio - 1.0,
    "intermediate": lambda ratio: float(np.log(ratio)),
    "standard": lambda ratio: 2.0 * (1.0 - ratio**-0.5),
    "complete": lambda ratio: 1.0 - 1.0 / ratio,
}
"""k·L of a law that reaches R/R0 = ratio at L."""


def _constants(name: str, ratio: float) -> list[tuple[float, ...]]:
    """Starting values of the constants times L: each mechanism alone, and both sharing the rise evenly."""
    if name == "hermia":
        return [
            (_ALONE["cake"](ratio), 0.1),
            (_ALONE["intermediate"](ratio), 1.0),
            (_ALONE["standard"](ratio), 1.5),
            (_ALONE["complete"](ratio), 1.9),
        ]
    if name in _ALONE:
        return [(_ALONE[name](ratio),)]
    one, other = name.split("-")
    shared = ratio**0.5
    return [
        (_ALONE[one](shared), _ALONE[other](shared)),
        (_ALONE[one](ratio), 0.01 * _ALONE[other](ratio)),
        (0.01 * _ALONE[one](ratio), _ALONE[other](ratio)),
    ]


def _polynomial_forms(
    law: Law, reach: float, first: float, last: float, loading: Floats, resistance: Floats
) -> Iterator[Form]:
    degree = law.degree or 0
    matrix = _from_ends(degree, reach) * first
    rise = last / first - 1.0
    powers = loading[:, None] ** np.arange(degree + 1)
    start = _relative_least_squares(powers @ matrix, resistance)
    if not np.all(powers @ matrix @ start > 0.0):
        start = np.array([1.0, *[rise] * degree])
    low = np.array([1e-6, *[0.0] * degree])
    high = np.full(degree + 1, np.inf)

    def natural(theta: Floats) -> tuple[float, ...]:
        return tuple(float(value) for value in matrix @ theta)

    def slopes(_: Floats) -> Floats:
        return matrix

    if degree == 3:
        free = np.array([1e-6, -np.inf, -np.inf, -np.inf])
        yield Form(law, free, high, (start,), natural, slopes, _non_decreasing, True)
    yield Form(law, low, high, (start,), natural, slopes, _always, degree == 2)
    if degree == 3:
        yield _touching_form(law, matrix, rise)


def _non_decreasing(theta: Floats) -> bool:
    _, b0, b1, b2 = theta
    return bool(b0 >= 0.0 and b2 >= 0.0 and b1 >= -np.sqrt(b0 * b2))


def _touching_form(law: Law, matrix: Floats, rise: float) -> Form:
    """Cubics whose slope is zero once inside the range: q = g·(z − z0)², b = g·(z0², −z0·(1−z0), (1−z0)²)."""

    def natural(theta: Floats) -> tuple[float, ...]:
        c0, g, z = theta
        ends = np.array([c0, g * z * z, -g * z * (1.0 - z), g * (1.0 - z) ** 2])
        return tuple(float(value) for value in matrix @ ends)

    def slopes(theta: Floats) -> Floats:
        _, g, z = theta
        by_g = [0.0, z * z, -z * (1.0 - z), (1.0 - z) ** 2]
        by_z = [0.0, 2.0 * g * z, g * (2.0 * z - 1.0), -2.0 * g * (1.0 - z)]
        return np.asarray(matrix @ np.array([[1.0, 0.0, 0.0, 0.0], by_g, by_z]).T)

    starts = tuple(np.array([1.0, 3.0 * rise, place]) for place in (0.5, 0.2, 0.8))
    upper = np.array([np.inf, np.inf, 1.0])
    return Form(law, np.array([1e-6, 0.0, 0.0]), upper, starts, natural, slopes, _always, True)


def _from_ends(degree: int, reach: float) -> Floats:
    """Matrix from (c0, b0, b1[, b2]), b the slope's Bernstein coefficients times L, to c0 … c_degree."""
    if degree == 2:
        rows = np.array([[1, 0, 0], [0, 1, 0], [0, -0.5, 0.5]])
    else:
        rows = np.array([[1, 0, 0, 0], [0, 1, 0, 0], [0, -1, 1, 0], [0, 1 / 3, -2 / 3, 1 / 3]])
    return np.asarray(rows / reach ** np.arange(degree + 1)[:, None])
