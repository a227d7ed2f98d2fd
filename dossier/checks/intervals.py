"""Interval arithmetic over arrays of intervals, in round-to-nearest floating point with proved outward widening.

Soundness.  Let u = 2^-53.  For +, -, *, / and the square root IEEE 754 gives c = fl(x), the nearest
double to the exact result x.  `down` returns fl(c - e) with e = fl(fl(W |c|) + T), W = u (1 + 2u), T = 1e-300.

* Claim: fl(c - e) <= pred(c), the double below c, hence <= x, as every x below pred(c) would round to
  pred(c) or less.  Because rounding is monotone it is enough that e exceeds half the gap between c and
  pred(c), or that c - e <= pred(c).
* |c| >= 2^-960, 2^k <= |c| < 2^(k+1): W |c| is far above the subnormals, so fl(W |c|) >= W 2^k exactly
  representable = u 2^k (1 + 2u) > u 2^k by monotonicity; the half gap is at most u 2^k.  Adding T >= 0
  cannot lower e.
* |c| < 2^-960: the gap is below 2^-1012 < T, so c - e <= c - T <= pred(c).
* Underflow: then |c| < 2^-1021 and |x - c| <= 2^-1022 even where subnormal results are flushed to zero;
  T covers it.  Overflow: c is infinite, the bound infinite or nan, and `is_sound` refuses it.

`up` is the mirror image.  The idea is that of S. M. Rump, P. Zimmermann, S. Boldo and G. Melquiond,
"Computing predecessor and successor in rounding to nearest", BIT 49 (2009); the bound above is derived
here.  The rounding mode of the processor is never changed.

Unbounded and unknown ends.  An infinite end means "unbounded on that side"; nan means "unknown".  Every
function propagates nan (numpy's minimum and maximum do), and a comparison with nan is False, so an
unknown end never proves anything.
"""

from __future__ import annotations

import math
from fractions import Fraction
from typing import Final, NamedTuple, cast

import numpy as np
from numpy.typing import NDArray

from dossier.model.ball import Ball

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

UNIT: Final = 2.0**-53
WIDEN: Final = 2.0**-53 * (1 + 2.0**-52)
"""W above; exactly representable."""
TINY: Final = 1e-300
"""T above: dominates underflow, flushed or gradual, and is far below any number that matters."""


class Span(NamedTuple):
    """An array of closed intervals [lo, hi]; both arrays have the same shape."""

    lo: Array
    hi: Array


def down(value: Array) -> Array:
    """A lower bound of the exact result that was rounded to `value`."""
    return value - (WIDEN * np.abs(value) + TINY)


def up(value: Array) -> Array:
    """An upper bound of the exact result that was rounded to `value`."""
    return value + (WIDEN * np.abs(value) + TINY)


def point(value: Array) -> Span:
    """The intervals that hold one number each."""
    return Span(value, value)


def scalar(lo: float, hi: float | None = None) -> Span:
    """One interval that fits every shape; [lo, lo] without `hi`."""
    return Span(cast(Array, np.float64(lo)), cast(Array, np.float64(lo if hi is None else hi)))


def is_sound(a: Span) -> Mask:
    """Both ends finite and in order; False for nan."""
    width = a.hi - a.lo
    return (width >= 0) & (width < np.inf)


def add(a: Span, b: Span) -> Span:
    """Sums."""
    return Span(down(a.lo + b.lo), up(a.hi + b.hi))


def sub(a: Span, b: Span) -> Span:
    """Differences."""
    return Span(down(a.lo - b.hi), up(a.hi - b.lo))


def neg(a: Span) -> Span:
    """Negatives, exactly."""
    return Span(-a.hi, -a.lo)


def _not_negative(lower: Array, certain: Mask) -> Array:
    """`lower`, raised to zero where the exact result is `certain` not to be negative."""
    return np.maximum(lower, np.where(certain, 0.0, -np.inf))


def mul(a: Span, b: Span) -> Span:
    """Products: extreme values are taken at end points; two non-negative factors give a non-negative product."""
    p, q, r, s = a.lo * b.lo, a.lo * b.hi, a.hi * b.lo, a.hi * b.hi
    lower = down(np.minimum(np.minimum(p, q), np.minimum(r, s)))
    upper = up(np.maximum(np.maximum(p, q), np.maximum(r, s)))
    return Span(_not_negative(lower, (a.lo >= 0) & (b.lo >= 0)), upper)


def excludes_zero(a: Span) -> Mask:
    """Zero is not in the interval; False where an end is unknown on the side that matters."""
    return (a.lo > 0) | (a.hi < 0)


def div(a: Span, b: Span) -> Span:
    """Quotients; unbounded where the divisor may be zero."""
    regular = excludes_zero(b)
    with np.errstate(all="ignore"):
        p, q, r, s = a.lo / b.lo, a.lo / b.hi, a.hi / b.lo, a.hi / b.hi
        lower = down(np.minimum(np.minimum(p, q), np.minimum(r, s)))
        upper = up(np.maximum(np.maximum(p, q), np.maximum(r, s)))
    lower = _not_negative(lower, (a.lo >= 0) & (b.lo > 0))
    return Span(np.where(regular, lower, -np.inf), np.where(regular, upper, np.inf))


def absolute(a: Span) -> Span:
    """Absolute values, exactly."""
    left, right = np.abs(a.lo), np.abs(a.hi)
    smallest = np.where((a.lo <= 0) & (a.hi >= 0), 0.0, np.minimum(left, right))
    return Span(smallest, np.maximum(left, right))


def square(a: Span) -> Span:
    """Squares; never negative."""
    size = absolute(a)
    return Span(np.maximum(down(size.lo * size.lo), 0.0), up(size.hi * size.hi))


def power(a: Span, exponent: int) -> Span:
    """Whole powers with exponent at least 1, monotone in |a|.  Raises ValueError for other exponents."""
    if exponent < 1:
        raise ValueError("only whole powers from 1 on")
    if exponent % 2 == 0:
        return _power_of_size(absolute(a), exponent)
    left = _power_of_size(point(np.abs(a.lo)), exponent)
    right = _power_of_size(point(np.abs(a.hi)), exponent)
    return Span(np.where(a.lo >= 0, left.lo, -left.hi), np.where(a.hi >= 0, right.hi, -right.lo))


def _power_of_size(size: Span, exponent: int) -> Span:
    """Powers of non-negative intervals by squaring and multiplying, each step rounded outward."""
    result: Span | None = None
    factor = size
    while exponent:
        if exponent % 2:
            result = factor if result is None else _product_of_sizes(result, factor)
        exponent //= 2
        if exponent:
            factor = _product_of_sizes(factor, factor)
    return size if result is None else result


def _product_of_sizes(a: Span, b: Span) -> Span:
    return Span(np.maximum(down(a.lo * b.lo), 0.0), up(a.hi * b.hi))


def sqrt(a: Span) -> Span:
    """Square roots of the part that is not negative; nan where there is none.  IEEE square roots round correctly."""
    with np.errstate(all="ignore"):
        lower = down(np.sqrt(np.maximum(a.lo, 0.0)))
        return Span(np.maximum(lower, 0.0), up(np.sqrt(a.hi)))


def maximum(a: Span, b: Span) -> Span:
    """The greater of two numbers, exactly."""
    return Span(np.maximum(a.lo, b.lo), np.maximum(a.hi, b.hi))


def minimum(a: Span, b: Span) -> Span:
    """The smaller of two numbers, exactly."""
    return Span(np.minimum(a.lo, b.lo), np.minimum(a.hi, b.hi))


def middle(a: Span) -> Array:
    """A number near the centre of each interval, inside it."""
    return np.clip(0.5 * (a.lo + a.hi), a.lo, a.hi)


def reach(a: Span, centre: Array) -> Array:
    """Upper bound of the distance from `centre` to any point of the interval."""
    return up(np.maximum(a.hi - centre, centre - a.lo))


def bounds_of_fraction(value: Fraction) -> tuple[float, float]:
    """The tightest doubles below and above `value`; equal where it is a double, infinite beyond the range."""
    try:
        nearest = float(value)
    except OverflowError:
        largest = math.nextafter(math.inf, 0.0)
        return (largest, math.inf) if value > 0 else (-math.inf, -largest)
    exact = Fraction(nearest)
    return (
        nearest if exact <= value else math.nextafter(nearest, -math.inf),
        nearest if exact >= value else math.nextafter(nearest, math.inf),
    )


def bounds_of_ball(ball: Ball) -> tuple[float, float]:
    """The tightest doubles around `ball`."""
    return bounds_of_fraction(ball.lower)[0], bounds_of_fraction(ball.upper)[1]


def span_of(value: Fraction | Ball) -> Span:
    """A number as a scalar interval of doubles, rounded outward."""
    return scalar(*bounds_of_ball(value if isinstance(value, Ball) else Ball(value)))
