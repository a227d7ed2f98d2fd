"""One solution: tight enclosures, exact coordinates only where proved, places with respect to closed boxes."""

from fractions import Fraction

import pytest
from builders import box, make_case
from hypothesis import given
from hypothesis import strategies as st
from loop_cases import formula

from dossier.checks.solutions import (
    holds_one,
    holds_solution,
    place_of,
    rest_problem,
    simplest_between,
    tighten,
    vanishes,
)
from dossier.model.ball import Ball

FREE = ((None, None), (None, None))


def hints(*sides):
    return box(("x", "y")[: len(sides)], dict(zip(("x", "y"), sides, strict=False)))


@given(st.fractions(), st.fractions())
def test_the_simplest_rational_has_the_least_denominator(a, b):
    lower, upper = min(a, b), max(a, b)
    value = simplest_between(lower, upper)
    assert lower <= value <= upper
    for denominator in range(1, min(value.denominator, 60)):
        assert -((-lower.numerator * denominator) // lower.denominator) > upper * denominator


def test_a_square_root_is_enclosed_to_sixty_digits():
    problem = rest_problem(make_case({"x": "x^2 - 2"}))
    enclosure = tighten(problem, hints((1, 2)), (Fraction(3, 2),), hints((1, 2)))
    assert enclosure is not None
    assert enclosure[0].lower ** 2 < 2 < enclosure[0].upper ** 2
    assert enclosure[0].radius <= Fraction(2, 10**60)


def test_rational_solutions_become_exact():
    problem = rest_problem(make_case({"x": "3*x - 1", "y": "y - x^2"}))
    whole = hints((0, 1), (0, 1))
    assert tighten(problem, whole, (Fraction(0), Fraction(0)), whole) == (Ball(Fraction(1, 3)), Ball(Fraction(1, 9)))


def test_a_coordinate_is_exact_on_its_own_where_the_rest_is_irrational():
    problem = rest_problem(make_case({"x": "y", "y": "2 - x^2 - y"}))
    state = tighten(problem, hints((1, 2), (-1, 1)), (Fraction(3, 2), Fraction(0)), hints(*FREE))
    assert state is not None and state[1] == Ball(Fraction(0)) and not state[0].is_exact


def test_a_number_near_a_rational_is_not_rounded_to_it():
    # 1 + 1e-65 lies in every enclosure that also holds 1, yet is not 1.
    problem = rest_problem(make_case({"x": "x - k"}, parameters={"k": "1" + "." + "0" * 64 + "1"}))
    state = tighten(problem, hints((0, 2)), (Fraction(1),), hints((0, 2)))
    assert state is not None and state[0].lower <= 1 + Fraction(1, 10**65) <= state[0].upper
    assert state[0] != Ball(Fraction(1))


def test_exact_coordinates_that_do_not_solve_the_equations_are_refused():
    problem = rest_problem(make_case({"x": "3*x - 1", "y": "y^2 - 2"}))
    root = Ball(Fraction(141421356, 10**8), Fraction(1, 10**6))
    assert holds_solution(problem, (Ball(Fraction(1, 3)), root))
    assert not holds_solution(problem, (Ball(Fraction(33, 100)), root))
    assert not holds_solution(problem, (Ball(Fraction(1, 3)), Ball(Fraction(3, 2))))


def test_the_fixed_points_of_a_map_solve_f_of_x_equal_x():
    problem = rest_problem(make_case({"x": "x^2"}, sampled=True))
    assert holds_solution(problem, (Ball(Fraction(1)),)) and holds_solution(problem, (Ball(Fraction(0)),))
    assert not holds_solution(problem, (Ball(Fraction(2)),))


def test_a_box_with_two_solutions_does_not_hold_one():
    problem = rest_problem(make_case({"x": "x^2 - 1"}))
    assert holds_one(problem, hints(("0.5", 2))) and not holds_one(problem, hints((-2, 2)))


@pytest.mark.parametrize(
    ("middle", "radius", "place"),
    [("1", "0", "inside"), ("0.5", "0.5", "inside"), ("1", "0.001", "undecided"), ("2", "0.5", "outside")],
)
def test_boxes_are_closed(middle, radius, place):
    assert place_of((Ball(Fraction(middle), Fraction(radius)),), hints((0, 1))) == place


@pytest.mark.parametrize(
    ("text", "zero"),
    [("0*q", True), ("(p + q)^2 - p^2 - 2*p*q - q^2", True), ("p/q - p/q", True), ("p - q", False), ("sin(p)", False)],
)
def test_identities_are_proved_not_guessed(text, zero):
    assert vanishes(formula(text)) == zero
