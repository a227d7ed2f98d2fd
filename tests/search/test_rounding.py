"""Rounding to short rationals: exact where it must be, near where it may be."""

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dossier.search.rounding import (
    power_of_two_near,
    rescale,
    rounded_function,
    scaled_matrix,
    short_below,
    to_grid,
    to_matrix,
    value_at,
)


@given(st.floats(min_value=1e-30, max_value=1e30))
def test_the_nearest_power_of_two_is_within_half_an_octave(value):
    power = power_of_two_near(value)
    assert 2**-0.5 * (1 - 1e-12) <= value / float(power) <= 2**0.5 * (1 + 1e-12)
    assert power.numerator & (power.numerator - 1) == 0
    assert power.denominator & (power.denominator - 1) == 0


@pytest.mark.parametrize("value", [0.0, -1.0, float("inf"), float("nan")])
def test_what_has_no_size_keeps_scale_one(value):
    assert power_of_two_near(value) == 1


@given(st.floats(min_value=-1e6, max_value=1e6), st.integers(1, 60))
def test_the_grid_is_a_power_of_two_and_at_most_half_a_step_away(value, bits):
    rounded = to_grid(value, bits)
    assert (1 << bits) % rounded.denominator == 0
    assert abs(rounded - Fraction(value)) <= Fraction(1, 2 << bits)


@given(st.fractions(min_value=Fraction(1, 10**9), max_value=10**9))
def test_a_short_level_is_never_above_and_hardly_below(value):
    short = short_below(value)
    assert 0 < short <= value
    assert value - short <= value * Fraction(1, 2**28)
    assert short_below(-value) == 0


def test_a_matrix_comes_back_symmetric_and_scaling_is_exact():
    rough = np.array([[1.0, 0.3], [0.1, 2.0]])
    matrix = to_matrix(rough, 20)
    assert matrix[0][1] == matrix[1][0]
    assert abs(float(matrix[0][1]) - 0.2) < 2**-20
    factors = (Fraction(1, 8), Fraction(4))
    assert rescale(matrix, factors)[0][1] == matrix[0][1] / 2
    assert rescale(rescale(matrix, factors), tuple(1 / f for f in factors)) == matrix


def test_a_rounded_function_is_the_form_in_unscaled_offsets():
    """z'Mz with y = S z: the coefficient of y1 y2 is 2 M12/(s1 s2)."""
    scales = (Fraction(1, 1024), Fraction(64))
    matrix = np.array([[2.0, 0.5], [0.5, 3.0]])
    function = rounded_function(matrix, scales)
    assert function == {(2, 0): Fraction(2 * 1024**2), (1, 1): Fraction(16), (0, 2): Fraction(3, 4096)}
    assert np.array_equal(scaled_matrix(function, scales), matrix)
    assert value_at(function, (Fraction(1, 1024), Fraction(64))) == 6
