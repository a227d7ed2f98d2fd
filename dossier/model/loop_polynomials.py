"""A loop as two polynomials: 1 + L = (a + c)/a with a = det(sI - A0) and c = det(sI - A0 - b k) - a.

L = -k (sI - A0)^-1 b = c/a.  A sampled loop is brought to the same form by z = (1 + s)/(1 - s), which
maps the unit disc onto the left half-plane (W. Hahn 1959, from memory): a = det((1 + s) I - (1 - s) A0).
Coefficients are exact where the linear part is rational, else balls in which a coefficient that
vanishes by structure is an exact zero.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Final, cast

from flint import arb, arb_mat, fmpq, fmpq_mat, fmpq_poly

from dossier.model.ball import WORKING_BITS, Ball, from_arb, precision, to_fraction
from dossier.model.case import Case
from dossier.model.equilibrium import Equilibrium
from dossier.model.linear_part import LinearLoop, NoLinearPart, Number, linear_loop

LARGEST_EXPANSION: Final = 8_192
"""Most minors one determinant of balls is expanded into; beyond, structural zeros are given up (2**n at worst)."""

STORED_DIGITS: Final = 40
"""Decimal digits kept of an inexact coefficient: certificates stay short, results need fewer than half."""


@dataclass(frozen=True, slots=True)
class LoopPolynomials:
    """Coefficients, highest power first, all of length n + 1, of a, c and a + c.

    `interval` is the sampling interval in s, None for a continuous model; `remarks` are saturations that
    are active at the equilibrium (the loop is broken there).
    """

    loop: str
    interval: Ball | None
    open_loop: tuple[Ball, ...]
    gain: tuple[Ball, ...]
    closed_loop: tuple[Ball, ...]
    remarks: tuple[str, ...]

    @property
    def is_exact(self) -> bool:
        """Every coefficient is a rational number."""
        return all(b.is_exact for b in (*self.open_loop, *self.gain, *self.closed_loop))


def loop_polynomials(case: Case, equilibrium: Equilibrium, loop: str) -> LoopPolynomials | NoLinearPart:
    """The polynomials of the nominal loop of `case` opened at signal `loop`, s in 1/s (dimensionless if sampled)."""
    linear = linear_loop(case, equilibrium, loop)
    if isinstance(linear, NoLinearPart):
        return linear
    with precision(WORKING_BITS):
        return _polynomials(linear)


def _polynomials(linear: LinearLoop) -> LoopPolynomials:
    if linear.is_exact:
        opened, closed = _exact(linear)
        gain = [w - v for v, w in zip(opened, closed, strict=True)]
    elif (expanded := _by_expansion(linear)) is not None:
        opened, gain = expanded
        closed = [v + w for v, w in zip(opened, gain, strict=True)]
    else:
        opened, closed = _by_flint(linear)
        gain = [w - v for v, w in zip(opened, closed, strict=True)]
    a, c, total = (tuple(_stored(v) for v in reversed(p)) for p in (opened, gain, closed))
    interval = None if linear.interval is None else _stored(linear.interval)
    return LoopPolynomials(linear.loop, interval, a, c, total, linear.remarks)


def _closed(linear: LinearLoop) -> list[list[Number]]:
    return [
        [v + g * k for v, k in zip(row, linear.feedback, strict=True)]
        for row, g in zip(linear.matrix, linear.input, strict=True)
    ]


def _exact(linear: LinearLoop) -> tuple[list[Number], list[Number]]:
    pair = [
        fmpq_mat(cast(list[list[fmpq]], [list(row) for row in m])).charpoly() for m in (linear.matrix, _closed(linear))
    ]
    opened, closed = (_mapped(p.coeffs(), linear) for p in pair)
    return opened, closed


def _by_flint(linear: LinearLoop) -> tuple[list[Number], list[Number]]:
    pair = [arb_mat([[arb(v) for v in row] for row in m]).charpoly() for m in (linear.matrix, _closed(linear))]
    opened, closed = (_mapped(p.coeffs(), linear) for p in pair)
    return opened, closed


def _mapped(coefficients: Sequence[Number], linear: LinearLoop) -> list[Number]:
    """Coefficients (lowest first) after the bilinear map if the loop is sampled: sum p_i (1 + s)^i (1 - s)^(n - i)."""
    if linear.interval is None:
        return list(coefficients)
    degree = len(coefficients) - 1
    result: list[Number] = [fmpq(0)] * (degree + 1)
    for i, coefficient in enumerate(coefficients):
        basis = fmpq_poly([1, 1]) ** i * fmpq_poly([1, -1]) ** (degree - i)
        for j in range(degree + 1):
            result[j] = result[j] + coefficient * basis[j]
    return result


def _by_expansion(linear: LinearLoop) -> tuple[list[Number], list[Number]] | None:
    """a = det M and c = det [[M, b], [k, 0]] with M = sI - A0 (matrix determinant lemma); lowest power first.

    Sampled: M = (1 + s) I - (1 - s) A0, and b is multiplied by 1 - s.  None where that is too long.
    """
    size, sampled = len(linear.matrix), linear.interval is not None
    rows = [[_entry(arb(v), i == j, sampled) for j, v in enumerate(row)] for i, row in enumerate(linear.matrix)]
    column = [[arb(g), -arb(g)] if sampled else [arb(g)] for g in linear.input]
    bordered = [[*row, g] for row, g in zip(rows, column, strict=True)]
    bordered.append([*([arb(k)] for k in linear.feedback), [arb(0)]])
    opened, gain = _determinant(rows), _determinant(bordered)
    return None if opened is None or gain is None else (_padded(opened, size), _padded(gain, size))


def _entry(value: arb, diagonal: bool, sampled: bool) -> list[arb]:
    one = arb(int(diagonal))
    return [one - value, one + value] if sampled else [-value, one]


def _padded(coefficients: Sequence[arb], degree: int) -> list[Number]:
    return [*coefficients, *[arb(0)] * (degree + 1 - len(coefficients))]


def _determinant(matrix: Sequence[Sequence[list[arb]]]) -> list[arb] | None:
    """Laplace expansion along the rows; division free, so structural zeros stay exact.

    Row by row, `minors` maps a set of used columns (bits) to the signed sum over all ways to use them.
    None where the columns in use come in more than `LARGEST_EXPANSION` ways.
    """
    minors: dict[int, list[arb]] = {0: [arb(1)]}
    for row in matrix:
        following: dict[int, list[arb]] = {}
        for used, value in minors.items():
            for j, entry in enumerate(row):
                if used >> j & 1 or all(v.is_zero() for v in entry):
                    continue
                sign = -1 if (used >> j).bit_count() % 2 else 1
                term = _product([sign * v for v in entry], value)
                following[used | 1 << j] = _sum(following.get(used | 1 << j, []), term)
        if len(following) > LARGEST_EXPANSION:
            return None
        minors = following
    return minors.get((1 << len(matrix)) - 1, [])


def _sum(left: Sequence[arb], right: Sequence[arb]) -> list[arb]:
    length = max(len(left), len(right))
    zero = arb(0)
    return [(left[i] if i < len(left) else zero) + (right[i] if i < len(right) else zero) for i in range(length)]


def _product(left: Sequence[arb], right: Sequence[arb]) -> list[arb]:
    if not right:
        return []
    result = [arb(0)] * (len(left) + len(right) - 1)
    for i, u in enumerate(left):
        if u.is_zero():
            continue
        for j, v in enumerate(right):
            if not v.is_zero():
                result[i + j] = result[i + j] + u * v
    return result


def _stored(value: Number) -> Ball:
    if isinstance(value, fmpq):
        return Ball(to_fraction(value))
    ball = from_arb(value)
    if ball is None:
        raise ArithmeticError("a characteristic polynomial without finite coefficients")
    return rounded_ball(ball, STORED_DIGITS)


def rounded_ball(ball: Ball, digits: int) -> Ball:
    """A ball around `ball` whose middle has `digits` significant decimals; exact zero and exact balls stay."""
    if ball.is_exact:
        return ball
    size = max(abs(ball.middle), ball.radius)
    step = decimal_step(size, digits)
    middle = round(ball.middle / step) * step
    reach = ball.radius + abs(ball.middle - middle)
    coarse = decimal_step(reach, 2)
    return Ball(middle, -(-reach // coarse) * coarse)


def decimal_step(size: Fraction, digits: int) -> Fraction:
    """The power of ten that leaves about `digits` significant digits of a number of that `size` > 0."""
    magnitude = len(str(abs(size.numerator))) - len(str(size.denominator))
    return Fraction(10) ** (magnitude - digits)
