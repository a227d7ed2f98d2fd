"""Printed numbers: the laws of outward rounding, read back from the printed text."""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from dossier.report import numbers

FRACTIONS = st.fractions(max_denominator=10**12).map(lambda f: f * 10**4)
TINY = st.builds(lambda p, e: Fraction(p, 10**e), st.integers(-(10**9), 10**9), st.integers(0, 30))
ANY = st.one_of(FRACTIONS, TINY)


def read(text: str) -> Fraction:
    """A printed number, read back by a reader of its own."""
    plain = text.replace(numbers.GROUP, "").replace("−", "-").replace("≈", "").rstrip("…%").replace("…×", "×")
    mantissa, _, power = plain.partition("×10")
    exponent = int(power.translate(str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-"))) if power else 0
    return Fraction(mantissa) * Fraction(10) ** exponent


@given(ANY)
def test_a_lower_bound_is_never_printed_too_high(value: Fraction) -> None:
    assert read(numbers.below(value)) <= value


@given(ANY)
def test_an_upper_bound_is_never_printed_too_low(value: Fraction) -> None:
    assert read(numbers.above(value)) >= value


@given(ANY)
def test_four_digits_are_within_a_thousandth(value: Fraction) -> None:
    for text in (numbers.below(value), numbers.above(value), numbers.nearest(value)):
        assert abs(read(text) - value) <= abs(value) / 1000


@given(ANY)
def test_rounding_a_mirrored_bound_mirrors_the_text(value: Fraction) -> None:
    assert read(numbers.below(-value)) == -read(numbers.above(value))


@given(ANY)
def test_a_number_printed_exactly_reads_back_exactly(value: Fraction) -> None:
    text = numbers.exactly(value)
    assert text is None or read(text) == value


@given(ANY)
def test_a_rounded_number_is_always_marked(value: Fraction) -> None:
    text = numbers.number(value)
    assert (read(text) == value) == (numbers.ABOUT not in text)


@given(ANY, ANY)
def test_an_enclosure_printed_with_two_ends_holds_the_true_one(one: Fraction, other: Fraction) -> None:
    low, high = min(one, other), max(one, other)
    left, dots, right = numbers.enclosure(low, high).partition(f" {numbers.ELLIPSIS} ")
    if dots:
        assert read(left) <= low
        assert read(right) >= high


@given(ANY, st.integers(5, 40))
def test_first_digits_are_shared_by_the_whole_enclosure(value: Fraction, places: int) -> None:
    low, high = value, value + Fraction(1, 10**places)
    text = numbers.first_digits(low, high)
    if text is not None:
        printed = read(text)
        for end in (low, high):
            assert abs(printed) <= abs(end)
            assert abs(end - printed) <= abs(end) / 10 ** (numbers.FIRST_DIGITS - 2)


@given(ANY)
def test_a_reserve_is_rounded_down_to_tenths_of_a_per_cent(share: Fraction) -> None:
    printed = read(numbers.percent_below(share)) if abs(share) < 1 else None
    if printed is not None:
        assert printed <= share * 100 < printed + Fraction(1, 10)


@pytest.mark.parametrize(
    ("value", "expected"),
    [
        ("1", "1"),
        ("-12.5", "−12.5"),
        ("1200", "1200"),
        ("240000", "240\u202f000"),
        ("0.0015", "0.0015"),
        ("4e6", "4\u202f×\u202f10⁶"),
        ("-2.2e-8", "−2.2\u202f×\u202f10⁻⁸"),
        ("0", "0"),
    ],
)
def test_numbers_are_written_as_the_standard_asks(value: str, expected: str) -> None:
    """ISO 80000-1, 7.3: groups of three, minus sign, multiplication cross."""
    assert numbers.number(Fraction(value)) == expected


def test_a_missing_end_is_no_infinity() -> None:
    assert numbers.enclosure(None, None) == "no finite value in this model"
    assert "no finite upper end" in numbers.enclosure(Fraction(1), None)
    assert "no finite lower end" in numbers.enclosure(None, Fraction(1))


def test_more_digits_are_announced_before_the_power_of_ten() -> None:
    third = Fraction(1, 3 * 10**9)
    assert numbers.first_digits(third, third) == "3.33333…\u202f×\u202f10⁻¹⁰"


def test_a_narrow_enclosure_shows_its_common_digits() -> None:
    assert numbers.enclosure(Fraction("54.10812"), Fraction("54.10819")) == "54.1081…"
    assert numbers.enclosure(Fraction("1.7"), Fraction("1.9")) == "1.7 … 1.9"


def test_a_narrow_enclosure_that_straddles_a_decimal_is_printed_with_its_radius() -> None:
    reach = Fraction(1, 10**12)
    assert numbers.enclosure(1 - reach, 1 + reach) == "1 ±\u202f1\u202f×\u202f10⁻¹²"


@given(ANY, st.integers(7, 30))
def test_centre_and_radius_hold_the_enclosure(value: Fraction, places: int) -> None:
    low, high = value - abs(value) / 10**places, value + abs(value) / (3 * 10**places)
    centre, sign, reach = numbers.enclosure(low, high).partition(f" {numbers.PLUS_MINUS}")
    if sign:
        assert read(centre) - read(reach) <= low
        assert read(centre) + read(reach) >= high


def test_no_digit_is_claimed_for_an_enclosure_around_zero() -> None:
    assert numbers.first_digits(Fraction(-1, 10**20), Fraction(1, 10**20)) is None


def test_an_angle_stated_in_degrees_is_printed_as_stated() -> None:
    moved = Fraction(90) + Fraction(1, 10**30)
    assert numbers.stated(moved) == "90"
    assert numbers.stated(Fraction(1, 3)).startswith(numbers.ABOUT)


def test_an_estimate_is_marked() -> None:
    assert numbers.estimate(0.1) == "≈\u202f0.100"
