"""How far off, and how honest, the predicted area is: simulated runs of every law, kept by imperfect instruments.

Prints, per law and kind of run, the bias of the predicted minimum area and how often the 90 % interval holds the true
one. The area is that of a constant-flow stage: the smallest whose demand L·R(L) fits a budget, so it is 1/L.
Run: python tests/benchmarks/curve_coverage.py [seeds]
"""

from __future__ import annotations

import sys
import tempfile
import time as clock
from pathlib import Path

import numpy as np
from scipy.optimize import brentq

sys.path.insert(0, str(Path(__file__).parents[2]))

from tests.bench.lab import AREA, PSI, RunEntry, fitted, write_rows
from trainopt.curves.laws import LAWS
from trainopt.curves.uncertainty import bootstrap

PARAMETERS = {
    "cake": (1e-3, 0.06),
    "intermediate": (1e-3, 0.016),
    "standard": (1e-3, 0.009),
    "complete": (1e-3, 0.0058),
    "hermia": (1e-3, 0.010, 1.3),
    "cake-complete": (1e-3, 0.02, 0.004),
    "cake-intermediate": (1e-3, 0.03, 0.006),
    "cake-standard": (1e-3, 0.03, 0.006),
    "complete-standard": (1e-3, 0.0028, 0.005),
    "intermediate-standard": (1e-3, 0.005, 0.005),
    "quadratic": (1e-3, 1e-5, 4e-7),
    "cubic": (1e-3, 3e-5, -3e-7, 3e-9),
}
FLUX, REACH, PRESSURE = 150.0, 140.0, 1.0
BUDGET_LOADING = 110.0
NOISE, DRIFT, GAUGE, CYLINDER = 0.02, 0.02, 0.5 * PSI, 1e-3


def flow_rows(law: str, p: tuple[float, ...], rng: np.random.Generator) -> list[list[str]]:
    """Constant flow every two minutes: a pump that drifts and slips once, a 0.5 psi gauge, a 1 mL cylinder."""
    time = np.arange(0.0, REACH / FLUX, 1.0 / 60.0)
    flux = FLUX * (1.0 + DRIFT * (time / time[-1] - 0.5))
    start = int(rng.integers(len(time) // 3, len(time) - 8))
    flux[start : start + 5] *= 0.7
    loading = np.concatenate([[0.0], np.cumsum(flux[1:] * np.diff(time))])
    pressure = LAWS[law].resistance(loading, *p) * flux * (1.0 + NOISE * rng.standard_normal(len(time)))
    shown = np.round(pressure / GAUGE) * 0.5
    volume = np.round(loading * AREA / CYLINDER)
    head = ["time (min)", "volume (mL)", "pressure (psi)"]
    return [
        head,
        *([f"{t * 60:.0f}", f"{v:.0f}", f"{q:.1f}"] for t, v, q in zip(time, volume, shown, strict=True)),
    ]


def pressure_rows(law: str, p: tuple[float, ...], rng: np.random.Generator) -> list[list[str]]:
    """Constant pressure held within 1 %, read at 40 times to the second, a 1 mL cylinder."""
    end = LAWS[law].integral(REACH, *p) / PRESSURE
    rows = [["time (s)", "volume (mL)", "pressure (psi)"]]
    for time in np.linspace(0.0, end, 40):
        at = float(np.round(time * 3600.0))
        target = at / 3600.0 * PRESSURE
        loading = brentq(lambda l, y=target: LAWS[law].integral(l, *p) - y, 0.0, REACH * 1.02) if at else 0.0
        volume = loading * AREA / CYLINDER + 0.3 * rng.standard_normal() * (at > 0)
        shown = PRESSURE * (1.0 + 0.005 * rng.standard_normal()) / PSI
        rows.append([f"{at:.0f}", f"{max(np.round(volume), 0):.0f}", f"{shown:.2f}"])
    return rows


def loading_at_budget(law: str, p: tuple[float, ...], budget: float) -> float:
    """The loading whose demand L·R(L) is the budget, L/m²."""
    top = min(LAWS[law].pole(*p) * (1.0 - 1e-9), 2000.0)
    return float(brentq(lambda l: l * min(LAWS[law].resistance(l, *p), 1e6) - budget, 1e-6, top))


def trial(law: str, kind: str, seed: int, folder: Path, fit_as: str) -> tuple[float, bool]:
    """Relative error of the area, and whether the 90 % interval holds the true one."""
    p, rng = PARAMETERS[law], np.random.default_rng(seed)
    budget = BUDGET_LOADING * LAWS[law].resistance(BUDGET_LOADING, *p)
    entries = []
    for index in range(3):
        make = flow_rows if kind == "flow" else pressure_rows
        operation = "constant-flow" if kind == "flow" else "constant-pressure"
        path = write_rows(folder / f"{law}-{index}.csv", make(law, p, rng))
        entries.append(RunEntry(path, lot="a", operation=operation))
    curve = fitted(*entries, law=fit_as)
    area = 1.0 / loading_at_budget(curve.law, tuple(e.value for e in curve.parameters.values()), budget)
    draws = bootstrap(curve, draws=200, seed=seed)
    areas = [1.0 / loading_at_budget(draws.law, tuple(map(float, q)), budget) for q in draws.parameters]
    low, high = np.percentile(areas, [5.0, 95.0])
    true = 1.0 / BUDGET_LOADING
    return area / true - 1.0, bool(low <= true <= high)


def main() -> None:
    seeds = int(sys.argv[1]) if len(sys.argv) > 1 else 200
    print(f"{seeds} seeds, 3 runs each; bias of the minimum area, its spread, and coverage of the 90 % interval")
    print(f"{'law':<24}{'run':<10}{'bias':>9}{'spread':>9}{'coverage':>10}{'s/fit':>8}")
    with tempfile.TemporaryDirectory() as folder:
        for law in PARAMETERS:
            for kind in ("flow", "pressure"):
                start = clock.perf_counter()
                out = [trial(law, kind, seed, Path(folder), law) for seed in range(seeds)]
                errors = np.array([error for error, _ in out])
                inside = np.mean([held for _, held in out])
                each = (clock.perf_counter() - start) / seeds
                print(
                    f"{law:<24}{kind:<10}{errors.mean():>9.2%}{errors.std():>9.2%}{inside:>10.1%}{each:>8.2f}",
                    flush=True,
                )


if __name__ == "__main__":
    main()
