"""Krawczyk's operator in ball arithmetic: accepts what has one zero, refuses what has none, two or a fold."""

from fractions import Fraction

import pytest
from flint import arb
from hypothesis import given
from hypothesis import strategies as st
from loop_cases import formula

from dossier.checks.slopes import krawczyk, newton_step, value_and_slopes
from dossier.model.ball import Ball, evaluate, precision
from dossier.model.expression import add, call, differentiate, number, power, symbol

X = ("x",)


def around(middle, radius):
    return (Ball(Fraction(middle), Fraction(radius)),)


@pytest.mark.parametrize(
    "text",
    [
        "x^3 - 2/x + 5", "sin(x)*cos(2*x)", "tan(x/3)", "asin(x/4) - acos(x/5)", "atan(x^2)", "exp(-x)*log(x)",
        "sqrt(x + 1)*tanh(x)", "abs(x - 7)*x", "1/(1 + x)^2",
    ],
)  # fmt: skip
@given(x=st.fractions(Fraction(1, 10), Fraction(3)))
def test_slopes_at_a_point_are_the_derivative(text, x):
    expression = formula(text)
    with precision(200):
        place = {"x": arb(x.numerator) / arb(x.denominator)}
        value, (slope,) = value_and_slopes(expression, X, place)
        assert value.overlaps(evaluate(expression, place))
        assert slope.overlaps(evaluate(differentiate(expression, "x"), place))
        assert slope.rad() < 1e-40


def test_the_slope_at_a_kink_holds_both_sides():
    with precision(64):
        _, (slope,) = value_and_slopes(formula("abs(x)"), X, {"x": arb("0.5", 1)})
        assert slope.contains(-1) and slope.contains(1)
        saturated = call("sat", symbol("x"), formula("0-1"), formula("1"))
        _, (slope,) = value_and_slopes(saturated, X, {"x": arb(1, 0.1)})
        assert slope.contains(0) and slope.contains(1) and not slope.contains(2)


def test_a_simple_zero_is_accepted_with_a_tight_image():
    image = krawczyk([formula("x^2 - 2")], X, {}, around("1.4142135", "1e-6"))
    assert image is not None
    assert image[0].lower ** 2 < 2 < image[0].upper ** 2 and image[0].radius < Fraction(1, 10**12)


@pytest.mark.parametrize(
    ("text", "middle", "radius"),
    [
        ("x^2 + 1", "0", "1"),  # no zero
        ("x^2 - 1", "0", "3"),  # two zeros
        ("x^2", "0", "0.1"),  # a double zero
        ("x^2 - 2", "1.5", "0.01"),  # a zero outside
        ("abs(x) - 1", "0", "2"),  # two zeros across a kink
        ("sqrt(x)", "0", "1"),  # undefined in part
        ("x", "1", "1"),  # the zero on the border
        ("x", "1", "0"),  # no box at all
    ],
)
def test_boxes_without_exactly_one_zero_inside_are_refused(text, middle, radius):
    assert krawczyk([formula(text)], X, {}, around(middle, radius)) is None


def test_a_zero_that_exists_only_in_the_formal_continuation_is_refused():
    # x^(3/2) + x + 1/2 is positive wherever it is defined.
    expression = add(power(symbol("x"), Fraction(3, 2)), symbol("x"), number("1/2"))
    assert krawczyk([expression], X, {}, around("0", "1")) is None


def test_a_zero_at_a_kink_is_accepted_where_all_slopes_have_one_sign():
    assert krawczyk([formula("3*x + abs(x)")], X, {}, around("0", "1")) is not None


def test_an_uncertain_constant_widens_the_image():
    constants = {"k": Ball(Fraction(2), Fraction(1, 100))}
    image = krawczyk([formula("x^2 - k")], X, constants, around("1.41", "0.1"))
    assert image is not None
    assert image[0].lower ** 2 <= Fraction(199, 100) and Fraction(201, 100) <= image[0].upper ** 2


def test_newton_steps_converge_and_fail_as_values():
    guess = (Fraction(3, 2),)
    for _ in range(6):
        guess = newton_step([formula("x^2 - 2")], X, {}, guess)
        assert guess is not None
    assert abs(guess[0] ** 2 - 2) < Fraction(1, 10**30)
    assert newton_step([formula("x^2 + 1")], X, {}, (Fraction(0),)) is None
    assert newton_step([formula("log(x)")], X, {}, (Fraction(-1),)) is None
