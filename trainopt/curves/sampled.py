"""Many sampled lots on one curve at once: the same as a list of `LotCurve`, with demand in arrays.

Loading l in L/m², demand in bar·h (model.md, section 1).
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import overload

import numpy as np

from trainopt.bench.run import Floats
from trainopt.curves.curve import LotCurve
from trainopt.curves.laws import LAWS

SLACK = 1e-12
"""Relative room for rounding where a loading is held against what is known of the curve."""


@dataclass(frozen=True, eq=False)
class SampledCurves(Sequence[LotCurve]):
    """R_s(l) = ρ_s·R_s0(κ_s·l) of n sampled lots.

    `parameters` of shape (n, k), one row for each lot (a single row: shared by all); `resistance_factor` ρ and
    `fouling_factor` κ of shape (n,). Beyond `known` L/m² of κ·l nothing was seen of the curve: demand there is
    infinite, so that a lot that would be loaded further counts as one that fails.
    """

    law: str
    parameters: Floats
    resistance_factor: Floats
    fouling_factor: Floats
    known: float = float("inf")

    def __len__(self) -> int:
        return len(self.resistance_factor)

    @overload
    def __getitem__(self, at: int) -> LotCurve: ...
    @overload
    def __getitem__(self, at: slice) -> SampledCurves: ...
    def __getitem__(self, at: int | slice) -> LotCurve | SampledCurves:
        if isinstance(at, slice):
            return self.at(np.arange(len(self))[at])
        row = self.parameters[at if len(self.parameters) > 1 else 0]
        return LotCurve(
            self.law, tuple(row.tolist()), float(self.resistance_factor[at]), float(self.fouling_factor[at])
        )

    def __iter__(self) -> Iterator[LotCurve]:
        return (self[k] for k in range(len(self)))

    def at(self, places: np.ndarray[tuple[int], np.dtype[np.intp]]) -> SampledCurves:
        """The lots at `places`, in that order."""
        rows = self.parameters[places] if len(self.parameters) > 1 else self.parameters
        rho, kappa = self.resistance_factor[places], self.fouling_factor[places]
        return replace(self, parameters=rows, resistance_factor=rho, fouling_factor=kappa)

    @cached_property
    def poles(self) -> Floats:
        """Loading in L/m² of each lot where its resistance becomes infinite, shape (n,)."""
        law = LAWS[self.law]
        poles = np.array([law.pole(*row) for row in self.parameters.tolist()])
        return np.asarray(poles / self.fouling_factor)

    def demand(self, operation: str, loading: Floats) -> Floats:
        """D in bar·h, shape (n, m), at each of m loadings; infinite past a pole and beyond what is known."""
        inner = self.fouling_factor[:, None] * loading
        beyond = inner > self.known * (1.0 + SLACK)
        if LAWS[self.law].polynomial and len(self.parameters) > 1:
            spent = _one_by_one(self, operation, loading)
        elif len(self.parameters) == 1:
            spent = self._shared(operation, loading, inner)
        else:
            spent = self._spread(operation, loading, inner)
        return np.where(beyond, np.inf, spent)

    def _shared(self, operation: str, loading: Floats, inner: Floats) -> Floats:
        """All lots on one shape: the law sees them as one array of loadings."""
        law, p = LAWS[self.law], tuple(self.parameters[0].tolist())
        if operation == "constant-pressure":
            return np.asarray((self.resistance_factor / self.fouling_factor)[:, None] * law.integral(inner, *p))
        return np.asarray(loading * self.resistance_factor[:, None] * law.peak(inner, *p))

    def _spread(self, operation: str, loading: Floats, inner: Floats) -> Floats:
        """Each lot on its own shape: the laws take columns of parameters as they take numbers."""
        law = LAWS[self.law]
        factor, *k = (self.parameters[:, [j]] for j in range(self.parameters.shape[1]))
        inside = loading < self.poles[:, None]
        safe = np.where(inside, inner, 0.0)
        with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
            if operation == "constant-pressure":
                spent = (self.resistance_factor / self.fouling_factor)[:, None] * factor * law.area(safe, *k)
            else:
                spent = loading * self.resistance_factor[:, None] * factor * law.shape(safe, *k)
        return np.where(inside, spent, np.inf)


def _one_by_one(curves: SampledCurves, operation: str, loading: Floats) -> Floats:
    if operation == "constant-pressure":
        return np.array([curve.demand_constant_pressure(loading) for curve in curves])
    return np.array([curve.demand_constant_flow(loading) for curve in curves])
