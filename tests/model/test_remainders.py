"""Elementary functions of the states: the polynomial with its factor gives the function at every point of the box.

Truth is Taylor's theorem with Lagrange's remainder, evaluated here with mpmath's own functions.
"""

import random
from fractions import Fraction

import mpmath
import pytest
from loop_cases import formula

from dossier.model.ball import Ball
from dossier.model.polynomial import NotRational, OffsetField, offset_field, terms
from dossier.model.region import Box, Interval
from dossier.model.remainders import HIGHEST_ORDER, Expansion, Refusal, expansions

DIGITS = 60
SLACK = mpmath.mpf(10) ** -40
TRUTH = {
    "sin": mpmath.sin, "cos": mpmath.cos, "tan": mpmath.tan, "exp": mpmath.exp, "log": mpmath.log,
    "atan": mpmath.atan, "tanh": mpmath.tanh, "sqrt": mpmath.sqrt, "asin": mpmath.asin, "acos": mpmath.acos,
}  # fmt: skip
CASES = [
    *(
        (name, centre)
        for name in ("sin", "cos", "tan", "exp", "atan", "tanh", "asin", "acos")
        for centre in ("0", "1/3")
    ),
    *((name, "2") for name in ("log", "sqrt", "sin", "cos", "exp", "atan", "tanh")),
]


def value(fraction) -> mpmath.mpf:
    return mpmath.mpf(Fraction(fraction).numerator) / Fraction(fraction).denominator


@pytest.mark.parametrize("order", range(HIGHEST_ORDER + 1))
@pytest.mark.parametrize(("name", "centre"), CASES)
def test_the_factor_holds_the_true_remainder_at_every_point(name, centre, order):
    node, reach = formula(f"{name}(x)"), Fraction(1, 5)
    rest = Ball(Fraction(centre))
    around = {"x": Ball(Fraction(centre), reach)}
    found = expansions((node,), {"x": rest}, around, order)
    assert isinstance(found, dict)
    plan = found[node]
    chance = random.Random(order)
    with mpmath.workdps(DIGITS):
        for _ in range(60):
            d = value(Fraction(chance.randint(-(10**6), 10**6), 10**6) * reach)
            partial = mpmath.mpf(0)
            for k, ball in enumerate(plan.coefficients):
                truth = mpmath.taylor(TRUTH[name], value(centre), k)[k]
                assert abs(truth - value(ball.middle)) <= value(ball.radius) + mpmath.mpf(10) ** -15
                partial += truth * d**k
            rest_of = (TRUTH[name](value(centre) + d) - partial) / d ** len(plan.coefficients) if d else None
            if rest_of is not None and abs(d) > mpmath.mpf("1e-3"):
                assert value(plan.factor.lower) - SLACK ** mpmath.mpf("0.25") <= rest_of
                assert rest_of <= value(plan.factor.upper) + SLACK ** mpmath.mpf("0.25")


def test_terms_that_vanish_at_the_equilibrium_are_exact_there():
    """sin starts with d, cos with 1: no ball stands where the value is a rational number."""
    sine, cosine = formula("sin(x)"), formula("cos(x)")
    around = {"x": Ball(Fraction(0), Fraction(1, 4))}
    found = expansions((sine, cosine), {"x": Ball(Fraction(0))}, around, 2)
    assert isinstance(found, dict)
    assert found[sine].coefficients == (Ball(Fraction(0)), Ball(Fraction(1)), Ball(Fraction(0)))
    assert found[cosine].coefficients == (Ball(Fraction(1)), Ball(Fraction(0)))
    lower, upper = found[sine].factor.bounds
    assert Fraction(-1, 6) - Fraction(1, 10**6) < lower < upper < Fraction(-16, 100)


@pytest.mark.parametrize(
    ("text", "centre", "reach"),
    [
        ("log(x)", "1", "1"), ("sqrt(x)", "1/2", "1/2"), ("tan(x)", "0", "2"), ("asin(x)", "0", "1"),
        ("abs(x)", "1/4", "1/2"), ("sat(x, -1, 1)", "0", "1"), ("sat(x, -1, 1)", "0", "2"),
    ],
)  # fmt: skip
def test_a_function_that_is_not_smooth_all_over_the_box_is_refused(text, centre, reach):
    around = {"x": Ball(Fraction(centre), Fraction(reach))}
    for order in range(1, HIGHEST_ORDER + 1):
        assert isinstance(expansions((formula(text),), {"x": Ball(Fraction(centre))}, around, order), Refusal)


@pytest.mark.parametrize(
    ("text", "centre", "branch"),
    [("abs(x)", "1", 1), ("abs(x)", "-1", -1), ("sat(x, -2, 2)", "0", 1), ("sat(x, -1, 2)", "1", 1)],
)
def test_a_kink_that_is_out_of_reach_is_followed_on_its_branch(text, centre, branch):
    around = {"x": Ball(Fraction(centre), Fraction(1, 2))}
    found = expansions((formula(text),), {"x": Ball(Fraction(centre))}, around, 0)
    assert found == {formula(text): Expansion((), Interval(None, None), branch)}


SYSTEMS = [
    (("y", "-k*sin(x) - y*cos(x)"), (0, 0)),
    (("y*exp(-x)", "-x - y + x*y*exp(-x/2)"), (0, 0)),
    (("tanh(x)*y - x", "sin(x + y)*cos(x) - 2*y"), (0, 0)),
    (("y", "(sin(x) - y)/(2 + sin(x)^2) - 3*x"), (0, 0)),
    (("log(1 + x) - y", "sqrt(4 + y) - 2 - y + x"), (0, 0)),
    (("sin(sin(x)) - 2*x", "atan(x)*y - y"), (0, 0)),
]


@pytest.mark.parametrize("order", range(HIGHEST_ORDER + 1))
@pytest.mark.parametrize(("equations", "centre"), SYSTEMS)
def test_with_the_true_factors_the_polynomial_field_is_the_field(equations, centre, order):
    """The factors that make it true are computed from the functions themselves and must lie in their intervals."""
    states, reach = ("x", "y"), Fraction(1, 5)
    place = Box(
        (*states, "k"),
        (*(Interval(c - reach, c + reach) for c in map(Fraction, centre)), Interval(Fraction(1), Fraction(3))),
    )
    expressions = tuple(map(formula, equations))
    rest = tuple(Ball(Fraction(c)) for c in centre)
    field = offset_field(
        expressions, states, rest, {"k": Ball(Fraction(2))}, ("k",), sampled=False, place=place, order=order
    )
    if isinstance(field, NotRational):
        assert order == 0 and "does not vanish at the equilibrium" in field.reason
        return
    assert isinstance(field, OffsetField) and field.constant_terms_vanish
    bounds = {"x": Ball(rest[0].middle, reach), "y": Ball(rest[1].middle, reach), "k": Ball(Fraction(2), Fraction(1))}
    plans = expansions(expressions, dict(zip(states, rest, strict=True)), bounds, order)
    assert isinstance(plans, dict)
    chance = random.Random(7)
    with mpmath.workdps(DIGITS):
        for _ in range(15):
            at = {n: value(Fraction(chance.randint(-999, 999), 1000) * reach) for n in states}
            at["k"] = value(Fraction(chance.randint(1000, 3000), 1000))
            numbers = {**at, **_factors(plans, field, at, rest, states)}
            names = field.ring.names
            denominator = _evaluated(field.denominator, names, numbers)
            for expression, numerator in zip(expressions, field.numerators, strict=True):
                inside = {**at, **{s: at[s] + value(b.middle) for s, b in zip(states, rest, strict=True)}}
                truth = _true(expression, inside)
                assert abs(_evaluated(numerator, names, numbers) / denominator - truth) < mpmath.mpf(10) ** -12


def _factors(plans, field, at, rest, states):
    """The true factor of every function at this point, checked against its interval."""
    inside = {**at, **{s: at[s] + value(b.middle) for s, b in zip(states, rest, strict=True)}}
    still = {**at, **{s: value(b.middle) for s, b in zip(states, rest, strict=True)}}
    found, labels = {}, iter(field.factors.names)
    for node, plan in plans.items():
        if plan.branch:
            continue
        name = next(labels)
        d = _true(node.args[0], inside) - _true(node.args[0], still)
        partial = sum((value(b.middle) * d**k for k, b in enumerate(plan.coefficients)), mpmath.mpf(0))
        power = d ** len(plan.coefficients)
        found[name] = (_true(node, inside) - partial) / power if abs(power) > SLACK else value(plan.factor.middle)
        slack = mpmath.mpf(10) ** -12 / max(abs(power), mpmath.mpf(10) ** -9)
        assert value(plan.factor.lower) - slack <= found[name] <= value(plan.factor.upper) + slack
    for name, ball in field.balls.items():
        found[name] = value(ball.middle)
    return found


def _evaluated(polynomial, names, numbers):
    total = mpmath.mpf(0)
    for exponents, coefficient in terms(polynomial).items():
        term = value(coefficient)
        for name, power in zip(names, exponents, strict=True):
            term *= numbers[name] ** power
        total += term
    return total


def _true(node, at):
    args = [_true(a, at) for a in node.args]
    if node.op == "number":
        return value(node.fraction)
    if node.op == "symbol":
        return at[node.value]
    if node.op in ("add", "mul"):
        return mpmath.fsum(args) if node.op == "add" else mpmath.fprod(args)
    if node.op == "div":
        return args[0] / args[1]
    if node.op == "neg":
        return -args[0]
    if node.op == "pow":
        return args[0] ** value(node.fraction)
    return TRUTH[node.op](*args)
