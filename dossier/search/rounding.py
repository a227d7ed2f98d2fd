"""Floating-point candidates to short rationals; exact scaling by powers of two."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from math import frexp, isfinite
from typing import Final

import numpy as np
from numpy.typing import NDArray

from dossier.model.claim import Matrix
from dossier.model.polynomial import Exponents

Array = NDArray[np.float64]

MATRIX_BITS: Final = 24
"""Rounding of P relative to its largest scaled entry: short coefficients that keep six digits."""
LEVEL_BITS: Final = 30
"""Significant bits of a level: finer than any step between two levels tried."""


def power_of_two_near(value: float) -> Fraction:
    """The power of two nearest to `value` > 0 on a logarithmic scale; 1 for zero, negative, infinite or NaN."""
    if not (value > 0 and isfinite(value)):
        return Fraction(1)
    mantissa, exponent = frexp(value)
    return Fraction(2) ** (exponent if mantissa * mantissa * 2 > 1 else exponent - 1)


def to_grid(value: float, bits: int) -> Fraction:
    """`value` rounded to a multiple of 2**-bits.  Raises ValueError or OverflowError for NaN and infinities."""
    return Fraction(round(Fraction(float(value)) * (1 << bits)), 1 << bits)


def short_below(value: Fraction) -> Fraction:
    """The largest number of `LEVEL_BITS` significant bits or so that does not exceed `value` >= 0."""
    if value <= 0:
        return Fraction(0)
    unit = power_of_two_near(float(value)) / (1 << LEVEL_BITS)
    return unit * (value // unit)


def to_matrix(values: Array, bits: int) -> Matrix:
    """Symmetric rational matrix near the symmetric part of `values`, entries multiples of 2**-bits."""
    symmetric = (values + values.T) / 2
    size = len(symmetric)
    rows = [[to_grid(symmetric[max(i, j), min(i, j)], bits) for j in range(size)] for i in range(size)]
    return tuple(tuple(row) for row in rows)


def rescale(matrix: Matrix, factors: tuple[Fraction, ...]) -> Matrix:
    """D matrix D with D = diag(factors), exactly."""
    return tuple(
        tuple(a * v * b for v, b in zip(row, factors, strict=True)) for row, a in zip(matrix, factors, strict=True)
    )


def rounded_function(matrix: Array, scales: tuple[Fraction, ...]) -> dict[Exponents, Fraction]:
    """V over unscaled offsets with short rational coefficients near z' `matrix` z, y = S z."""
    unit = power_of_two_near(float(np.abs(matrix).max()))
    rounded = to_matrix(matrix / float(unit), MATRIX_BITS)
    size = len(scales)
    function: dict[Exponents, Fraction] = {}
    for i in range(size):
        for j in range(i, size):
            value = unit * rounded[i][j] / (scales[i] * scales[j]) * (1 if i == j else 2)
            if value:
                function[tuple(int(k == i) + int(k == j) for k in range(size))] = value
    return function


def scaled_matrix(function: Mapping[Exponents, Fraction], scales: tuple[Fraction, ...]) -> Array:
    """The floating matrix of z' P z for a quadratic `function` of y = S z."""
    matrix = np.zeros((len(scales), len(scales)))
    for exponents, coefficient in function.items():
        i, j = (k for k, count in enumerate(exponents) for _ in range(count))
        half = float(coefficient * scales[i] * scales[j]) / 2
        matrix[i, j] += half
        matrix[j, i] += half
    return matrix


def value_at(function: Mapping[Exponents, Fraction], point: tuple[Fraction, ...]) -> Fraction:
    """The exact value of a polynomial."""
    total = Fraction(0)
    for exponents, coefficient in function.items():
        term = coefficient
        for value, count in zip(point, exponents, strict=True):
            term *= value**count
        total += term
    return total
