"""Characteristic polynomial of a linear part, and its bilinear map for sampled models."""

from __future__ import annotations

from collections.abc import Sequence
from typing import cast

from flint import arb, arb_mat, fmpq, fmpq_mat, fmpq_poly

from dossier.model.linear_part import Number

Matrix = Sequence[Sequence[Number]]


def characteristic(matrix: Matrix) -> list[Number]:
    """det(sI - A), highest power first; rational where every entry is."""
    if all(isinstance(v, fmpq) for row in matrix for v in row):
        exact = fmpq_mat(cast(list[list[fmpq]], [list(row) for row in matrix])).charpoly().coeffs()
        return list(reversed(exact))
    coefficients: list[Number] = list(reversed(arb_mat([[arb(v) for v in row] for row in matrix]).charpoly().coeffs()))
    coefficients[0] = fmpq(1)
    return coefficients


def bilinear(polynomial: Sequence[Number]) -> list[Number]:
    """p((1 + s)/(1 - s)) (1 - s)^n, highest power first: the unit disc becomes the left half-plane.

    A root at z = -1 shows as a vanishing leading coefficient, a root at infinity.
    """
    degree = len(polynomial) - 1
    result: list[Number] = [fmpq(0)] * (degree + 1)
    for i, coefficient in enumerate(reversed(polynomial)):
        basis = fmpq_poly([1, 1]) ** i * fmpq_poly([1, -1]) ** (degree - i)
        for j in range(degree + 1):
            result[j] = result[j] + coefficient * basis[j]
    return list(reversed(result))
