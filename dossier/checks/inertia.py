"""How many roots of a real polynomial lie left of, on and right of the imaginary axis, exactly.

Right in every singular case: zeros in the first column, rows of zeros, roots symmetric about the origin,
multiple roots on the axis, roots at infinity (from the bilinear map).  E. J. Routh 1877; A. Hurwitz 1895;
F. R. Gantmacher, Theory of Matrices, vol. 2, chapter XV (Cauchy indices by Sturm chains; from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from math import gcd

from flint import fmpq, fmpq_poly, fmpz_poly

from dossier.checks.sturm import positive_roots
from dossier.model.ball import to_fraction
from dossier.model.linear_part import Number, sign_of


@dataclass(frozen=True, slots=True)
class Inertia:
    """Roots counted with multiplicity; `boundary` includes roots at infinity."""

    inside: int
    boundary: int
    outside: int


def inertia(polynomial: Sequence[Number]) -> Inertia | None:
    """Counts for a polynomial given highest power first; None where balls do not decide.

    A leading zero is a root at infinity (z = -1 before the bilinear map) and lies on the boundary.
    Raises ValueError for the zero polynomial.
    """
    exact = [c for c in polynomial if isinstance(c, fmpq)]
    return _exact(exact) if len(exact) == len(polynomial) else _by_routh(polynomial)


def _exact(polynomial: Sequence[fmpq]) -> Inertia:
    whole = fmpq_poly(list(reversed(polynomial)))
    if whole == 0:
        raise ValueError("the zero polynomial has no inertia")
    at_infinity = len(polynomial) - 1 - whole.degree()
    symmetric = whole.gcd(_mirrored(whole))
    rest = whole / symmetric if symmetric.degree() > 0 else whole
    left, right = _without_symmetric_roots(fmpq_poly(rest.coeffs()) if isinstance(rest, fmpq_poly) else rest)
    axis = _on_axis(symmetric)
    paired = (symmetric.degree() - axis) // 2
    return Inertia(left + paired, axis + at_infinity, right + paired)


def _mirrored(polynomial: fmpq_poly) -> fmpq_poly:
    """p(-s)."""
    return fmpq_poly([c * (-1) ** i for i, c in enumerate(polynomial.coeffs())])


def _without_symmetric_roots(polynomial: fmpq_poly) -> tuple[int, int]:
    """(left, right) of a polynomial that shares no root with p(-s), hence has none on the axis.

    p(jw) (-j)^n = A(w) + jB(w) with real A of degree n and B of lower degree.  The argument grows by
    pi (left - right) from w = -inf to inf, which is -pi times the Cauchy index of B/A, which is the
    loss of sign variations of the Sturm chain A, B, ... from -inf to inf.
    """
    degree = polynomial.degree()
    if degree <= 0:
        return 0, 0
    real: list[fmpq] = [fmpq(0)] * (degree + 1)
    imaginary: list[fmpq] = [fmpq(0)] * (degree + 1)
    for k, c in enumerate(polynomial.coeffs()):
        turn = (k - degree) % 4  # j^k (-j)^n = j^(k - n)
        part, sign = ((real, 1), (imaginary, 1), (real, -1), (imaginary, -1))[turn]
        part[k] = part[k] + sign * c
    chain = [fmpq_poly(real), fmpq_poly(imaginary)]
    while chain[-1] != 0:
        chain.append(-(chain[-2] % chain[-1]))
    signs = [(1 if p.leading_coefficient() > 0 else -1, p.degree()) for p in chain if p != 0]
    at_minus = _changes([s * (-1) ** d for s, d in signs])
    at_plus = _changes([s for s, _ in signs])
    difference = at_plus - at_minus
    return (degree + difference) // 2, (degree - difference) // 2


def _changes(signs: Sequence[int]) -> int:
    return sum(a != b for a, b in pairwise(signs))


def _on_axis(symmetric: fmpq_poly) -> int:
    """Roots on the imaginary axis of h with h(s) = +-h(-s): zeros of s^k H(s^2) with H's roots W <= 0."""
    if symmetric.degree() <= 0:
        return 0
    coefficients = symmetric.coeffs()
    zeros = next(i for i, c in enumerate(coefficients) if c != 0)
    squared = fmpq_poly(coefficients[zeros::2])
    count = zeros
    _, factors = _to_integers(squared).factor_squarefree()
    for factor, multiplicity in factors:
        count += 2 * multiplicity * _negative_roots(factor)
    return count


def _to_integers(polynomial: fmpq_poly) -> fmpz_poly:
    return (polynomial * polynomial.denom()).numer()


def _negative_roots(factor: fmpz_poly) -> int:
    """Distinct negative real roots, by a Sturm chain on the mirrored polynomial (no root at zero)."""
    if factor.degree() < 1:
        return 0
    return positive_roots([fmpq(int(c) * (-1) ** i) for i, c in enumerate(factor.coeffs())])


def _by_routh(polynomial: Sequence[Number]) -> Inertia | None:
    """The inertia shared by all polynomials within the balls, where Routh's array in ball arithmetic decides it.

    Exact trailing zeros are roots at 0, exact leading zeros roots at infinity.  A whole row of exact zeros
    (coefficients that vanish by structure) means that the row above is an even or odd polynomial q that divides p;
    the row becomes the derivative of q, and every sign change from there on is one root to the right with a
    mirror image to the left (Routh's second singular case; Gantmacher, vol. 2, chapter XV).  Only one such row is
    taken, and no undecided sign.
    """
    coefficients = list(polynomial)
    boundary = 0
    for end in (0, -1):
        while len(coefficients) > 1 and coefficients[end] == 0:
            coefficients.pop(end)
            boundary += 1
    column = _first_column(coefficients)
    if column is None:
        return None
    signs, symmetric_from = column
    degree = len(coefficients) - 1
    outside = _changes(signs)
    if symmetric_from is not None:
        axis = degree - symmetric_from - 2 * _changes(signs[symmetric_from:])
        return Inertia(degree - outside - axis, boundary + axis, outside)
    return Inertia(degree - outside, boundary, outside)


def _first_column(coefficients: Sequence[Number]) -> tuple[list[int], int | None] | None:
    """Signs of the first column, and the row of the even or odd divisor where a row vanished exactly."""
    upper, lower = list(coefficients[0::2]), list(coefficients[1::2])
    degree = len(coefficients) - 1
    signs, singular = [sign_of(upper[0])], None
    for power in range(degree, 0, -1):
        if all(v == 0 for v in lower):
            if singular is not None:
                return None
            singular = degree - power
            lower = [v * (power - 2 * i) for i, v in enumerate(upper) if power - 2 * i > 0]
        signs.append(sign_of(lower[0]))
        if not all(signs):
            return None
        ratio = upper[0] / lower[0]
        padded = [*lower, *[fmpq(0)] * (len(upper) - len(lower))]
        upper, lower = lower, [upper[i + 1] - ratio * padded[i + 1] for i in range(len(upper) - 1)]
    decided = [s for s in signs if s]
    return (decided, singular) if len(decided) == degree + 1 else None


def routh_rows(polynomial: Sequence[Number]) -> list[list[Number]]:
    """Rows of Routh's array, cut short after the first whose leading entry is not proved non-zero."""
    upper, lower = list(polynomial[0::2]), list(polynomial[1::2])
    rows = [upper]
    while sign_of(rows[-1][0]) in (-1, 1) and lower:
        rows.append(lower)
        if sign_of(lower[0]) not in (-1, 1):
            break
        ratio = upper[0] / lower[0]
        following = [
            upper[i + 1] - ratio * lower[i + 1] if i + 1 < len(lower) else upper[i + 1] for i in range(len(upper) - 1)
        ]
        upper, lower = lower, following
    return rows


def integer_array(polynomial: Sequence[Number]) -> tuple[tuple[int, ...], ...]:
    """The regular Routh array with each row scaled by a positive number to coprime integers; () where irregular."""
    if not all(isinstance(c, fmpq) for c in polynomial):
        return ()
    rows = routh_rows(polynomial)
    if len(rows) != len(polynomial) or any(row[0] == 0 for row in rows):
        return ()
    result = []
    for row in rows:
        fractions = [to_fraction(c) for c in row if isinstance(c, fmpq)]
        scale = 1
        for value in fractions:
            scale = scale * value.denominator // gcd(scale, value.denominator)
        whole = [int(v * scale) for v in fractions]
        common = gcd(*whole) or 1
        result.append(tuple(v // common for v in whole))
    return tuple(result)
