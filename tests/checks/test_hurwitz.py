"""Routh's array against known roots and published limits."""

from fractions import Fraction

import pytest
from flint import arb, fmpq
from hypothesis import given
from hypothesis import strategies as st
from loop_cases import blurred, polynomial

from dossier.checks.hurwitz import is_hurwitz
from dossier.model.ball import precision, to_fmpq

ROOT = st.fractions(-8, 8, max_denominator=12)


@given(st.lists(ROOT, max_size=4), st.lists(st.tuples(ROOT, ROOT.filter(bool)), max_size=2))
def test_a_polynomial_is_hurwitz_exactly_when_all_its_roots_are_left(roots, pairs):
    p = polynomial(roots, pairs)
    left = all(r < 0 for r in roots) and all(q < 0 for q, _ in pairs)
    assert is_hurwitz(p[::-1]) is left
    assert is_hurwitz([-v for v in p[::-1]]) is left
    with precision(256):
        assert is_hurwitz(blurred(p)[::-1]) in (left, None)


@pytest.mark.parametrize(
    ("coefficients", "limit", "stable_below"),
    [
        (lambda k: [1, 3, 3, 2, k], Fraction(14, 9), True),  # Ogata, G = K/(s(s^2+s+1)(s+2)), from memory
        (lambda k: [1, 18, 77, k], Fraction(1386), True),  # N. Nise, Example 6.9, from memory
        (lambda k: [1, 5, k - 6, k], Fraction(15, 2), False),  # Franklin, Powell, Emami-Naeini ch. 3, from memory
    ],
)
def test_published_routh_limits_are_met_exactly(coefficients, limit, stable_below):
    step = Fraction(1, 10**12)
    inside, outside = (limit - step, limit + step) if stable_below else (limit + step, limit - step)
    assert is_hurwitz([to_fmpq(Fraction(v)) for v in coefficients(inside)]) is True
    assert is_hurwitz([to_fmpq(Fraction(v)) for v in coefficients(limit)]) is False
    assert is_hurwitz([to_fmpq(Fraction(v)) for v in coefficients(outside)]) is False


def test_balls_that_reach_over_the_routh_limit_do_not_decide():
    assert is_hurwitz([fmpq(1), fmpq(18), fmpq(77), arb(1386, 1)]) is None
    assert is_hurwitz([arb(0, 1), fmpq(1)]) is None
