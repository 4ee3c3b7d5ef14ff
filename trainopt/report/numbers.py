"""Numbers and names as people read them: sensible digits, one unit of pressure, no terminal codes."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass

NONE = "–"
"""What stands where a number does not exist."""

PRESSURE_UNITS = {"bar": 1.0, "psi": 14.503773773020923, "kPa": 100.0}
"""Units of pressure on offer and how many of each make a bar (1 psi = 6.894757e3 Pa, NIST SP 811)."""

PRESSURE_DECIMALS = {"bar": 2, "psi": 1, "kPa": 0}


def fixed(value: float | None, decimals: int) -> str:
    """`value` with so many decimals and thousands set off by commas; a dash where there is none."""
    if value is None or not math.isfinite(value):
        return NONE
    rounded = round(value, decimals) + 0.0
    return f"{rounded:,.{decimals}f}"


def significant(value: float | None, digits: int = 3) -> str:
    """`value` to so many significant digits, never in exponents unless it is tiny or huge."""
    if value is None or not math.isfinite(value):
        return NONE
    if value == 0.0:
        return "0"
    exponent = math.floor(math.log10(abs(value)))
    if not -4 <= exponent < 9:
        return f"{value:.{digits - 1}e}"
    return fixed(value, max(0, digits - 1 - exponent))


def trimmed(value: float | None, decimals: int = 2) -> str:
    """`value` with at most so many decimals, trailing zeros left off."""
    text = fixed(value, decimals)
    return text.rstrip("0").rstrip(".") if "." in text else text


def aligned(values: Iterable[float | None], decimals: int = 2) -> list[str]:
    """A column of numbers with the same decimals: as many as the one that needs most, at most `decimals`."""
    texts = [fixed(value, decimals) for value in values]
    spare = min((len(text) - len(text.rstrip("0")) for text in texts if text != NONE), default=0)
    keep = max(0, decimals - spare)
    return [fixed(None if text == NONE else float(text.replace(",", "")), keep) for text in texts]


def percent(value: float | None) -> str:
    """A percentage: one decimal below 10 %, none above."""
    if value is None or not math.isfinite(value):
        return NONE
    return f"{fixed(value, 1 if abs(value) < 9.95 else 0)} %"


def money(value: float | None, currency: str) -> str:
    """An amount in whole units of the currency."""
    return f"{fixed(value, 0)} {currency}".rstrip()


def duration(hours: float | None) -> str:
    """A time as hours and minutes, `3 h 41 min`."""
    if hours is None or not math.isfinite(hours):
        return NONE
    whole, minutes = divmod(round(hours * 60.0), 60)
    if not whole:
        return f"{minutes} min"
    return f"{whole} h {minutes:02d} min" if minutes else f"{whole} h"


@dataclass(frozen=True)
class Pressure:
    """One unit of pressure for a whole report."""

    unit: str = "bar"

    def number(self, bar: float | None) -> str:
        """A pressure given in bar, without its unit."""
        return NONE if bar is None else fixed(bar * PRESSURE_UNITS[self.unit], PRESSURE_DECIMALS[self.unit])

    def text(self, bar: float | None) -> str:
        """A pressure given in bar, with its unit."""
        return f"{self.number(bar)} {self.unit}"


def needed(value: float | None, module: str | None = None) -> str:
    """The value that a limit alone would need (None: none is enough); a count with the module that it is of."""
    if value is None:
        return "no value alone is enough"
    return f"{value:.0f} × {module}" if module is not None else significant(value, 4)


def plain(text: str) -> str:
    """User's text with everything replaced that a terminal would obey instead of show."""
    return "".join(letter if letter.isprintable() else "\N{REPLACEMENT CHARACTER}" for letter in text)


LIMITS = {
    "pressure": "pressure",
    "differential-pressure": "differential rating",
    "inlet-pressure": "inlet rating",
    "flux": "flux limit",
    "loading-tested": "loading tested",
    "loading-limit": "loading limit",
    "turbidity": "turbidity",
    "module-size": "module size",
}
"""What can limit a stage, in words."""


def limit_words(code: str) -> str:
    """The limit in words (the code itself where it is new)."""
    return LIMITS.get(code, code.replace("-", " "))
