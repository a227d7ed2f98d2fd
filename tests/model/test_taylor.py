"""Functions of parameters as polynomials with a remainder, against evaluation of the functions themselves."""

from fractions import Fraction as F

import pytest
from flint import arb
from hypothesis import given
from hypothesis import strategies as st
from loop_cases import formula

from dossier.model.ball import Ball, enclose, evaluate, precision
from dossier.model.expression import UNARY_FUNCTIONS, fold
from dossier.model.region import Box, Interval
from dossier.model.taylor import expand_functions

FORMULAS = [
    "exp(p)", "exp(-p*q)", "sin(p + q)", "cos(p)", "tan(p/4)", "atan(p)", "tanh(p*q)", "sqrt(2 + p)", "log(3 + q)",
    "asin(p/4)", "acos(q/4)", "exp(sin(p))", "1/(1 + exp(p))", "q*q*exp(p)/(2 + p)",
]  # fmt: skip


def is_rational(expression):
    return fold(expression, lambda node, args: node.op not in UNARY_FUNCTIONS and all(args))


@given(
    st.sampled_from(FORMULAS),
    st.fractions(-1, 1, max_denominator=50),
    st.fractions(0, F(1, 5), max_denominator=50),
    st.fractions(0, 1),
    st.fractions(0, 1),
)
def test_the_polynomial_and_its_remainder_hold_the_function(text, low, width, s, t):
    area = Box(("p", "q"), (Interval(low, low + width), Interval(low, low + width)))
    expression = formula(text)
    (rational,), balls = expand_functions((expression,), area, {})
    assert is_rational(rational)
    p, q = low + s * width, low + t * width
    with precision(200):
        at = {"p": enclose(Ball(p)), "q": enclose(Ball(q))}
        true = evaluate(expression, at)
        found = evaluate(rational, at | {n: enclose(b) for n, b in balls.items()})
    assert found.overlaps(true)


def test_the_remainder_falls_with_the_cube_of_the_box():
    def remainder(width):
        side = Interval(F(1), F(1) + width)
        _, balls = expand_functions((formula("exp(p)"),), Box(("p",), (side,)), {})
        return max(b.radius for b in balls.values())

    assert remainder(F(1, 100)) <= remainder(F(1, 50)) / 7


def test_near_zero_the_coefficients_are_exact_so_that_cancellation_is():
    (rational,), balls = expand_functions((formula("exp(p) - 1 - p"),), Box(("p",), (Interval(F(0), F(1, 1000)),)), {})
    with precision(100):
        value = evaluate(rational, {"p": arb(0)} | {n: enclose(b) for n, b in balls.items()})
    assert len(balls) == 1
    assert value.abs_upper() < arb("1e-9")


def test_a_shared_function_gets_one_remainder():
    texts = (formula("exp(p)"), formula("2*exp(p)"))
    _, balls = expand_functions(texts, Box(("p",), (Interval(F(0), F(1, 10)),)), {})
    assert len(balls) == 1


@pytest.mark.parametrize("text", ["log(p)", "sqrt(p)", "1/sqrt(p)", "asin(p)", "tan(2*p)", "abs(p - 1/2)"])
def test_a_function_that_is_not_smooth_on_the_box_is_refused(text):
    side = Interval(F(0), F(1))
    with pytest.raises(ArithmeticError):
        expand_functions((formula(text),), Box(("p",), (side,)), {})


def test_uncertain_constants_take_part_in_the_range():
    constants = {"c": Ball(F(1), F(1, 10))}
    (rational,), balls = expand_functions((formula("exp(c*p)"),), Box(("p",), (Interval(F(0), F(1)),)), constants)
    with precision(100):
        names = {n: enclose(b) for n, b in balls.items()}
        for c in (F(9, 10), F(11, 10)):
            at = {"p": arb(1), "c": enclose(Ball(c))}
            assert evaluate(rational, at | names).overlaps(evaluate(formula("exp(c*p)"), at))
