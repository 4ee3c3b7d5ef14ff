"""Text with a unit to canonical floats and back: bar, L, m², h, LMH, L/m², bar/LMH.

A unit written as in the table below converts by one multiplication, without any import, so that a design
does not wait for a unit library; every other unit of the right dimension goes through pint with a small
registry of our own. A test holds the table against that registry, and the registry against NIST SP 811.
"""

from __future__ import annotations

import difflib
import math
import re
from functools import cache
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from pint import UnitRegistry

CANONICAL = {
    "volume": "L",
    "time": "h",
    "pressure": "bar",
    "area": "m2",
    "length": "m",
    "flux": "LMH",
    "flow": "L/h",
    "loading": "L/m2",
    "resistance": "bar/LMH",
    "per_loading": "m2/L",
    "temperature": "degC",
    "density": "kg/L",
    "line": "bar/(L/h)",
    "titer": "g/L",
    "mass": "kg",
    "turbidity": "NTU",
    "resistance_per_loading_1": "bar/LMH/(L/m2)",
    "resistance_per_loading_2": "bar/LMH/(L/m2)^2",
    "resistance_per_loading_3": "bar/LMH/(L/m2)^3",
}
"""Each dimension and the unit that its floats are in."""

EXAMPLES = {
    "volume": "2000 L",
    "time": "6 h",
    "pressure": "2 bar",
    "area": "23 cm2",
    "length": "0.3 m",
    "flux": "200 LMH",
    "flow": "50 L/h",
    "loading": "150 L/m2",
    "resistance": "0.0008 bar/LMH",
    "per_loading": "0.012 m2/L",
    "temperature": "21 degC",
    "density": "1.01 kg/L",
    "line": "0.00002 bar/(L/h)",
    "titer": "3 g/L",
    "mass": "35 g",
    "turbidity": "8 NTU",
    "resistance_per_loading_1": "1e-5 bar/LMH/(L/m2)",
    "resistance_per_loading_2": "1e-7 bar/LMH/(L/m2)^2",
    "resistance_per_loading_3": "1e-9 bar/LMH/(L/m2)^3",
}
"""What a value of each dimension may look like in a file."""

_PSI = 6894.757293168361e-5  # bar; 1 lbf/in² with lb, in and standard gravity exact
_FT2 = 0.3048**2  # m²

_FACTORS: dict[str, dict[str, float]] = {
    "volume": {"L": 1.0, "mL": 1e-3, "m3": 1e3},
    "time": {"h": 1.0, "min": 1.0 / 60.0, "s": 1.0 / 3600.0, "day": 24.0},
    "pressure": {"bar": 1.0, "mbar": 1e-3, "psi": _PSI, "kPa": 1e-2, "MPa": 10.0, "Pa": 1e-5},
    "area": {"m2": 1.0, "cm2": 1e-4, "ft2": _FT2},
    "flux": {"LMH": 1.0, "L/m2/h": 1.0},
    "flow": {"L/h": 1.0, "L/min": 60.0, "mL/min": 0.06},
    "loading": {"L/m2": 1.0},
    "resistance": {"bar/LMH": 1.0, "psi/LMH": _PSI},
    "per_loading": {"m2/L": 1.0},
    "density": {"kg/L": 1.0, "g/mL": 1.0},
    "line": {"bar/(L/h)": 1.0},
    "titer": {"g/L": 1.0},
    "mass": {"kg": 1.0, "g": 1e-3},
    "turbidity": {"NTU": 1.0},
}


def usual_units(dimension: str) -> tuple[str, ...]:
    """The usual spellings of the units of a dimension, the canonical one first."""
    if dimension == "temperature":
        return ("degC", "degF", "K")
    return tuple(_FACTORS.get(dimension, {CANONICAL[dimension]: 1.0}))


DEFINITIONS = (
    "meter = [length] = m",
    "kilogram = [mass] = kg",
    "second = [time] = s = sec = seconds",
    "kelvin = [temperature]; offset: 0 = K",
    "NTU = [turbidity] = _ = ntu = FNU = FTU",
    "degree_Celsius = kelvin; offset: 273.15 = degC",
    "degree_Fahrenheit = 5 / 9 * kelvin; offset: 255.3722222222222 = degF",
    "decimeter = 0.1 * meter = dm",
    "centimeter = 0.01 * meter = cm",
    "millimeter = 1e-3 * meter = mm",
    "micrometer = 1e-6 * meter = um",
    "foot = 0.3048 * meter = ft = feet",
    "inch = 0.0254 * meter = in",
    "gram = 1e-3 * kilogram = g",
    "milligram = 1e-6 * kilogram = mg",
    "microgram = 1e-9 * kilogram = ug",
    "pound = 0.45359237 * kilogram = lb",
    "minute = 60 * second = min = minutes",
    "hour = 3600 * second = h = hr = hours",
    "day = 86400 * second = d = days",
    "liter = 1e-3 * meter ** 3 = L = l = litre = liters = litres",
    "milliliter = 1e-6 * meter ** 3 = mL = ml = cc",
    "microliter = 1e-9 * meter ** 3 = uL = ul",
    "hectoliter = 0.1 * meter ** 3 = hL = hl",
    "kiloliter = meter ** 3 = kL = kl",
    "gallon = 231 * inch ** 3 = gal = gallons",
    "newton = kilogram * meter / second ** 2 = N",
    "pascal = kilogram / meter / second ** 2 = Pa",
    "hectopascal = 1e2 * pascal = hPa",
    "kilopascal = 1e3 * pascal = kPa",
    "megapascal = 1e6 * pascal = MPa",
    "bar = 1e5 * pascal = _ = barg",
    "millibar = 1e2 * pascal = mbar",
    "psi = 6894.757293168361 * pascal = _ = psig = psid",
    "atmosphere = 101325 * pascal = atm",
    "LMH = 1e-3 * meter / hour = _ = lmh",
    "GFD = gallon / foot ** 2 / day = _ = gfd",
)
"""The units that are known, in pint's notation: name = value = symbol = further spellings. No prefixes apply,
so that a slip such as `ML` for `mL` is an error instead of a factor of 1e9."""

_PRESSURE_UNITS_REFUSED = {"psia": "psi", "bara": "bar"}

_NUMBER = r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?"
_QUANTITY = re.compile(rf"\s*(?P<number>{_NUMBER})\s*(?P<unit>\S.*?)?\s*", re.DOTALL)
_WORD = re.compile(r"[A-Za-z_]+")
_POWERED = r"[A-Za-z_]+(?:(?:\^|\*\*)?-?[1-9])?"
_TIMES = r"(?:\s*[*/·]\s*|\s+)"
_GROUP = rf"\({_POWERED}(?:{_TIMES}{_POWERED})*\)(?:(?:\^|\*\*)-?[1-9])?"
_FACTOR = rf"(?:{_POWERED}|{_GROUP})"
_UNIT = re.compile(rf"(?:1\s*/\s*)?{_FACTOR}(?:{_TIMES}{_FACTOR})*")
_COMMA = re.compile(r"\s*[+-]?\d+,\d")
_PLAIN = str.maketrans({"²": "^2", "³": "^3", "°": "deg", "µ": "u", "μ": "u"})
_LONGEST = 80


def quantity(text: str, dimension: str) -> float:
    """The value of `text` ("30 psi") in the canonical unit of `dimension` ("pressure" → bar).

    Raises ValueError with what was expected where the number, the unit or its dimension is wrong.
    """
    match = _QUANTITY.fullmatch(text.translate(_PLAIN)) if len(text) <= _LONGEST else None
    if match is None or _COMMA.match(text):
        raise ValueError(_not_a_quantity(text, dimension))
    unit = match["unit"]
    if unit is None:
        if dimension == "turbidity":
            unit = "NTU"
        else:
            raise ValueError(missing_unit(text.strip(), dimension))
    elif not _UNIT.fullmatch(unit):
        raise ValueError(_not_a_quantity(text, dimension))
    value = _convert(float(match["number"]), unit, dimension)
    if not math.isfinite(value):
        raise ValueError(f"{_quoted(text)} is not a finite number; expected {expected(dimension)}")
    return value


def missing_unit(value: object, dimension: str, example: str = "") -> str:
    """What is wrong with a bare number where a value with a unit belongs."""
    return f"{value} has no unit; expected {expected(dimension, example)}"


def expected(dimension: str, example: str = "") -> str:
    """What a value of the dimension should look like, for messages: "a pressure such as '2 bar'"."""
    name = dimension if not dimension.startswith("resistance_per_loading") else "coefficient"
    article = "an" if name[0] in "aeiou" else "a"
    return f"{article} {_PHRASES.get(name, name)} such as '{example or EXAMPLES[dimension]}'"


_PHRASES = {
    "per_loading": "blocking constant (area per volume)",
    "line": "line resistance (pressure per flow)",
    "flux": "flux (volume per area and time)",
    "loading": "loading (volume per area)",
    "resistance": "resistance (pressure per flux)",
    "flow": "flow (volume per time)",
    "coefficient": "coefficient with its unit",
}


def convert(value: float, dimension: str, unit: str) -> float:
    """A canonical `value` of `dimension` in `unit`; raises ValueError where the unit does not fit."""
    if dimension == "temperature":
        found = _pint_unit(unit, dimension)
        return float(_registry().Quantity(value, _canonical_units(dimension)).to(found).magnitude)
    return value / _factor(unit, dimension)


def show(value: float, dimension: str, unit: str | None = None, digits: int = 3) -> str:
    """A canonical `value` as text in `unit` (default: the canonical one), to so many significant digits."""
    unit = unit or CANONICAL[dimension]
    number = f"{convert(value, dimension, unit) if unit != CANONICAL[dimension] else value:.{digits}g}"
    if "e" in number and 1e-4 <= abs(float(number)) < 1e9:
        number = f"{float(number):.0f}"
    return f"{number} {unit}"


def _convert(number: float, unit: str, dimension: str) -> float:
    factor = _FACTORS.get(dimension, {}).get(unit)
    if factor is not None:
        return number * factor
    if dimension != "temperature":
        return number * _factor(unit, dimension)
    if unit == "degC":
        return number
    if unit == "degF":  # exact for round values: 68 degF is 20 degC
        return (number - 32.0) * 5.0 / 9.0
    found = _pint_unit(unit, dimension)
    return float(_registry().Quantity(number, found).to(_canonical_units(dimension)).magnitude)


def _factor(unit: str, dimension: str) -> float:
    """How much one `unit` is in the canonical unit of the dimension."""
    known = _FACTORS.get(dimension, {}).get(unit)
    return known if known is not None else registry_factor(unit, dimension)


@cache
def registry_factor(unit: str, dimension: str) -> float:
    """The same from the registry of `DEFINITIONS` alone."""
    if unit == CANONICAL[dimension]:
        return 1.0
    found = _pint_unit(unit, dimension)
    return float(_registry().Quantity(1.0, found).to(_canonical_units(dimension)).magnitude)


@cache
def _registry() -> UnitRegistry[Any]:
    import pint

    registry: UnitRegistry[Any] = pint.UnitRegistry(None, on_redefinition="raise", cache_folder=None)
    registry.load_definitions(list(DEFINITIONS))
    return registry


@cache
def _canonical_units(dimension: str) -> Any:
    return _registry().parse_units(_spelled(CANONICAL[dimension]))


@cache
def _known_words() -> frozenset[str]:
    words = set()
    for definition in DEFINITIONS:
        name, _, *others = (part.strip() for part in definition.split("="))
        words |= {name, *others}
    return frozenset(word for word in words if _WORD.fullmatch(word) and word != "_")


def _pint_unit(unit: str, dimension: str) -> Any:
    """The unit in pint, once every word of it is known and its dimension is right."""
    if dimension == "pressure" and unit in _PRESSURE_UNITS_REFUSED:
        plain = _PRESSURE_UNITS_REFUSED[unit]
        raise ValueError(f"'{unit}' is absolute pressure; expected gauge pressure, in '{plain}'")
    if not _UNIT.fullmatch(unit.translate(_PLAIN)):
        raise ValueError(f"{_quoted(unit)} is not a unit; expected {expected(dimension)}")
    for word in _WORD.findall(unit):
        if word not in _known_words():
            near = _nearest_word(word, dimension)
            hint = f" (did you mean '{near}'?)" if near else ""
            raise ValueError(f"unknown unit '{word}'{hint}; expected {expected(dimension)}")
    try:
        found = _registry().parse_units(_spelled(unit))
        right = found.dimensionality == _canonical_units(dimension).dimensionality
    except Exception as error:  # the library's own errors are many; the words above are known ones
        raise ValueError(f"{_quoted(unit)} is not a unit; expected {expected(dimension)}") from error
    if not right:
        raise ValueError(f"'{unit}' is not a unit of {_measure(dimension)}; expected {expected(dimension)}")
    return found


def _measure(dimension: str) -> str:
    name = dimension if not dimension.startswith("resistance_per_loading") else "coefficient"
    return {
        "per_loading": "area per volume",
        "line": "pressure per flow",
        "coefficient": "this coefficient",
    }.get(name, name)


def _nearest_word(word: str, dimension: str) -> str | None:
    """The unit that an unknown word is most likely a slip of, among the usual ones of the dimension."""
    usual = {word for unit in _FACTORS.get(dimension, {}) for word in _WORD.findall(unit)}
    words = sorted(usual or _known_words())
    same_letters = [known for known in words if known.casefold() == word.casefold()]
    near = same_letters or difflib.get_close_matches(word, words, n=1, cutoff=0.5)
    return near[0] if near else None


_POWER = re.compile(r"(?<=[A-Za-z)])(?:\^|\*\*)?(-?[1-9])")


def _spelled(unit: str) -> str:
    """The unit as pint writes it: `m2` → `m**2`, a space or a dot is a product."""
    text = _POWER.sub(r"**\1", unit.replace("·", "*"))
    return re.sub(r"(?<=[\w)])\s+(?=[\w(])", "*", text)


def _quoted(text: str) -> str:
    text = " ".join(text.split())
    return f"'{text if len(text) <= 40 else text[:37] + '...'}'"


def _not_a_quantity(text: str, dimension: str) -> str:
    if _COMMA.match(text):
        return (
            f"{_quoted(text)} has a comma in its number; expected a decimal point and no separators "
            f"between thousands, such as '{EXAMPLES[dimension]}'"
        )
    return f"{_quoted(text)} is not a number with a unit; expected {expected(dimension)}"
