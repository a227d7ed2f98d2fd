"""Positive real roots of one polynomial: that a list of intervals isolates all of them, and how they are refined.

A polynomial is a list of numbers, lowest power first: all rational (then roots are counted by Sturm's
theorem), or partly balls (then by Descartes' rule of signs on Moebius-transformed coefficients, valid
for every polynomial in the balls).  Only simple roots exist after the square-free part is taken; balls
allow none, so a double root there stays undecided.
Sources: J. C. F. Sturm 1829; R. Descartes' rule and A. J. H. Vincent 1836 as in G. E. Collins and
A. G. Akritas, SYMSAC 1976.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import pairwise
from math import comb
from typing import Final, cast

from flint import fmpq, fmpq_poly, fmpz_poly

from dossier.model.ball import to_fmpq
from dossier.model.claim import Crossing
from dossier.model.linear_part import Number, sign_of

Polynomial = Sequence[Number]

GAP_PIECES: Final = 2_000
"""Most pieces into which the gaps between listed roots are cut; a gap that needs more is undecided."""

REFINEMENT: Final = Fraction(1, 10**30)
"""Relative width at which refinement stops: values of about 18 digits are printed from it."""

REFINEMENT_STEPS: Final = 400
"""Bisections per root; 30 decimals need 100, the rest is room for wide first intervals."""

SPLITS: Final = (Fraction(1, 2), Fraction(3, 8), Fraction(5, 8))
"""Where an interval is tried to be cut: a ball's sign can be undecided at one point, not easily at three."""


@dataclass(frozen=True, slots=True)
class Recount:
    """Whether the listed intervals hold every positive root, one each; `reason` says why not."""

    holds: bool
    reason: str = ""


def is_exact(polynomial: Polynomial) -> bool:
    """All coefficients are rational numbers."""
    return all(isinstance(c, fmpq) for c in polynomial)


def is_zero(polynomial: Polynomial) -> bool:
    """All coefficients are exact zeros."""
    return all(c == 0 for c in polynomial)


def reduced(polynomial: Polynomial) -> list[Number]:
    """The square-free part (rational case) without exact zero leading coefficients and zero roots."""
    coefficients = list(polynomial)
    while coefficients and coefficients[-1] == 0:
        coefficients.pop()
    while coefficients and coefficients[0] == 0:
        coefficients.pop(0)
    if len(coefficients) > 1 and is_exact(coefficients):
        p = _rational(coefficients)
        return [*(p / p.gcd(p.derivative())).coeffs()]
    return coefficients


def common_part(left: Polynomial, right: Polynomial) -> list[Number]:
    """Greatest common divisor of two rational polynomials."""
    return [*_rational(left).gcd(_rational(right)).coeffs()]


def _rational(polynomial: Polynomial) -> fmpq_poly:
    return fmpq_poly(cast(list[fmpq], list(polynomial)))


def isolates(polynomial: Polynomial, intervals: Sequence[Crossing]) -> Recount:
    """Prove that `intervals` hold exactly one positive root of `reduced` polynomial each, and all of them.

    Intervals are closed, positive, disjoint and increasing; a degenerate one is an exact root.
    """
    bounds = [b for i in intervals for b in (i.lower, i.upper)]
    if any(b <= 0 for b in bounds) or any(i.lower > i.upper for i in intervals):
        return Recount(False, "an interval is not positive")
    if any(a.upper >= b.lower for a, b in pairwise(intervals)):
        return Recount(False, "intervals overlap or are out of order")
    if not polynomial:
        return Recount(not intervals, "roots are listed of a polynomial that is zero" if intervals else "")
    return _sturm_recount(polynomial, intervals) if is_exact(polynomial) else _descartes_recount(polynomial, intervals)


def _sturm_recount(polynomial: Polynomial, intervals: Sequence[Crossing]) -> Recount:
    for interval in intervals:
        if not has_sign_change(polynomial, interval):
            return Recount(False, f"no sign change between {interval.lower} and {interval.upper}")
    count = positive_roots(polynomial)
    if count != len(intervals):
        return Recount(False, f"{len(intervals)} roots are listed, Sturm's theorem counts {count}")
    return Recount(True)


def has_sign_change(polynomial: Polynomial, interval: Crossing) -> bool:
    """A root lies in `interval`: the polynomial changes sign over it, or is zero at a degenerate one."""
    if interval.lower == interval.upper:
        return sign_at(polynomial, interval.lower) == 0
    ends = sign_at(polynomial, interval.lower), sign_at(polynomial, interval.upper)
    return ends in ((-1, 1), (1, -1))


def sign_at(polynomial: Polynomial, point: Fraction) -> int | None:
    """Sign of the polynomial at a rational point; None where its balls do not decide."""
    return sign_of(evaluate_at(polynomial, to_fmpq(point)))


def evaluate_at(polynomial: Polynomial, point: Number) -> Number:
    """Horner's rule; a ball if the point or any coefficient is one."""
    total: Number = fmpq(0)
    for coefficient in reversed(polynomial):
        total = total * point + coefficient
    return total


def sturm_chain(polynomial: Polynomial) -> list[fmpz_poly]:
    """p, p' and the negated remainders, each made primitive by a positive factor."""
    p = _rational(polynomial)
    chain = [p, p.derivative()]
    while chain[-1].degree() > 0:
        remainder = -(chain[-2] % chain[-1])
        if remainder.is_zero():
            break
        chain.append(fmpq_poly(_primitive(remainder)))
    return [_primitive(q) for q in chain if not q.is_zero()]


def _primitive(polynomial: fmpq_poly) -> fmpz_poly:
    numerator = polynomial.numer()
    return numerator / numerator.content() if numerator.content() > 1 else numerator


def positive_roots(polynomial: Polynomial) -> int:
    """Number of distinct roots in (0, infinity) of a rational polynomial that is not zero at 0 (Sturm 1829)."""
    chain = sturm_chain(polynomial)
    return _changes(q[0] for q in chain) - _changes(q.leading_coefficient() for q in chain)


def roots_between(polynomial: Polynomial, lower: Fraction, upper: Fraction) -> int:
    """Number of distinct roots in (lower, upper] of a rational polynomial that is not zero (Sturm 1829)."""
    chain = sturm_chain(polynomial)
    low, high = to_fmpq(lower), to_fmpq(upper)
    return _changes(q(low) for q in chain) - _changes(q(high) for q in chain)


def _changes(values: Iterator) -> int:
    signs = [v > 0 for v in values if v != 0]
    return sum(a != b for a, b in pairwise(signs))


def _descartes_recount(polynomial: Polynomial, intervals: Sequence[Crossing]) -> Recount:
    if sign_of(polynomial[-1]) is None or sign_of(polynomial[0]) is None:
        return Recount(False, "a root near zero or infinity is not excluded: the end coefficient may vanish")
    budget = GAP_PIECES
    start = Fraction(0)
    for interval in intervals:
        if not has_sign_change(polynomial, interval):
            return Recount(False, f"no proved sign change between {interval.lower} and {interval.upper}")
        if variations(on_interval(polynomial, interval.lower, interval.upper)) != (1, 1):
            return Recount(False, f"not proved one simple root between {interval.lower} and {interval.upper}")
        budget = _empty_gap(polynomial, start, interval.lower, budget)
        start = interval.upper
    budget = _empty_gap(polynomial, start, None, budget)
    return Recount(True) if budget > 0 else Recount(False, "a further root between the listed ones is not excluded")


def _empty_gap(polynomial: Polynomial, lower: Fraction, upper: Fraction | None, budget: int) -> int:
    """Prove that no root lies strictly between the bounds; the budget left, 0 or less when it is not proved."""
    stack = [(lower, upper)]
    while stack and budget > 0:
        low, high = stack.pop()
        budget -= 1
        if variations(on_interval(polynomial, low, high)) == (0, 0):
            continue
        middle = (low + high) / 2 if high is not None else 2 * low + 1
        if sign_at(polynomial, middle) in (None, 0):
            middle = low + (middle - low) * Fraction(3, 4)
            if sign_at(polynomial, middle) in (None, 0):
                return 0
        stack += [(low, middle), (middle, high)]
    return budget if not stack else 0


def on_interval(polynomial: Polynomial, lower: Fraction, upper: Fraction | None) -> list[Number]:
    """Coefficients in t of p(lower + t), or of (1 + t)^n p((lower + upper t)/(1 + t)): t > 0 is the open interval."""
    shifted = _taylor(polynomial, to_fmpq(lower))
    if upper is None:
        return shifted
    width, degree = to_fmpq(upper - lower), len(shifted) - 1
    result: list[Number] = [fmpq(0)] * (degree + 1)
    scale = fmpq(1)
    for i, coefficient in enumerate(shifted):
        for j in range(degree - i + 1):
            result[i + j] = result[i + j] + coefficient * (scale * comb(degree - i, j))
        scale *= width
    return result


def _taylor(polynomial: Polynomial, point: fmpq) -> list[Number]:
    """Coefficients of p(point + t) by repeated synthetic division."""
    values = list(polynomial)
    for i in range(len(values) - 1):
        for j in range(len(values) - 2, i - 1, -1):
            values[j] = values[j] + point * values[j + 1]
    return values


def variations(coefficients: Sequence[Number]) -> tuple[int, int]:
    """Least and greatest number of sign variations over all values in the coefficients' balls."""
    reach: dict[int, tuple[int, int]] = {0: (0, 0)}
    for coefficient in coefficients:
        sign = sign_of(coefficient)
        following: dict[int, tuple[int, int]] = {}
        for last, (least, most) in reach.items():
            for new in (-1, 0, 1) if sign is None else (sign,):
                change = int(new * last < 0)
                low, high = following.get(new or last, (least + change, most + change))
                following[new or last] = min(low, least + change), max(high, most + change)
        reach = following
    return min(r[0] for r in reach.values()), max(r[1] for r in reach.values())


def refine(polynomial: Polynomial, interval: Crossing) -> Crossing:
    """A smaller interval around the one root in `interval`, by bisection on proved signs."""
    lower, upper = interval.lower, interval.upper
    if lower == upper:
        return interval
    rising = sign_at(polynomial, upper) == 1
    for _ in range(REFINEMENT_STEPS):
        if upper - lower <= REFINEMENT * upper:
            break
        cut = _cut(polynomial, lower, upper)
        if cut is None:
            break
        point, sign = cut
        if sign == 0:
            return Crossing(point, point)
        lower, upper = (lower, point) if (sign == 1) == rising else (point, upper)
    return Crossing(lower, upper)


def _cut(polynomial: Polynomial, lower: Fraction, upper: Fraction) -> tuple[Fraction, int] | None:
    for share in SPLITS:
        point = lower + (upper - lower) * share
        sign = sign_at(polynomial, point)
        if sign is not None:
            return point, sign
    return None
