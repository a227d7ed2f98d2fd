"""Scaling and rounding of matrices for the linear part: powers of two throughout, so that nothing is lost."""

from __future__ import annotations

from fractions import Fraction
from typing import Final

import numpy as np
from numpy.typing import NDArray

from dossier.model.claim import Matrix
from dossier.search.rounding import power_of_two_near

Array = NDArray[np.float64]

SWEEPS: Final = 10
"""Rounds of balancing; each needs two or three for matrices of this size."""


def balance(matrix: Array) -> tuple[Fraction, ...]:
    """Powers of two S so that S^-1 A S has rows and columns of similar size (B. Parlett and C. Reinsch 1969)."""
    size = len(matrix)
    scales = np.ones(size)
    for _ in range(SWEEPS):
        before = scales.copy()
        for i in range(size):
            scaled = np.abs(matrix * scales[None, :] / scales[:, None])
            row, column = scaled[i].sum() - scaled[i, i], scaled[:, i].sum() - scaled[i, i]
            if row > 0 and column > 0:
                scales[i] *= float(power_of_two_near(float(np.sqrt(row / column))))
        if np.array_equal(before, scales):
            break
    return tuple(power_of_two_near(float(s)) for s in scales)


def shortened(matrix: Matrix, bits: int) -> Matrix:
    """Symmetric `matrix` with entry (i, j) rounded to about `bits` binary digits below sqrt(P_ii P_jj).

    Raises ValueError where a diagonal entry is not positive.
    """
    return rounded_like(matrix, matrix, bits)


def rounded_like(matrix: Matrix, base: Matrix, bits: int) -> Matrix:
    """Symmetric `matrix` with entry (i, j) rounded to about `bits` binary digits below sqrt(B_ii B_jj), B = `base`.

    Raises ValueError where a diagonal entry of `base` is not positive.
    """
    if any(row[i] <= 0 for i, row in enumerate(base)):
        raise ValueError("a positive diagonal is needed")
    scales = [_root_magnitude(row[i]) for i, row in enumerate(base)]
    size = len(matrix)

    def entry(i: int, j: int) -> Fraction:
        unit = scales[i] * scales[j] / (1 << bits)
        return round(matrix[i][j] / unit) * unit

    return tuple(tuple(entry(max(i, j), min(i, j)) for j in range(size)) for i in range(size))


def _root_magnitude(value: Fraction) -> Fraction:
    """A power of two within a factor 2 or so of the square root of `value` > 0."""
    return Fraction(2) ** ((value.numerator.bit_length() - value.denominator.bit_length()) // 2)


def to_short(values: Array, bits: int) -> Matrix:
    """`shortened` of the symmetric part of a finite floating-point matrix."""
    return shortened(exactly(values), bits)


def exactly(values: Array) -> Matrix:
    """The symmetric part of a finite floating-point matrix, as it is."""
    symmetric = (values + values.T) / 2
    return tuple(tuple(Fraction(float(v)) for v in row) for row in symmetric)
