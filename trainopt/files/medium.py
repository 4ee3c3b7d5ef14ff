"""The medium file: one filter medium, its bench runs or its known curve, and its limits."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Any, TypeVar

from pydantic import PrivateAttr, ValidationInfo

from trainopt.files.fields import (
    Amount,
    Area,
    Choice,
    Density,
    Entry,
    Factor,
    FilePath,
    Flag,
    Flux,
    HoldUp,
    Loading,
    Name,
    Number,
    Pressure,
    Range,
    Rule,
    Spread,
    Temperature,
    Turbidity,
    Words,
    nearest,
    written,
    wrong,
)
from trainopt.files.source import Source

LAWS: dict[str, tuple[str, ...]] = {
    "cake": ("R0", "k"),
    "intermediate": ("R0", "k"),
    "standard": ("R0", "k"),
    "complete": ("R0", "k"),
    "hermia": ("R0", "k", "n"),
    "cake-complete": ("R0", "k_c", "k_b"),
    "cake-intermediate": ("R0", "k_c", "k_i"),
    "cake-standard": ("R0", "k_c", "k_s"),
    "complete-standard": ("R0", "k_b", "k_s"),
    "intermediate-standard": ("R0", "k_i", "k_s"),
    "quadratic": ("c0", "c1", "c2"),
    "cubic": ("c0", "c1", "c2", "c3"),
}
"""The resistance laws a file may name and the parameters each takes (held against `curves.laws` by a test)."""

POLYNOMIALS = ("quadratic", "cubic")
OPERATIONS = ("constant-flow", "constant-pressure")
COLUMN_ROLES = (
    "time",
    "volume",
    "mass",
    "pressure",
    "outlet_pressure",
    "differential_pressure",
    "turbidity",
    "feed_volume",
    "feed_mass",
)


@dataclass(frozen=True)
class Parameters(Rule):
    """A law's parameters by name: R0 a resistance, the k's per loading, n a bare number from 0 to 2."""

    def _expected(self) -> str:
        return "a mapping such as {R0: 0.0008 bar/LMH, k: 0.012 m2/L}"

    def _read(self, value: Any, info: ValidationInfo, /) -> dict[str, float]:
        if not isinstance(value, dict) or not value:
            raise ValueError(f"{written(value)} is not a law's parameters; expected {self.expected}")
        return _each({key: self.rule(key) for key in value}, value, info)

    @staticmethod
    def rule(name: str) -> Rule:
        """How the parameter of that name is read."""
        if name == "n":
            return Number(Range(least=0.0, most=2.0), "1.2")
        if name == "R0":
            return Amount("resistance", Range(above=0.0))
        return Amount("per_loading", Range(least=0.0))


@dataclass(frozen=True)
class Coefficients(Rule):
    """A polynomial's coefficients c0, c1, c2 (, c3), each with its unit, bar/LMH per (L/m2)^i."""

    def _expected(self) -> str:
        return "three or four such as [0.0008 bar/LMH, 1e-5 bar/LMH/(L/m2), 1e-7 bar/LMH/(L/m2)^2]"

    def _read(self, value: Any, info: ValidationInfo, /) -> tuple[float, ...]:
        if not isinstance(value, tuple | list) or not 3 <= len(value) <= 4:
            raise ValueError(f"{written(value)} is not a polynomial's coefficients; expected {self.expected}")
        rules: dict[int, Rule] = {0: Amount("resistance", Range(above=0.0))}
        rules |= {i: Amount(f"resistance_per_loading_{i}") for i in range(1, len(value))}
        return tuple(_each(rules, dict(enumerate(value)), info).values())


Key = TypeVar("Key", str, int)


def _each(rules: dict[Key, Rule], values: dict[Key, Any], info: ValidationInfo) -> dict[Key, float]:
    """Every value by its rule; the faults of all of them at once."""
    out: dict[Key, float] = {}
    faults: list[tuple[tuple[str | int, ...], str]] = []
    for key, value in values.items():
        try:
            out[key] = rules[key].read(value, info)
        except ValueError as error:
            faults.append(((key,), str(error)))
    if faults:
        raise wrong(*faults)
    return out


class TareAmount(float):
    """A tare in kg or L that remembers which: `dimension` is "mass" or "volume"."""

    dimension: str


@dataclass(frozen=True)
class Tare(Rule):
    """What the balance or the cylinder showed before any filtrate: a mass (kg) or a volume (L)."""

    def _expected(self) -> str:
        return "a mass or a volume, as the run records it, such as '35 g'"

    def _read(self, value: Any, info: ValidationInfo, /) -> float:
        faults = []
        for dimension in ("mass", "volume"):
            try:
                tare = TareAmount(Amount(dimension, Range(least=0.0)).read(value, info))
            except ValueError as error:
                faults.append(str(error))
            else:
                tare.dimension = dimension
                return tare
        raise ValueError(
            next((f for f in faults if "outside" in f), f"{written(value)} is no tare; expected {self.expected}")
        )


@dataclass(frozen=True)
class ColumnNames(Rule):
    """The headers of the run's columns by what they hold."""

    def _expected(self) -> str:
        return 'a mapping such as {time: "t [min]", volume: "V [mL]", pressure: "P [psi]"}'

    def _read(self, value: Any, info: ValidationInfo, /) -> dict[str, str]:
        if not isinstance(value, dict) or not value:
            raise ValueError(f"{written(value)} names no columns; expected {self.expected}")
        faults: list[tuple[tuple[str | int, ...], str]] = []
        out: dict[str, str] = {}
        for key, header in value.items():
            if key not in COLUMN_ROLES:
                faults.append(((key,), f"unknown column '{key}'; {nearest(key, COLUMN_ROLES)}"))
                continue
            try:
                out[key] = Words("t [min]").read(header, info)
            except ValueError as error:
                faults.append(((key,), str(error)))
        if faults:
            raise wrong(*faults)
        return out


class Run(Entry):
    """One bench run: the file that records it and what the file does not say."""

    file: Annotated[Path, FilePath()]
    """The recorded table (CSV or XLSX), relative to the medium file."""
    lot: Annotated[str, Name("a")] = "unnamed"
    """The lot of feed that was run."""
    operation: Annotated[str, Choice(OPERATIONS)]
    """How the run was driven: constant-flow, or constant-pressure (also any other flow history, by ∫ΔP dt)."""
    area: Area
    """Filter area of the bench device."""
    pressure: Pressure | None = None
    """Differential pressure of a constant-pressure run that does not record it."""
    temperature: Temperature | None = None
    """Temperature of the feed during the run; without it no viscosity correction is made."""
    density: Density | None = None
    """Density of the filtrate, where the run records mass."""
    hold_up: HoldUp = 0.0
    """Volume that leaves the device before filtrate does; taken off the volume recorded."""
    columns: Annotated[dict[str, str], ColumnNames()] | None = None
    """Which column holds what, where the headers alone do not tell."""
    sheet: Annotated[str, Words("run 1")] | None = None
    """The sheet of an XLSX workbook that records the run."""
    keep: Annotated[bool, Flag()] = False
    """Keep the readings that a quality rule would leave out."""
    feed_loading: Loading | None = None
    """Loading that the filter upstream had reached when this run's feed was collected."""
    tare: Annotated[float, Tare()] | None = None
    """What the balance or cylinder showed before any filtrate (default: its first reading)."""


class Tested(Entry):
    """The range over which a curve given by its parameters was tested."""

    loading: Loading
    """Highest loading tested."""
    flux: Flux
    """Highest flux tested."""
    temperature: Temperature | None = None
    """Temperature of the test; without it no viscosity correction is made."""


class LotSpec(Entry):
    """How one lot of feed differs from the curve: R(l) = resistance × R(fouling × l)."""

    resistance: Factor = 1.0
    """Multiplier on the resistance (rho)."""
    fouling: Factor = 1.0
    """Multiplier on the loading (kappa): above 1 the lot fouls faster."""


@dataclass(frozen=True)
class StandardErrors(Rule):
    """Standard errors of a curve's parameters or coefficients by name, each in its parameter's unit."""

    def _expected(self) -> str:
        return "a mapping such as {R0: 0.00001 bar/LMH, k: 0.0002 m2/L}"

    def _read(self, value: Any, info: ValidationInfo, /) -> dict[str, float]:
        if not isinstance(value, dict):
            raise ValueError(f"{written(value)} holds no standard errors; expected {self.expected}")
        return _each({key: self.rule(str(key)) for key in value}, value, info)

    @staticmethod
    def rule(name: str) -> Rule:
        """How the standard error of that name is read."""
        if name == "n":
            return Number(Range(least=0.0), "0.1")
        power = name[1:] if name[:1] == "c" and name[1:] in {"1", "2", "3"} else ""
        if power:
            return Amount(f"resistance_per_loading_{power}", Range(least=0.0))
        return Amount("resistance" if name in {"R0", "c0"} else "per_loading", Range(least=0.0))


class OriginRun(Entry):
    """One bench run that a frozen curve was fitted to."""

    file: Annotated[Path, FilePath()]
    """The recorded table, relative to the medium file."""
    lot: Annotated[str, Name("a")] = "unnamed"
    """The lot of feed that was run."""
    sha256: Annotated[str, Words("sha256:…")]
    """Hash of the file when the curve was frozen."""


class LotErrors(Entry):
    """Standard errors of a lot's multipliers."""

    resistance: Annotated[float, Number(Range(least=0.0), "0.01")] | None = None
    """Of the multiplier on the resistance."""
    fouling: Annotated[float, Number(Range(least=0.0), "0.01")] | None = None
    """Of the multiplier on the loading."""


class Origin(Entry):
    """Where a curve given by its parameters came from, as `trainopt curve --freeze` writes it."""

    runs: tuple[OriginRun, ...] = ()
    """The runs it was fitted to; one that has changed since is a warning."""
    standard_errors: Annotated[dict[str, float], StandardErrors()] | None = None
    """Standard errors of the parameters."""
    lots: dict[str, LotErrors] | None = None
    """Standard errors of the lots' multipliers."""
    turbidity: Turbidity | None = None
    """The turbidity limit that `turbidity_loading` belongs to."""
    pool_turbidity: Turbidity | None = None
    """The limit on the pooled filtrate that `turbidity_loading` belongs to."""
    turbidity_loading: Annotated[float, Amount("loading", Range(least=0.0))] | None = None
    """Loading at which the filtrate reached a turbidity limit."""
    feed_loading: Loading | None = None
    """Loading that the filter upstream had reached when the feed of the runs was collected."""


class CurveSpec(Entry):
    """Resistance against loading: by bench runs, by a law's parameters, or by a polynomial's coefficients."""

    law: Annotated[str, Choice(("auto", *LAWS))] = "auto"
    """The resistance law; auto lets the data choose among all laws."""
    runs: tuple[Run, ...] = ()
    """The bench runs the curve is fitted to."""
    parameters: Annotated[dict[str, float], Parameters()] | None = None
    """A law's parameters, in place of runs."""
    coefficients: Annotated[tuple[float, ...], Coefficients()] | None = None
    """A polynomial's coefficients, in place of runs."""
    tested: Tested | None = None
    """The range the parameters or coefficients were tested over (not with runs, which say it themselves)."""
    lots: dict[str, LotSpec] | None = None
    """How lots of feed differ, for a curve given by parameters or coefficients."""
    origin: Origin | None = None
    """The runs that the parameters were fitted to, with their uncertainty."""


class Limits(Entry):
    """What the medium may be asked for; a limit that is not given does not bind, unless its default says so."""

    loading: Loading | None = None
    """Highest loading (default: the highest loading tested)."""
    flux: Flux | None = None
    """Highest flux on the installed area (default: the highest flux tested)."""
    turbidity: Turbidity | None = None
    """Highest turbidity of the filtrate, NTU; the loading where it is reached becomes a cap."""
    pool_turbidity: Turbidity | None = None
    """Highest turbidity of the pooled filtrate, NTU; the loading where it is reached becomes a cap."""
    differential_pressure: Pressure | None = None
    """Rating: highest differential pressure across the filter."""
    inlet_pressure: Pressure | None = None
    """Rating: highest pressure at the filter's inlet."""


class Flush(Entry):
    """The flush before use."""

    volume: Loading
    """Flush volume per area."""
    flux: Flux
    """Flux of the flush."""


class Variability(Entry):
    """Spread between modules and media lots: log-normal with mean 1, drawn for each stage by itself (default: what
    three or more lots show; none with fewer)."""

    resistance: Spread | None = None
    """Coefficient of variation of the resistance."""
    fouling: Spread | None = None
    """Coefficient of variation of the fouling."""


class Medium(Entry):
    """One filter medium."""

    medium: Annotated[str, Name()]
    """Name of the medium; equals the file's stem."""
    about: Annotated[str, Words("coarse cellulose sheet", empty=True)] | None = None
    """What it is, for people."""
    curve: CurveSpec
    """Resistance against loading."""
    limits: Limits = Limits()
    """What it may be asked for."""
    scale_up: Factor = 1.0
    """Large-scale to bench capacity per area."""
    flush: Flush | None = None
    """The flush before use."""
    variability: Variability | None = None
    """Spread between modules and media lots, for a reliability basis and the chance of finishing in a rating."""

    _source: Source = PrivateAttr(default=Source(Path(), "(built in Python)", ""))

    @property
    def source(self) -> Source:
        """The file it was read from."""
        return self._source

    @property
    def lots(self) -> tuple[str, ...]:
        """Names of the lots that were run or given, sorted."""
        return tuple(sorted({run.lot for run in self.curve.runs} | set(self.curve.lots or {})))
