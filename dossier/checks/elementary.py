"""Elementary functions over arrays of intervals, from + - * / and the square root only: no library function.

Library functions are off by up to 2 units in the last place and change with the processor, so they
prove nothing.  Each kernel below reduces its argument (W. J. Cody and W. Waite, Software Manual for the
Elementary Functions, 1980), sums a Taylor polynomial with Horner's rule and adds a bound of the error
that is derived in the comment beside it.  u = 2^-53; every rounded operation gives fl(x) with
|fl(x) - x| <= u |fl(x)|; terms of size u^2 are covered by the margin between derived and used constant.
"""

from __future__ import annotations

import math
from fractions import Fraction
from typing import Final

import numpy as np
from flint import arb
from numpy.typing import NDArray

from dossier.checks import intervals as iv
from dossier.checks.intervals import UNIT, Array, Span, bounds_of_fraction, down, up
from dossier.model.ball import WORKING_BITS, from_arb, precision

SPLIT_BITS: Final = 32
"""Bits of the leading parts of pi/2: times |k| < 2^20 they stay exact in 53 bits."""
LN2_BITS: Final = 40
"""Bits of the leading part of log 2: times |k| < 2^11 it stays exact."""
LARGEST_ANGLE: Final = 1.0e6
"""Beyond it sin and cos are enclosed by [-1, 1]; |k| = |x| 2/pi < 2^20 below it."""
LEAST_EXPONENT: Final = -700.0
GREATEST_EXPONENT: Final = 709.0
"""Range of the exponential kernel: |k| <= 1023 and 2^k stays a normal number."""
SMALLEST_NORMAL: Final = 2.0**-1022


def _exact(value: arb) -> tuple[Fraction, Fraction]:
    ball = from_arb(value)
    if ball is None:
        raise ArithmeticError("a constant has no finite value")
    return ball.lower, ball.upper


def _bounds(value: arb) -> tuple[float, float]:
    lower, upper = _exact(value)
    return bounds_of_fraction(lower)[0], bounds_of_fraction(upper)[1]


def _leading_part(value: Fraction, bits: int) -> float:
    """`value` > 0 cut to its first `bits` bits, exactly a double."""
    exponent = math.frexp(float(value))[1] - bits
    scale = Fraction(2) ** exponent
    return float(math.floor(value / scale) * scale)


with precision(WORKING_BITS):
    _HALF_PI, _LN2 = arb.pi() / 2, arb(2).log()
    HALF_PI: Final = _bounds(_HALF_PI)
    LN2: Final = _bounds(_LN2)
    _half_pi, _ln2 = _exact(_HALF_PI)[0], _exact(_LN2)[0]

# pi/2 = P1 + P2 + P3 + d3 and log 2 = L1 + L2 + d2 with |d3| <= u |P3|, |d2| <= u |L2| (to 2^-250 relative,
# the width of the enclosures above, covered by the margins).
P1: Final = _leading_part(_half_pi, SPLIT_BITS)
P2: Final = _leading_part(_half_pi - Fraction(P1), SPLIT_BITS)
P3: Final = float(_half_pi - Fraction(P1) - Fraction(P2))
L1: Final = _leading_part(_ln2, LN2_BITS)
L2: Final = float(_ln2 - Fraction(L1))
TWO_OVER_PI: Final = float(1 / _half_pi)
ONE_OVER_LN2: Final = float(1 / _ln2)
ONE_OVER_TWO_PI: Final = float(1 / (4 * _half_pi))
QUARTER_TURN: Final = float(_half_pi)

# Taylor coefficients, each rounded to nearest.
_SIN: Final = [float(Fraction((-1) ** k, math.factorial(2 * k + 1))) for k in range(1, 10)]  # r^3 .. r^19
_COS: Final = [float(Fraction((-1) ** k, math.factorial(2 * k))) for k in range(2, 11)]  # r^4 .. r^20
_EXP: Final = [float(Fraction(1, math.factorial(k))) for k in range(2, 16)]  # r^2 .. r^15
_LOG: Final = [float(Fraction(1, 2 * k + 1)) for k in range(1, 13)]  # s^3 .. s^25
_ATAN: Final = [bounds_of_fraction(Fraction((-1) ** k, 2 * k + 1)) for k in range(14)]  # t .. t^27

# Used constants; the comments of the kernels derive smaller ones.
REDUCTION: Final = 1.08 * UNIT
SIN_ERROR: Final = 3 * UNIT
COS_ERROR: Final = 4 * UNIT
EXP_ERROR: Final = 4 * UNIT
EXPM1_ERROR: Final = 4 * UNIT
LOG_ERROR: Final = 10 * UNIT
ATAN_REMAINDER: Final = 1e-21


def _horner(coefficients: list[float], z: Array) -> Array:
    """coefficients[0] + z coefficients[1] + ..., one multiplication and one addition per coefficient."""
    total = np.full_like(z, coefficients[-1])
    for coefficient in coefficients[-2::-1]:
        total *= z
        total += coefficient
    return total


def _sincos_points(x: Array) -> tuple[Span, Span]:
    """Enclosures of sin and cos at points.

    Reduction.  k = rint(x 2/pi), r = x - k pi/2.  k P1 and k P2 are exact, so c differs from r by the
    rounding of three subtractions, of the product k P3, and by k d3:
    |c - r| <= u (|t1| + |t2| + |c| + 2.01 |t3|) =: rho.  For k = 0, c = x exactly.
    |x 2/pi - k| <= 1/2 + 2u |x| 2/pi, hence |r| <= 0.7854 + 1e-9 and |c| <= 0.786, z = c^2 <= 0.618.

    sin c = c + c z S(z), |S| <= 1/6.  Cut after c^19: 0.786^20/21! < 2e-22 relative to c.  Rounding of S:
    coefficient and last addition u/6 each, the rest below 0.03 u, so 2.3 u relative; with z, two
    products: 5.4 u relative on a term of at most 0.103 |c|; last addition u |s|.  Sum: 1.6 u |c| < 3 u |c|.
    cos c = (1 - z/2) + z^2 C(z), |C| <= 1/24, z^2 <= 0.382.  Cut after c^20: 0.786^22/22! < 1e-23.
    Rounding of z: 0.31 u in z/2; 1 - z/2: u; z^2 C: 6.3 u times 0.016; last addition u.  Sum: 2.5 u < 4 u.
    |sin r - sin c| and |cos r - cos c| are at most |r - c| <= rho.
    """
    inside = np.abs(x) <= LARGEST_ANGLE
    x = np.where(inside, x, 0.0)
    k = np.rint(x * TWO_OVER_PI)
    t1 = x - k * P1
    t2 = t1 - k * P2
    t3 = k * P3
    c = t2 - t3
    rho = np.where(k != 0, REDUCTION * (np.abs(t1) + np.abs(t2) + np.abs(c)) + 2.1 * REDUCTION * np.abs(t3), 0.0)
    z = c * c
    sine = c + c * (z * _horner(_SIN, z))
    cosine = (1.0 - 0.5 * z) + (z * z) * _horner(_COS, z)
    sine_error, cosine_error = SIN_ERROR * np.abs(c) + rho, COS_ERROR + rho
    quadrant = k.astype(np.int64) & 3
    swap = (quadrant & 1) == 1
    first, first_error = np.where(swap, cosine, sine), np.where(swap, cosine_error, sine_error)
    second, second_error = np.where(swap, sine, cosine), np.where(swap, sine_error, cosine_error)
    first = np.where(quadrant > 1, -first, first)
    second = np.where((quadrant == 1) | (quadrant == 2), -second, second)  # noqa: PLR2004 - quadrants of the circle
    return _clipped(first, first_error, inside), _clipped(second, second_error, inside)


def _clipped(value: Array, error: Array, inside: NDArray[np.bool_]) -> Span:
    """[value - error, value + error] within [-1, 1]; all of [-1, 1] where not `inside`."""
    lower = np.maximum(down(value - up(error)), -1.0)
    upper = np.minimum(up(value + up(error)), 1.0)
    # value - up(error) is one rounded subtraction of an upper bound of the error; `down` covers its rounding.
    return Span(np.where(inside, lower, -1.0), np.where(inside, upper, 1.0))


FULL_TURN: Final = 6.2
"""Intervals wider than this (below 2 pi) are given the full range."""
TURN_MARGIN: Final = 1e-12
"""Relative slack of the test for an extremum inside; its rounding errors are below 1e-15 relative."""


def _with_extrema(ends: tuple[Span, Span], a: Span, peak: float, trough: float) -> Span:
    """Hull of both end values, raised to 1 (lowered to -1) unless a peak + 2 pi k (trough) is surely outside."""
    lower, upper = np.minimum(ends[0].lo, ends[1].lo), np.maximum(ends[0].hi, ends[1].hi)
    narrow = (a.hi - a.lo) < FULL_TURN
    return Span(
        np.where(_misses(a, trough) & narrow, lower, -1.0),
        np.where(_misses(a, peak) & narrow, upper, 1.0),
    )


def _misses(a: Span, offset: float) -> NDArray[np.bool_]:
    """No offset + 2 pi k lies in the interval; False where unsure."""
    left, right = (a.lo - offset) * ONE_OVER_TWO_PI, (a.hi - offset) * ONE_OVER_TWO_PI
    slack = TURN_MARGIN * (1.0 + np.abs(left) + np.abs(right))
    return np.floor(right + slack) < np.ceil(left - slack)


def sin(a: Span) -> Span:
    """Sines."""
    ends = _sincos_points(a.lo)[0], _sincos_points(a.hi)[0]
    return _with_extrema(ends, a, QUARTER_TURN, -QUARTER_TURN)


def cos(a: Span) -> Span:
    """Cosines."""
    ends = _sincos_points(a.lo)[1], _sincos_points(a.hi)[1]
    return _with_extrema(ends, a, 0.0, 2 * QUARTER_TURN)


def tan(a: Span) -> Span:
    """Tangents; unbounded unless the interval surely lies between two poles, where tan is monotone."""
    regular = iv.excludes_zero(cos(a))
    left, right = (iv.div(*_sincos_points(end)) for end in (a.lo, a.hi))
    return Span(np.where(regular, left.lo, -np.inf), np.where(regular, right.hi, np.inf))


def _power_of_two(k: Array) -> Array:
    """2^k for whole k in [-1022, 1023], by writing the exponent bits."""
    return ((k.astype(np.int64) + 1023) << 52).view(np.float64)


def _exp_points(x: Array) -> Span:
    """Enclosures of exp at points.

    k = rint(x / log 2), r = x - k log 2; k L1 is exact, so |c - r| <= u (|t1| + |c| + 2.01 |t2|) =: rho and
    |c| <= 0.3467, z = c^2 <= 0.1203.  exp c = 1 + (c + z E(c)), E <= 0.57.  Cut after c^15:
    0.3467^16/16! exp(0.35) < 4e-21.  Rounding of E: 0.9 u; z and one product: z E off by 0.25 u; c + z E <= 0.42:
    0.42 u; last addition 1.42 u.  Sum 2.1 u < 4 u.  |exp r - exp c| <= 1.42 rho.  Scaling by 2^k is exact, as
    the kernel is at least 0.7 and k >= -1010.
    Below -700 the value lies in (0, 1e-304); above 709 it is at least exp(709) > 8.2e307, without upper bound.
    """
    clipped = np.clip(x, LEAST_EXPONENT, GREATEST_EXPONENT)
    k = np.rint(np.where(clipped == clipped, clipped, 0.0) * ONE_OVER_LN2)
    t1 = clipped - k * L1
    t2 = k * L2
    c = t1 - t2
    rho = np.where(k != 0, REDUCTION * (np.abs(t1) + np.abs(c)) + 2.1 * REDUCTION * np.abs(t2), 0.0)
    value = 1.0 + (c + (c * c) * _horner(_EXP, c))
    error = up(EXP_ERROR + 1.5 * rho)
    scale = _power_of_two(k)
    lower, upper = down(value - error) * scale, up(value + error) * scale
    lower = np.where(x < LEAST_EXPONENT, 0.0, lower)
    upper = np.where(x < LEAST_EXPONENT, 1e-304, upper)
    return Span(lower, np.where(x > GREATEST_EXPONENT, np.inf, upper))


def exp(a: Span) -> Span:
    """Exponentials."""
    return Span(_exp_points(a.lo).lo, _exp_points(a.hi).hi)


SMALL_TANH: Final = 0.17
"""Below it tanh comes from expm1 without reduction, which keeps the relative error small near zero."""
LARGE_TANH: Final = 20.0


def _tanh_points(x: Array) -> Span:
    """Enclosures of tanh at points, by oddness from |x|.

    |x| < 0.17: m = expm1(2x) = c + z E(c) with c = 2x exactly; z E is 4 u relative and at most 0.2 |c|, last
    addition 1.2 u |c|: off by 2 u |c| < 4 u |c|.  tanh = m/(m + 2).  Else tanh = 1 - 2/(exp(2x) + 1).
    1 - tanh(20) < 9e-18.
    """
    size = np.abs(x)
    c = 2.0 * np.minimum(size, SMALL_TANH)
    m = c + (c * c) * _horner(_EXP, c)
    error = EXPM1_ERROR * c
    small = Span(np.maximum(down(m - up(error)), 0.0), up(m + up(error)))
    two, one = iv.scalar(2.0), iv.scalar(1.0)
    low = iv.div(small, iv.add(small, two))
    clipped = np.minimum(size, LARGE_TANH)
    grown = iv.add(_exp_points(2.0 * clipped), one)
    high = iv.sub(one, iv.div(two, grown))
    near, far = size < SMALL_TANH, size > LARGE_TANH
    lower = np.where(near, np.maximum(low.lo, 0.0), np.where(far, 1.0 - 1e-15, high.lo))
    upper = np.where(near, low.hi, np.where(far, 1.0, np.minimum(high.hi, 1.0)))
    # min(size, .) keeps nan, so an unknown end stays unknown.
    return Span(np.where(x < 0, -upper, lower), np.where(x < 0, -lower, upper))


def tanh(a: Span) -> Span:
    """Hyperbolic tangents."""
    return Span(_tanh_points(a.lo).lo, _tanh_points(a.hi).hi)


def _log_points(x: Array) -> Span:
    """Enclosures of log at points; (-inf, -708] below the normal numbers, nan where x is negative or unknown.

    x = m 2^e, m in [sqrt(1/2), sqrt 2], s = (m - 1)/(m + 1), |s| <= 0.1716, z = s^2 <= 0.0295.  m - 1 is exact
    (Sterbenz), so s has relative error 2.01 u, which moves 2 atanh s by at most 2 * 2.01 u |s|/(1 - z) = 4.2 u |s|.
    log m = 2s + 2s (z L(z)), L <= 0.34: the second term is 5.5 u relative and at most 0.021 |s|: 0.12 u |s|; last
    addition 2.03 u |s|.  Cut after s^25: 2 z^13/27/(1 - z) < 1e-21 relative.  Sum 6.4 u |s| < 10 u |s|.
    """
    normal = (x >= SMALLEST_NORMAL) & (x < np.inf)
    bits = np.ascontiguousarray(np.where(normal, x, 1.0)).view(np.int64)
    exponent = (bits >> 52) - 1023
    mantissa = ((bits & 0x000FFFFFFFFFFFFF) | 0x3FF0000000000000).view(np.float64)
    large = mantissa > math.sqrt(2)
    mantissa = np.where(large, 0.5 * mantissa, mantissa)
    e = np.where(large, exponent + 1, exponent).astype(np.float64)
    s = (mantissa - 1.0) / (mantissa + 1.0)
    z = s * s
    value = 2.0 * s + (2.0 * s) * (z * _horner(_LOG, z))
    error = up(LOG_ERROR * np.abs(s))
    kernel = Span(down(value - error), up(value + error))
    whole = iv.mul(iv.point(e), iv.scalar(LN2[0])), iv.mul(iv.point(e), iv.scalar(LN2[1]))
    shift = Span(np.minimum(whole[0].lo, whole[1].lo), np.maximum(whole[0].hi, whole[1].hi))
    total = iv.add(kernel, shift)
    lower = np.where(normal, total.lo, np.where(x == np.inf, 709.0, np.where(x >= 0, -np.inf, np.nan)))
    upper = np.where(normal, total.hi, np.where(x == np.inf, np.inf, np.where(x >= 0, -708.0, np.nan)))
    return Span(lower, upper)


def log(a: Span) -> Span:
    """Logarithms of the positive part; nan where there is none."""
    left = _log_points(np.maximum(a.lo, 0.0)).lo
    return Span(left, _log_points(a.hi).hi)


def _atan_of_size(a: Span) -> Span:
    """Arcus tangents of intervals in [0, inf], evaluated in interval arithmetic throughout.

    Above 1 by atan x = pi/2 - atan(1/x); then atan x = 2 atan(x/(1 + sqrt(1 + x^2))) twice brings the argument
    below tan(pi/16) < 0.199, z <= 0.0397, where the alternating series cut after t^27 is off by less than
    z^14/29 < 9e-22 relative to t.
    """
    one = iv.scalar(1.0)
    invert = a.lo > 1
    small = Span(np.where(invert, 1.0, a.lo), np.where(invert, 1.0, a.hi))
    with np.errstate(all="ignore"):
        inverse = Span(np.maximum(down(1.0 / a.hi), 0.0), up(1.0 / a.lo))
    t = Span(np.where(invert, inverse.lo, small.lo), np.where(invert, inverse.hi, small.hi))
    for _ in range(2):
        root = iv.sqrt(iv.add(one, iv.square(t)))
        t = iv.div(t, iv.add(one, root))
    z = iv.square(t)
    total = Span(np.full_like(z.lo, _ATAN[-1][0]), np.full_like(z.lo, _ATAN[-1][1]))
    for low, high in _ATAN[-2::-1]:
        total = iv.add(iv.mul(total, z), iv.scalar(low, high))
    total = Span(down(total.lo - ATAN_REMAINDER), up(total.hi + ATAN_REMAINDER))
    four = iv.scalar(4.0)
    angle = iv.mul(total, iv.mul(four, t))
    turned = iv.sub(iv.scalar(*HALF_PI), angle)
    return Span(np.where(invert, turned.lo, angle.lo), np.where(invert, turned.hi, angle.hi))


def _atan_points(x: Array) -> Span:
    size = _atan_of_size(iv.point(np.abs(x)))
    return _mirrored(size, x)


def _mirrored(size: Span, x: Array) -> Span:
    """Value of an odd function at x from its enclosure at |x|."""
    return Span(np.where(x < 0, -size.hi, size.lo), np.where(x < 0, -size.lo, size.hi))


def atan(a: Span) -> Span:
    """Arcus tangents."""
    return Span(_atan_points(a.lo).lo, _atan_points(a.hi).hi)


def _asin_points(x: Array) -> Span:
    """Enclosures of asin at points of [-1, 1]: atan(|x|/sqrt((1 - |x|)(1 + |x|))), where 1 - |x| is sharp near 1."""
    size, one = iv.point(np.minimum(np.abs(x), 1.0)), iv.scalar(1.0)
    root = iv.sqrt(iv.mul(_up_from_zero(iv.sub(one, size)), iv.add(one, size)))
    with np.errstate(all="ignore"):
        # Zero over zero cannot occur: where the root may vanish |x| is near 1.
        slope = Span(np.maximum(down(size.lo / root.hi), 0.0), up(size.hi / root.lo))
    left, right = _atan_of_size(iv.point(slope.lo)).lo, _atan_of_size(iv.point(slope.hi)).hi
    return _mirrored(Span(left, right), x)


def _up_from_zero(a: Span) -> Span:
    return Span(np.maximum(a.lo, 0.0), a.hi)


def asin(a: Span) -> Span:
    """Arcus sines of the part in [-1, 1]."""
    return Span(_asin_points(np.clip(a.lo, -1.0, 1.0)).lo, _asin_points(np.clip(a.hi, -1.0, 1.0)).hi)


def acos(a: Span) -> Span:
    """Arcus cosines of the part in [-1, 1], pi/2 - asin."""
    return iv.sub(iv.scalar(*HALF_PI), asin(a))


def rational_power(a: Span, exponent: Fraction) -> Span:
    """a^exponent of the part where a is not negative (positive for negative exponents), exponent not whole.

    Half-whole exponents come from the square root, others from exp(exponent log a); monotone either way.
    """
    if exponent < 0:
        return iv.div(iv.scalar(1.0), rational_power(a, -exponent))
    if exponent.denominator == 2:  # noqa: PLR2004 - a square root
        return iv.power(iv.sqrt(a), exponent.numerator)
    low, high = bounds_of_fraction(exponent)
    factor = iv.scalar(low, high)
    value = exp(iv.mul(factor, log(a)))
    return Span(np.where(a.lo <= 0, 0.0, value.lo), value.hi)


def constant(value: arb) -> Span:
    """A finite arb as an interval of doubles; unbounded where it is not finite."""
    ball = from_arb(value)
    return iv.scalar(-math.inf, math.inf) if ball is None else iv.span_of(ball)
