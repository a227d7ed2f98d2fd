"""Identities and definiteness over the rationals: the core that every exact verdict rests on.

Nothing here uses floating point.  Linear algebra over Q is python-flint's.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from math import isqrt
from typing import Final

from flint import fmpq, fmpq_mat

from dossier.model.ball import Ball
from dossier.model.claim import Gram, Matrix
from dossier.model.polynomial import Exponents

Coefficients = Mapping[Exponents, Ball]

ROOT_BITS: Final = 64
"""Relative precision, in bits, of the rational bounds on square roots; only their sharpness depends on it."""


def _flint(matrix: Sequence[Sequence[Fraction]]) -> fmpq_mat:
    size = len(matrix)
    return fmpq_mat(size, size, [fmpq(v.numerator, v.denominator) for row in matrix for v in row])


def is_symmetric(matrix: Sequence[Sequence[Fraction]]) -> bool:
    """Square and equal to its transpose, exactly."""
    size = len(matrix)
    return all(len(row) == size for row in matrix) and all(
        matrix[i][j] == matrix[j][i] for i in range(size) for j in range(i)
    )


def _sign_pattern(matrix: Sequence[Sequence[Fraction]]) -> list[fmpq]:
    """Elementary symmetric functions e_1 .. e_n of the eigenvalues, from the characteristic polynomial."""
    size = len(matrix)
    characteristic = _flint(matrix).charpoly()
    return [characteristic[size - k] * (-1) ** k for k in range(1, size + 1)]


def is_positive_definite(matrix: Sequence[Sequence[Fraction]]) -> bool:
    """x' M x > 0 for every x != 0, decided exactly; False for a matrix that is not symmetric.

    The eigenvalues of a symmetric M are real, and all are positive exactly when every coefficient of
    det(M + s I) is positive: then no s >= 0 is a root, so no eigenvalue is <= 0; conversely the
    coefficients are the elementary symmetric functions of the eigenvalues (any text on matrix analysis).
    The empty matrix is positive definite.
    """
    return is_symmetric(matrix) and (not matrix or all(e > 0 for e in _sign_pattern(matrix)))


def is_positive_semidefinite(matrix: Sequence[Sequence[Fraction]]) -> bool:
    """x' M x >= 0 for every x, decided exactly: the coefficients of det(M + s I) are non-negative."""
    return is_symmetric(matrix) and (not matrix or all(e >= 0 for e in _sign_pattern(matrix)))


def is_positive_definite_for_all(middle: Sequence[Sequence[Fraction]], radius: Sequence[Sequence[Fraction]]) -> bool:
    """Every symmetric matrix within `radius` of `middle`, entry by entry, is positive definite.

    |x'E x| <= sum |e_ij| (x_i^2 + x_j^2)/2, so it is enough that `middle` minus the diagonal matrix of the row sums of
    |E| is positive definite.  Rows and columns are first brought to diagonal entries near one, as radii of badly scaled
    matrices would drown the small ones: D M D with D > 0 is definite exactly when M is.
    """
    if not is_symmetric(middle) or any(middle[i][i] <= 0 for i in range(len(middle))):
        return False
    factors = [_root_magnitude(middle[i][i]) for i in range(len(middle))]
    scaled, reach = _congruent(middle, factors), _congruent(radius, factors)
    sums = [
        sum(map(max, row, column), Fraction(0)) for row, column in zip(reach, zip(*reach, strict=True), strict=True)
    ]
    shifted = [[v - sums[i] if i == j else v for j, v in enumerate(row)] for i, row in enumerate(scaled)]
    return is_positive_definite(shifted)


def _root_magnitude(value: Fraction) -> Fraction:
    """The inverse of a power of two within a factor of two or so of the square root of `value` > 0."""
    return Fraction(2) ** ((value.denominator.bit_length() - value.numerator.bit_length()) // 2)


def _congruent(matrix: Sequence[Sequence[Fraction]], factors: Sequence[Fraction]) -> list[list[Fraction]]:
    """D M D with D = diag(factors)."""
    return [[a * v * b for v, b in zip(row, factors, strict=True)] for row, a in zip(matrix, factors, strict=True)]


def inverse(matrix: Sequence[Sequence[Fraction]]) -> Matrix | None:
    """Exact inverse, or None for a singular matrix."""
    size = len(matrix)
    flint_matrix = _flint(matrix)
    if flint_matrix.det() == 0:
        return None
    table = flint_matrix.inv().tolist()
    return tuple(tuple(Fraction(int(table[i][j].p), int(table[i][j].q)) for j in range(size)) for i in range(size))


def quadratic_form(matrix: Sequence[Sequence[Fraction]], vector: Sequence[Fraction]) -> Fraction:
    """vector' matrix vector."""
    return sum(
        (v * m * w for v, row in zip(vector, matrix, strict=True) for m, w in zip(row, vector, strict=True)),
        Fraction(0),
    )


def root_above(value: Fraction) -> Fraction:
    """A rational at or above the square root of `value` >= 0, sharp to about 2**-ROOT_BITS."""
    if value < 0:
        raise ValueError("no real square root of a negative number")
    scale = 1 << (2 * (ROOT_BITS + max(0, value.denominator.bit_length() - value.numerator.bit_length())))
    whole = -(-value.numerator * scale // value.denominator)
    root = isqrt(whole)
    return Fraction(root if root * root == whole else root + 1, isqrt(scale))


def root_below(value: Fraction) -> Fraction:
    """A rational at or below the square root of `value` >= 0, sharp to about 2**-ROOT_BITS."""
    if value < 0:
        raise ValueError("no real square root of a negative number")
    scale = 1 << (2 * (ROOT_BITS + max(0, value.denominator.bit_length() - value.numerator.bit_length())))
    return Fraction(isqrt(value.numerator * scale // value.denominator), isqrt(scale))


def product(left: Exponents, right: Exponents) -> Exponents:
    """Exponents of the product of two monomials."""
    return tuple(a + b for a, b in zip(left, right, strict=True))


def expand(gram: Gram) -> dict[Exponents, Fraction]:
    """Coefficients of basis' matrix basis."""
    result: dict[Exponents, Fraction] = {}
    for a, row in zip(gram.basis, gram.matrix, strict=True):
        for b, value in zip(gram.basis, row, strict=True):
            if value:
                key = product(a, b)
                result[key] = result.get(key, Fraction(0)) + value
    return {e: c for e, c in result.items() if c}


def multiply(left: Mapping[Exponents, Fraction], right: Mapping[Exponents, Fraction]) -> dict[Exponents, Fraction]:
    """Product of two polynomials given by their coefficients."""
    result: dict[Exponents, Fraction] = {}
    for a, u in left.items():
        for b, v in right.items():
            key = product(a, b)
            result[key] = result.get(key, Fraction(0)) + u * v
    return {e: c for e, c in result.items() if c}


def subtract(left: Coefficients, right: Mapping[Exponents, Fraction]) -> dict[Exponents, Ball]:
    """Coefficients of left - right; `right` is exact."""
    result = dict(left)
    for exponents, value in right.items():
        ball = result.get(exponents, Ball(Fraction(0)))
        result[exponents] = Ball(ball.middle - value, ball.radius)
    return {e: b for e, b in result.items() if b.middle or b.radius}


def is_well_formed(gram: Gram, variables: int) -> bool:
    """Square matrix matching a basis of distinct monomials over `variables` variables."""
    size = len(gram.basis)
    return (
        len(set(gram.basis)) == size
        and all(len(e) == variables and min(e, default=0) >= 0 for e in gram.basis)
        and len(gram.matrix) == size
        and is_symmetric(gram.matrix)
    )


def vanishes_only_at_zero(basis: Sequence[Exponents], variables: int) -> bool:
    """The monomials of `basis` are all zero at the origin and have no other common zero.

    True when none is constant and each variable has a pure power among them.
    """
    pure = {i for e in basis for i, k in enumerate(e) if k and sum(e) == k}
    return all(any(e) for e in basis) and pure == set(range(variables))


def is_positive_gram(target: Coefficients, gram: Gram) -> bool:
    """The polynomial `target` is z' Q z with Q positive definite, for every value of its coefficient balls.

    `gram` gives z and an approximate Q.  The residual of each monomial is spread evenly over the entries
    that produce it (H. Peyrl and P. A. Parrilo, Theor. Comput. Sci. 409, 2008: projection onto the affine
    space of exact Grams); a residual monomial that no product of two basis members reaches is fatal.
    """
    residual = subtract(target, expand(gram))
    size = len(gram.basis)
    places: dict[Exponents, list[tuple[int, int]]] = {}
    for i in range(size):
        for j in range(size):
            places.setdefault(product(gram.basis[i], gram.basis[j]), []).append((i, j))
    middle = [list(row) for row in gram.matrix]
    radius = [[Fraction(0)] * size for _ in range(size)]
    for exponents, ball in residual.items():
        reached = places.get(exponents)
        if not reached:
            return False
        for i, j in reached:
            middle[i][j] += ball.middle / len(reached)
            radius[i][j] += ball.radius / len(reached)
    return is_positive_definite_for_all(middle, radius)
