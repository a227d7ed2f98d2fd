"""Floating-point candidates to short rationals; exact scaling by powers of two."""

from __future__ import annotations

from fractions import Fraction
from math import frexp

import numpy as np
from numpy.typing import NDArray

from dossier.model.claim import Matrix

Array = NDArray[np.float64]


def power_of_two_near(value: float) -> Fraction:
    """The power of two nearest to `value` > 0 on a logarithmic scale; 1 for zero, infinite or NaN."""
    if not (value > 0 and np.isfinite(value)):
        return Fraction(1)
    mantissa, exponent = frexp(value)
    return Fraction(2) ** (exponent if mantissa * mantissa * 2 > 1 else exponent - 1)


def to_grid(value: float, bits: int) -> Fraction:
    """`value` rounded to a multiple of 2**-bits.  Raises ValueError or OverflowError for NaN and infinities."""
    return Fraction(round(Fraction(float(value)) * (1 << bits)), 1 << bits)


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
