"""A loop on the boundary s = jw, as real polynomials in W = w^2.

With p(jw) = E(W) + jw O(W) for a, c and a + c:  c conj(a) = X(W) + jw Y(W),
X = Ec Ea + W Oc Oa,  Y = Oc Ea - Ec Oa,  |p|^2 = E^2 + W O^2.
Polynomials are lists of numbers, lowest power first.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from flint import acb, arb, fmpq

from dossier.checks.sturm import evaluate_at
from dossier.model.ball import Ball, enclose, to_fmpq
from dossier.model.linear_part import Number

Coefficients = list[Number]


def number_of(ball: Ball) -> Number:
    """The exact rational, or an enclosure."""
    return to_fmpq(ball.middle) if ball.is_exact else enclose(ball)


@dataclass(frozen=True)
class BoundaryPart:
    """One polynomial p on the boundary: p(jw) = even(W) + jw odd(W)."""

    even: Coefficients
    odd: Coefficients

    @classmethod
    def of(cls, polynomial: Sequence[Number]) -> BoundaryPart:
        """From coefficients, lowest power of s first."""
        return cls(
            [v * (-1) ** i for i, v in enumerate(polynomial[0::2])],
            [v * (-1) ** i for i, v in enumerate(polynomial[1::2])],
        )

    def square(self) -> Coefficients:
        """|p(jw)|^2."""
        return add(multiply(self.even, self.even), raised(multiply(self.odd, self.odd)))

    def value(self, at: arb) -> acb:
        """p(jw) at W = `at` >= 0."""
        return acb(arb(evaluate_at(self.even, at)), at.sqrt() * evaluate_at(self.odd, at))


@dataclass(frozen=True)
class LoopOnBoundary:
    """a, c and a + c on the boundary; `first` and `last` are their coefficients at w = 0 and w = infinity.

    `gain_crossing` is Y, `real` is X, `phase_crossing` |a|^2 - |c|^2 and `peak` the numerator of d|S|^2/dW.
    """

    opened: BoundaryPart
    gain: BoundaryPart
    closed: BoundaryPart
    first: tuple[Number, Number, Number]
    last: tuple[Number, Number, Number]
    real: Coefficients
    gain_crossing: Coefficients
    phase_crossing: Coefficients
    peak: Coefficients


def on_boundary(opened: Sequence[Ball], gain: Sequence[Ball], closed: Sequence[Ball]) -> LoopOnBoundary:
    """From the coefficients of a, c and a + c, highest power of s first, all of one length."""
    lists = [[number_of(b) for b in reversed(p)] for p in (opened, gain, closed)]
    a, c, total = (BoundaryPart.of(p) for p in lists)
    real = add(multiply(c.even, a.even), raised(multiply(c.odd, a.odd)))
    imaginary = add(multiply(c.odd, a.even), negated(multiply(c.even, a.odd)))
    open_square, gain_square = a.square(), c.square()
    added = add(gain_square, [2 * v for v in real])
    return LoopOnBoundary(
        a,
        c,
        total,
        (lists[0][0], lists[1][0], lists[2][0]),
        (lists[0][-1], lists[1][-1], lists[2][-1]),
        real,
        imaginary,
        add(open_square, negated(gain_square)),
        quotient_slope(open_square, added),
    )


def quotient_slope(part: Coefficients, rest: Coefficients) -> Coefficients:
    """Numerator of d/dW of part/(part + rest): part' rest - part rest'.

    The coefficient of W^k is the sum over i + j = k + 1 of (i - j) part_i rest_j, so that leading terms
    that cancel do so exactly, for balls too.
    """
    result: Coefficients = [fmpq(0)] * max(1, len(part) + len(rest) - 2)
    for i, u in enumerate(part):
        for j, v in enumerate(rest):
            if i != j:
                result[i + j - 1] = result[i + j - 1] + (i - j) * u * v
    return result


def add(left: Coefficients, right: Coefficients) -> Coefficients:
    """Sum of two polynomials."""
    length = max(len(left), len(right))
    zero = fmpq(0)
    return [(left[i] if i < len(left) else zero) + (right[i] if i < len(right) else zero) for i in range(length)]


def negated(polynomial: Coefficients) -> Coefficients:
    """Minus a polynomial."""
    return [-v for v in polynomial]


def multiply(left: Coefficients, right: Coefficients) -> Coefficients:
    """Product; a factor that is an exact zero leaves an exact zero."""
    result: Coefficients = [fmpq(0)] * max(0, len(left) + len(right) - 1)
    for i, u in enumerate(left):
        for j, v in enumerate(right):
            result[i + j] = result[i + j] + u * v
    return result


def raised(polynomial: Coefficients) -> Coefficients:
    """W times a polynomial."""
    return [fmpq(0), *polynomial]
