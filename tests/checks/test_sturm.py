"""Root counts and isolation against polynomials built from known roots, exactly and with balls."""

from fractions import Fraction
from itertools import pairwise, product

import pytest
from flint import arb, fmpq
from hypothesis import given, settings
from hypothesis import strategies as st
from loop_cases import blurred, polynomial

from dossier.checks.sturm import (
    isolates,
    positive_roots,
    reduced,
    refine,
    roots_between,
    variations,
)
from dossier.model.ball import precision
from dossier.model.claim import Crossing

ROOT = st.fractions(-8, 8, max_denominator=12)


def around(root, reach=Fraction(1, 1000)):
    return Crossing(root - reach, root + reach)


@given(st.lists(ROOT, max_size=5), st.lists(st.tuples(ROOT, ROOT.filter(bool)), max_size=2))
def test_the_count_of_positive_roots_is_the_number_of_distinct_ones(roots, pairs):
    p = reduced(polynomial(roots, pairs))
    assert positive_roots(p) == len({r for r in roots if r > 0})


@given(st.lists(ROOT, min_size=1, max_size=5), ROOT, ROOT)
def test_the_count_between_two_points_includes_the_upper_one_only(roots, first, second):
    low, high = min(first, second), max(first, second)
    p = polynomial(sorted(set(roots)))
    assert roots_between(p, low, high) == len({r for r in roots if low < r <= high})


@settings(max_examples=40)
@given(st.lists(ROOT.filter(lambda r: r > 0), min_size=1, max_size=4, unique=True), st.booleans())
def test_a_complete_list_is_accepted_and_one_with_a_root_left_out_is_not(roots, with_balls):
    roots.sort()
    p = polynomial(roots, [(Fraction(1), Fraction(2))])
    with precision(256):
        p = blurred(p) if with_balls else p
        listed = [around(r) for r in roots]
        assert isolates(p, listed).holds
        for i in range(len(listed)):
            assert not isolates(p, listed[:i] + listed[i + 1 :]).holds


@pytest.mark.parametrize("with_balls", [False, True])
@pytest.mark.parametrize(
    "listed",
    [
        [Crossing(Fraction(1, 2), Fraction(7, 2))],
        [around(Fraction(1)), around(Fraction(3)), around(Fraction(5))],
        [around(Fraction(3)), around(Fraction(1))],
        [Crossing(Fraction(1, 2), Fraction(2)), Crossing(Fraction(2), Fraction(4))],
        [Crossing(Fraction(-1), Fraction(2)), around(Fraction(3))],
        [Crossing(Fraction(4), Fraction(3)), around(Fraction(5))],
        [around(Fraction(1)), around(Fraction(2))],
        [],
    ],
    ids=["two in one", "one too many", "out of order", "touching", "not positive", "reversed", "misplaced", "none"],
)
def test_a_wrong_list_of_the_roots_one_and_three_is_refused(listed, with_balls):
    p = polynomial([Fraction(1), Fraction(3)])
    with precision(256):
        recount = isolates(blurred(p) if with_balls else p, listed)
    assert not recount.holds
    assert recount.reason


def test_a_double_root_is_not_missed_in_exact_coefficients_and_undecided_in_balls():
    p = polynomial([Fraction(2), Fraction(2), Fraction(5)])
    listed = [around(Fraction(2)), around(Fraction(5))]
    assert isolates(reduced(p), listed).holds
    assert not isolates(reduced(p), listed[1:]).holds
    with precision(256):
        assert not isolates(blurred(p), listed).holds
        assert not isolates(blurred(p), listed[1:]).holds


def test_a_root_that_may_lie_at_infinity_is_not_excluded():
    p = [fmpq(1), fmpq(1), arb(0, 1e-30)]
    assert not isolates(p, []).holds
    assert isolates([fmpq(1), fmpq(1), arb(1, 1e-30)], []).holds


def test_a_root_that_may_lie_at_zero_is_not_excluded():
    assert not isolates([arb(0, 1e-30), fmpq(1), fmpq(1)], []).holds


def test_an_exact_root_may_be_listed_as_a_point():
    p = polynomial([Fraction(3, 2), Fraction(-1)])
    point = Crossing(Fraction(3, 2), Fraction(3, 2))
    assert isolates(p, [point]).holds
    assert refine(p, point) == point
    assert not isolates(p, [Crossing(Fraction(1), Fraction(1))]).holds


@pytest.mark.parametrize("with_balls", [False, True])
def test_refinement_encloses_the_square_root_of_two(with_balls):
    p = [fmpq(-2), fmpq(0), fmpq(1)]
    with precision(256):
        finer = refine(blurred(p, Fraction(1, 10**40)) if with_balls else p, Crossing(Fraction(1), Fraction(2)))
    assert finer.lower**2 < 2 < finer.upper**2
    assert finer.upper - finer.lower < Fraction(1, 10**29)


def test_refinement_stops_at_a_rational_root_or_closes_in_on_it_where_balls_hide_it():
    p = polynomial([Fraction(1)], [(Fraction(0), Fraction(1))])
    start = Crossing(Fraction(1, 2), Fraction(3, 2))
    assert refine(p, start) == Crossing(Fraction(1), Fraction(1))
    with precision(256):
        finer = refine(blurred(p), start)
    assert finer.lower < 1 < finer.upper
    assert finer.upper - finer.lower < Fraction(1, 10**25)


@given(st.lists(st.sampled_from([-1, 0, 1, None]), min_size=1, max_size=7))
def test_variations_are_the_extremes_over_all_signs_the_balls_allow(signs):
    numbers = [arb(0, 1) if s is None else fmpq(s) for s in signs]
    choices = product(*((-1, 0, 1) if s is None else (s,) for s in signs))
    counts = []
    for choice in choices:
        kept = [s for s in choice if s]
        counts.append(sum(a != b for a, b in pairwise(kept)))
    assert variations(numbers) == (min(counts), max(counts))


def test_three_roots_in_one_interval_of_a_polynomial_with_balls_are_refused():
    p = polynomial([Fraction(1), Fraction(2), Fraction(3)])
    with precision(256):
        assert not isolates(blurred(p), [Crossing(Fraction(1, 2), Fraction(4))]).holds
