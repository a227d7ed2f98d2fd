"""Eigenvalue discs and the rates they give, against closed forms."""

from fractions import Fraction as F
from math import atan2, exp, log, pi, sqrt

import pytest
from hypothesis import given
from hypothesis import strategies as st
from linear_cases import matrix_case, polynomial_case, square_root
from loop_cases import equilibrium_at, loop_case

from dossier.checks.spectrum import eigenvalue_discs, outward, spectral_values
from dossier.model.ball import Ball

CLOSE = 1e-12


def values(case, equilibrium):
    return {n: (float(v.lower), float(v.upper)) for n, v in spectral_values(case, equilibrium).items()}


def holds(enclosure, value):
    return enclosure[0] - CLOSE <= value <= enclosure[1] + CLOSE and enclosure[1] - enclosure[0] < 1e-9


def test_multiple_and_defective_eigenvalues_keep_their_multiplicity():
    jordan = [[-1, 1, 0, 0], [0, -1, 1, 0], [0, 0, -1, 0], [0, 0, 0, -2]]
    discs = eigenvalue_discs(*matrix_case(jordan))
    assert [(d.real, d.imaginary, d.radius, d.multiplicity) for d in discs] == [(-1, 0, 0, 3), (-2, 0, 0, 1)]
    diagonal = [[-1, 0, 0], [0, -1, 0], [0, 0, -1]]
    assert [d.multiplicity for d in eigenvalue_discs(*matrix_case(diagonal))] == [3]


def test_discs_hold_the_roots_and_are_tight():
    discs = eigenvalue_discs(*polynomial_case([1, 2, 5]))
    assert all((d.real + 1) ** 2 + (abs(d.imaginary) - 2) ** 2 <= d.radius**2 for d in discs)
    assert all(d.radius < F(1, 10**30) for d in discs)
    root = square_root(F(2))
    negative, positive = eigenvalue_discs(*polynomial_case([1, 0, -2]))[::-1]
    assert abs(positive.real - root.middle) <= positive.radius + root.radius
    assert negative.imaginary == positive.imaginary == 0


@given(st.fractions(F(1, 10), 5, max_denominator=20), st.fractions(F(1, 10), 5, max_denominator=20))
def test_decay_and_damping_of_a_pair_are_those_of_its_modulus_and_angle(decay, frequency):
    found = values(*matrix_case([[-decay, -frequency], [frequency, -decay]]))
    assert holds(found["decay rate"], float(decay))
    assert holds(found["damping ratio"], float(decay) / sqrt(decay**2 + frequency**2))


def test_real_eigenvalues_have_damping_one_or_minus_one_exactly():
    assert values(*matrix_case([[-2, 0], [0, -7]]))["damping ratio"] == (1, 1)
    assert values(*matrix_case([[2, 0], [0, -7]]))["damping ratio"] == (-1, -1)


def test_a_zero_eigenvalue_has_no_damping_ratio():
    found = values(*matrix_case([[0, 0], [0, -1]]))
    assert found["decay rate"] == (0, 0)
    assert "damping ratio" not in found


@pytest.mark.parametrize(
    ("real", "imaginary"), [("1/2", "1/4"), ("-3/10", "6/10"), ("-1/2", "1/1000"), ("1/10", "9/10")]
)
def test_sampled_rates_are_those_of_the_logarithm(real, imaginary):
    x, y, interval = F(real), F(imaginary), 0.02
    found = values(*matrix_case([[x, -y], [y, x]], "1/50"))
    modulus, angle = sqrt(x * x + y * y), atan2(float(y), float(x))
    assert holds(found["contraction"], modulus)
    assert holds(found["decay rate"], -log(modulus) / interval)
    assert holds(found["damping ratio"], -log(modulus) / sqrt(log(modulus) ** 2 + angle**2))


def test_a_negative_real_multiplier_turns_by_half_a_circle_per_sample():
    found = values(*matrix_case([["-1/2"]], "1"))
    assert holds(found["damping ratio"], log(2) / sqrt(log(2) ** 2 + pi**2))
    assert holds(values(*matrix_case([["1/2"]], "1"))["damping ratio"], 1)


def test_a_dead_beat_eigenvalue_bounds_no_rate():
    found = values(*matrix_case([[0, 0], [0, "1/2"]], "1"))
    assert found["contraction"] == (0.5, 0.5)
    assert holds(found["decay rate"], log(2))
    dead = values(*matrix_case([[0, 1], [0, 0]], "1"))
    assert dead == {"contraction": (0, 0)}


def test_an_inexact_entry_widens_the_enclosure_and_stays_inside_it():
    case = loop_case({"x": "-exp(p)*x"}, {}, {"p": Ball(F(1, 2), F(1, 1000))})
    low, high = values(case, equilibrium_at(0))["decay rate"]
    assert low <= exp(0.499) * (1 + CLOSE) and exp(0.501) * (1 - CLOSE) <= high
    assert high - low < 0.004


def test_no_linear_part_no_values():
    case = loop_case({"x": "-abs(x)"}, {})
    assert spectral_values(case, equilibrium_at(0)) == {}
    assert eigenvalue_discs(case, equilibrium_at(0)) == ()


@given(st.fractions(-100, 100), st.fractions(0, 1))
def test_printed_enclosures_are_rounded_outward(lower, width):
    enclosure = outward(lower, lower + width, "1")
    assert enclosure.lower <= lower and lower + width <= enclosure.upper
    assert enclosure.upper - enclosure.lower <= width + F(1, 10**14)
