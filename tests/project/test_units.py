"""Units convert exactly, angles keep pi, and what cannot be exact or meant is refused.

Definitions: BIPM, The International System of Units (SI), 9th ed. 2019; inch and pound: international yard
and pound agreement 1959 (values from memory, they are definitions).
"""

from fractions import Fraction as F

import pytest
from hypothesis import given
from hypothesis import strategies as st

from dossier.project.units import BASES, UnitError, parse_unit


@pytest.mark.parametrize(
    ("text", "factor", "pi_power"),
    [
        ("1", F(1), 0),
        ("kN/mm", F(10**6), 0),
        ("mm", F(1, 1000), 0),
        ("ms", F(1, 1000), 0),
        ("%", F(1, 100), 0),
        ("rad", F(1), 0),
        ("mrad", F(1, 1000), 0),
        ("deg", F(1, 180), 1),
        ("turn", F(2), 1),
        ("rpm", F(1, 30), 1),
        ("deg/s^2", F(1, 180), 1),
        ("N*m/deg", F(180), -1),
        ("min", F(60), 0),
        ("bar", F(10**5), 0),
        ("L/min", F(1, 60_000), 0),
        ("in", F(254, 10_000), 0),
        ("lbf", F("4.4482216152605"), 0),
        ("kW", F(1000), 0),
        ("t", F(1000), 0),
        ("K/K", F(1), 0),
        ("uF", F(1, 10**6), 0),
        ("g", F(1, 1000), 0),
        ("m^(1/2)", F(1), 0),
    ],
)
def test_factors_are_exact(text: str, factor: F, pi_power: int) -> None:
    unit = parse_unit(text)
    assert isinstance(unit.factor, F)
    assert (unit.factor, unit.pi_power) == (factor, pi_power)


@pytest.mark.parametrize(
    ("one", "other"),
    [
        ("N", "kg*m/s^2"),
        ("J", "N*m"),
        ("W", "V*A"),
        ("ohm", "V/A"),
        ("H", "V*s/A"),
        ("F", "A*s/V"),
        ("T", "Wb/m^2"),
        ("N/(m*s)", "kg/s^3"),
        ("rad/s", "1/s"),
        ("degC", "K"),
        ("Pa", "N/m^2"),
        ("N/m/s", "N/(m*s)"),
    ],
)
def test_dimensions_of_derived_units_agree(one: str, other: str) -> None:
    assert parse_unit(one).dimension == parse_unit(other).dimension
    assert parse_unit(one).factor == parse_unit(other).factor


@pytest.mark.parametrize(
    ("text", "offset", "hint"),
    [
        ("Hz", 0, "rates take 1/s"),
        ("kN/mn", 3, ""),
        ("Nm", 0, "N*m"),
        ("m2", 1, "m^2"),
        ("degC/s", 0, "use K"),
        ("dB/s", 0, ""),
        ("m^", 2, ""),
        ("m^2^3", 3, ""),
        ("(m", 2, ""),
        ("m²", 1, "powers with ^"),
        ("m^13", 2, ""),
        ("((km^12)^12)^12", 0, ""),
        ("mm^(1/2)", 0, "roots"),
        ("", 0, '"1"'),
    ],
)
def test_other_texts_are_refused_with_place_and_hint(text: str, offset: int, hint: str) -> None:
    with pytest.raises(UnitError) as caught:
        parse_unit(text)
    assert hint in caught.value.hint
    assert caught.value.offset == offset or text.startswith("((")


NAMES = st.sampled_from(("m", "mm", "kg", "s", "ms", "A", "K", "kN", "deg", "rpm", "V", "%"))


@given(NAMES, NAMES, st.integers(1, 4))
def test_products_and_powers_multiply_factors(one: str, other: str, power: int) -> None:
    a, b, both = parse_unit(one), parse_unit(other), parse_unit(f"{one}/{other}^{power}")
    assert both.factor == a.factor / b.factor**power
    assert both.pi_power == a.pi_power - power * b.pi_power
    assert both.dimension == a.dimension / b.dimension**power


@given(st.text(alphabet="mskgNrad%*/^()-12 C", max_size=20))
def test_any_text_is_a_unit_or_refused(text: str) -> None:
    try:
        unit = parse_unit(text)
    except UnitError as error:
        assert 0 <= error.offset <= len(text)
    else:
        assert unit.factor > 0
        assert len(unit.dimension.exponents) == len(BASES)
