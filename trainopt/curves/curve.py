"""A fitted or given resistance curve, and the same curve as one lot of feed sees it in the plant.

Loading l in L/m², resistance R in bar/LMH, demand in bar·h (model.md, sections 1 and 2).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, overload

from trainopt.bench.run import Flag
from trainopt.curves.blocking import Floats
from trainopt.curves.laws import LAWS

if TYPE_CHECKING:
    from trainopt.curves.evidence import Evidence


@dataclass(frozen=True)
class LotCurve:
    """R_s(l) = ρ·R(κ·l) of one lot: `resistance_factor` ρ (viscosity ratio included), `fouling_factor` κ.

    All methods take a scalar or an array of loadings in L/m² and are infinite at and past `pole`.
    """

    law: str
    parameters: tuple[float, ...]
    resistance_factor: float = 1.0
    fouling_factor: float = 1.0

    @property
    def pole(self) -> float:
        """Loading of this lot in L/m² at which the resistance becomes infinite."""
        return LAWS[self.law].pole(*self.parameters) / self.fouling_factor

    @overload
    def resistance(self, loading: float) -> float: ...
    @overload
    def resistance(self, loading: Floats) -> Floats: ...
    def resistance(self, loading: float | Floats) -> float | Floats:
        """R_s(l) in bar/LMH."""
        law = LAWS[self.law]
        return self.resistance_factor * law.resistance(self.fouling_factor * loading, *self.parameters)

    @overload
    def peak(self, loading: float) -> float: ...
    @overload
    def peak(self, loading: Floats) -> Floats: ...
    def peak(self, loading: float | Floats) -> float | Floats:
        """Highest R_s on [0, l] in bar/LMH, exact."""
        return self.resistance_factor * LAWS[self.law].peak(self.fouling_factor * loading, *self.parameters)

    @overload
    def demand_constant_flow(self, loading: float) -> float: ...
    @overload
    def demand_constant_flow(self, loading: Floats) -> Floats: ...
    def demand_constant_flow(self, loading: float | Floats) -> float | Floats:
        """Pressure × time spent at constant flow up to l: l times the highest R_s, bar·h (model.md, 1)."""
        return loading * self.peak(loading)

    @overload
    def demand_constant_pressure(self, loading: float) -> float: ...
    @overload
    def demand_constant_pressure(self, loading: Floats) -> Floats: ...
    def demand_constant_pressure(self, loading: float | Floats) -> float | Floats:
        """Pressure × time spent at constant total pressure up to l: ∫₀ˡ R_s dl, bar·h (model.md, 1)."""
        scale = self.resistance_factor / self.fouling_factor
        return scale * LAWS[self.law].integral(self.fouling_factor * loading, *self.parameters)


@dataclass(frozen=True)
class Estimate:
    """A parameter with its standard error (None where the curve was given, not fitted) and unit."""

    value: float
    se: float | None
    unit: str


@dataclass(frozen=True)
class LotEffect:
    """What a lot does to the shared curve: ρ (resistance) and κ (fouling), with standard errors."""

    resistance: float
    resistance_se: float | None
    fouling: float
    fouling_se: float | None


@dataclass(frozen=True)
class Alternative:
    """A law that was considered: AICc (lower is better), Akaike weight, root mean square relative error."""

    law: str
    aicc: float
    weight: float
    relative_error: float


@dataclass(frozen=True)
class Point:
    """One reduced reading: loading L/m², flux LMH, resistance bar/LMH, turbidity NTU (None where not read).

    `excluded` is the reason why the fit left it out, None where it was used; `pool_turbidity` NTU is that of the
    filtrate pooled so far.
    """

    run: str
    row: int
    lot: str
    loading: float
    flux: float
    resistance: float
    turbidity: float | None
    excluded: str | None
    pool_turbidity: float | None = None


@dataclass(frozen=True)
class Curve:
    """The resistance curve of a medium: shared shape, lots, what was tested.

    `tested_loading` L/m² and `tested_flux` LMH bound what the curve may be used for, `tested_temperature`
    degC is the temperature the resistances hold at, `turbidity_loading` L/m² is where the filtrate first
    reached the turbidity limit (None: no limit, or never reached). `covariance` is that of the parameters,
    in their order. `feed_loading` L/m² is how far the filter upstream had been loaded when the feed of the
    runs was collected (None: not said). `source` "runs" or "parameters". `evidence` is what the fit was
    made on.
    """

    medium: str
    law: str
    parameters: Mapping[str, Estimate]
    covariance: tuple[tuple[float, ...], ...] | None
    tested_loading: float
    tested_flux: float
    tested_temperature: float | None
    turbidity_loading: float | None
    feed_loading: float | None
    lots: Mapping[str, LotEffect]
    alternatives: tuple[Alternative, ...]
    points: tuple[Point, ...]
    flags: tuple[Flag, ...]
    source: str
    evidence: Evidence | None = field(default=None, compare=False, repr=False)

    def lot_curve(self, lot: str | None = None, viscosity_ratio: float = 1.0) -> LotCurve:
        """The curve as `lot` sees it, resistances times `viscosity_ratio`; None is the pooled curve (1, 1).

        A lot that was not tested on this medium gets the worst ρ and the worst κ of those that were.
        """
        values = tuple(estimate.value for estimate in self.parameters.values())
        rho, kappa = self._multipliers(lot)
        return LotCurve(self.law, values, rho * viscosity_ratio, kappa)

    def _multipliers(self, lot: str | None) -> tuple[float, float]:
        if lot is None or not self.lots:
            return 1.0, 1.0
        if lot in self.lots:
            return self.lots[lot].resistance, self.lots[lot].fouling
        effects = self.lots.values()
        return max(effect.resistance for effect in effects), max(effect.fouling for effect in effects)
