"""An axis of a sweep as a user writes it: a field and the values that it takes.

batch.volume=500 L..5000 L/19          19 values, evenly spaced, ends included
batch.volume=500 L..5000 L/19 log      the same, each a fixed factor above the last
batch.volume=1000 L, 2000 L, 2500 L    these values
safety_factor=1..2/11                  a bare number where the field has no unit
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from trainopt.units import CANONICAL, convert, expected, quantity

MOST_VALUES = 2000
_RANGE = re.compile(r"(?P<low>.+?)\.\.(?P<high>.+)/\s*(?P<count>\d+)(?P<log>\s+log)?")
_BARE = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?")
_UNIT = re.compile(rf"\s*{_BARE.pattern}\s*(?P<unit>.*?)\s*")


@dataclass(frozen=True)
class Axis:
    """One field and its values in canonical units; `unit` is the one the user wrote ("" for a bare number)."""

    field: str
    dimension: str | None
    unit: str
    values: tuple[float, ...]

    def shown(self, value: float) -> float:
        """A canonical value in the user's unit."""
        if self.dimension is None or self.unit == CANONICAL[self.dimension]:
            return value
        return convert(value, self.dimension, self.unit)

    @property
    def span(self) -> float:
        """Distance between the lowest and the highest value, canonical."""
        return max(self.values) - min(self.values)


def parse_axis(text: str, dimension_of: Callable[[str], str | None]) -> Axis:
    """The axis that `text` describes; `dimension_of` knows the dimension of a field (None: a bare number).

    Raises ValueError saying what was expected; an unknown field is for `dimension_of` to refuse.
    """
    field, equals, spec = text.partition("=")
    field, spec = field.strip(), spec.strip()
    if not equals or not field or not spec:
        raise ValueError(f"'{text}' is not an axis; expected FIELD=VALUES such as 'batch.volume=500 L..5000 L/19'")
    dimension = dimension_of(field)
    match = _RANGE.fullmatch(spec)
    values, unit = _range(match, dimension) if match else _list(spec, dimension)
    if len(set(values)) < len(values):
        raise ValueError(f"'{text}' names a value twice")
    return Axis(field, dimension, unit, values)


def _range(match: re.Match[str], dimension: str | None) -> tuple[tuple[float, ...], str]:
    low_text, high_text = match["low"].strip(), match["high"].strip()
    unit = _unit(high_text)
    # `500..5000 L/19`: the unit of the end holds for the start as well.
    low = _value(low_text if _unit(low_text) or not unit else f"{low_text} {unit}", dimension)
    high, count = _value(high_text, dimension), int(match["count"])
    if not 2 <= count <= MOST_VALUES:
        raise ValueError(f"a range of {count} values; expected 2 to {MOST_VALUES} after the '/'")
    if low == high:
        raise ValueError(f"the range starts and ends at {low_text}; expected two different ends")
    unit = _unit(low_text) or unit
    # Spaced in the user's unit, so that round steps stay round.
    ends = [_shown(value, dimension, unit) for value in (low, high)]
    if match["log"]:
        if min(ends) <= 0.0:
            raise ValueError("a log range needs ends above zero")
        shown = np.geomspace(ends[0], ends[1], count)
    else:
        shown = np.linspace(ends[0], ends[1], count)
    texts = [float(f"{value:.12g}") for value in shown.tolist()]
    return tuple(_value(f"{value!r} {unit}".strip(), dimension) for value in texts), unit


def _list(spec: str, dimension: str | None) -> tuple[tuple[float, ...], str]:
    parts = [part.strip() for part in spec.split(",")]
    if any(not part for part in parts):
        raise ValueError(f"'{spec}' has an empty value; expected values such as '1000 L, 2000 L'")
    if len(parts) > MOST_VALUES:
        raise ValueError(f"{len(parts)} values; expected at most {MOST_VALUES}")
    return tuple(_value(part, dimension) for part in parts), _unit(parts[0])


def _unit(text: str) -> str:
    match = _UNIT.fullmatch(text)
    return match["unit"] if match else ""


def _value(text: str, dimension: str | None) -> float:
    if dimension is not None:
        return quantity(text, dimension)
    if not _BARE.fullmatch(text) or not math.isfinite(float(text)):
        raise ValueError(f"'{text}' is not a bare number; expected a number such as 1.5")
    return float(text)


def _shown(value: float, dimension: str | None, unit: str) -> float:
    if dimension is None or not unit:
        return value
    try:
        return convert(value, dimension, unit)
    except ValueError as error:
        raise ValueError(f"'{unit}' does not fit; expected {expected(dimension)}") from error
