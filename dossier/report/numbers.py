"""Exact rationals as printed digits: rounded to the less favourable side, never to the more favourable one.

A proved bound is printed with `below` or `above`; `nearest` is for estimates, which are marked.
Signs follow ISO 80000-1: a minus sign, a multiplication cross before powers of ten, digits in groups of three.
"""

from __future__ import annotations

from decimal import ROUND_CEILING, ROUND_DOWN, ROUND_FLOOR, ROUND_HALF_EVEN, Context, Decimal
from fractions import Fraction
from typing import Final

MINUS: Final = "−"
TIMES: Final = "×"
ABOUT: Final = "≈"
ELLIPSIS: Final = "…"
GROUP: Final = "\u202f"
"""Narrow no-break space between groups of three digits (ISO 80000-1, 7.3.1)."""

PLUS_MINUS: Final = "±"

NO_FINITE_VALUE: Final = "no finite value in this model"

DIGITS: Final = 4
"""Significant digits of a printed bound: more than any tolerance of a machine supports."""

FIRST_DIGITS: Final = 6
FEWEST_SHARED: Final = 4
"""Most and fewest digits printed of a number known more closely than anyone reads; with fewer, both ends are."""

NARROW: Final = Fraction(1, 10**6)
"""Relative width below which a centre with a radius reads better than two ends."""

STATED_CLOSENESS: Final = Fraction(1, 10**12)
"""An input converted through pi is printed as the short decimal it came from, if that is relatively this close."""

EXACT_DIGITS: Final = 9
"""A decimal of at most this many digits is printed whole."""

LARGEST_PLAIN: Final = 6
SMALLEST_PLAIN: Final = -4
"""Numbers from 0.0001 to below one million are written without a power of ten."""

GROUPED_FROM: Final = 5
"""Integers of four digits stay together, longer ones are grouped."""

_SUPERSCRIPTS: Final = str.maketrans("0123456789-", "⁰¹²³⁴⁵⁶⁷⁸⁹⁻")


def below(value: Fraction, digits: int = DIGITS) -> str:
    """The greatest decimal of `digits` significant digits at or below `value`."""
    return _print(_round(value, digits, ROUND_FLOOR))


def above(value: Fraction, digits: int = DIGITS) -> str:
    """The least decimal of `digits` significant digits at or above `value`."""
    return _print(_round(value, digits, ROUND_CEILING))


def nearest(value: Fraction, digits: int = DIGITS) -> str:
    """The nearest decimal of `digits` significant digits; for estimates only."""
    return _print(_round(value, digits, ROUND_HALF_EVEN))


def exactly(value: Fraction) -> str | None:
    """`value` with all its digits, or None where it has more than `EXACT_DIGITS` of them."""
    decimal = _round(value, EXACT_DIGITS, ROUND_HALF_EVEN)
    return _print(decimal) if Fraction(decimal) == value else None


def number(value: Fraction, digits: int = DIGITS) -> str:
    """`value` exactly where that is short, else its nearest digits, marked as rounded."""
    return exactly(value) or f"{ABOUT}{GROUP}{nearest(value, digits)}"


def stated(value: Fraction) -> str:
    """An input: its own short decimal, also where a conversion through pi has moved it in the last place."""
    decimal = _round(value, EXACT_DIGITS, ROUND_HALF_EVEN)
    if abs(Fraction(decimal) - value) <= abs(value) * STATED_CLOSENESS:
        return _print(decimal.normalize())
    return number(value)


def estimate(value: float, digits: int = 3) -> str:
    """A floating-point result, marked as an estimate."""
    return f"{ABOUT}{GROUP}{nearest(Fraction(value), digits)}"


def first_digits(lower: Fraction, upper: Fraction, digits: int = FIRST_DIGITS) -> str | None:
    """The leading digits that every number in [lower, upper] shares, with an ellipsis; None where they differ."""
    if lower == upper:
        return exactly(lower) or _continued(_round(lower, digits, ROUND_DOWN))
    low, high = (_round(v, digits, ROUND_DOWN) for v in (lower, upper))
    same = low == high and low != 0 and (lower > 0) == (upper > 0)
    return _continued(low) if same else None


def _continued(value: Decimal) -> str:
    """`value` with the sign that more digits follow, before any power of ten."""
    mantissa, cross, power = _print(value).partition(f"{GROUP}{TIMES}")
    return f"{mantissa}{ELLIPSIS}{cross}{power}"


def enclosure(lower: Fraction | None, upper: Fraction | None, digits: int = DIGITS) -> str:
    """An enclosure: its common first digits where it is narrow, else both ends rounded outward."""
    if lower is None and upper is None:
        return NO_FINITE_VALUE
    if upper is None and lower is not None:
        return f"at least {below(lower, digits)}; no finite upper end"
    if lower is None and upper is not None:
        return f"at most {above(upper, digits)}; no finite lower end"
    assert lower is not None and upper is not None
    for shared in (first_digits(lower, upper, d) for d in range(FIRST_DIGITS, FEWEST_SHARED - 1, -1)):
        if shared is not None:
            return shared
    return _around(lower, upper) or f"{below(lower, digits)} {ELLIPSIS} {above(upper, digits)}"


def _around(lower: Fraction, upper: Fraction) -> str | None:
    """A narrow enclosure that straddles a short decimal, as that decimal and a radius; None for a wide one."""
    centre = Fraction(_round((lower + upper) / 2, FIRST_DIGITS, ROUND_HALF_EVEN))
    reach = max(abs(upper - centre), abs(centre - lower))
    if reach > abs(centre) * NARROW:
        return None
    return f"{nearest(centre, FIRST_DIGITS)} {PLUS_MINUS}{GROUP}{radius(reach)}"


def radius(value: Fraction) -> str:
    """A radius, rounded up to two digits; an exact zero stays 0."""
    return above(value, 2)


def percent_below(share: Fraction) -> str:
    """A dimensionless share as per cent with one decimal, rounded down."""
    return _percent(share, ROUND_FLOOR)


def _percent(share: Fraction, rounding: str) -> str:
    tenths = Decimal(share.numerator * 1000) / 1  # exact: an integer
    rounded = Context(prec=50, rounding=rounding).divide(tenths, Decimal(share.denominator))
    whole = rounded.to_integral_value(rounding=rounding)
    return f"{_print(whole.scaleb(-1).normalize())} %".replace(" %", f"{GROUP}%")


def count(value: int) -> str:
    """A count, with digits in groups."""
    return _print(Decimal(value))


def _round(value: Fraction, digits: int, rounding: str) -> Decimal:
    context = Context(prec=digits, rounding=rounding, Emin=-999_999, Emax=999_999)
    return context.divide(Decimal(value.numerator), Decimal(value.denominator))


def _print(value: Decimal) -> str:
    if value == 0:
        return "0"
    sign = MINUS if value < 0 else ""
    magnitude = abs(value)
    exponent = magnitude.adjusted()
    if SMALLEST_PLAIN <= exponent < LARGEST_PLAIN:
        return sign + _group(f"{magnitude:f}")
    mantissa = magnitude.scaleb(-exponent, Context(prec=len(magnitude.as_tuple().digits) + 1))
    text = f"{mantissa:f}"
    text = text.rstrip("0").rstrip(".") if "." in text else text
    return f"{sign}{text}{GROUP}{TIMES}{GROUP}10{str(exponent).translate(_SUPERSCRIPTS)}"


def _group(text: str) -> str:
    """Digits in groups of three from the decimal point outward, where there are five or more on a side."""
    whole, _, fraction = text.partition(".")
    if len(whole) >= GROUPED_FROM:
        head = len(whole) % 3
        parts = [whole[:head]] if head else []
        whole = GROUP.join(parts + [whole[i : i + 3] for i in range(head, len(whole), 3)])
    if len(fraction) >= GROUPED_FROM:
        fraction = GROUP.join(fraction[i : i + 3] for i in range(0, len(fraction), 3))
    return f"{whole}.{fraction}" if fraction else whole
