"""Short printed forms of exact numbers for statements and details; never evidence, always enough to recognise."""

from __future__ import annotations

from decimal import ROUND_CEILING, ROUND_FLOOR, Context, Decimal
from fractions import Fraction
from typing import Final

SHORT: Final = 9
"""A decimal of at most this many significant digits is printed exactly."""
ROUNDED: Final = 6
"""Significant digits of anything longer, marked as rounded."""
PLAIN_EXPONENTS: Final = range(-3, 7)
"""Powers of ten printed without a factor 10^n."""
_SUPERSCRIPT: Final = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def figure(value: Fraction) -> str:
    """`value` in decimals: exactly where that is short, else rounded to nearest and marked with ≈."""
    exact = Context(prec=60).divide(Decimal(value.numerator), Decimal(value.denominator)).normalize()
    if Fraction(exact) == value and len(exact.as_tuple().digits) <= SHORT:
        return _printed(exact)
    return f"≈ {_printed(Context(prec=ROUNDED).plus(exact).normalize())}"


def span(lower: Fraction, upper: Fraction) -> str:
    """A closed interval in short decimals, rounded outward."""
    return f"[{_end(lower, ROUND_FLOOR)}, {_end(upper, ROUND_CEILING)}]"


def _end(value: Fraction, rounding: str) -> str:
    context = Context(prec=ROUNDED, rounding=rounding)
    return _printed(context.divide(Decimal(value.numerator), Decimal(value.denominator)).normalize())


def _printed(value: Decimal) -> str:
    if value == 0:
        return "0"
    sign, size = ("−" if value < 0 else ""), abs(value)
    exponent = size.adjusted()
    if exponent in PLAIN_EXPONENTS:
        return f"{sign}{size:f}"
    mantissa = size.scaleb(-exponent)
    return f"{sign}{mantissa.normalize():f} × 10{str(exponent).translate(_SUPERSCRIPT)}"
