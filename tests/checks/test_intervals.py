"""Interval arithmetic: every bound against exact fractions, every unknown refused."""

import math
from fractions import Fraction

import numpy as np
import pytest
from flint import arb
from hypothesis import given
from hypothesis import strategies as st

from dossier.checks import intervals as iv
from dossier.checks.intervals import Span
from dossier.model.ball import Ball, precision

SPECIAL = st.sampled_from([0.0, -0.0, 5e-324, -5e-324, 1e-310, 2.0**-1022])
MODERATE = st.floats(-1e150, 1e150) | st.floats(-4, 4) | SPECIAL


@st.composite
def spans(draw):
    """An interval of doubles and an exact point of it."""
    lo, hi = sorted((draw(MODERATE), draw(MODERATE)))
    share = Fraction(draw(st.integers(0, 16)), 16)
    return one(lo, hi), Fraction(lo) + share * (Fraction(hi) - Fraction(lo))


def one(lo, hi):
    return Span(np.array([lo]), np.array([hi]))


def holds(span, exact):
    """The exact number lies in the interval; an infinite end is no bound."""
    lo, hi = float(span.lo[0]), float(span.hi[0])
    assert not (math.isnan(lo) or math.isnan(hi))
    return (lo == -math.inf or Fraction(lo) <= exact) and (hi == math.inf or exact <= Fraction(hi))


@given(spans(), spans())
def test_sums_differences_and_products_hold_the_exact_result(first, second):
    (a, x), (b, y) = first, second
    assert holds(iv.add(a, b), x + y)
    assert holds(iv.sub(a, b), x - y)
    assert holds(iv.mul(a, b), x * y)
    assert holds(iv.neg(a), -x)
    assert holds(iv.maximum(a, b), max(x, y))
    assert holds(iv.minimum(a, b), min(x, y))


@given(spans(), spans())
def test_quotients_hold_the_exact_result_wherever_it_exists(first, second):
    (a, x), (b, y) = first, second
    if y != 0:
        assert holds(iv.div(a, b), x / y)


@given(spans(), st.integers(1, 7))
def test_squares_powers_and_sizes_hold_the_exact_result(first, exponent):
    a, x = first
    with np.errstate(over="ignore", invalid="ignore"):
        assert holds(iv.square(a), x * x)
        assert holds(iv.absolute(a), abs(x))
        power = iv.power(a, exponent)
    # Beyond the range of doubles, 1e43^7 at the least, an end is unknown and nothing may rest on it.
    assert (
        holds(power, x**exponent) if iv.is_sound(power)[0] else max(map(abs, (*a.lo.tolist(), *a.hi.tolist()))) > 1e43
    )


@given(spans())
def test_square_roots_hold_the_exact_root(first):
    a, x = first
    if x >= 0:
        root = iv.sqrt(a)
        assert Fraction(float(root.lo[0])) ** 2 <= x <= Fraction(float(root.hi[0])) ** 2


@given(st.floats(allow_nan=False, allow_infinity=False, max_value=1e300, min_value=-1e300))
def test_widening_steps_at_least_to_the_neighbouring_double(value):
    assert iv.down(np.array([value]))[0] <= math.nextafter(value, -math.inf)
    assert iv.up(np.array([value]))[0] >= math.nextafter(value, math.inf)


@pytest.mark.parametrize("exponent", [-1021, -961, -960, -53, 0, 52, 1000])
def test_widening_covers_the_gap_on_both_sides_of_every_power_of_two(exponent):
    near = [math.nextafter(2.0**exponent, 0), 2.0**exponent, math.nextafter(2.0**exponent, math.inf)]
    for value in (*near, *(-v for v in near)):
        assert iv.down(np.array([value]))[0] <= math.nextafter(value, -math.inf)
        assert iv.up(np.array([value]))[0] >= math.nextafter(value, math.inf)


def test_widening_costs_two_units_in_the_last_place_and_no_more():
    value = np.linspace(1, 2, 1001)
    assert ((iv.up(value) - value) <= 2 * np.spacing(value)).all()


def test_a_quotient_by_an_interval_that_may_be_zero_is_unbounded_and_not_sound():
    for low, high in ((-1.0, 1.0), (0.0, 1.0), (-1.0, 0.0), (0.0, 0.0)):
        quotient = iv.div(one(1.0, 2.0), one(low, high))
        assert (quotient.lo[0], quotient.hi[0]) == (-math.inf, math.inf)
        assert not iv.is_sound(quotient)[0]


def test_squares_and_even_powers_across_zero_start_at_zero():
    assert iv.square(one(-1.0, 2.0)).lo[0] == 0
    assert iv.power(one(-1.0, 2.0), 4).lo[0] == 0
    assert iv.power(one(-2.0, 1.0), 3).lo[0] == pytest.approx(-8)


def test_zero_times_an_unbounded_interval_is_unknown_and_proves_nothing():
    with np.errstate(invalid="ignore"):
        product = iv.mul(one(0.0, 0.0), one(-math.inf, math.inf))
    assert not iv.is_sound(product)[0]
    assert not iv.excludes_zero(product)[0]


UNKNOWN = [(math.nan, 1.0), (1.0, math.nan), (math.nan, math.nan)]


@pytest.mark.parametrize("ends", UNKNOWN)
@pytest.mark.parametrize("operation", [iv.add, iv.sub, iv.mul, iv.div, iv.maximum, iv.minimum])
def test_an_unknown_end_never_comes_back_sound_from_two_operands(operation, ends):
    with np.errstate(all="ignore"):
        for pair in ((one(*ends), one(2.0, 3.0)), (one(2.0, 3.0), one(*ends))):
            assert not iv.is_sound(operation(*pair))[0]


@pytest.mark.parametrize("ends", UNKNOWN)
@pytest.mark.parametrize("operation", [iv.neg, iv.square, iv.sqrt, iv.absolute, lambda a: iv.power(a, 3)])
def test_an_unknown_end_never_comes_back_sound_from_one_operand(operation, ends):
    with np.errstate(all="ignore"):
        assert not iv.is_sound(operation(one(*ends)))[0]


@pytest.mark.parametrize(
    ("lo", "hi", "sound"),
    [(0.0, 0.0, True), (-1.0, 2.0, True), (2.0, -1.0, False), (-math.inf, 0.0, False), (math.inf, math.inf, False)],
)
def test_an_interval_is_sound_when_finite_and_in_order(lo, hi, sound):
    with np.errstate(invalid="ignore"):
        assert bool(iv.is_sound(one(lo, hi))[0]) is sound


def test_roots_of_negative_numbers_are_unknown():
    assert not iv.is_sound(iv.sqrt(one(-2.0, -1.0)))[0]


def test_whole_powers_below_one_are_refused():
    with pytest.raises(ValueError, match="from 1 on"):
        iv.power(one(1.0, 2.0), 0)


@given(st.fractions())
def test_the_tightest_doubles_around_a_fraction_are_neighbours(value):
    lo, hi = iv.bounds_of_fraction(value)
    assert Fraction(lo) <= value <= Fraction(hi)
    assert hi in (lo, math.nextafter(lo, math.inf))


def test_fractions_beyond_the_range_of_doubles_are_unbounded():
    huge = Fraction(10) ** 400
    assert iv.bounds_of_fraction(huge)[1] == math.inf
    assert iv.bounds_of_fraction(-huge)[0] == -math.inf
    assert iv.bounds_of_fraction(1 / huge) == (0.0, 5e-324)


def test_the_doubles_around_a_ball_hold_its_ends():
    lo, hi = iv.bounds_of_ball(Ball(Fraction(1, 3), Fraction(1, 7)))
    assert Fraction(lo) <= Fraction(4, 21) and Fraction(10, 21) <= Fraction(hi)


def test_the_middle_lies_inside_and_the_reach_covers_both_ends():
    boxes = Span(np.array([-1.0, 1.0, 0.1]), np.array([2.0, 1.0, math.nextafter(0.1, 1)]))
    centre = iv.middle(boxes)
    assert ((boxes.lo <= centre) & (centre <= boxes.hi)).all()
    for lo, hi, c, r in zip(*(v.tolist() for v in (*boxes, centre, iv.reach(boxes, centre))), strict=True):
        assert Fraction(r) >= max(Fraction(hi) - Fraction(c), Fraction(c) - Fraction(lo))


def test_roots_agree_with_an_independent_library():
    values = np.array([2.0, 3.0, 1e-310, 5e-324, 1e300])
    root = iv.sqrt(iv.point(values))
    with precision(200):
        for v, lo, hi in zip(values.tolist(), root.lo.tolist(), root.hi.tolist(), strict=True):
            assert arb(lo) <= arb(v).sqrt() <= arb(hi)
