"""Midpoint-radius enclosures with rational midpoint and radius, and ball evaluation of expressions.

Rigorous ball arithmetic is python-flint's ``arb`` (F. Johansson, "Arb: efficient arbitrary-precision
midpoint-radius interval arithmetic", IEEE Trans. Computers 66, 2017).  Conversions to and from
fractions are exact or rounded outward.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

from flint import arb, ctx, fmpq

from dossier.model.expression import Expression, fold

WORKING_BITS: Final = 256
"""Precision of ball evaluations: far above double precision, cheap for expressions of this size."""


@dataclass(frozen=True, slots=True)
class Ball:
    """All reals within `radius` of `middle`; radius 0 is an exact number."""

    middle: Fraction
    radius: Fraction = Fraction(0)

    def __post_init__(self) -> None:
        if self.radius < 0:
            raise ValueError("a ball has no negative radius")

    @property
    def lower(self) -> Fraction:
        """Least value in the ball."""
        return self.middle - self.radius

    @property
    def upper(self) -> Fraction:
        """Greatest value in the ball."""
        return self.middle + self.radius

    @property
    def is_exact(self) -> bool:
        """It holds one number only."""
        return self.radius == 0

    @classmethod
    def from_bounds(cls, lower: Fraction, upper: Fraction) -> Ball:
        """The ball [lower, upper]."""
        return cls((lower + upper) / 2, (upper - lower) / 2)


@contextmanager
def precision(bits: int) -> Iterator[None]:
    """Run python-flint at `bits` of precision; its setting is global to the process."""
    previous = ctx.prec
    ctx.prec = bits
    try:
        yield
    finally:
        ctx.prec = previous


def to_fmpq(value: Fraction) -> fmpq:
    """`value` as a flint rational."""
    return fmpq(value.numerator, value.denominator)


def to_fraction(value: fmpq) -> Fraction:
    """`value` as a Python fraction."""
    return Fraction(int(value.p), int(value.q))


def exact_value(number: arb) -> Fraction:
    """The dyadic value of an exact arb (radius zero); raises ValueError for any other."""
    if not (number.is_exact() and number.is_finite()):
        raise ValueError("not an exact finite number")
    mantissa, exponent = number.man_exp()
    return Fraction(int(mantissa)) * Fraction(2) ** int(exponent)


def enclose(value: Ball) -> arb:
    """An arb that contains `value` at the current precision."""
    middle = arb(to_fmpq(value.middle))
    if value.radius == 0:
        return middle
    reach = arb(to_fmpq(value.radius)).upper()
    return middle + reach.union(-reach)


def from_arb(value: arb) -> Ball | None:
    """The exact ball of a finite arb, or None where it is not finite."""
    if not value.is_finite():
        return None
    return Ball(exact_value(value.mid()), exact_value(value.rad()))


def evaluate(expression: Expression, environment: Mapping[str, arb]) -> arb:
    """Enclosure of `expression` for all values of the symbols in `environment`, at the current precision.

    Where a value is undefined the result is not finite, and only a finite result is evidence.
    Raises KeyError for a symbol without a value.
    """
    return fold(expression, lambda node, args: _evaluate_node(node, args, environment))


def _evaluate_node(node: Expression, args: tuple[arb, ...], environment: Mapping[str, arb]) -> arb:
    op = node.op
    if op == "number":
        return arb(to_fmpq(node.fraction))
    if op == "symbol":
        return environment[str(node.value)]
    if op == "pi":
        return arb.pi()
    if op == "add":
        total = args[0]
        for term in args[1:]:
            total = total + term
        return total
    if op == "mul":
        total = args[0]
        for factor in args[1:]:
            total = total * factor
        return total
    if op == "neg":
        return -args[0]
    if op == "div":
        return args[0] / args[1]
    if op == "pow":
        return _power(args[0], node.fraction)
    if op == "sat":
        return args[0].max(args[1]).min(args[2])
    if op == "abs":
        return abs(args[0])
    return getattr(args[0], op)()


WIDE: Final = 1024
"""Inverse relative radius from which a square is taken from its ends: below, the plain product is as sharp."""


def square(value: arb) -> arb:
    """Tight square: for wide balls arb's product loses that both factors are the same."""
    if not value.is_finite() or value.rad() * WIDE < abs(value.mid()) or value.rad() == 0:
        return value * value
    size = abs(value)
    top = arb(size.upper())
    upper = (top * top).upper()
    if value.contains(0):
        return arb(0).union(upper)
    bottom = arb(size.lower())
    return (bottom * bottom).lower().union(upper)


def _power(base: arb, exponent: Fraction) -> arb:
    if exponent.denominator != 1:
        if exponent == Fraction(1, 2):
            return base.sqrt()
        return (base.log() * arb(to_fmpq(exponent))).exp()
    count = abs(int(exponent))
    even = square(base)
    result = arb(1)
    for _ in range(count // 2):
        result = result * even
    if count % 2:
        result = result * base
    return result if exponent > 0 else arb(1) / result
