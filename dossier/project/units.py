"""Units at the border: text to dimension and exact factor; inside the program everything is SI.

The relations between units are handed to pint, the only place that sees it, with fractions for
numbers.  pi is a base unit of that registry, so that a degree or a revolution per minute keeps pi exactly
and every factor stays rational.  Only the units named here are known: no unit is guessed from a prefix
that happens to fit.

Relations: BIPM, The International System of Units, 9th ed. 2019, tables 4, 5, 7 and 8; inch, foot, pound:
the international yard and pound agreement of 1959; standard gravity 9.80665 m/s^2: 3rd CGPM, 1901.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from fractions import Fraction
from functools import cache, lru_cache
from typing import Final

import pint

BASES: Final = ("m", "kg", "s", "A", "K", "mol", "cd")
_BASE_OF: Final = {"length": 0, "mass": 1, "time": 2, "current": 3, "temperature": 4, "amount": 5, "luminous": 6}
_PI: Final = "[pi]"

PREFIXES: Final = {
    "f": Fraction(1, 10**15), "p": Fraction(1, 10**12), "n": Fraction(1, 10**9), "u": Fraction(1, 10**6),
    "µ": Fraction(1, 10**6), "m": Fraction(1, 1000), "c": Fraction(1, 100), "d": Fraction(1, 10),
    "h": Fraction(100), "k": Fraction(1000), "M": Fraction(10**6), "G": Fraction(10**9), "T": Fraction(10**12),
}  # fmt: skip


@dataclass(frozen=True, slots=True)
class _Row:
    """One known unit: pint relation, coherent SI unit as text, and whether it takes prefixes."""

    relation: str
    coherent: str
    prefixable: bool = False


_ROWS: Final[dict[str, _Row]] = {
    "m": _Row("[length]", "m", True),
    "kg": _Row("[mass]", "kg"),
    "s": _Row("[time]", "s", True),
    "A": _Row("[current]", "A", True),
    "K": _Row("[temperature]", "K", True),
    "mol": _Row("[amount]", "mol", True),
    "cd": _Row("[luminous]", "cd"),
    "g": _Row("kg / 1000", "kg", True),
    "t": _Row("1000 * kg", "kg"),
    "rad": _Row("[]", "rad", True),
    "turn": _Row("2 * pi_unit", "rad"),
    "deg": _Row("pi_unit / 180", "rad"),
    "rpm": _Row("pi_unit / (30 * s)", "rad/s"),
    "percent": _Row("1 / 100", "1"),
    "min": _Row("60 * s", "s"),
    "h": _Row("3600 * s", "s"),
    "d": _Row("86400 * s", "s"),
    "N": _Row("kg * m / s**2", "N", True),
    "Pa": _Row("N / m**2", "Pa", True),
    "J": _Row("N * m", "J", True),
    "W": _Row("J / s", "W", True),
    "C": _Row("A * s", "C", True),
    "V": _Row("W / A", "V", True),
    "F": _Row("C / V", "F", True),
    "ohm": _Row("V / A", "ohm", True),
    "S": _Row("A / V", "S", True),
    "Wb": _Row("V * s", "Wb", True),
    "T": _Row("Wb / m**2", "T", True),
    "H": _Row("Wb / A", "H", True),
    "VA": _Row("V * A", "W", True),
    "Wh": _Row("3600 * J", "J", True),
    "Ah": _Row("3600 * C", "C", True),
    "L": _Row("m**3 / 1000", "m^3", True),
    "bar": _Row("100000 * Pa", "Pa", True),
    "atm": _Row("101325 * Pa", "Pa"),
    "in": _Row("0.0254 * m", "m"),
    "ft": _Row("0.3048 * m", "m"),
    "lb": _Row("0.45359237 * kg", "kg"),
    "lbf": _Row("9.80665 * m * lb / s**2", "N"),
    "psi": _Row("lbf / in**2", "Pa"),
    "kgf": _Row("9.80665 * N", "N"),
    "degC": _Row("[temperature]", "K"),
}

_SPELLINGS: Final = {"%": "percent", "Ω": "ohm", "l": "L"}

ADVICE: Final = {
    "Hz": "rates take 1/s (or rad/s); a frequency counted in turns takes turn/s",
    "Nm": "write products with *, as N*m",
    "°": "write deg",
    "°C": "write degC",
    "rev": "write turn",
    "degree": "write deg",
    "degrees": "write deg",
    "sec": "write s",
    "hr": "write h",
    "Ohm": "write ohm",
    "lbs": "write lb",
    "C": "the unit C is the coulomb; a temperature takes degC",
    "dB": "dB is for gain margins only",
}

_SHOWN: Final = (
    "1", "m", "s", "kg", "A", "K", "mol", "m/s", "m/s^2", "1/s", "1/s^2", "N", "N/m", "N*s/m", "N*m", "N/s", "W", "V",
    "ohm", "H", "F", "C", "Wb", "T", "V/s", "A/s", "K/s", "Pa", "Pa/s", "W/K", "J/K", "kg*m^2", "kg/s", "m^2", "m^3",
    "m^3/s", "mol/m^3", "mol/(m^3*s)", "m*s", "N/(m*s)", "N/m^2", "N/m^3", "V*s/rad", "1/m", "1/K",
)  # fmt: skip
"""How dimensions are shown: the first of these that has the dimension."""


class UnitError(ValueError):
    """Text that is no known unit; `offset` is the character at fault, `hint` what to write."""

    def __init__(self, message: str, offset: int, hint: str = "") -> None:
        super().__init__(message)
        self.offset = offset
        self.hint = hint


@dataclass(frozen=True, slots=True)
class Dimension:
    """Exponents of the base units in `BASES`; angles and ratios have none."""

    exponents: tuple[Fraction, ...]

    def __mul__(self, other: Dimension) -> Dimension:
        return Dimension(tuple(a + b for a, b in zip(self.exponents, other.exponents, strict=True)))

    def __truediv__(self, other: Dimension) -> Dimension:
        return self * other**-1

    def __pow__(self, exponent: Fraction | int) -> Dimension:
        return Dimension(tuple(a * exponent for a in self.exponents))

    def __str__(self) -> str:
        return next((t for t in _SHOWN if parse_unit(t).dimension == self), self._product())

    def _product(self) -> str:
        parts = [(b, e) for b, e in zip(BASES, self.exponents, strict=True) if e]
        return "*".join(b if e == 1 else f"{b}^{e}" if e.denominator == 1 else f"{b}^({e})" for b, e in parts)


PLAIN: Final = Dimension((Fraction(0),) * len(BASES))
TIME: Final = Dimension(tuple(Fraction(b == "s") for b in BASES))


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit as typed: one of it is `factor` * pi**`pi_power` of `coherent`, an SI unit.

    `zero` is the SI value of its zero (degrees Celsius), used for absolute values only.
    """

    text: str
    factor: Fraction
    pi_power: int
    dimension: Dimension
    coherent: str
    zero: Fraction = Fraction(0)

    @property
    def is_percent(self) -> bool:
        """It is the percent sign."""
        return self.text in ("%", "percent")

    @property
    def is_decibel(self) -> bool:
        """It is a logarithmic measure of gains (20 log10)."""
        return self.text == DECIBEL

    @property
    def difference(self) -> Unit:
        """The unit that differences of such values are stated in."""
        return parse_unit("K") if self.zero else self


DECIBEL: Final = "dB"
CELSIUS: Final = "degC"
CELSIUS_ZERO: Final = Fraction("273.15")
"""SI value of 0 degC (BIPM, SI brochure, 2.3.1)."""

_UNIT_TOKEN: Final = re.compile(r"\s*([A-Za-zµΩ%]+|[0-9]+|[*/^()-])")
LONGEST_UNIT: Final = 60
"""Characters of a unit's text."""
LARGEST_POWER: Final = 12
"""Largest exponent within a unit."""
LARGEST_FACTOR_BITS: Final = 1000
"""Bits of numerator or denominator of a unit's factor; within range of doubles, and no power can run away."""


@dataclass(frozen=True, slots=True)
class _Part:
    factor: Fraction
    pi_power: Fraction
    dimension: Dimension
    names: tuple[tuple[str, Fraction], ...]

    def times(self, other: _Part) -> _Part:
        return _Part(
            self.factor * other.factor, self.pi_power + other.pi_power, self.dimension * other.dimension,
            self.names + other.names,
        )  # fmt: skip

    def power(self, exponent: Fraction, offset: int) -> _Part:
        return _Part(
            _exact_power(self.factor, exponent, offset), self.pi_power * exponent, self.dimension**exponent,
            tuple((n, e * exponent) for n, e in self.names),
        )  # fmt: skip


_ONE: Final = _Part(Fraction(1), Fraction(0), PLAIN, ())


def _exact_power(value: Fraction, exponent: Fraction, offset: int) -> Fraction:
    bits = max(value.numerator.bit_length(), value.denominator.bit_length()) * abs(exponent.numerator)
    if bits > LARGEST_FACTOR_BITS:
        raise UnitError("the unit is out of range", offset, "smaller exponents")
    powered = value**exponent.numerator
    if exponent.denominator == 1:
        return Fraction(powered)
    roots = [round(n ** (1 / exponent.denominator)) for n in (powered.numerator, powered.denominator)]
    result = Fraction(*roots)
    if result**exponent.denominator != powered:
        raise UnitError("the root of this unit has no exact factor", offset, "use units without prefixes in roots")
    return result


@cache
def _registry() -> pint.UnitRegistry:
    """The registry of the known units, with exact fractions for numbers."""
    registry = pint.UnitRegistry(None, non_int_type=Fraction)  # type: ignore[arg-type] - pint's stub knows floats only
    registry.load_definitions([f"pi_unit = {_PI}", *(f"{name} = {row.relation}" for name, row in _ROWS.items())])
    return registry


@cache
def _known(symbol: str) -> _Part:
    """A unit of the table, by its symbol, from pint."""
    registry = _registry()
    factor, _ = registry.get_root_units(symbol)
    dimensions = registry.get_dimensionality(symbol)
    exponents = [Fraction(0)] * len(BASES)
    pi_power = Fraction(0)
    for name, exponent in dimensions.items():
        if name == _PI:
            pi_power = Fraction(str(exponent))
        else:
            exponents[_BASE_OF[name.strip("[]")]] = Fraction(str(exponent))
    if not isinstance(factor, int | Fraction):
        raise ArithmeticError(f"the factor of {symbol} is not exact")
    return _Part(Fraction(factor), pi_power, Dimension(tuple(exponents)), ())


def _named(name: str, offset: int) -> _Part:
    symbol = _SPELLINGS.get(name, name)
    if symbol in _ROWS:
        part = _known(symbol)
        return _Part(part.factor, part.pi_power, part.dimension, _coherent_names(symbol))
    for prefix, factor in PREFIXES.items():
        rest = _SPELLINGS.get(name.removeprefix(prefix), name.removeprefix(prefix))
        if name.startswith(prefix) and rest in _ROWS and _ROWS[rest].prefixable:
            part = _known(rest)
            return _Part(part.factor * factor, part.pi_power, part.dimension, _coherent_names(rest))
    raise UnitError(f"unknown unit {name}", offset, ADVICE.get(name, ""))


def _coherent_names(symbol: str) -> tuple[tuple[str, Fraction], ...]:
    return {
        "rad/s": (("rad", Fraction(1)), ("s", Fraction(-1))),
        "m^3": (("m", Fraction(3)),),
        "1": (),
    }.get(_ROWS[symbol].coherent, ((_ROWS[symbol].coherent, Fraction(1)),))


@lru_cache(maxsize=1024)
def parse_unit(text: str) -> Unit:
    """The unit that `text` names: products of unit names with ``*``, ``/``, ``^`` and parentheses.

    Raises UnitError with the offset of what is at fault.
    """
    if text == DECIBEL:
        return Unit(DECIBEL, Fraction(1), 0, PLAIN, DECIBEL)
    if text == CELSIUS:
        return Unit(CELSIUS, Fraction(1), 0, _known(CELSIUS).dimension, "K", CELSIUS_ZERO)
    part = _UnitParser(text).parse()
    if part.pi_power.denominator != 1:
        raise UnitError("a root of an angle is no unit", 0)
    return Unit(text, part.factor, int(part.pi_power), part.dimension, _coherent_text(part.names))


def _coherent_text(names: tuple[tuple[str, Fraction], ...]) -> str:
    above = [_powered(n, e) for n, e in names if e > 0]
    below = [_powered(n, -e) for n, e in names if e < 0]
    text = "*".join(above) or "1"
    if not below:
        return text
    return f"{text}/{below[0]}" if len(below) == 1 else f"{text}/({'*'.join(below)})"


def _powered(name: str, exponent: Fraction) -> str:
    if exponent == 1:
        return name
    return f"{name}^{exponent}" if exponent.denominator == 1 else f"{name}^({exponent})"


class _UnitParser:
    """Recursive descent over the text of one unit."""

    def __init__(self, text: str) -> None:
        if not text.strip():
            raise UnitError("no unit", 0, 'a dimensionless quantity has the unit "1"')
        if len(text) > LONGEST_UNIT:
            raise UnitError("the unit is too long", 0, f"at most {LONGEST_UNIT} characters")
        self.text = text
        self.tokens: list[tuple[str, int]] = []
        self.position = 0
        place = 0
        while text[place:].strip():
            found = _UNIT_TOKEN.match(text, place)
            if found is None:
                place += len(text[place:]) - len(text[place:].lstrip())
                raise UnitError(f"{text[place]} does not belong in a unit", place, _sign_advice(text[place:]))
            self.tokens.append((found[1], found.start(1)))
            place = found.end()

    def parse(self) -> _Part:
        """The whole text as one product."""
        part = self._product()
        if self.position < len(self.tokens):
            token, offset = self.tokens[self.position]
            hint = "write powers with ^, as m^2" if token.isdigit() else "write products with *, as kg*m^2/s^2"
            raise UnitError(f"{token} is not expected here", offset, hint)
        return part

    def _peek(self) -> str:
        return self.tokens[self.position][0] if self.position < len(self.tokens) else ""

    def _offset(self) -> int:
        return self.tokens[self.position][1] if self.position < len(self.tokens) else len(self.text)

    def _take(self) -> str:
        token = self._peek()
        self.position += 1
        return token

    def _product(self) -> _Part:
        part = self._factor()
        while self._peek() in ("*", "/"):
            sign = self._take()
            offset = self._offset()
            factor = self._factor()
            part = part.times(factor if sign == "*" else factor.power(Fraction(-1), offset))
        return part

    def _factor(self) -> _Part:
        offset = self._offset()
        part = self._atom()
        if self._peek() != "^":
            return part
        self._take()
        return part.power(self._exponent(), offset)

    def _atom(self) -> _Part:
        offset = self._offset()
        token = self._take()
        if token == "(":
            part = self._product()
            self._expect(")")
            return part
        if token == "1":
            return _ONE
        if token in (DECIBEL, CELSIUS):
            raise UnitError(f"{token} stands alone, not in products", offset, "use K for temperature differences")
        if not token or (not token[0].isalpha() and token != "%"):
            raise UnitError(f"{token or 'end of the unit'}: a unit name is missing", offset, "such as m, N/m or 1/s")
        return _named(token, offset)

    def _exponent(self) -> Fraction:
        bracketed = self._peek() == "("
        if bracketed:
            self._take()
        sign = -1 if self._peek() == "-" else 1
        if sign < 0:
            self._take()
        value = Fraction(self._integer())
        if bracketed and self._peek() == "/":
            self._take()
            value /= self._integer()
        if bracketed:
            self._expect(")")
        return sign * value

    def _integer(self) -> int:
        offset, token = self._offset(), self._take()
        if (
            not token.isdigit()
            or not 0 < len(token) < len(str(LARGEST_POWER)) + 1
            or not 0 < int(token) <= LARGEST_POWER
        ):
            raise UnitError("an exponent is missing or out of range", offset, f"a whole number up to {LARGEST_POWER}")
        return int(token)

    def _expect(self, sign: str) -> None:
        offset = self._offset()
        if self._take() != sign:
            raise UnitError(f"{sign} is missing", offset)


def _sign_advice(rest: str) -> str:
    if rest[0] in "²³⁻¹·×":
        return "write powers with ^ and products with *, as kg*m^2"
    return ADVICE.get(rest[:2].strip(), ADVICE.get(rest[0], "such as m, N/m or 1/s"))


@cache
def known_names() -> tuple[str, ...]:
    """Every unit name with its prefixes, for suggestions."""
    names = [s for s in _ROWS if s != "percent"] + ["%", DECIBEL]
    return (*names, *(p + s for s, row in _ROWS.items() if row.prefixable for p in PREFIXES if p in "munkMG"))


PERCENT: Final = parse_unit("%")
