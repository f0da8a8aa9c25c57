"""Quantities: exact factors by definition, and refusals that say what to write."""

from __future__ import annotations

import math
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from resonate.scene.refused import RefusedError
from resonate.scene.units import UNITS, exact_quantity, quantity

# Exact by definition: BIPM, SI Brochure, 9th ed. (2019), tables 7 (prefixes) and 8 (min, h, t, degree);
# NIST SP 811 (2008), appendix B.8 (inch 0.0254 m and foot 0.3048 m exactly; t_degC + 273.15).
EXACT = [
    ("3 mm", "length", Fraction(3, 1000)),
    ("2 cm", "length", Fraction(2, 100)),
    ("7 um", "length", Fraction(7, 10**6)),
    ("7 µm", "length", Fraction(7, 10**6)),
    ("1.5 km", "length", Fraction(1500)),
    ("1 in", "length", Fraction(254, 10000)),
    ("1 ft", "length", Fraction(3048, 10000)),
    ("0.3m", "length", Fraction(3, 10)),
    ("20 ms", "time", Fraction(20, 1000)),
    ("5 us", "time", Fraction(5, 10**6)),
    ("2 min", "time", Fraction(120)),
    ("36 km/h", "speed", Fraction(10)),
    ("250 cm/s", "speed", Fraction(5, 2)),
    ("1500 mm/s", "speed", Fraction(3, 2)),
    ("48 kHz", "frequency", Fraction(48000)),
    ("12 g", "mass", Fraction(12, 1000)),
    ("5 mg", "mass", Fraction(5, 10**6)),
    ("2 t", "mass", Fraction(2000)),
    ("3 kN", "force", Fraction(3000)),
    ("3 mN", "force", Fraction(3, 1000)),
    ("212 GPa", "pressure", Fraction(212 * 10**9)),
    ("3 MPa", "pressure", Fraction(3 * 10**6)),
    ("101.325 kPa", "pressure", Fraction(101325)),
    ("7.85 g/cm^3", "density", Fraction(7850)),
    ("7850 kg/m^3", "density", Fraction(7850)),
    ("7850 kg/m3", "density", Fraction(7850)),
    ("2 kN/m", "tension", Fraction(2000)),
    ("4 N/mm", "stiffness", Fraction(4000)),
    ("0.2 N s/m", "damping", Fraction(1, 5)),
    ("20 degC", "temperature", Fraction("293.15")),
    ("-10 degC", "temperature", Fraction("263.15")),
    ("300 K", "temperature", Fraction(300)),
    ("-6 dB", "level", Fraction(-6)),
    ("9.80665 m/s^2", "acceleration", Fraction("9.80665")),
    ("1 m/s2", "acceleration", Fraction(1)),
    ("11e-6 1/K", "expansion", Fraction(11, 10**6)),
    ("50 W/(m K)", "conductivity", Fraction(50)),
    ("50 W/mK", "conductivity", Fraction(50)),
    ("470 J/(kg K)", "specific heat", Fraction(470)),
    ("470 J/kgK", "specific heat", Fraction(470)),
    ("50 %", "fraction", Fraction(1, 2)),
    ("1_000 mm", "length", Fraction(1)),
    ("+.5 m", "length", Fraction(1, 2)),
    ("1e-3 m", "length", Fraction(1, 1000)),
    (" 3  mm ", "length", Fraction(3, 1000)),
]


@pytest.mark.parametrize(("text", "dimension", "expected"), EXACT)
def test_factors_are_those_of_the_definitions(text, dimension, expected):
    assert exact_quantity(text, dimension) == expected
    assert quantity(text, dimension) == float(expected)


# A turn is 2 pi rad and 360 degrees: SI Brochure, table 8; one rounding of pi is left.
ANGLES = [
    ("180 deg", "angle", math.pi),
    ("1 turn", "angle", 2 * math.pi),
    ("60 rpm", "spin", 2 * math.pi),
    ("3 rev/s", "spin", 6 * math.pi),
    ("90 deg/s", "spin", math.pi / 2),
    ("2 rad", "angle", 2.0),
]


@pytest.mark.parametrize(("text", "dimension", "expected"), ANGLES)
def test_angles(text, dimension, expected):
    assert quantity(text, dimension) == pytest.approx(expected, rel=2e-16, abs=0)


REFUSED = [
    ("1,5 mm", "length", "decimal comma", "point"),
    ("3 kg", "length", "'kg' is not a length unit but one of mass", "use one of m, km, cm, mm, um, ft, in"),
    ("3 mm*2", "length", "not a length unit", "use one of"),
    ("3 5 mm", "length", "not a length unit", "use one of"),
    ("3 MM", "length", "'MM' is not a length unit", "use one of"),
    ("three mm", "length", "is not a length", "1.5 m"),
    ("", "length", "is not a length", "1.5 m"),
    ("mm", "length", "is not a length", "1.5 m"),
    ("nan m", "length", "not a finite number", "a number in m"),
    ("-inf m", "length", "not a finite number", "a number in m"),
    ("1e400 m", "length", "not a finite number", "a number in m"),
    ("1e999999999999 m", "length", "not a finite number", "a number in m"),
    ("1e308 km", "length", "not a finite number", "smaller"),
    ("1e-400 m", "length", "too small", "write 0"),
    ("9" * 80 + " m", "length", "is not a length", "1.5 m"),
    (math.nan, "length", "nan is not a finite number", "a number in m"),
    (math.inf, "speed", "inf is not a finite number", "a number in m/s"),
    (10**400, "mass", "not a finite number", "a number in kg"),
    (True, "length", "true is not a length", "1.5 m"),
    ([1], "length", "[1] is not a length", "1.5 m"),
    ("3 m", "number", "plain number", "number alone"),
    ("0.5 kHZ", "frequency", "'kHZ' is not a frequency unit", "did you mean 'kHz'?"),
]


@pytest.mark.parametrize(("value", "dimension", "what", "fix"), REFUSED)
def test_refusals_say_what_and_how_to_fix(value, dimension, what, fix):
    with pytest.raises(RefusedError) as caught:
        quantity(value, dimension)
    assert what in caught.value.what
    assert fix in caught.value.fix


@given(
    amount=st.decimals(min_value=-(10**6), max_value=10**6, allow_nan=False, places=6),
    unit=st.sampled_from([(name, unit) for name, units in UNITS.items() for unit in units if unit != "degC"]),
)
def test_every_unit_scales_the_exact_decimal(amount, unit):
    dimension, name = unit
    assert exact_quantity(f"{amount:f} {name}", dimension) == Fraction(amount) * UNITS[dimension][name]


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_bare_number_and_its_text_come_back_unchanged(value):
    assert quantity(value, "length") == value
    if len(f"{value!r} m") <= 64:
        assert quantity(f"{value!r} m", "length") == value


@given(st.text(max_size=30))
def test_any_text_is_read_or_refused(text):
    try:
        value = quantity(text, "pressure")
    except RefusedError as refusal:
        value = 0.0 if refusal.what and refusal.fix else math.nan
    assert math.isfinite(value)
