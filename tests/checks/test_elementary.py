"""Elementary functions without a library: every enclosure against ball arithmetic at 200 bits."""

import math
from fractions import Fraction

import numpy as np
import pytest
from flint import arb
from hypothesis import given
from hypothesis import strategies as st

from dossier.checks import elementary as el
from dossier.checks import intervals as iv
from dossier.checks.intervals import Span
from dossier.model.ball import precision, to_fmpq

BITS = 200
EDGES = {
    "sin": [0.0, -0.0, 5e-324, 1e-200, math.pi, -math.pi, math.pi / 2, 355.0, 1e6, -1e6, 1e6 + 1],
    "exp": [0.0, 1e-300, -700.0, -700.1, 709.0, 709.1, -746.0, math.log(2) / 2, -math.log(2) / 2],
    "log": [1.0, 2.0**-1022, 5e-324, 1.7e308, math.sqrt(2), math.sqrt(0.5), 1 + 2.0**-52, 1 - 2.0**-53],
    "tanh": [0.0, 5e-324, 0.17, math.nextafter(0.17, 0), 20.0, 20.5, -0.17, 1e300],
    "atan": [0.0, 5e-324, 1.0, math.nextafter(1, 2), -1.0, 1e300, 1e-200],
    "asin": [0.0, 1.0, -1.0, math.nextafter(1, 0), 1e-200, 0.5],
}
EDGES |= {"cos": EDGES["sin"], "tan": EDGES["sin"], "acos": EDGES["asin"]}


def sample(name):
    """Points over the useful range of a function on linear and logarithmic scales, and its edges."""
    generator = np.random.default_rng(7)
    wide = generator.normal(size=400) * 10.0 ** generator.uniform(-8, 5, 400)
    if name in ("asin", "acos"):
        values = np.concatenate([generator.uniform(-1, 1, 300), 1 - 10.0 ** generator.uniform(-16, 0, 200)])
    elif name == "log":
        values = np.concatenate([10.0 ** generator.uniform(-300, 300, 400), 1 + generator.normal(size=400) * 1e-3])
    elif name == "exp":
        values = np.concatenate([generator.uniform(-740, 720, 400), generator.uniform(-1, 1, 400)])
    else:
        values = np.concatenate([wide, generator.uniform(-8, 8, 400)])
    return np.concatenate([values, EDGES[name]])


def is_outside(exact, lo, hi):
    """The reference is surely not enclosed.  Its ball, 1e-60 wide, may stick out where the value rounds to +-1."""
    assert not (math.isnan(lo) or math.isnan(hi))
    return (lo != -math.inf and exact < arb(lo)) or (hi != math.inf and exact > arb(hi))


def test_the_comparison_notices_a_bound_off_by_one_unit_in_the_last_place():
    with precision(BITS):
        exact = arb(1).sin()
        near = float(exact)
        assert is_outside(exact, math.nextafter(near, 2), 1.0) and is_outside(exact, -1.0, math.nextafter(near, 0))
        assert not is_outside(exact, math.nextafter(near, 0), math.nextafter(near, 2))


@pytest.mark.parametrize("name", sorted(EDGES))
def test_every_point_value_lies_in_its_enclosure(name):
    points = sample(name)
    result = getattr(el, name)(iv.point(points))
    with precision(BITS):
        for x, lo, hi in zip(points.tolist(), result.lo.tolist(), result.hi.tolist(), strict=True):
            exact = getattr(arb(x), name)()
            assert not is_outside(exact, lo, hi), x


@pytest.mark.parametrize(
    ("name", "low", "high"),
    [("sin", 0.1, 3.0), ("cos", -1.5, 1.5), ("exp", -600, 600), ("log", 3, 1e9), ("atan", 0.01, 50), ("tanh", 0.01, 9)],
)
def test_enclosures_are_within_24_units_in_the_last_place(name, low, high):
    points = np.linspace(low, high, 2001)
    result = getattr(el, name)(iv.point(points))
    assert ((result.hi - result.lo) <= 24 * np.spacing(np.abs(result.hi))).mean() > 0.95


@given(st.sampled_from(["sin", "cos", "tan"]), st.floats(-50, 50), st.floats(0, 8), st.integers(0, 16))
def test_trigonometric_ranges_hold_every_value_between_the_ends(name, low, width, share):
    high = low + width
    inside = min(max(low + (high - low) * share / 16, low), high)
    result = getattr(el, name)(Span(np.array([low]), np.array([high])))
    with precision(BITS):
        exact = getattr(arb(inside), name)()
        assert not is_outside(exact, float(result.lo[0]), float(result.hi[0]))


def test_extrema_inside_an_interval_are_reached_and_those_outside_are_not():
    boxes = Span(np.array([1.0, 1.0, 4.0, -0.5, 0.1]), np.array([2.0, 1.5, 5.0, 0.5, 0.2]))
    sine, cosine = el.sin(boxes), el.cos(boxes)
    assert sine.hi.tolist()[0] == 1.0 and sine.hi[1] < 0.998
    assert sine.lo[2] == -1.0
    assert cosine.hi[3] == 1.0 and cosine.hi[4] < 0.996


@pytest.mark.parametrize("turn", [-100_000, -3, -1, 0, 1, 2, 100_000])
@pytest.mark.parametrize("past", [1e-3, 1e-5, 1e-7])
def test_an_extremum_just_inside_either_end_is_not_missed(turn, past):
    # 1e-7 past the peak the value at the end is 5e-15 below it, far outside rounding.
    for function, peak in ((el.sin, math.pi / 2), (el.cos, 0.0)):
        for half, sign in ((0, 1), (1, -1)):
            place = peak + (2 * turn + half) * math.pi
            boxes = Span(np.array([place - 0.3, place - past]), np.array([place + past, place + 0.3]))
            result = function(boxes)
            assert ((result.hi if sign > 0 else -result.lo) == 1.0).all()


def test_tangents_across_a_pole_are_unbounded():
    boxes = Span(np.array([1.0, 1.0, -0.1, 0.0]), np.array([2.0, 1.5, 0.1, 40.0]))
    sound = iv.is_sound(el.tan(boxes))
    assert sound.tolist() == [False, True, True, False]


@pytest.mark.parametrize("exponent", ["1/2", "3/2", "-1/2", "1/3", "-2/3", "7/5", "0.001"])
def test_rational_powers_hold_the_exact_value(exponent):
    value = Fraction(exponent)
    points = np.concatenate([10.0 ** np.linspace(-30, 30, 61), np.linspace(0.5, 2, 31)])
    result = el.rational_power(iv.point(points), value)
    with precision(BITS):
        for x, lo, hi in zip(points.tolist(), result.lo.tolist(), result.hi.tolist(), strict=True):
            exact = (arb(x).log() * arb(to_fmpq(value))).exp()
            assert arb(lo) <= exact <= arb(hi)


def test_rational_powers_from_zero_start_at_zero_and_negative_ones_are_unbounded():
    boxes = Span(np.array([0.0]), np.array([8.0]))
    third = el.rational_power(boxes, Fraction(1, 3))
    assert third.lo[0] == 0 and 2 <= third.hi[0] < 2 + 1e-12
    assert el.rational_power(boxes, Fraction(-1, 3)).hi[0] == math.inf


@pytest.mark.parametrize("name", ["exp", "log", "tanh", "atan", "asin"])
def test_monotone_functions_take_their_bounds_from_the_ends(name):
    low, high = (0.25, 0.75)
    result = getattr(el, name)(Span(np.array([low]), np.array([high])))
    with precision(BITS):
        for x in (low, 0.5, high):
            assert arb(float(result.lo[0])) <= getattr(arb(x), name)() <= arb(float(result.hi[0]))
    reference = getattr(math, name)
    assert result.lo[0] == pytest.approx(reference(low), rel=1e-14)
    assert result.hi[0] == pytest.approx(reference(high), rel=1e-14)


def test_functions_of_the_whole_line_stay_within_their_range():
    line = Span(np.array([-math.inf]), np.array([math.inf]))
    with np.errstate(all="ignore"):
        for function in (el.sin, el.cos, el.tanh):
            result = function(line)
            assert result.lo[0] <= -1 + 1e-14 and result.hi[0] >= 1 - 1e-14
        angle = el.atan(line)
        assert angle.lo[0] <= -math.pi / 2 and angle.hi[0] >= math.pi / 2
        assert el.exp(line).lo[0] == 0 and el.exp(line).hi[0] == math.inf


@pytest.mark.parametrize("name", ["exp", "log", "atan", "asin", "acos", "tan"])
def test_an_unknown_argument_gives_no_sound_value(name):
    with np.errstate(all="ignore"):
        assert not iv.is_sound(getattr(el, name)(Span(np.array([math.nan]), np.array([math.nan]))))[0]


def test_logarithms_of_negative_numbers_are_unknown_and_from_zero_unbounded_below():
    with np.errstate(all="ignore"):
        assert not iv.is_sound(el.log(Span(np.array([-2.0]), np.array([-1.0]))))[0]
    assert el.log(Span(np.array([-1.0]), np.array([1.0]))).lo[0] == -math.inf


def test_constants_are_rounded_outward_and_unknown_ones_unbounded():
    with precision(BITS):
        third = el.constant(arb(1) / 3)
        assert Fraction(float(third.lo)) < Fraction(1, 3) < Fraction(float(third.hi))
        assert el.constant(arb(1) / 0).hi == math.inf
