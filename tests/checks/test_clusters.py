"""Discs of roots of uncertain polynomials: single roots, clusters, and polynomials drawn from the balls."""

from fractions import Fraction as F

import pytest
from flint import arb, fmpq, fmpq_poly
from hypothesis import given
from hypothesis import strategies as st
from loop_cases import blurred

from dossier.checks.clusters import distinct_roots, root_discs
from dossier.model.ball import precision, to_fmpq

BITS = 256


def expanded(roots):
    """Monic polynomial with the rational roots given, highest power first."""
    result = fmpq_poly([1])
    for r in roots:
        result = result * fmpq_poly([to_fmpq(-F(r)), 1])
    return result.coeffs()[::-1]


def uncertain(coefficients, radius):
    return [fmpq(1), *blurred(coefficients[1:], radius)]


ROOTS = st.lists(st.sampled_from([F(-3), F(-1), F(-1, 2), F(1, 3), F(2)]), min_size=1, max_size=5)


RADII = st.sampled_from([F(1, 10**12), F(1, 1000), F(1, 40), F(1, 4)])


@given(ROOTS, RADII, st.lists(st.fractions(-1, 1), min_size=5, max_size=5))
def test_every_polynomial_in_the_balls_has_the_stated_number_of_roots_in_each_disc(roots, radius, shares):
    exact = expanded(roots)
    with precision(BITS):
        discs = root_discs(uncertain(exact, radius))
        assert sum(d.multiplicity for d in discs) == len(roots)
        drawn = [exact[0]] + [c + to_fmpq(radius * s) for c, s in zip(exact[1:], shares, strict=False)]
        found = distinct_roots(fmpq_poly(drawn[::-1]))
        for disc in discs:
            inside = sum(m for z, m in found if abs(z - disc.centre) < disc.radius)
            assert inside == disc.multiplicity


def test_the_uncertainty_counts_on_the_whole_circle_not_at_its_centre():
    # s^2 + [-1, 1] s: one of the polynomials has the root -1 though the uncertainty vanishes at the centre 0
    with precision(BITS):
        (disc,) = root_discs([fmpq(1), arb(0, 1), fmpq(0)])
        assert disc.multiplicity == 2
        assert disc.radius > 1


def test_discs_never_meet():
    with precision(BITS):
        for distance in (F(k, 40) for k in range(1, 60)):
            discs = root_discs(uncertain(expanded([-1, -1 - distance, -4]), F(1, 100)))
            for i, a in enumerate(discs):
                assert all(abs(a.centre - b.centre) > a.radius + b.radius for b in discs[:i])


@given(st.sampled_from([F(-3), F(-1), F(5, 7)]), st.integers(1, 4))
def test_a_root_of_multiplicity_m_moves_by_the_mth_root_of_the_uncertainty(root, count):
    with precision(BITS):
        (disc,) = root_discs(uncertain(expanded([root] * count), F(1, 10**40)))
        assert disc.multiplicity == count
        assert abs(disc.centre - to_fmpq(root)) < disc.radius
        assert disc.radius < arb(10) ** (1 - fmpq(40, count))


def test_a_cluster_of_two_may_be_a_complex_pair():
    with precision(BITS):
        (disc,) = root_discs([fmpq(1), fmpq(2), arb(1, 0.01)])
        assert disc.enclosure.imag.contains(arb("0.0999")) and disc.enclosure.imag.contains(arb("-0.0999"))


def test_a_simple_real_root_is_proved_real():
    with precision(BITS):
        discs = root_discs(uncertain(expanded([-1, -2]), F(1, 10**30)))
        assert all(d.enclosure.imag.is_zero() for d in discs)
        assert all(
            d.enclosure.real.contains(v)
            for d, v in zip(sorted(discs, key=lambda d: d.centre.real), (-2, -1), strict=True)
        )


def test_the_radius_is_close_to_the_true_reach_of_the_root():
    with precision(BITS):
        (disc,) = root_discs([fmpq(1), arb(1, 0.001)])
        assert arb("0.001") <= disc.radius < arb("0.0013")


def test_a_ball_too_wide_to_separate_the_roots_gives_one_cluster():
    with precision(BITS):
        (disc,) = root_discs(uncertain(expanded([-1, F(-101, 100)]), F(1, 10)))
        assert disc.multiplicity == 2


def test_an_uncertain_or_missing_leading_coefficient_gives_no_discs():
    assert root_discs([arb(1), arb(2)]) == ()
    assert root_discs([fmpq(0), arb(2)]) == ()


@pytest.mark.parametrize("coefficients", [[1, 2, 5], [1, 0, 0, 1], [1, 0, 2, 0, 1]])
def test_exact_coefficients_give_the_roots_themselves(coefficients):
    with precision(BITS):
        discs = root_discs([fmpq(c) for c in coefficients])
        assert sum(d.multiplicity for d in discs) == len(coefficients) - 1
        assert all(d.radius < arb(10) ** -60 for d in discs)
