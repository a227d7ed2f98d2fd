"""Units in print and conversions out of SI."""

from __future__ import annotations

import math
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from dossier.model.case import Quantity
from dossier.report import units


@pytest.mark.parametrize(
    ("unit", "expected"),
    [
        ("1", ""),
        ("m", "m"),
        ("N*s/m", "N\u00a0s/m"),
        ("N/m^3", "N/m³"),
        ("kg*m^2", "kg\u00a0m²"),
        ("1/s", "1/s"),
        ("deg", "°"),
        ("deg/s", "°/s"),
        ("m^(-1)", "m⁻¹"),
    ],
)
def test_units_are_printed_with_their_signs(unit: str, expected: str) -> None:
    assert units.unit_text(unit) == expected


def test_pi_lies_between_its_printed_bounds() -> None:
    """Value of pi to 50 decimals: OEIS A000796."""
    pi = Fraction("3.14159265358979323846264338327950288419716939937510")
    assert units.PI_BELOW < pi < units.PI_ABOVE


@given(st.fractions(max_denominator=10**9))
def test_a_conversion_through_pi_is_rounded_outward(value: Fraction) -> None:
    low, high = units.DEGREE.from_si(value, value)
    assert low is not None
    assert high is not None
    assert low <= high
    assert high - low <= abs(value) / 10**30
    assert math.isclose(float(low), math.degrees(float(value)), rel_tol=1e-12, abs_tol=1e-300)


def test_degrees_celsius_have_their_own_zero_but_differences_do_not() -> None:
    kelvin = Quantity(Fraction(1), 0, "K", "1 K")
    assert units.absolute_unit("degC", kelvin).from_si(Fraction("293.15"), None) == (20, None)
    difference = units.difference_unit("degC", kelvin)
    assert difference.name == "K"
    assert difference.from_si(Fraction(5), Fraction(6)) == (5, 6)


def test_the_unit_of_a_bound_is_recovered_from_its_text() -> None:
    unit = units.stated_unit(Quantity(Fraction("0.0016"), 0, "m", "1.6 mm"))
    assert unit is not None
    assert unit.name == "mm"
    assert unit.from_si(Fraction("0.00138"), None) == (Fraction("1.38"), None)
    degrees = units.stated_unit(Quantity(Fraction(40, 180), 1, "rad", "40 deg"))
    assert degrees is not None
    assert (degrees.name, degrees.factor, degrees.pi_power) == ("deg", Fraction(1, 180), 1)


def test_a_bound_of_zero_tells_no_unit() -> None:
    """0 mm is 0 in SI: the length of a millimetre cannot be recovered from it."""
    assert units.stated_unit(Quantity(Fraction(0), 0, "m", "0 mm")) is None
    assert units.unit_text(units.COHERENT.name) == "(SI units)"


def test_degrees_celsius_are_printed_from_their_own_zero() -> None:
    unit = units.stated_unit(Quantity(Fraction("353.15"), 0, "K", "80 degC"))
    assert unit is not None
    assert unit.from_si(Fraction("353.15"), None) == (80, None)


def test_a_stated_quantity_keeps_its_digits() -> None:
    assert units.as_written(Quantity(Fraction("4e6"), 0, "N/m", "4.0e6")) == "4.0\u202f×\u202f10⁶\u00a0N/m"
    assert units.as_written(Quantity(Fraction(-2), 0, "mm", "-2 mm")) == "−2\u00a0mm"
    assert units.written("see note 3") == "see note 3"


def test_hertz_are_turns_per_second() -> None:
    low, high = units.HERTZ.from_si(Fraction("6.283185307179586"), Fraction("6.283185307179587"))
    assert low is not None
    assert high is not None
    assert low <= 1 <= high
