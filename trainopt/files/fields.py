"""What one field of a file may hold: its reading, its range, and how to say what was expected.

A rule serves for reading, for the error text and for the field reference. Values read from a file must carry their
unit; the same objects built in Python take canonical floats.
"""

from __future__ import annotations

import difflib
import math
import re
from abc import ABC, abstractmethod
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Any

from pydantic import BaseModel, ConfigDict, GetCoreSchemaHandler, ValidationError, ValidationInfo
from pydantic_core import CoreSchema, InitErrorDetails, PydanticCustomError, core_schema

from trainopt.files.document import Decimal, Whole
from trainopt.units import expected, missing_unit, quantity, show


class Entry(BaseModel):
    """Base of everything in a file: unknown keys refused, no silent conversion, never changed once read."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True, protected_namespaces=())


def wrong(*faults: tuple[tuple[str | int, ...], str]) -> ValidationError:
    """An error at places below the value that is being read: (keys and indices, what is wrong)."""
    return ValidationError.from_exception_data(
        "file",
        [
            InitErrorDetails(type=PydanticCustomError("rule", "{text}", {"text": text}), loc=loc, input=None)
            for loc, text in faults
        ],
    )


def from_file(info: ValidationInfo) -> bool:
    """Whether the value was written by a user (a number then needs its unit)."""
    return info.context is not None


def nearest_name(name: str, known: Iterable[str]) -> str | None:
    """The known name that an unknown one is most likely a slip of, if any is near."""
    by_letters = {one.casefold(): one for one in sorted(known)}
    near = difflib.get_close_matches(name.casefold(), sorted(by_letters), n=1, cutoff=0.6)
    return by_letters[near[0]] if near else None


def nearest(name: str, known: Iterable[str]) -> str:
    """What to offer in place of an unknown name: the nearest known one, or all of them."""
    known = sorted(known)
    near = nearest_name(name, known)
    if near:
        return f"did you mean '{near}'?"
    if not known:
        return "expected none"
    most = 12
    more = f" and {len(known) - most} more" if len(known) > most else ""
    return f"expected one of {', '.join(known[:most])}{more}"


class Rule(ABC):
    """How one field is read."""

    @property
    def expected(self) -> str:
        """What the field should hold, with an example; completes "expected …"."""
        return self._expected()

    def read(self, value: Any, info: ValidationInfo) -> Any:
        """The value; ValueError says what is wrong with it and what was expected."""
        return self._read(value, info)

    @abstractmethod
    def _expected(self) -> str: ...

    @abstractmethod
    def _read(self, value: Any, info: ValidationInfo, /) -> Any: ...

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.with_info_plain_validator_function(self.read)


@dataclass(frozen=True)
class Range:
    """Bounds of a number: `above` is excluded, the others are included."""

    above: float | None = None
    least: float | None = None
    most: float | None = None
    below: float | None = None

    def holds(self, value: float) -> bool:
        """Whether the value is inside."""
        return not (
            (self.above is not None and value <= self.above)
            or (self.least is not None and value < self.least)
            or (self.most is not None and value > self.most)
            or (self.below is not None and value >= self.below)
        )

    def words(self, text: Any = lambda value: f"{value:.10g}") -> str:
        """The bounds in words, each value as `text` shows it."""
        parts = [
            f"{how} {text(bound)}"
            for how, bound in (
                ("above", self.above),
                ("at least", self.least),
                ("at most", self.most),
                ("below", self.below),
            )
            if bound is not None
        ]
        return " and ".join(parts)


@dataclass(frozen=True)
class Amount(Rule):
    """Text with a unit, read to a float in the canonical unit of `dimension`; bounds in that unit."""

    dimension: str
    range: Range = Range()
    example: str = ""

    def _expected(self) -> str:
        return expected(self.dimension, self.example)

    @property
    def bounds(self) -> str:
        """The range in words."""
        return self.range.words(lambda value: show(value, self.dimension))

    def _read(self, value: Any, info: ValidationInfo, /) -> float:
        amount = self._amount(value, info)
        if not math.isfinite(amount):
            raise ValueError(f"{written(value)} is not a finite number; expected {self.expected}")
        if not self.range.holds(amount):
            raise ValueError(f"{written(value)} is outside its range; expected a value {self.bounds}")
        return amount

    def _amount(self, value: Any, info: ValidationInfo) -> float:
        if isinstance(value, str):
            return quantity(value, self.dimension)
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise ValueError(f"{written(value)} is not a number with a unit; expected {self.expected}")
        if math.isfinite(value) and from_file(info) and self.dimension != "turbidity":
            raise ValueError(missing_unit(written(value), self.dimension, self.example))
        return float(value)


@dataclass(frozen=True)
class Number(Rule):
    """A bare number (dimensionless, or money)."""

    range: Range = Range()
    example: str = "1.5"

    def _expected(self) -> str:
        words = self.range.words()
        return f"a number{' ' + words if words else ''} such as {self.example}"

    def _read(self, value: Any, _info: ValidationInfo, /) -> float:
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise ValueError(f"{written(value)} is not a bare number; expected {self.expected}")
        if not math.isfinite(value) or not self.range.holds(value):
            raise ValueError(f"{written(value)} is outside its range; expected {self.expected}")
        return float(value)


@dataclass(frozen=True)
class Count(Rule):
    """A whole number."""

    range: Range = Range(least=1)
    example: str = "4"

    def _expected(self) -> str:
        return f"a whole number {self.range.words()} such as {self.example}"

    def _read(self, value: Any, _info: ValidationInfo, /) -> int:
        if isinstance(value, bool) or not isinstance(value, int) or not self.range.holds(value):
            raise ValueError(f"{written(value)} does not count anything; expected {self.expected}")
        return int(value)


_NAME = re.compile(r"[\w.-]+")


@dataclass(frozen=True)
class Name(Rule):
    """A name of the user's own."""

    example: str = "oat-coarse"

    def _expected(self) -> str:
        return f"a name of letters, digits, '-', '_' and '.' such as {self.example}"

    def _read(self, value: Any, _info: ValidationInfo, /) -> str:
        text = as_text(value)
        if text is None or not _NAME.fullmatch(text):
            raise ValueError(f"{written(value)} is not a name; expected {self.expected}")
        return text


@dataclass(frozen=True)
class Words(Rule):
    """Text for people, in one line."""

    example: str
    empty: bool = False

    def _expected(self) -> str:
        return f"text such as '{self.example}'"

    def _read(self, value: Any, _info: ValidationInfo, /) -> str:
        text = as_text(value)
        if text is None or (not text.strip() and not self.empty):
            raise ValueError(f"{written(value)} is not text; expected {self.expected}")
        return text


@dataclass(frozen=True)
class Choice(Rule):
    """One of a few words; `other` says what else than a word may stand there."""

    words: tuple[str, ...]
    other: str = ""

    def _expected(self) -> str:
        return f"one of {', '.join(self.words)}"

    def _read(self, value: Any, _info: ValidationInfo, /) -> str:
        if not isinstance(value, str):
            raise ValueError(f"{written(value)} is not one of its words; expected {self.expected}")
        if value not in self.words:
            offer = nearest(value, self.words)
            if self.other and not offer.endswith("?"):
                offer += f", or {self.other}"
            raise ValueError(f"unknown {written(value)}; {offer}")
        return value


@dataclass(frozen=True)
class Flag(Rule):
    """true or false."""

    def _expected(self) -> str:
        return "true or false"

    def _read(self, value: Any, _info: ValidationInfo, /) -> bool:
        if not isinstance(value, bool):
            raise ValueError(f"{written(value)} is neither true nor false; expected {self.expected}")
        return value


@dataclass(frozen=True)
class FilePath(Rule):
    """A file, relative to the file that names it."""

    example: str = "../bench/oat-coarse-a.csv"

    def _expected(self) -> str:
        return f"a path relative to this file such as {self.example}"

    def _read(self, value: Any, info: ValidationInfo, /) -> Path:
        if isinstance(value, Path):
            return value
        text = as_text(value)
        if not text or "\0" in text:
            raise ValueError(f"{written(value)} is not a path; expected {self.expected}")
        folder = info.context["folder"] if info.context else Path.cwd()
        return Path(folder, text).resolve()


def as_text(value: Any) -> str | None:
    """The text of a scalar as it was written (a lot may be named 007); None for anything else."""
    if isinstance(value, Whole | Decimal):
        return value.text
    return value if isinstance(value, str) else None


def written(value: Any) -> str:
    """A value as the user wrote it, short enough for a message."""
    if value is None:
        return "nothing"
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, dict):
        return "a mapping"
    if isinstance(value, tuple | list):
        return "a list"
    text = as_text(value) if not isinstance(value, str) else value
    text = " ".join((str(value) if text is None else text).split())
    short = text if len(text) <= 60 else text[:57] + "..."
    return f"'{short}'" if isinstance(value, str) else short


POSITIVE = Range(above=0.0)
NOT_NEGATIVE = Range(least=0.0)

Volume = Annotated[float, Amount("volume", POSITIVE)]
HoldUp = Annotated[float, Amount("volume", NOT_NEGATIVE, "12 mL")]
Time = Annotated[float, Amount("time", POSITIVE)]
Pressure = Annotated[float, Amount("pressure", POSITIVE)]
Area = Annotated[float, Amount("area", POSITIVE)]
Flux = Annotated[float, Amount("flux", POSITIVE)]
Loading = Annotated[float, Amount("loading", POSITIVE)]
Temperature = Annotated[float, Amount("temperature", Range(least=0.0, most=100.0))]
Density = Annotated[float, Amount("density", Range(least=0.5, most=3.0))]
Turbidity = Annotated[float, Amount("turbidity", POSITIVE, "8")]
Price = Annotated[float, Number(NOT_NEGATIVE, "940")]
Factor = Annotated[float, Number(POSITIVE, "1.0")]
Spread = Annotated[float, Number(Range(least=0.0, most=3.0), "0.1")]
Fraction = Annotated[float, Number(Range(least=0.0, most=1.0), "0.8")]
