"""Text with units: the table against the registry, the registry against published factors, and what is refused."""

from __future__ import annotations

import math
import subprocess
import sys

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from trainopt import units
from trainopt.units import CANONICAL, EXAMPLES, convert, quantity, show

TABLE = [(unit, dimension) for dimension, factors in units._FACTORS.items() for unit in factors]


@pytest.mark.parametrize(("unit", "dimension"), TABLE)
def test_the_table_agrees_with_the_registry(unit: str, dimension: str) -> None:
    assert units._FACTORS[dimension][unit] == pytest.approx(units.registry_factor(unit, dimension), rel=1e-15)


# NIST SP 811 (2008), appendix B.8 and table 6, in the digits printed there, from memory except psi and bar.
PUBLISHED = [
    ("1 psi", "pressure", 6.894757e3 / 1e5, 5e-8),
    ("1 bar", "pressure", 1.0, 0.0),
    ("100000 Pa", "pressure", 1.0, 1e-15),
    ("1 atm", "pressure", 1.01325, 1e-15),
    ("1 gal", "volume", 3.785412, 1e-7),
    ("1 ft2", "area", 9.290304e-2, 1e-15),
    ("1 in2", "area", 6.4516e-4, 1e-15),
    ("1 lb", "mass", 4.535924e-1, 1e-7),
    ("1 day", "time", 24.0, 1e-15),
]


@pytest.mark.parametrize(("text", "dimension", "value", "tolerance"), PUBLISHED)
def test_published_factors(text: str, dimension: str, value: float, tolerance: float) -> None:
    assert quantity(text, dimension) == pytest.approx(value, rel=tolerance)


# Worked out by hand from the definitions.
READ = [
    ("30 psi", "pressure", 30 * 0.06894757293168361),
    ("200 kPa", "pressure", 2.0),
    ("0.2 MPa", "pressure", 2.0),
    ("1500 mbar", "pressure", 1.5),
    ("30 psig", "pressure", 30 * 0.06894757293168361),
    ("2barg", "pressure", 2.0),
    ("12 mL", "volume", 0.012),
    ("2 m3", "volume", 2000.0),
    ("2 m³", "volume", 2000.0),
    ("2 m^3", "volume", 2000.0),
    ("2 kL", "volume", 2000.0),
    ("500 litres", "volume", 500.0),
    ("12 ml", "volume", 0.012),
    ("3 cc", "volume", 0.003),
    ("23 cm2", "area", 0.0023),
    ("23 cm²", "area", 0.0023),
    ("1 ft2", "area", 0.09290304),
    ("90 min", "time", 1.5),
    ("5400 s", "time", 1.5),
    ("0.5 day", "time", 12.0),
    ("2 hr", "time", 2.0),
    ("200 L/m2/h", "flux", 200.0),
    ("200 L/(m2 h)", "flux", 200.0),
    ("200 L/(m²·h)", "flux", 200.0),
    ("200 L m-2 h-1", "flux", 200.0),
    ("1 mL/min/cm2", "flux", 600.0),
    ("1 GFD", "flux", 3.785411784 / 0.09290304 / 24),
    ("10 mL/min", "flow", 0.6),
    ("2 L/min", "flow", 120.0),
    ("1 m3/h", "flow", 1000.0),
    ("2 gal/min", "flow", 2 * 3.785411784 * 60),
    ("150 L/m2", "loading", 150.0),
    ("15 mL/cm2", "loading", 150.0),
    ("150 L/m^2", "loading", 150.0),
    ("0.0008 bar/LMH", "resistance", 0.0008),
    ("0.01 psi/LMH", "resistance", 0.0006894757293168361),
    ("80 Pa/LMH", "resistance", 0.0008),
    ("0.012 m2/L", "per_loading", 0.012),
    ("12 m2/m3", "per_loading", 0.012),
    ("21 degC", "temperature", 21.0),
    ("21 °C", "temperature", 21.0),
    ("68 degF", "temperature", 20.0),
    ("293.15 K", "temperature", 20.0),
    ("-4 degF", "temperature", -20.0),
    ("1.01 kg/L", "density", 1.01),
    ("1.01 g/mL", "density", 1.01),
    ("1010 kg/m3", "density", 1.01),
    ("1010 g/L", "density", 1.01),
    ("2e-5 bar/(L/h)", "line", 2e-5),
    ("0.00002 bar*h/L", "line", 2e-5),
    ("2 mbar/(m3/h)", "line", 2e-6),
    ("3 g/L", "titer", 3.0),
    ("3 mg/mL", "titer", 3.0),
    ("35 g", "mass", 0.035),
    ("8 NTU", "turbidity", 8.0),
    ("8 FNU", "turbidity", 8.0),
    ("8", "turbidity", 8.0),
    ("1e-5 bar/LMH/(L/m2)", "resistance_per_loading_1", 1e-5),
    ("1e-7 bar/LMH/(L/m2)^2", "resistance_per_loading_2", 1e-7),
    ("1e-7 bar/LMH/(L/m2)**2", "resistance_per_loading_2", 1e-7),
    ("1e-9 bar/LMH/(L/m2)^3", "resistance_per_loading_3", 1e-9),
    ("+.5 L", "volume", 0.5),
    ("  5.  L  ", "volume", 5.0),
    ("5E+2 L", "volume", 500.0),
]


@pytest.mark.parametrize(("text", "dimension", "value"), READ)
def test_reading(text: str, dimension: str, value: float) -> None:
    assert quantity(text, dimension) == pytest.approx(value, rel=1e-13, abs=1e-12)


@pytest.mark.parametrize("dimension", CANONICAL)
def test_canonical_units_and_examples_read_as_they_stand(dimension: str) -> None:
    assert quantity(f"0.3 {CANONICAL[dimension]}", dimension) == 0.3
    assert math.isfinite(quantity(EXAMPLES[dimension], dimension))


REFUSED = [
    ("2000", "volume", "2000 has no unit; expected a volume such as '2000 L'"),
    ("2000 bar", "volume", "'bar' is not a unit of volume"),
    ("2,000 L", "volume", "comma"),
    ("3 ML", "volume", "unknown unit 'ML' (did you mean 'mL'?)"),
    ("3 Bar", "pressure", "did you mean 'bar'?"),
    ("3 psia", "pressure", "absolute"),
    ("nan L", "volume", "is not a number with a unit"),
    ("inf L", "volume", "is not a number with a unit"),
    ("1e999 L", "volume", "not a finite number"),
    ("12:30", "time", "is not a number with a unit"),
    ("", "time", "is not a number with a unit"),
    ("L", "volume", "is not a number with a unit"),
    ("2 L/", "flow", "is not"),
    ("2 L//h", "flow", "is not"),
    ("2 L/(h", "flow", "is not"),
    ("2 m2**99", "area", "is not"),
    ("2 __import__('os')", "volume", "is not"),
    ("2 degC/min", "temperature", "not a unit of temperature"),
    ("1 " + "L" * 500, "volume", "is not a number with a unit"),
    ("2 L 3", "volume", "is not"),
]


@pytest.mark.parametrize(("text", "dimension", "words"), REFUSED)
def test_refused_with_what_was_expected(text: str, dimension: str, words: str) -> None:
    with pytest.raises(ValueError, match="expected") as raised:
        quantity(text, dimension)
    assert words in str(raised.value)
    assert EXAMPLES[dimension] in str(raised.value) or "gauge" in str(raised.value)
    assert len(str(raised.value)) < 250


@settings(max_examples=500, deadline=None)
@given(
    st.text(max_size=30) | st.from_regex(r"[0-9.]{1,4} ?[A-Za-z0-9/()^*·² -]{0,12}", fullmatch=True),
    st.sampled_from(sorted(CANONICAL)),
)
def test_any_text_is_read_or_refused(text: str, dimension: str) -> None:
    try:
        assert math.isfinite(quantity(text, dimension))
    except ValueError as error:
        assert "expected" in str(error)


@given(
    st.floats(-1e6, 1e6),
    st.sampled_from([("psi", "pressure"), ("degF", "temperature"), ("gal", "volume"), ("mL/min", "flow")]),
)
def test_there_and_back(value: float, unit: tuple[str, str]) -> None:
    name, dimension = unit
    assert quantity(f"{convert(value, dimension, name)!r} {name}", dimension) == pytest.approx(
        value, rel=1e-12, abs=1e-9
    )


def test_shown_with_sensible_digits() -> None:
    assert show(2000.0, "volume") == "2000 L"
    assert show(0.000802, "resistance") == "0.000802 bar/LMH"
    assert show(2.0, "pressure", "psi") == "29 psi"
    assert show(20.0, "temperature", "degF") == "68 degF"
    assert show(1234567.0, "volume") == "1230000 L"


def test_usual_units_need_no_unit_library() -> None:
    script = (
        "import sys; from trainopt.units import quantity; quantity('30 psi', 'pressure'); "
        "sys.exit('pint' in sys.modules)"
    )
    assert subprocess.run([sys.executable, "-c", script], check=False).returncode == 0
