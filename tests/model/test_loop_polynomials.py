"""Linear parts and polynomials of opened loops, against hand calculation and numpy."""

from fractions import Fraction

import numpy as np
import pytest
from loop_cases import equilibrium_at, loop_case, transfer_loop

from dossier.model import loop_polynomials as loops
from dossier.model.ball import Ball
from dossier.model.linear_part import NoLinearPart
from dossier.model.loop_polynomials import loop_polynomials


def exact(*coefficients):
    return tuple(Ball(Fraction(v)) for v in coefficients)


def test_a_saturation_that_is_inactive_is_linear():
    case = loop_case({"x": "-x + u"}, {"u": "sat(4 - 2*x, -9, 9)"})
    polynomials = loop_polynomials(case, equilibrium_at(Fraction(4, 3)), "u")
    assert polynomials.gain == exact(0, 2)
    assert polynomials.remarks == ()


@pytest.mark.parametrize(
    ("equation", "command", "place"),
    [
        ("-x + u", "sat(3 - 2*x, -1, 1)", 1),
        ("-x + u", "abs(x)", 0),
        ("-x + u", "-sqrt(x)", 0),
        ("-x + u", "-1/x", 0),
        ("-x + u", "-(x - 1)*(1/x)*x", 0),
        ("-x + u", "-asin(x)", 1),
        ("-x + u", "sat(-x, 1, 1)", -1),
    ],
)
def test_where_the_loop_is_not_proved_differentiable_it_has_no_linear_part(equation, command, place):
    case = loop_case({"x": equation}, {"u": command})
    refusal = loop_polynomials(case, equilibrium_at(place), "u")
    assert isinstance(refusal, NoLinearPart)
    assert "equilibrium" in refusal.reason


def test_a_term_that_vanishes_does_not_hide_where_the_loop_is_undefined():
    case = loop_case({"x": "-x + u"}, {"u": "-x + z*log(x)"}, {"z": "0"})
    assert isinstance(loop_polynomials(case, equilibrium_at(0), "u"), NoLinearPart)
    assert loop_polynomials(case, equilibrium_at(1), "u").gain == exact(0, 1)


def test_a_kink_that_an_uncertain_equilibrium_may_touch_is_not_decided():
    case = loop_case({"x": "-x + u"}, {"u": "-abs(x - 1)"})
    near = Ball(Fraction(1001, 1000), Fraction(1, 100))
    off = Ball(Fraction(1001, 1000), Fraction(1, 10_000))
    assert isinstance(loop_polynomials(case, equilibrium_at(near), "u"), NoLinearPart)
    assert loop_polynomials(case, equilibrium_at(off), "u").gain[1].middle == 1


def test_a_loop_that_does_not_exist_is_said_so():
    assert "no signal" in loop_polynomials(transfer_loop([1], [1, 1]), equilibrium_at(0), "y").reason


def test_one_loop_is_broken_and_the_others_stay_closed():
    # two commands on an integrator chain: with v closed the loop at u is 3/(s(s + 2))
    case = loop_case({"x": "y", "y": "u + v"}, {"u": "-3*x", "v": "-2*y"})
    polynomials = loop_polynomials(case, equilibrium_at(0, 0), "u")
    assert polynomials.open_loop == exact(1, 2, 0)
    assert polynomials.gain == exact(0, 0, 3)
    assert polynomials.closed_loop == exact(1, 2, 3)


def test_structural_zeros_stay_exact_between_balls():
    case = loop_case(
        {"x": "y", "y": "-w^2*y + z", "z": "-w*z + u"},
        {"u": "-x"},
        {"w": Ball(Fraction(22, 7), Fraction(1, 10**20))},
    )
    polynomials = loop_polynomials(case, equilibrium_at(0, 0, 0), "u")
    assert polynomials.open_loop[-1] == Ball(Fraction(0))
    assert polynomials.gain == exact(0, 0, 0, 1)
    assert not polynomials.open_loop[1].is_exact


def test_determinants_of_balls_agree_with_the_characteristic_polynomial_of_a_library(monkeypatch):
    entries = [[(3 * i + 5 * j) % 7 - 3 for j in range(4)] for i in range(4)]
    names = "xyzw"
    equations = {
        n: " + ".join(f"({v})*g*{m}" for v, m in zip(r, names, strict=True))
        for n, r in zip(names, entries, strict=True)
    }
    equations["w"] += " + u"
    case = loop_case(equations, {"u": "-g*x - y"}, {"g": Ball(Fraction(1, 3), Fraction(1, 10**30))})
    place = equilibrium_at(0, 0, 0, 0)
    expanded = loop_polynomials(case, place, "u")
    monkeypatch.setattr(loops, "LARGEST_EXPANSION", 0)
    library = loop_polynomials(case, place, "u")
    matrix = np.array(entries) / 3
    for ours, other, reference in zip(expanded.open_loop, library.open_loop, np.poly(matrix), strict=True):
        assert abs(ours.middle - other.middle) <= ours.radius + other.radius
        assert abs(float(ours.middle) - reference) < 1e-9
    closed = matrix + np.outer([0, 0, 0, 1], [-1 / 3, -1, 0, 0])
    for ours, reference in zip(expanded.closed_loop, np.poly(closed), strict=True):
        assert abs(float(ours.middle) - reference) < 1e-9


def test_the_bilinear_map_of_a_sampled_loop_keeps_its_response():
    case = loop_case({"x": "x/2 + u", "y": "x - y/3"}, {"u": "-x/4 - y/5"}, sample_interval="1/10")
    polynomials = loop_polynomials(case, equilibrium_at(0, 0), "u")
    assert polynomials.interval == Ball(Fraction(1, 10))
    matrix, column, row = np.array([[0.5, 0], [1, -1 / 3]]), np.array([1, 0]), np.array([-0.25, -0.2])
    for angle in (0.1, 1.0, 3.0):
        z = np.exp(1j * angle)
        s = (z - 1) / (z + 1)
        expected = -row @ np.linalg.solve(z * np.eye(2) - matrix, column)
        c, a = (np.polyval([float(b.middle) for b in p], s) for p in (polynomials.gain, polynomials.open_loop))
        assert abs(c / a - expected) < 1e-12
