"""Root counts against products of factors whose roots are known."""

from fractions import Fraction
from itertools import pairwise

import pytest
from flint import arb, fmpq, fmpq_poly
from hypothesis import given
from hypothesis import strategies as st
from loop_cases import blurred

from dossier.checks.inertia import Inertia, inertia, integer_array
from dossier.model.characteristic import bilinear
from dossier.model.linear_part import sign_of

SIZES = st.fractions(Fraction(1, 8), 8, max_denominator=8)


def real_root(a):
    return [-a, 1]


def pair(p, q):
    """Roots p + jq and p - jq."""
    return [p * p + q * q, -2 * p, 1]


@st.composite
def factors(draw):
    """(ascending coefficients, roots left, on, right); values from a short list make multiple roots likely."""
    a, b = draw(st.sampled_from([(1, 1), (1, 2), (2, 1), (Fraction(1, 3), 5)]))
    return draw(
        st.sampled_from(
            [
                (real_root(-a), 1, 0, 0),
                (real_root(a), 0, 0, 1),
                (real_root(0), 0, 1, 0),
                (pair(-a, b), 2, 0, 0),
                (pair(a, b), 0, 0, 2),
                (pair(0, b), 0, 2, 0),
            ]
        )
    )


def product(parts):
    result = fmpq_poly([1])
    for coefficients, *_ in parts:
        result = result * fmpq_poly([fmpq(Fraction(c).numerator, Fraction(c).denominator) for c in coefficients])
    return result.coeffs()[::-1]


def counts(parts):
    return Inertia(*(sum(p[i] for p in parts) for i in (1, 2, 3)))


@given(st.lists(factors(), min_size=1, max_size=7), st.sampled_from([fmpq(1), fmpq(-1), fmpq(-3, 7)]))
def test_a_product_of_known_factors_has_the_counts_of_its_factors(parts, scale):
    assert inertia([c * scale for c in product(parts)]) == counts(parts)


@given(st.lists(factors(), min_size=1, max_size=4))
def test_roots_with_their_mirror_images_are_counted_on_both_sides(parts):
    mirrored = [([c * (-1) ** i for i, c in enumerate(p)], right, on, left) for p, left, on, right in parts]
    assert inertia(product([*parts, *mirrored])) == counts([*parts, *mirrored])


@given(st.lists(factors(), min_size=1, max_size=6))
def test_balls_give_the_exact_counts_or_no_answer(parts):
    exact = product(parts)
    found = inertia(blurred(exact))
    assert found is None or found == counts(parts)
    if counts(parts).boundary:
        assert found is None


@given(st.lists(factors().filter(lambda f: not f[2]), min_size=1, max_size=5))
def test_balls_around_a_regular_array_are_decided(parts):
    exact = product(parts)
    if integer_array(exact):
        assert inertia(blurred(exact)) == counts(parts)


def test_coefficients_that_vanish_by_structure_leave_balls_decidable():
    w = arb("2.5")
    assert inertia([fmpq(1), fmpq(0), w]) == Inertia(0, 2, 0)
    assert inertia([fmpq(1), fmpq(0), -w]) == Inertia(1, 0, 1)
    assert inertia([fmpq(1), w, fmpq(0)]) == Inertia(1, 1, 0)


def test_a_double_root_on_the_axis_is_no_business_of_balls():
    # (s^2 + 1)^2 with structural zeros: a second row of zeros appears
    assert inertia([arb(1), fmpq(0), fmpq(2), fmpq(0), fmpq(1)]) is None
    assert inertia([fmpq(1), fmpq(0), fmpq(2), fmpq(0), fmpq(1)]) == Inertia(0, 4, 0)


def test_a_leading_zero_is_a_root_at_infinity():
    assert inertia([fmpq(0), fmpq(1), fmpq(2)]) == Inertia(1, 1, 0)


def test_the_zero_polynomial_is_refused():
    with pytest.raises(ValueError, match="zero polynomial"):
        inertia([fmpq(0), fmpq(0)])


@given(st.lists(st.integers(-9, 9), min_size=2, max_size=7).filter(lambda c: c[0] != 0))
def test_the_integer_array_shows_the_roots_to_the_right_by_its_sign_changes(coefficients):
    polynomial = [fmpq(c) for c in coefficients]
    array = integer_array(polynomial)
    if array:
        column = [row[0] for row in array]
        changes = sum(a * b < 0 for a, b in pairwise(column))
        assert len(column) == len(polynomial)
        assert inertia(polynomial) == Inertia(len(polynomial) - 1 - changes, 0, changes)


def test_a_singular_array_is_not_shown():
    assert integer_array([fmpq(1), fmpq(-1), fmpq(0)]) == ()
    assert integer_array([fmpq(1), fmpq(0), fmpq(1)]) == ()
    assert integer_array([arb(1), arb(2)]) == ()


def test_rows_of_the_array_keep_their_signs_and_have_no_common_factor():
    # s^3 + 6 s^2 + 11 s + 6 = (s + 1)(s + 2)(s + 3); the array by hand: 1 11 | 6 6 | 10 | 6
    assert integer_array([fmpq(1), fmpq(6), fmpq(11), fmpq(6)]) == ((1, 11), (1, 1), (1,), (1,))


@given(
    st.lists(st.tuples(SIZES, st.sampled_from([1, -1])), min_size=1, max_size=5), st.integers(0, 2), st.integers(0, 2)
)
def test_the_bilinear_map_turns_the_unit_disc_into_the_left_half_plane(sizes, at_minus_one, at_one):
    roots = [s * sign for s, sign in sizes] + [Fraction(-1)] * at_minus_one + [Fraction(1)] * at_one
    z = product([(real_root(r),) for r in roots])
    inside, on = sum(abs(r) < 1 for r in roots), sum(abs(r) == 1 for r in roots)
    assert inertia(bilinear(z)) == Inertia(inside, on, len(roots) - inside - on)


@given(SIZES, SIZES)
def test_complex_multipliers_are_counted_by_their_modulus(p, q):
    z = product([(pair(p, q),)])
    size = p * p + q * q
    expected = Inertia(2, 0, 0) if size < 1 else Inertia(0, 2, 0) if size == 1 else Inertia(0, 0, 2)
    assert inertia(bilinear(z)) == expected


def test_the_sign_of_a_ball_is_known_only_where_all_its_values_share_it():
    assert sign_of(arb(0, 1)) is None
    assert sign_of(arb(2, 1)) == 1
