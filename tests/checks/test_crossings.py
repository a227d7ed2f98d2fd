"""Margins from crossings at the ends of the frequency axis and in loops no state model produces, in closed form."""

from fractions import Fraction
from math import atan2, pi, sqrt

import pytest
from flint import fmpq, fmpq_poly

from dossier.checks.boundary import on_boundary, quotient_slope
from dossier.checks.crossings import (
    Candidate,
    Extreme,
    Place,
    Undecided,
    gain_margins,
    least,
    peak_sensitivity,
    phase_margins,
)
from dossier.model.ball import Ball
from dossier.model.claim import Crossing


def exact(*coefficients):
    return tuple(Ball(Fraction(v)) for v in coefficients)


def boundary(opened, gain):
    """A loop c/a that need not come from states (c may have the degree of a)."""
    total = [Fraction(v) + Fraction(w) for v, w in zip(opened, gain, strict=True)]
    return on_boundary(exact(*opened), exact(*gain), exact(*total))


def test_a_loop_with_direct_gain_loses_degree_at_infinite_frequency():
    # L = -(s + 1)/(2 s + 6): k = 2 at w = infinity, k = 6 at w = 0
    loop = boundary([2, 6], [-1, -1])
    up = gain_margins(loop, ()).up
    assert up.lower <= 2 <= up.upper
    assert up.place.upper is None
    assert phase_margins(loop, ()).delay is None


def test_a_loop_whose_gain_at_infinity_reaches_one_tolerates_no_delay():
    # L = 2 s/(s + 1): neutral, |L(infinity)| = 2; gain one at W = 1/3
    loop = boundary([1, 1], [2, 0])
    margins = phase_margins(loop, [Crossing(Fraction(1, 4), Fraction(1, 2))])
    assert margins.delay.lower == margins.delay.upper == 0


def test_gain_one_at_zero_frequency_counts_as_a_half_turn():
    # L = 1/(s + 1): |L| = 1 only at w = 0, where L = 1
    margins = phase_margins(boundary([1, 1], [0, 1]), ())
    assert margins.least.lower <= Fraction(pi) <= margins.least.upper + Fraction(1, 10**12)
    assert margins.least.place.lower == margins.least.place.upper == 0
    assert margins.delay is None


def test_a_loop_of_gain_one_everywhere_is_not_measured():
    margins = phase_margins(boundary([1, -1, -2], [1, 1, -2]), ())
    assert isinstance(margins.least, Undecided)


def test_a_constant_loop_crosses_at_its_inverse_for_every_frequency():
    # c = -a/2: k = 2 everywhere, Im(c conj a) vanishes identically, S = 2
    loop = boundary([1, 1], [Fraction(-1, 2), Fraction(-1, 2)])
    assert gain_margins(loop, ()).up.lower <= 2 <= gain_margins(loop, ()).up.upper
    assert peak_sensitivity(loop, ()).lower <= 2 <= peak_sensitivity(loop, ()).upper


def test_the_slope_of_the_sensitivity_cancels_its_leading_term_exactly():
    part, rest = [fmpq(1), fmpq(2), fmpq(3)], [fmpq(5), fmpq(7), fmpq(11)]
    p, q = fmpq_poly(part), fmpq_poly(rest)
    assert fmpq_poly(quotient_slope(part, rest)) == p.derivative() * q - p * q.derivative()
    third = [Ball(Fraction(1, 3), Fraction(1, 10**9))]
    balls = on_boundary(exact(1, 2, 3), (*exact(0), *third, *exact(1)), (*exact(1), *third, *exact(4)))
    assert balls.peak[-1] == 0


def test_a_crossing_that_may_lie_at_zero_gain_bounds_the_downward_margin_on_one_side_only():
    # a = s + e, c = 1 with |e| <= 1e-9: k = -e may be a tiny positive factor, or there is no crossing
    blur = Ball(Fraction(0), Fraction(1, 10**9))
    loop = on_boundary((*exact(1), blur), exact(0, 1), (*exact(1), Ball(Fraction(1), Fraction(1, 10**9))))
    down = gain_margins(loop, ()).down
    assert down.upper is None
    assert Fraction(10**9) * Fraction(99, 100) < down.lower <= 10**9


def test_a_loop_value_that_may_be_minus_one_is_undecided():
    blur = Ball(Fraction(-1), Fraction(1, 10**9))
    loop = on_boundary((*exact(1), blur), exact(0, 1), (*exact(1), Ball(Fraction(0), Fraction(1, 10**9))))
    assert isinstance(gain_margins(loop, ()).up, Undecided)
    assert isinstance(peak_sensitivity(loop, ()), Undecided)


def test_the_least_crossing_is_found_among_uncertain_ones():
    sure = Candidate(Fraction(3), Fraction(4), Place(Fraction(1), Fraction(2)))
    later = Candidate(Fraction(5), Fraction(6), Place(Fraction(7), Fraction(8)))
    perhaps = Candidate(Fraction(2), Fraction(5, 2), Place(Fraction(3), Fraction(3)), certain=False)
    assert least([later, sure]) == Extreme(Fraction(3), Fraction(4), Place(Fraction(1), Fraction(2)))
    assert least([sure, perhaps, later]) == Extreme(Fraction(2), Fraction(4), Place(Fraction(1), Fraction(3)))
    assert least([perhaps]) == Extreme(Fraction(2), None, Place(Fraction(3), Fraction(3)))
    assert least([]) is None


def test_a_loop_value_of_plus_one_is_a_half_turn_in_either_sense():
    # a = s^2 + s + 3, c = s + 2: a - c = s^2 + 1, so L(j) = 1; at W = 5, -L = (-1 + 4 sqrt(5) j)/9
    loop = boundary([1, 1, 3], [0, 1, 2])
    margins = phase_margins(loop, [Crossing(Fraction(1, 2), Fraction(3, 2)), Crossing(Fraction(4), Fraction(6))])
    lag = atan2(4 * sqrt(5), -1)
    assert float(margins.lag.lower) == pytest.approx(lag, abs=1e-12)
    assert float(margins.lead.lower) == pytest.approx(pi, abs=1e-12)
    assert float(margins.delay.lower) == pytest.approx(lag / sqrt(5), abs=1e-12)


def test_the_gain_at_infinity_that_may_be_one_leaves_the_delay_undecided():
    blur = Ball(Fraction(1), Fraction(1, 10**9))
    loop = on_boundary(exact(1, 2), (blur, *exact(1)), (Ball(Fraction(2), Fraction(1, 10**9)), *exact(3)))
    assert isinstance(phase_margins(loop, ()).delay, Undecided)
