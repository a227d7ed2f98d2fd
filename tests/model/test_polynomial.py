"""Quotients of polynomials, offsets from an equilibrium and Bernstein forms, against direct evaluation."""

from fractions import Fraction
from itertools import product
from math import comb

from hypothesis import given, settings
from hypothesis import strategies as st

from dossier.model.ball import Ball
from dossier.model.decrease import bernstein_coefficients, decrease_form
from dossier.model.expression import add, call, div, mul, neg, number, power, sub, symbol
from dossier.model.polynomial import NotRational, OffsetField, Ring, collapse, offset_field, terms
from dossier.model.region import Box, Interval

X, V, P, M = (symbol(n) for n in "xvpm")
SMALL = st.fractions(min_value=-3, max_value=3, max_denominator=12)


def evaluate(polynomial, ring, values):
    total = Fraction(0)
    for exponents, coefficient in terms(polynomial).items():
        term = coefficient
        for name, count in zip(ring.names, exponents, strict=True):
            term *= values[name] ** count
        total += term
    return total


def converter_field(equilibrium, symbolic=()):
    """v' = (x - p/v)/m, x' = -x - v: one state in a denominator."""
    equations = (sub(neg(X), V), div(sub(X, div(P, V)), M))
    parameters = {"p": Ball(Fraction(3)), "m": Ball(Fraction(2))}
    return offset_field(equations, ("x", "v"), equilibrium, parameters, symbolic, sampled=False)


@given(SMALL, SMALL)
def test_the_offset_field_equals_the_field_minus_its_value_at_the_equilibrium(y1, y2):
    at = (Fraction(5), Fraction(7))
    field = converter_field(tuple(Ball(a) for a in at))
    x, v = at[0] + y1, at[1] + y2
    denominator = evaluate(field.denominator, field.ring, {"x": y1, "v": y2})
    truth = [-x - v, (x - 3 / v) / 2]
    at_rest = [-at[0] - at[1], (at[0] - Fraction(3, 7)) / 2]
    for i, numerator in enumerate(field.numerators):
        dropped = evaluate(field.denominator, field.ring, {"x": Fraction(0), "v": Fraction(0)}) * at_rest[i]
        assert evaluate(numerator, field.ring, {"x": y1, "v": y2}) == truth[i] * denominator - dropped


def test_dropped_terms_are_reported_unless_they_vanish_identically():
    assert not converter_field((Ball(Fraction(5)), Ball(Fraction(7)))).constant_terms_vanish
    cubic = offset_field((sub(mul(P, neg(X)), power(X, 3)),), ("x",), (Ball(Fraction(0)),), {}, ("p",), sampled=False)
    assert isinstance(cubic, OffsetField)
    assert cubic.constant_terms_vanish


def test_elementary_functions_of_states_are_refused_and_of_constants_become_balls():
    refused = offset_field((call("sin", X),), ("x",), (Ball(Fraction(0)),), {}, (), sampled=False)
    assert isinstance(refused, NotRational)
    field = offset_field(
        (mul(call("exp", P), X),), ("x",), (Ball(Fraction(0)),), {"p": Ball(Fraction(-1))}, (), sampled=False
    )
    (ball,) = collapse(field.numerators[0], field.ring, 1, field.balls).values()
    # exp(-1) = 0.367879441171442321595523770161... (any table)
    assert Fraction("0.367879441171442321595") < ball.lower < ball.upper < Fraction("0.367879441171442321596")
    assert ball.radius < Fraction(1, 10**60)


def test_collapsed_balls_hold_every_value_of_the_uncertain_constants():
    ring = Ring(("y", "u", "w"))
    polynomial = ring.from_terms({(1, 2, 1): Fraction(3), (1, 0, 0): Fraction(-1)})
    balls = {"u": Ball(Fraction(2), Fraction(1, 4)), "w": Ball(Fraction(-1), Fraction(1, 3))}
    (ball,) = collapse(polynomial, ring, 1, balls).values()
    for u, w in product((balls["u"].lower, balls["u"].upper), (balls["w"].lower, balls["w"].upper)):
        assert ball.lower <= 3 * u * u * w - 1 <= ball.upper


@settings(max_examples=60)
@given(st.lists(SMALL, min_size=6, max_size=6), st.fractions(0, 1, max_denominator=9), SMALL)
def test_the_bernstein_form_reproduces_the_polynomial_with_non_negative_weights(coefficients, t, y):
    ring = Ring(("y", "p", "q"))
    monomials = [(1, 0, 0), (0, 1, 0), (1, 2, 0), (0, 1, 1), (2, 0, 1), (0, 2, 1)]
    polynomial = ring.from_terms(dict(zip(monomials, coefficients, strict=True)))
    box = Box(("p", "q"), (Interval(Fraction(-1), Fraction(3)), Interval(Fraction(2), Fraction(5))))
    p, q = -1 + 4 * t, 2 + 3 * t
    pieces = list(bernstein_coefficients(polynomial, ring, box))
    degrees = [max((i[k] for i, _ in pieces), default=0) for k in range(2)]
    total = Fraction(0)
    for index, coefficient in pieces:
        weight = Fraction(1)
        for b, d in zip(index, degrees, strict=True):
            weight *= comb(d, b) * t**b * (1 - t) ** (d - b)
        assert weight >= 0
        total += weight * evaluate(coefficient, ring, {"y": y, "p": Fraction(0), "q": Fraction(0)})
    assert total == evaluate(polynomial, ring, {"y": y, "p": p, "q": q})


def test_for_multi_affine_dependence_the_bernstein_coefficients_are_the_vertices():
    ring = Ring(("y", "p"))
    polynomial = ring.from_terms({(1, 1): Fraction(2), (1, 0): Fraction(-1)})
    box = Box(("p",), (Interval(Fraction(3), Fraction(4)),))
    values = {i: terms(c) for i, c in bernstein_coefficients(polynomial, ring, box)}
    assert values == {(0,): {(1, 0): Fraction(5)}, (1,): {(1, 0): Fraction(7)}}


@given(SMALL)
def test_the_decrease_of_a_sampled_model_is_v_of_the_next_sample_minus_v(a):
    """x+ = x/2 + x^3 (check value A07, constructed): V(x+) - V(x) by direct substitution."""
    equation = add(div(X, number(2)), power(X, 3))
    field = offset_field((equation,), ("x",), (Ball(Fraction(0)),), {}, (), sampled=True)
    function = {(2,): Fraction(3)}
    form = decrease_form(field, function)
    step = a / 2 + a**3
    assert evaluate(form.numerator, field.ring, {"x": a}) == 3 * step**2 - 3 * a**2
