"""Tapes enclose values, gradients and Hessians, compared with exact derivatives in ball arithmetic."""

from fractions import Fraction

import numpy as np
import pytest
from flint import arb
from hypothesis import given
from hypothesis import strategies as st
from loop_cases import formula

from dossier.checks import tape as tape_module
from dossier.checks.intervals import Span
from dossier.checks.tape import Tape
from dossier.model.ball import Ball, enclose, evaluate, precision
from dossier.model.expression import Expression, call, differentiate, number, power, symbol

NAMES = ("x", "y")
SMOOTH = [
    "x*y^3 - sin(x)*exp(y/3)/k",
    "tan(x/4) + atan(x*y) + tanh(y - x)",
    "sqrt(x + 4)*log(y + 5)/(3 + x)",
    "asin(x/4) + acos(y/4)",
    "cos(x*y) + pi*k*x - y^5",
    "1/(x^2 + 1)^2 - k",
]
K = Ball(Fraction(7, 3))


@st.composite
def points_in_boxes(draw):
    """A box in [-2, 2]^2 and a point in it."""
    centre = [draw(st.floats(-1.9, 1.9)) for _ in NAMES]
    reach = [10.0 ** draw(st.floats(-9, -1)) for _ in NAMES]
    share = [draw(st.floats(-1, 1)) for _ in NAMES]
    box = Span(
        np.array([[c - r] for c, r in zip(centre, reach, strict=True)]),
        np.array([[c + r] for c, r in zip(centre, reach, strict=True)]),
    )
    return box, [float(np.clip(c + s * r, c - r, c + r)) for c, r, s in zip(centre, reach, share, strict=True)]


def holds(span, place, exact):
    return arb(float(span.lo[place])) <= exact and exact <= arb(float(span.hi[place]))


@pytest.mark.parametrize("text", SMOOTH)
def test_second_order_encloses_the_exact_derivatives(text):
    expression = formula(text)
    first = [differentiate(expression, n) for n in NAMES]
    second = [[differentiate(d, n) for n in NAMES] for d in first]
    tape = Tape([expression], NAMES, {"k": K})

    @given(points_in_boxes())
    def law(pair):
        box, point = pair
        result = tape.second_order(box)
        assert result.twice[0] and result.smooth[0] and result.valid[0] and not result.empty[0]
        with precision(200):
            place = {**{n: arb(v) for n, v in zip(NAMES, point, strict=True)}, "k": enclose(K)}
            assert holds(result.values, (0, 0), evaluate(expression, place))
            for i in range(2):
                assert holds(result.gradients, (0, i, 0), evaluate(first[i], place))
                for j in range(2):
                    assert holds(result.hessians, (0, i, j, 0), evaluate(second[i][j], place))

    law()


def test_the_hessian_of_a_quadratic_is_its_matrix():
    tape = Tape([formula("3*x^2 + x*y - 2*y^2")], NAMES, {})
    box = Span(np.full((2, 1), -5.0), np.full((2, 1), 7.0))
    result = tape.second_order(box)
    for i, j, value in ((0, 0, 6), (0, 1, 1), (1, 0, 1), (1, 1, -4)):
        assert (
            abs(result.hessians.lo[0, i, j, 0] - value) < 1e-13 and abs(result.hessians.hi[0, i, j, 0] - value) < 1e-13
        )


def test_derivatives_that_vanish_by_structure_are_exactly_zero():
    result = Tape([formula("x^2 + 1")], NAMES, {}).second_order(Span(np.ones((2, 1)), np.ones((2, 1))))
    assert result.gradients.lo[0, 1, 0] == result.gradients.hi[0, 1, 0] == 0
    assert result.hessians.lo[0, 1, 1, 0] == result.hessians.hi[0, 0, 1, 0] == 0


def test_constants_enter_as_intervals():
    tape = Tape([formula("k*x")], ("x",), {"k": Ball.from_bounds(Fraction(1, 3), Fraction(2, 3))})
    result = tape.values(Span(np.full((1, 1), 3.0), np.full((1, 1), 3.0))).values
    assert 1 - 1e-14 < result.lo[0, 0] <= 1 and 2 <= result.hi[0, 0] < 2 + 1e-14


def test_equal_enclosures_of_different_constants_are_different_numbers():
    around_zero = Ball(Fraction(0), Fraction(1))
    texts = ["(x*p)*(x*q)", "(x*(p + 1))*(x*(q + 1)) - (x*(p + 1))^2"]
    tape = Tape([formula(t) for t in texts], ("x",), {"p": around_zero, "q": around_zero})
    result = tape.values(Span(np.ones((1, 1)), np.ones((1, 1)))).values
    # p = -q = 1 gives -1 and p = 1, q = -1 gives -4: taking q for p would hide both behind squares.
    assert result.lo[0, 0] <= -1 and result.lo[1, 0] <= -4


def test_a_zero_factor_does_not_hide_that_the_other_is_undefined():
    product = Expression("mul", (number(0), call("log", symbol("x"))))
    result = Tape([product], ("x",), {}).values(Span(np.zeros((1, 1)), np.ones((1, 1))))
    assert not result.valid[0]


def test_a_name_without_meaning_is_refused():
    with pytest.raises(KeyError):
        Tape([formula("q*x")], ("x",), {})


@pytest.mark.parametrize(
    ("text", "lower", "upper"),
    [
        ("1/x", -1, 1),
        ("log(x)", 0, 1),
        ("sqrt(x)", -1, 1),
        ("asin(x)", 0.5, 1.5),
        ("tan(x)", 1, 2),
    ],
)
def test_a_box_that_leaves_the_domain_is_not_valid(text, lower, upper):
    result = Tape([formula(text)], ("x",), {}).values(Span(np.array([[lower]], float), np.array([[upper]], float)))
    assert not result.valid[0] and not result.empty[0]


@pytest.mark.parametrize(("text", "lower", "upper"), [("log(x)", -2, 0), ("sqrt(x)", -2, -1), ("acos(x)", 1.5, 2)])
def test_a_box_wholly_outside_the_domain_is_empty(text, lower, upper):
    result = Tape([formula(text)], ("x",), {}).values(Span(np.array([[lower]], float), np.array([[upper]], float)))
    assert result.empty[0]


def test_a_value_may_be_valid_where_its_derivative_is_not():
    result = Tape([formula("sqrt(x)")], ("x",), {}).first_order(Span(np.zeros((1, 1)), np.ones((1, 1))))
    assert result.valid[0] and not result.smooth[0] and not result.empty[0]


def test_an_undefined_derivative_does_not_make_a_box_empty():
    result = Tape([formula("sqrt(x)")], ("x",), {}).first_order(Span(np.zeros((1, 1)), np.zeros((1, 1))))
    assert not result.empty[0] and not result.smooth[0]


def test_a_power_that_is_undefined_in_part_is_not_smooth():
    tape = Tape([power(symbol("x"), Fraction(3, 2))], ("x",), {})
    result = tape.first_order(Span(np.full((1, 1), -1.0), np.ones((1, 1))))
    assert not result.valid[0] and not result.smooth[0]


def test_a_partly_undefined_value_is_still_enclosed_where_it_is_defined():
    result = Tape([formula("sqrt(x) + 1")], ("x",), {}).values(Span(np.full((1, 1), -1.0), np.full((1, 1), 4.0)))
    assert 0.9 < result.values.lo[0, 0] <= 1 and 3 <= result.values.hi[0, 0] < 3.1


SATURATED = call("sat", symbol("x"), formula("0-1"), formula("2"))


@pytest.mark.parametrize(
    ("expression", "lower", "upper", "slope", "twice"),
    [
        (formula("abs(x)"), 1, 2, (1, 1), True),
        (formula("abs(x)"), -2, -1, (-1, -1), True),
        (formula("abs(x)"), -1, 1, (-1, 1), False),
        (SATURATED, 0, 1, (1, 1), True),
        (SATURATED, 3, 4, (0, 0), True),
        (SATURATED, -4, -3, (0, 0), True),
        (SATURATED, 1, 3, (0, 1), False),
        (SATURATED, -2, 0, (0, 1), False),
    ],
)
def test_slopes_at_kinks_are_the_generalised_gradient(expression, lower, upper, slope, twice):
    result = Tape([expression], ("x",), {}).second_order(Span(np.array([[lower]], float), np.array([[upper]], float)))
    assert (round(result.gradients.lo[0, 0, 0], 9), round(result.gradients.hi[0, 0, 0], 9)) == slope
    assert result.smooth[0] and result.twice[0] == twice


@given(st.floats(-3, 3), st.floats(-3, 3))
def test_the_mean_value_form_holds_across_kinks(a, b):
    tape = Tape([formula("abs(x)*x - abs(x - 1)*2"), SATURATED], ("x",), {})
    box = Span(np.array([[min(a, b)]]), np.array([[max(a, b)]]))
    result = tape.first_order(box)
    ends = tape.values(Span(np.array([[a, b]]), np.array([[a, b]]))).values
    for row in range(2):
        change = Fraction(float(ends.lo[row, 1])) - Fraction(float(ends.lo[row, 0]))
        slopes = (Fraction(float(v)) for v in (result.gradients.lo[row, 0, 0], result.gradients.hi[row, 0, 0]))
        products = [s * (Fraction(b) - Fraction(a)) for s in slopes]
        assert min(products) - Fraction(1, 10**13) <= change <= max(products) + Fraction(1, 10**13)


def test_rational_powers_carry_their_derivative():
    tape = Tape([power(symbol("x"), Fraction(3, 2))], ("x",), {})
    result = tape.second_order(Span(np.array([[0.0, 4.0]]), np.array([[0.0, 4.0]])))
    assert result.smooth.all() and list(result.twice) == [False, True]
    assert abs(result.gradients.lo[0, 0, 1] - 3) < 1e-13 and abs(result.hessians.hi[0, 0, 0, 1] - 0.375) < 1e-13


def test_batches_give_the_same_as_one_box_at_a_time(monkeypatch):
    monkeypatch.setattr(tape_module, "LARGEST_BATCH", 128)
    tape = Tape([formula(t) for t in SMOOTH], NAMES, {"k": K})
    grid = np.linspace(-1, 1, 300)
    boxes = Span(np.array([grid, grid[::-1]]), np.array([grid + 0.1, grid[::-1] + 0.2]))
    together = tape.second_order(boxes)
    for b in (0, 127, 128, 299):
        alone = tape.second_order(Span(boxes.lo[:, b : b + 1], boxes.hi[:, b : b + 1]))
        assert (alone.hessians.lo[..., 0] == together.hessians.lo[..., b]).all()
        assert (alone.values.hi[:, 0] == together.values.hi[:, b]).all()


def test_shared_parts_are_worked_out_once():
    alone, twice = Tape([formula("exp(sin(x))")], ("x",), {}), Tape([formula("exp(sin(x))")] * 2, ("x",), {})
    assert len(alone._builder.nodes) == len(twice._builder.nodes)
