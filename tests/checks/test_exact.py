"""Definiteness, Gram identities and rational roots, against closed forms and damaged witnesses."""

import subprocess
import sys
from fractions import Fraction

from hypothesis import given
from hypothesis import strategies as st

from dossier.checks.exact import (
    expand,
    inverse,
    is_positive_definite,
    is_positive_definite_for_all,
    is_positive_gram,
    is_positive_semidefinite,
    quadratic_form,
    root_above,
    root_below,
    vanishes_only_at_zero,
)
from dossier.model.ball import Ball
from dossier.model.claim import Gram

ENTRY = st.fractions(-5, 5, max_denominator=20)


def square(size):
    return st.lists(st.lists(ENTRY, min_size=size, max_size=size), min_size=size, max_size=size)


def times_transpose(matrix):
    return [[sum((a * b for a, b in zip(r, s, strict=True)), Fraction(0)) for s in matrix] for r in matrix]


@given(square(4))
def test_a_product_with_its_transpose_is_semidefinite_and_definite_exactly_when_regular(matrix):
    product = times_transpose(matrix)
    assert is_positive_semidefinite(product)
    assert is_positive_definite(product) == (inverse(matrix) is not None)


@given(square(3), st.lists(ENTRY, min_size=3, max_size=3))
def test_no_vector_contradicts_a_definite_answer(matrix, vector):
    symmetric = [[matrix[i][j] + matrix[j][i] for j in range(3)] for i in range(3)]
    if is_positive_definite(symmetric) and any(vector):
        assert quadratic_form(symmetric, vector) > 0


def test_a_singular_matrix_is_never_definite_and_an_asymmetric_one_is_refused():
    one = Fraction(1)
    assert not is_positive_definite([[one, one], [one, one]])
    assert is_positive_semidefinite([[one, one], [one, one]])
    assert not is_positive_definite([[one, one], [Fraction(0), one]])
    assert not is_positive_semidefinite([[-one]])


def test_definiteness_over_a_ball_stops_at_its_least_eigenvalue():
    """[[2, 1], [1, 2]] has eigenvalues 1 and 3 (closed form): off-diagonal changes below 1 keep it definite."""
    middle = [[Fraction(2), Fraction(1)], [Fraction(1), Fraction(2)]]
    zero = Fraction(0)
    assert is_positive_definite_for_all(middle, [[zero, Fraction(99, 100)], [Fraction(99, 100), zero]])
    assert not is_positive_definite_for_all(middle, [[zero, Fraction(1)], [Fraction(1), zero]])


@given(st.fractions(0, 10**9, max_denominator=10**9))
def test_rational_roots_enclose_the_square_root(value):
    low, high = root_below(value), root_above(value)
    assert low * low <= value <= high * high
    assert high - low <= max(high, Fraction(1, 10**6)) * Fraction(1, 2**60)


GRAM = Gram(((1, 0), (0, 1), (2, 0)), tuple(tuple(map(Fraction, r)) for r in ((2, 1, 0), (1, 2, 1), (0, 1, 3))))


def target(extra=Fraction(0), at=(2, 0)):
    coefficients = {e: Ball(c) for e, c in expand(GRAM).items()}
    coefficients[at] = Ball(coefficients.get(at, Ball(Fraction(0))).middle + extra)
    return coefficients


def test_a_gram_proves_its_own_polynomial_and_small_residuals_are_absorbed():
    assert is_positive_gram(target(), GRAM)
    assert is_positive_gram(target(Fraction(-1, 10)), GRAM)


def test_a_residual_too_large_or_out_of_reach_is_refused():
    assert not is_positive_gram(target(Fraction(-3)), GRAM)
    assert not is_positive_gram(target(Fraction(1, 10**30), (0, 5)), GRAM)
    assert not is_positive_gram(target(Fraction(1, 10**30), (0, 0)), GRAM)


def test_uncertain_coefficients_must_leave_the_gram_definite():
    wide = {e: Ball(b.middle, Fraction(2)) for e, b in target().items()}
    narrow = {e: Ball(b.middle, Fraction(1, 100)) for e, b in target().items()}
    assert is_positive_gram(narrow, GRAM)
    assert not is_positive_gram(wide, GRAM)


def test_a_basis_positive_away_from_zero_needs_a_pure_power_of_each_variable():
    assert vanishes_only_at_zero(((1, 0), (0, 3)), 2)
    assert not vanishes_only_at_zero(((1, 0), (1, 1)), 2)
    assert not vanishes_only_at_zero(((0, 0), (1, 0), (0, 1)), 2)


def test_the_exact_checker_loads_no_numerical_library_and_no_solver():
    code = "import dossier.checks.exact, sys; print(sorted(set(sys.modules) & set(BAD)))"
    bad = ["numpy", "scipy", "cvxpy", "clarabel", "sympy", "scs", "pydantic", "pint", "dossier.search"]
    done = subprocess.run([sys.executable, "-c", f"BAD = {bad}; {code}"], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
