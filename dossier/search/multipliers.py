"""Gram matrices that show the decrease of a given V on {V <= c}: one small conic program per Bernstein coefficient.

-g = z'Qz + (y'Sy-type multiplier) (c - V) with Q, S >= t I and t as large as possible (Positivstellensatz of
first degree, the S-procedure: P. A. Parrilo, thesis, Caltech 2000; W. Tan and A. Packard, IEEE Trans.
Autom. Control 53, 2008).  Interior solutions round well, so t is what is maximised.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations_with_replacement
from typing import Final

import cvxpy
import numpy as np
from numpy.typing import NDArray

from dossier.model.claim import DecreaseWitness, Gram
from dossier.model.decrease import DecreaseForm, bernstein_coefficients
from dossier.model.polynomial import Exponents, OffsetField, collapse, terms
from dossier.model.region import Box
from dossier.search.conic import solve
from dossier.search.rounding import power_of_two_near, rescale, to_matrix

Array = NDArray[np.float64]

GRAM_BITS: Final = 40
"""Rounding of Gram entries of order one; far finer than the margin asked for, still short."""
LEAST_MARGIN: Final = 1e-8
"""Margin t below which the rounding residual could eat it: no witness."""
LARGEST_BASIS: Final = 130
"""Largest Gram basis tried; beyond it one program takes minutes."""


def monomials(variables: int, least: int, most: int) -> tuple[Exponents, ...]:
    """All exponents of total degree `least` to `most`, degree by degree."""
    result = []
    for degree in range(least, most + 1):
        for places in combinations_with_replacement(range(variables), degree):
            exponents = [0] * variables
            for place in places:
                exponents[place] += 1
            result.append(tuple(exponents))
    return tuple(result)


def _product(a: Exponents, b: Exponents) -> Exponents:
    return tuple(x + y for x, y in zip(a, b, strict=True))


@dataclass
class MultiplierProgram:
    """The program for one V and level, compiled once and solved for every right-hand side.

    All polynomials are in scaled offsets z = y / S and divided by a power of two.
    """

    basis: tuple[Exponents, ...]
    multiplier_basis: tuple[Exponents, ...]
    rows: dict[Exponents, int]
    target: cvxpy.Parameter
    gram: cvxpy.Variable
    multiplier: cvxpy.Variable | None
    margin: cvxpy.Variable
    problem: cvxpy.Problem


def program(variables: int, degree: int, function: Mapping[Exponents, float], level: float) -> MultiplierProgram | None:
    """The program for right-hand sides of total degree `degree` and quadratic V = `function` (scaled).

    None where the basis would be too large.
    """
    half = (degree + 1) // 2
    basis = monomials(variables, 1, half)
    multiplier_basis = monomials(variables, 1, half - 1)
    if len(basis) > LARGEST_BASIS:
        return None
    reached = dict.fromkeys(_product(a, b) for a in basis for b in basis)
    rows = {e: i for i, e in enumerate(reached)}
    target = cvxpy.Parameter(len(rows))
    margin = cvxpy.Variable()
    gram = cvxpy.Variable((len(basis), len(basis)), symmetric=True)
    total = _gram_map(basis, rows) @ cvxpy.vec(gram, order="C")
    constraints = [gram >> margin * np.eye(len(basis)), margin <= 1.0]
    multiplier = None
    if multiplier_basis:
        size = len(multiplier_basis)
        multiplier = cvxpy.Variable((size, size), symmetric=True)
        total = total + _gap_map(multiplier_basis, rows, function, level) @ cvxpy.vec(multiplier, order="C")
        constraints.append(multiplier >> margin * np.eye(size))
    constraints.append(total == target)
    problem = cvxpy.Problem(cvxpy.Maximize(margin), constraints)
    return MultiplierProgram(basis, multiplier_basis, rows, target, gram, multiplier, margin, problem)


def _gram_map(basis: tuple[Exponents, ...], rows: Mapping[Exponents, int]) -> Array:
    size = len(basis)
    result = np.zeros((len(rows), size * size))
    for i, a in enumerate(basis):
        for j, b in enumerate(basis):
            result[rows[_product(a, b)], i * size + j] += 1.0
    return result


def _gap_map(
    basis: tuple[Exponents, ...], rows: Mapping[Exponents, int], function: Mapping[Exponents, float], level: float
) -> Array:
    """Coefficients of (basis' S basis) (level - V) as a linear map of vec(S)."""
    size = len(basis)
    result = np.zeros((len(rows), size * size))
    for i, a in enumerate(basis):
        for j, b in enumerate(basis):
            ab = _product(a, b)
            result[rows[ab], i * size + j] += level
            for exponents, coefficient in function.items():
                result[rows[_product(ab, exponents)], i * size + j] -= coefficient
    return result


def seek_witnesses(
    field: OffsetField,
    form: DecreaseForm,
    sign: int,
    function: Mapping[Exponents, Fraction],
    level: Fraction,
    parameters: Box,
    scales: tuple[Fraction, ...],
) -> tuple[DecreaseWitness, ...] | str:
    """One witness per Bernstein coefficient of sign * g, in order, or why there is none."""
    size = len(scales)
    numerator = form.numerator * field.ring.constant(Fraction(sign))
    degree = max((sum(e[:size]) for e in terms(numerator)), default=0)
    if degree == 0:
        return "the derivative of V vanishes identically"
    scaled = {e: float(c * _scale_of(e, scales)) for e, c in function.items()}
    prepared = program(size, degree, scaled, float(level))
    if prepared is None:
        return "the Gram basis would be too large"
    witnesses = []
    for index, coefficient in bernstein_coefficients(numerator, field.ring, parameters):
        target = {
            e: b.middle * _scale_of(e, scales) for e, b in collapse(-coefficient, field.ring, size, field.balls).items()
        }
        witness = _witness(prepared, index, target, scales)
        if isinstance(witness, str):
            return f"Bernstein coefficient {index}: {witness}" if index else witness
        witnesses.append(witness)
    return tuple(witnesses)


def _scale_of(exponents: Exponents, scales: tuple[Fraction, ...]) -> Fraction:
    result = Fraction(1)
    for exponent, scale in zip(exponents, scales, strict=True):
        result *= scale**exponent
    return result


def _witness(
    prepared: MultiplierProgram, index: Exponents, target: Mapping[Exponents, Fraction], scales: tuple[Fraction, ...]
) -> DecreaseWitness | str:
    unit = power_of_two_near(max((abs(float(c)) for c in target.values()), default=1.0))
    values = np.zeros(len(prepared.rows))
    for exponents, coefficient in target.items():
        if exponents not in prepared.rows:
            return "a monomial of the derivative is out of the basis's reach"
        values[prepared.rows[exponents]] = float(coefficient / unit)
    prepared.target.value = values
    solved = solve(prepared.problem)
    margin = prepared.margin.value
    if not solved.has_values or margin is None or not float(margin) > LEAST_MARGIN:
        return f"no positive definite Gram matrices ({solved.remark})"
    main = _gram(prepared.basis, prepared.gram.value, unit, scales)
    if prepared.multiplier is None:
        return DecreaseWitness(index, main, Gram((), ()))
    return DecreaseWitness(index, main, _gram(prepared.multiplier_basis, prepared.multiplier.value, unit, scales))


def _gram(basis: tuple[Exponents, ...], values: Array | None, unit: Fraction, scales: tuple[Fraction, ...]) -> Gram:
    """Back to unscaled offsets, exactly: z^a = y^a / S^a."""
    rounded = to_matrix(np.asarray(values), GRAM_BITS)
    factors = tuple(1 / _scale_of(e, scales) for e in basis)
    back = rescale(rounded, factors)
    return Gram(basis, tuple(tuple(unit * v for v in row) for row in back))
