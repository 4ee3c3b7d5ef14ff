"""A bench for the tests: simulated runs written as a lab records them, and run entries for them."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from trainopt.bench.reduce import reduce_run
from trainopt.bench.run import ReducedRun
from trainopt.curves.curve import Curve
from trainopt.curves.laws import LAWS
from trainopt.curves.medium import fit_curve
from trainopt.errors import Problem

AREA = 0.0023  # m², 23 cm²
PSI = 0.06894757293168361  # bar


@dataclass(frozen=True)
class RunEntry:
    """The fields of a medium's run, as `trainopt.files.Run` has them."""

    file: Path
    lot: str = "unnamed"
    operation: str = "constant-flow"
    area: float = AREA
    pressure: float | None = None
    temperature: float | None = None
    density: float | None = None
    hold_up: float = 0.0
    columns: dict[str, str] | None = None
    sheet: str | None = None
    keep: bool = False
    tare: float | None = None
    feed_loading: float | None = None


@dataclass(frozen=True)
class Spec:
    """The fields of a medium's curve, as `trainopt.files.CurveSpec` has them."""

    runs: tuple[RunEntry, ...] = ()
    law: str = "auto"
    parameters: dict[str, float] | None = None
    coefficients: tuple[float, ...] | None = None
    tested: Any = None
    lots: Any = None
    origin: Any = None


@dataclass(frozen=True)
class Limits:
    """The limits that a curve looks at, as `trainopt.files.Limits` has them."""

    turbidity: float | None = None
    pool_turbidity: float | None = None
    differential_pressure: float | None = None


class Source:
    """Where a medium was written."""

    def at(self, loc: tuple[object, ...], text: str) -> Problem:
        return Problem("medium.yaml", 3, f"{'.'.join(map(str, loc))}: {text}")


@dataclass(frozen=True)
class MediumEntry:
    """A medium, as `trainopt.files.Medium` has it."""

    curve: Spec
    limits: Limits = Limits()
    medium: str = "oat-coarse"
    source: Source = field(default_factory=Source)


def fitted(*runs: RunEntry, law: str = "auto", limits: Limits = Limits()) -> Curve:
    return fit_curve(MediumEntry(Spec(runs, law), limits))  # type: ignore[arg-type]


def where(loc: tuple[str, ...], text: str) -> Problem:
    return Problem("medium.yaml", 7, f"{'.'.join(loc)}: {text}")


def reduced(path: Path, **settings: object) -> ReducedRun:
    return reduce_run(RunEntry(path, **settings), where)  # type: ignore[arg-type]


@dataclass(frozen=True)
class Lab:
    """A constant-flow run of known law: n readings up to `reach` L/m² at `flux` LMH."""

    law: str = "intermediate"
    parameters: tuple[float, ...] = (1e-3, 0.012)
    rho: float = 1.0
    kappa: float = 1.0
    flux: float = 150.0
    reach: float = 150.0
    n: int = 61
    noise: float = 0.0
    seed: int = 0
    slip: tuple[int, int, float] | None = None  # first and last reading, part of the flow that is left
    turbidity: tuple[float, float] = (1.0, 8.0)
    rows: dict[str, np.ndarray] = field(init=False, compare=False)

    def __post_init__(self) -> None:
        rng = np.random.default_rng(self.seed)
        time = np.linspace(0.0, self.reach / self.flux, self.n)
        flux = np.full(self.n, self.flux)
        if self.slip:
            flux[self.slip[0] : self.slip[1]] *= self.slip[2]
        loading = np.concatenate([[0.0], np.cumsum(flux[1:] * np.diff(time))])
        resistance = self.rho * LAWS[self.law].resistance(self.kappa * loading, *self.parameters)
        pressure = resistance * flux * (1.0 + self.noise * rng.standard_normal(self.n))
        low, rise = self.turbidity
        turbidity = low + rise * (loading / self.reach) ** 3
        rows = {
            "time": time,
            "loading": loading,
            "flux": flux,
            "resistance": resistance,
            "pressure": pressure,
        }
        object.__setattr__(self, "rows", {**rows, "turbidity": turbidity})

    def table(self, decimals: int = 6) -> list[list[str]]:
        """Header and rows in min, mL, psi, NTU; turbidity every sixth reading."""
        r = self.rows
        out = [["time (min)", "volume (mL)", "pressure (psi)", "turbidity (NTU)"]]
        for i in range(self.n):
            values = (r["time"][i] * 60.0, r["loading"][i] * AREA * 1000.0, r["pressure"][i] / PSI)
            read = f"{r['turbidity'][i]:.3f}" if i % 6 == 0 else ""
            out.append([*(f"{value:.{decimals}f}" for value in values), read])
        return out

    def write(self, path: Path, decimals: int = 6) -> Path:
        return write_rows(path, self.table(decimals))


def write_rows(path: Path, rows: list[list[str]], delimiter: str = ",") -> Path:
    path.write_text("".join(delimiter.join(row) + "\n" for row in rows), encoding="utf-8")
    return path


def write_text(path: Path, text: str) -> Path:
    path.write_text(text, encoding="utf-8")
    return path
