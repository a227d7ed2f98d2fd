"""Exact numbers from text: ``0.1`` is one tenth, and ``12 mm`` is a number and the text of its unit."""

from __future__ import annotations

import re
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

LONGEST: Final = 120
"""Characters of one number; more is a slip, and bounds the size of the exact fraction."""

LARGEST_EXPONENT: Final = 100
"""Numbers lie between 1e-100 and 1e100 (or are 0): room for any machine, and within range of doubles."""

_NUMBER: Final = re.compile(r"[-+]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][-+]?[0-9]+)?")


class NumberError(ValueError):
    """Text that is no number; `hint` says what to write."""

    def __init__(self, message: str, hint: str = "") -> None:
        super().__init__(message)
        self.hint = hint


@dataclass(frozen=True, slots=True)
class Written:
    """A number as typed, its exact value, and the text of the unit after it at `offset` (empty: none)."""

    figure: str
    value: Fraction
    unit: str
    offset: int


def exact(figure: str) -> Fraction:
    """The value of a decimal number, exactly.

    Raises NumberError for anything else, and for numbers beyond 1e-100 to 1e100.
    """
    if _NUMBER.fullmatch(figure) is None:
        raise NumberError(f"{figure} is not a number", _advice(figure))
    if len(figure) > LONGEST:
        raise NumberError(f"a number of {len(figure)} characters", f"at most {LONGEST} characters")
    mantissa, _, exponent = figure.lower().partition("e")
    power = int(exponent or 0)
    if abs(power) > 2 * LARGEST_EXPONENT + LONGEST:
        raise NumberError(f"{figure} is out of range", f"between 1e-{LARGEST_EXPONENT} and 1e{LARGEST_EXPONENT}, or 0")
    value = Fraction(mantissa) * Fraction(10) ** power
    if value and not Fraction(10) ** -LARGEST_EXPONENT <= abs(value) <= Fraction(10) ** LARGEST_EXPONENT:
        raise NumberError(f"{figure} is out of range", f"between 1e-{LARGEST_EXPONENT} and 1e{LARGEST_EXPONENT}, or 0")
    return value


_MORE_DIGITS: Final = re.compile(r"[0-9]{3}([ ][0-9]{3})*(\.[0-9]*)?([ ]*[A-Za-z%].*)?")
"""What follows the first group of a number that is written in groups of three digits."""


def split(text: str) -> Written:
    """The number that `text` begins with and the unit text after it.

    Raises NumberError where `text` does not begin with a number.
    """
    body = text.strip()
    found = _NUMBER.match(body)
    if found is None:
        raise NumberError(f"{body or 'nothing'} is not a number", _advice(body))
    rest = body[found.end() :]
    if rest[:1] in ("_", ",", ".", "'", ":"):
        raise NumberError(f"{body} is not a number", _advice(body))
    unit = rest.strip()
    if _MORE_DIGITS.fullmatch(unit):
        raise NumberError(f"{body} is not one number", "write the digits without spaces between them")
    return Written(found[0], exact(found[0]), unit, text.find(unit, found.end()) if unit else len(text))


def _advice(text: str) -> str:
    if re.search(r"[0-9],[0-9]", text):
        return "the decimal sign is a point"
    if re.search(r"[0-9]_[0-9]", text):
        return "write the digits without underscores"
    if "\N{MINUS SIGN}" in text:
        return "write the minus sign as -"
    if text.lower().lstrip("+-.") in ("inf", "nan", "infinity"):
        return "numbers are finite; leave a side out where it is unbounded"
    return "write a decimal number such as 12, 0.5 or 1.6e-3, with a unit where it is not in the declared one"
