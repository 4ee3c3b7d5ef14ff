"""Sampled lots for a reliability basis: what a batch may meet that no bench run has seen.

Per lot: the feed's fouling (one draw per batch, shared by all stages), each stage's module and media lot (resistance
and fouling, drawn apart from each other), and the parameters of each fitted curve within what its fit leaves open.
Draws are named, not counted: a stage's numbers follow from the seed, its name and its medium alone, so that a what-if
on anything else meets the same lots (common random numbers), and more samples begin with the fewer.
"""

from __future__ import annotations

import hashlib
import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from trainopt.curves.curve import Curve
from trainopt.curves.laws import LAWS
from trainopt.curves.sampled import SampledCurves
from trainopt.curves.uncertainty import lot_spread
from trainopt.train.problem import Floats

if TYPE_CHECKING:
    from trainopt.files import Medium, Scenario

DESIGN, FRESH = "design", "fresh"
"""Streams of samples: those a design is made for, and those it is measured with afterwards."""
FRESH_TIMES = 10
"""How many times more lots a design is measured with than it was made for."""
ENOUGH_LOTS = 3


@dataclass(frozen=True)
class LogNormal:
    """A multiplier's spread: mean and standard deviation of its logarithm, without unit."""

    mean: float = 0.0
    deviation: float = 0.0

    @staticmethod
    def of_variation(cv: float) -> LogNormal:
        """Mean 1 with the coefficient of variation `cv`: σ² = ln(1 + cv²), μ = −σ²/2."""
        variance = math.log1p(cv * cv)
        return LogNormal(-0.5 * variance, math.sqrt(variance))

    def values(self, normal: Floats) -> Floats:
        """The multiplier at standard normal deviates."""
        return np.asarray(np.exp(self.mean + self.deviation * normal))


@dataclass(frozen=True)
class Sampler:
    """Draws the lots of one medium in one stage.

    `ratio` is the viscosity ratio; `known` L/m² how far the curve may be asked (infinite: no end), in loading at κ = 1.
    `resistance`, `fouling` and `feed` are the spreads; `shape` whether the fit's own uncertainty is drawn too.
    """

    seed: int
    stage: str
    curve: Curve
    ratio: float
    known: float
    resistance: LogNormal
    fouling: LogNormal
    feed: LogNormal

    def curves(self, lots: int, stream: str = DESIGN) -> SampledCurves:
        """The curves of so many lots of a stream."""
        name = (self.stage, self.curve.medium)
        rho = self.resistance.values(_normal(self.seed, lots, stream, "resistance", *name))
        kappa = self.fouling.values(_normal(self.seed, lots, stream, "fouling", *name))
        feed = self.feed.values(_normal(self.seed, lots, stream, "feed"))
        return SampledCurves(
            self.curve.law, drawn_parameters(self.curve, self.seed, lots, stream), self.ratio * rho, kappa * feed,
            self.known,
        )  # fmt: skip

    @property
    def varies(self) -> bool:
        """Whether any two lots differ."""
        spread = self.resistance.deviation + self.fouling.deviation + self.feed.deviation
        return spread > 0.0 or root_covariance(self.curve) is not None


def spreads(medium: Medium, curve: Curve) -> tuple[LogNormal, LogNormal]:
    """Spread of ρ and of κ between module and media lots: as given, else as seen over three or more lots, else none."""
    given = medium.variability
    seen = _seen(curve)
    resistance = given.resistance if given is not None else None
    fouling = given.fouling if given is not None else None
    return (
        seen[0] if resistance is None else LogNormal.of_variation(resistance),
        seen[1] if fouling is None else LogNormal.of_variation(fouling),
    )


def _seen(curve: Curve) -> tuple[LogNormal, LogNormal]:
    if len(curve.lots) < ENOUGH_LOTS:
        return LogNormal(), LogNormal()
    logs = np.log([(effect.resistance, effect.fouling) for effect in curve.lots.values()])
    means: list[float] = logs.mean(axis=0).tolist()
    fitted = lot_spread(curve)
    if fitted is not None:
        return LogNormal(means[0], fitted.log_resistance), LogNormal(means[1], fitted.log_fouling)
    deviations: list[float] = logs.std(axis=0, ddof=1).tolist()
    return LogNormal(means[0], deviations[0]), LogNormal(means[1], deviations[1])


def sampler(scenario: Scenario, seed: int, stage: str, medium: Medium, curve: Curve, ratio: float) -> Sampler:
    """The sampler of a medium in a stage; its curve may be asked as far as it was tested unless a limit is given."""
    resistance, fouling = spreads(medium, curve)
    feed = scenario.feed_variability
    return Sampler(
        seed=seed,
        stage=stage,
        curve=curve,
        ratio=ratio,
        known=curve.tested_loading if medium.limits.loading is None else math.inf,
        resistance=resistance,
        fouling=fouling,
        feed=LogNormal() if feed is None else LogNormal.of_variation(feed.fouling),
    )


def root_covariance(curve: Curve) -> Floats | None:
    """A root C of the covariance of a fitted curve's parameters, C·Cᵀ; None where it was given or is not known."""
    if curve.covariance is None:
        return None
    covariance = np.array(curve.covariance)
    if not np.isfinite(covariance).all():
        return None
    scale = np.sqrt(np.maximum(np.diag(covariance), 0.0))
    unit = covariance / np.outer(np.where(scale > 0.0, scale, 1.0), np.where(scale > 0.0, scale, 1.0))
    values, vectors = np.linalg.eigh(unit)
    # Symmetric, so that no sign of an eigenvector matters.
    root = vectors * np.sqrt(np.maximum(values, 0.0)) @ vectors.T
    return np.asarray(scale[:, None] * root) if scale.any() else None


def drawn_parameters(curve: Curve, seed: int, lots: int, stream: str) -> Floats:
    """Parameters of each lot, shape (lots, k): within what the fit leaves open; one row where nothing is drawn.

    The fit's covariance is taken as that of normal errors (large samples). Constants of the laws stay what they can be:
    R0 above zero, the k's not below it, n between 0 and 2.
    """
    values = np.array([estimate.value for estimate in curve.parameters.values()])
    root = root_covariance(curve)
    if root is None:
        return np.asarray(values[None, :])
    normal = np.stack(
        [_normal(seed, lots, stream, "parameter", curve.medium, name) for name in curve.parameters], axis=1
    )
    drawn = np.asarray(values + normal @ root.T)
    if not LAWS[curve.law].polynomial:
        least = np.zeros(len(values))
        least[0] = 1e-3 * values[0]
        most = np.array([2.0 if name == "n" else np.inf for name in curve.parameters])
        drawn = np.clip(drawn, least, most)
    return drawn


def _normal(seed: int, count: int, *names: str) -> Floats:
    """Standard normal deviates that follow from the seed and the names alone; a longer row begins with the shorter."""
    digest = hashlib.sha256("\x1f".join(names).encode()).digest()
    words = [int.from_bytes(digest[k : k + 4], "big") for k in range(0, 16, 4)]
    return np.random.default_rng([seed, *words]).standard_normal(count)
