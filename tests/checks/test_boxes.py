"""Signs, ranges and branches over boxes, against values at points and closed forms."""

from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st
from loop_cases import formula

from dossier.checks.boxes import condition_holds, exact_range, polynomial_sign, range_over, resolve_kinks
from dossier.model.expression import Condition, call, number, symbol
from dossier.model.region import Box, Interval

F = Fraction
SIDE = st.tuples(st.fractions(-4, 4, max_denominator=16), st.fractions(0, 2, max_denominator=16))
SHARE = st.fractions(0, 1, max_denominator=8)


def box(**sides) -> Box:
    return Box(tuple(sides), tuple(Interval(F(a), F(b)) for a, b in sides.values()))


@pytest.mark.parametrize("text", ["x*y - x^2", "(x + y)^3 - 2*x", "x/(5 + y^2)", "(x - y)*(x + y)*x"])
@given(SIDE, SIDE, SHARE, SHARE)
def test_exact_ranges_hold_every_value_at_a_point(text, x, y, s, t):
    place = box(x=(x[0], x[0] + x[1]), y=(y[0], y[0] + y[1]))
    px, py = x[0] + s * x[1], y[0] + t * y[1]
    values = {"x*y - x^2": px * py - px**2, "(x + y)^3 - 2*x": (px + py) ** 3 - 2 * px,
              "x/(5 + y^2)": px / (5 + py**2), "(x - y)*(x + y)*x": (px - py) * (px + py) * px}  # fmt: skip
    lower, upper = exact_range(formula(text), place)
    assert lower <= values[text] <= upper


def test_exact_ranges_refuse_what_is_not_rational_or_may_divide_by_zero():
    place = box(x=(-1, 1))
    assert exact_range(formula("sin(x)"), place) is None
    assert exact_range(formula("1/x"), place) is None
    assert exact_range(formula("x"), Box(("x",), (Interval(None, F(1)),))) is None
    assert exact_range(formula("x^2"), place) == (0, 1)


@pytest.mark.parametrize(
    ("relation", "text", "lower", "upper", "holds"),
    [
        ("nonzero", "x", "1/10", "3", True),
        ("nonzero", "x", "-3", "-1/10", True),
        ("nonzero", "x", "-1", "1", False),
        ("nonzero", "x", "0", "1", False),
        ("positive", "x", "-3", "-1", False),
        ("positive", "x^2 - x + 1/3", "-5", "5", True),
        ("positive", "x^2 - x + 1/4", "-5", "5", False),
        ("nonzero", "cos(x)", "-3/2", "3/2", True),
        ("nonzero", "cos(x)", "-8/5", "3/2", False),
        ("inside_unit", "sin(x)/2", "-9", "9", True),
        ("inside_unit", "x", "-1", "1/2", False),
    ],
)
def test_conditions_are_proved_only_where_they_hold_everywhere(relation, text, lower, upper, holds):
    """x^2 - x + 1/4 = (x - 1/2)^2 has a zero, + 1/3 has none; cos is zero at pi/2 = 1.5708 (closed forms)."""
    assert condition_holds(Condition(relation, formula(text)), box(x=(lower, upper))).holds is holds


def test_a_condition_without_variables_is_decided_by_its_value():
    nothing = Box((), ())
    assert condition_holds(Condition("nonzero", number(3)), nothing).holds
    assert not condition_holds(Condition("nonzero", number(0)), nothing).holds
    assert not condition_holds(Condition("positive", number(-1)), nothing).holds


@pytest.mark.parametrize(("low", "high", "sign"), [("1", "2", 1), ("-2", "-1", 1), ("-1", "1", 0)])
def test_the_sign_of_a_polynomial_is_that_of_its_values(low, high, sign):
    proof = polynomial_sign({(2,): F(1), (0,): F(-1, 2)}, box(x=(low, high)))
    assert (proof.sign if proof.holds else 0) == sign


def test_ranges_are_outer_bounds_and_sharp_for_elementary_functions():
    """sin on [0, 3] covers [0, 1] (closed form)."""
    ball = range_over(formula("sin(x)"), box(x=(0, 3)), 1024)
    assert ball.lower <= 0
    assert 1 <= ball.upper < F(101, 100)
    assert range_over(formula("log(x)"), box(x=(-1, 1)), 64) is None


def test_branches_are_replaced_only_where_they_are_strictly_active():
    limits = box(x=(-1, 1), m=(2, 3))
    saturation = call("sat", symbol("x"), formula("-m"), symbol("m"))
    assert resolve_kinks(saturation, limits) == symbol("x")
    assert resolve_kinks(saturation, box(x=(-1, 2), m=(2, 3))) == saturation
    assert resolve_kinks(saturation, box(x=(4, 5), m=(2, 3))) == symbol("m")
    assert resolve_kinks(saturation, box(x=(-5, -4), m=(2, 3))) == formula("-m")
    assert resolve_kinks(saturation, box(x=(4, 5), m=(-3, -2))) == saturation
    absolute = call("abs", symbol("x"))
    assert resolve_kinks(absolute, box(x=(1, 2))) == symbol("x")
    assert resolve_kinks(absolute, box(x=(0, 2))) == absolute
