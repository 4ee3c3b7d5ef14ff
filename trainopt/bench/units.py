"""Units as bench files spell them in headers, and how to split a header into a name and a unit.

Conversion itself is `trainopt.units`'; here only spellings are brought to the ones it knows. A spelling
that could mean two units (ML: milli or mega) is refused rather than guessed.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from functools import cache

from trainopt.units import quantity

NTU = "NTU"


@dataclass(frozen=True)
class HeaderUnit:
    """A unit in a header: `dimension` ("time", …), `factor` to the canonical unit, `absolute` pressure."""

    text: str
    dimension: str
    factor: float
    absolute: bool = False


_SPELLINGS: dict[str, dict[str, str]] = {
    "time": {
        **dict.fromkeys(("s", "sec", "secs", "second", "seconds"), "s"),
        **dict.fromkeys(("min", "mins", "minute", "minutes"), "min"),
        **dict.fromkeys(("h", "hr", "hrs", "hour", "hours"), "h"),
        **dict.fromkeys(("day", "days"), "day"),
    },
    "volume": {
        **dict.fromkeys(("ml", "mL", "cm3", "cm³", "cc", "ccm"), "mL"),
        **dict.fromkeys(("l", "L", "liter", "liters", "litre", "litres", "dm3", "dm³"), "L"),
        **dict.fromkeys(("ul", "uL", "µl", "µL"), "uL"),
        **dict.fromkeys(("m3", "m³", "m^3"), "m3"),
        **dict.fromkeys(("gal", "gallon", "gallons"), "gal"),
    },
    "mass": {
        **dict.fromkeys(("g", "gram", "grams"), "g"),
        **dict.fromkeys(("kg", "kilogram", "kilograms"), "kg"),
        "mg": "mg",
        **dict.fromkeys(("lb", "lbs"), "lb"),
    },
    "pressure": {
        **dict.fromkeys(("psi", "psig", "psid", "lb/in2"), "psi"),
        **dict.fromkeys(("bar", "barg", "bard"), "bar"),
        **dict.fromkeys(("mbar", "mbarg"), "mbar"),
        **dict.fromkeys(("kPa", "kpa", "kPag"), "kPa"),
        "Pa": "Pa",
        "MPa": "MPa",
        "hPa": "hPa",
        "atm": "atm",
        **dict.fromkeys(("psia",), "psi"),
        **dict.fromkeys(("bara",), "bar"),
        **dict.fromkeys(("kPaa",), "kPa"),
    },
    "flow": {
        **dict.fromkeys(("ml/min", "mL/min", "ccm/min", "cm3/min"), "mL/min"),
        **dict.fromkeys(("l/h", "L/h", "l/hr", "L/hr", "lph", "LPH"), "L/h"),
        **dict.fromkeys(("l/min", "L/min", "lpm", "LPM"), "L/min"),
    },
    "flux": {**dict.fromkeys(("LMH", "lmh", "L/m2/h", "L/m²/h", "L/(m2 h)", "L/(m²·h)"), "LMH")},
    "temperature": dict.fromkeys(("degC", "°C", "C", "degF", "°F", "F", "K"), ""),
    "turbidity": dict.fromkeys(("NTU", "ntu", "FNU", "fnu", "NTRU", "FTU"), NTU),
}

_ABSOLUTE = {"psia", "bara", "kPaa"}
_SHOUTED = {
    "MIN",
    "MINS",
    "SEC",
    "HR",
    "HRS",
    "PSI",
    "PSIG",
    "BAR",
    "BARG",
    "MBAR",
    "KPA",
    "MPA",
    "KG",
    "ML/MIN",
}
_PLAIN = {key.lower(): (dimension, value) for dimension, known in _SPELLINGS.items() for key, value in known.items()}


@cache
def unit_of(text: str) -> HeaderUnit | None:
    """The unit that `text` spells in a header, or None where it spells none without doubt."""
    text = text.strip()
    for dimension, known in _SPELLINGS.items():
        if text in known:
            return _unit(text, dimension, known[text])
    capitalized = len(text) > 2 and text[0].isupper() and text[1:].islower()
    if text in _SHOUTED or (capitalized and text.lower() not in {"mpa"}):
        found = _PLAIN.get("mpa" if text == "MPA" else text.lower())
        if found:
            return _unit(text, *found)
    return None


def _unit(text: str, dimension: str, spelled: str) -> HeaderUnit:
    if dimension in {"temperature", "turbidity"}:
        return HeaderUnit(text, dimension, 1.0)
    return HeaderUnit(text, dimension, quantity(f"1 {spelled}", dimension), text in _ABSOLUTE)


_BRACKETED = re.compile(r"^(?P<name>.*?)\s*[(\[](?P<unit>[^()\[\]]*)[)\]]\s*$")
_SEPARATED = re.compile(r"^(?P<name>.+?)\s*(?:/|,|\bin\b)\s+(?P<unit>\S+)$")


def split_header(header: str) -> tuple[str, str]:
    """Name and unit text of a header: `name (unit)`, `name [unit]`, `name_unit`, `name / unit`."""
    bracketed = _BRACKETED.match(header)
    if bracketed and bracketed["unit"].strip():
        return bracketed["name"].strip(), bracketed["unit"].strip()
    separated = _SEPARATED.match(header)
    if separated and unit_of(separated["unit"]) is not None:
        return separated["name"].strip(), separated["unit"]
    for mark in ("_", " "):
        name, _, unit = header.rpartition(mark)
        found = unit_of(unit)
        if name and found is not None and not (mark == " " and len(unit) == 1 and found.dimension == "temperature"):
            return name.strip(" _"), unit
    return ("", header) if unit_of(header) is not None and header not in _NAMES else (header, "")


_NAMES = {"t", "T", "V", "P", "p", "m", "h", "C", "F", "K", "g", "d", "s", "l", "L"}
"""Single letters that are a column's name before they are its unit."""
