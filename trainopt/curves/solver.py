"""Least squares within bounds, for a handful of parameters: Levenberg–Marquardt steps on the free
parameters.

A general solver does the same; this one exists because importing it would cost more than fitting every
medium of a design. Checked against certified nonlinear regressions in `tests/published/`. Source of the
damping: Marquardt, J. SIAM 11 (1963) 431; of the update: Nielsen, report IMM-REP-1999-05 (memory).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from trainopt.curves.blocking import Floats

Residuals = Callable[[Floats], tuple[Floats, Floats]]


@dataclass(frozen=True, eq=False)
class Solution:
    """Minimum of Σr²: parameters (k,), residuals (n,), Jacobian dr/dθ (n, k), steps taken."""

    x: Floats
    residuals: Floats
    jacobian: Floats
    steps: int
    converged: bool

    @property
    def cost(self) -> float:
        """Sum of squared residuals."""
        return float(self.residuals @ self.residuals)


def least_squares(
    function: Residuals, start: Floats, lower: Floats, upper: Floats, steps: int = 200, tolerance: float = 1e-10
) -> Solution:
    """Minimum of Σr(x)² with lower ≤ x ≤ upper; `function(x)` returns r (n,) and dr/dx (n, k).

    A point where a residual is not finite counts as worse than any other. Ends where a step moves no
    parameter by more than `tolerance` (relative to its size or 1e-3).
    """
    x = np.clip(start, lower, upper)
    residuals, jacobian = function(x)
    cost = float(residuals @ residuals)
    damping, growth = 1e-3, 2.0
    for step in range(steps):
        gradient = jacobian.T @ residuals
        free = _free(x, gradient, lower, upper)
        if not free.any():
            return Solution(x, residuals, jacobian, step, True)
        trial = _moved(x, free, _step(jacobian[:, free], gradient[free], damping), lower, upper)
        moved = trial - x
        if _small(moved, x, tolerance) or damping > 1e16:
            return _polished(function, Solution(x, residuals, jacobian, step, True), lower, upper, tolerance)
        new_residuals, new_jacobian = function(trial)
        new_cost = float(new_residuals @ new_residuals)
        if not new_cost < cost:
            damping, growth = damping * growth, growth * 2.0
            continue
        predicted = -float(moved @ (2.0 * gradient) + moved @ (jacobian.T @ (jacobian @ moved)))
        gain = (cost - new_cost) / predicted if predicted > 0.0 else 0.0
        damping = max(damping * max(1.0 / 3.0, 1.0 - (2.0 * gain - 1.0) ** 3), 1e-15)
        growth = 2.0
        x, residuals, jacobian, cost = trial, new_residuals, new_jacobian, new_cost
    return Solution(x, residuals, jacobian, steps, False)


def _free(x: Floats, gradient: Floats, lower: Floats, upper: Floats) -> NDArray[np.bool_]:
    """Parameters that no bound holds back."""
    return np.asarray(~(((x <= lower) & (gradient > 0.0)) | ((x >= upper) & (gradient < 0.0))))


def _moved(x: Floats, free: NDArray[np.bool_], move: Floats, lower: Floats, upper: Floats) -> Floats:
    trial = x.copy()
    trial[free] += move
    return np.asarray(np.clip(trial, lower, upper))


def _small(moved: Floats, x: Floats, tolerance: float) -> bool:
    return bool(np.all(np.abs(moved) <= tolerance * (np.abs(x) + 1e-3)))


def _polished(function: Residuals, found: Solution, lower: Floats, upper: Floats, tolerance: float) -> Solution:
    """A few undamped steps on the gradient alone: the sum of squares is flat to rounding long before x is settled."""
    best = found
    for _ in range(12 if tolerance < 1e-6 else 0):
        gradient = best.jacobian.T @ best.residuals
        free = _free(best.x, gradient, lower, upper)
        if not free.any():
            break
        trial = _moved(best.x, free, _step(best.jacobian[:, free], gradient[free], 0.0), lower, upper)
        if not _small(trial - best.x, best.x, 1e-4):
            break
        residuals, jacobian = function(trial)
        if not np.all(np.isfinite(residuals)) or residuals @ residuals > best.cost * (1.0 + 1e-9) + 1e-300:
            break
        settled = _small(trial - best.x, best.x, tolerance)
        best = Solution(trial, residuals, jacobian, best.steps + 1, True)
        if settled:
            break
    return best


def _step(jacobian: Floats, gradient: Floats, damping: float) -> Floats:
    """Damped Gauss–Newton step, columns scaled to unit length so that the damping means the same for each."""
    scale = np.sqrt(np.einsum("ij,ij->j", jacobian, jacobian))
    scale = np.where(scale > 0.0, scale, 1.0)
    scaled = jacobian / scale
    normal = scaled.T @ scaled
    normal.flat[:: len(normal) + 1] += damping
    try:
        move = np.linalg.solve(normal, -gradient / scale)
    except np.linalg.LinAlgError:
        move = np.linalg.lstsq(normal, -gradient / scale, rcond=None)[0]
    return np.asarray(move / scale)


def covariance(jacobian: Floats, variance: float) -> Floats:
    """Covariance (k, k) of the parameters: variance·(JᵀJ)⁻¹; infinite variance where the data say nothing."""
    scale = np.sqrt(np.einsum("ij,ij->j", jacobian, jacobian))
    dead = scale == 0.0
    scaled = jacobian / np.where(dead, 1.0, scale)
    values, vectors = np.linalg.eigh(scaled.T @ scaled)
    weak = values <= 1e-13 * values[-1] if values.size else values > 0.0
    inverse = (vectors / np.where(weak, np.inf, values)) @ vectors.T
    unknown = dead | (np.abs(vectors[:, weak]) > 1e-6).any(axis=1)
    out = variance * inverse / np.outer(np.where(dead, 1.0, scale), np.where(dead, 1.0, scale))
    out[unknown, unknown] = np.inf
    return np.asarray(out)
