"""Print units, and convert enclosures from SI into the units the engineer declared, outward."""

from __future__ import annotations

import re
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

from dossier.model.case import Quantity
from dossier.model.finding import Enclosure

PI_BELOW: Final = Fraction("3.14159265358979323846264338327950288")
PI_ABOVE: Final = PI_BELOW + Fraction(1, 10**35)
"""pi to 35 decimals, below and above (value known since Ludolph van Ceulen, 1610)."""

ZERO_POINTS: Final = {"degC": Fraction("273.15")}
"""SI value of the zero of units that do not begin at zero; used for absolute values only."""

DIFFERENCE_UNITS: Final = {"degC": "K"}
"""The unit of a difference, where it has another name."""

_NAMES: Final = {"deg": "°", "degC": "°C", "ohm": "Ω", "percent": "%", "1": "", "": "", "SI": "(SI units)"}
_POWERS: Final = str.maketrans("0123456789-", "⁰¹²³⁴⁵⁶⁷⁸⁹⁻")
SPACE: Final = "\u00a0"
THIN: Final = "\u202f"


@dataclass(frozen=True, slots=True)
class PrintedUnit:
    """A unit to print in: one of it is `factor` * pi**`pi_power` in SI, its zero lies at `zero` in SI."""

    name: str
    factor: Fraction = Fraction(1)
    pi_power: int = 0
    zero: Fraction = Fraction(0)

    def from_si(self, lower: Fraction | None, upper: Fraction | None) -> tuple[Fraction | None, Fraction | None]:
        """The enclosure [lower, upper] of SI values in this unit, rounded outward where pi is involved."""
        if self.pi_power == 0:
            return tuple(None if v is None else (v - self.zero) / self.factor for v in (lower, upper))  # type: ignore[return-value]
        return (
            None if lower is None else min(self._candidates(lower)),
            None if upper is None else max(self._candidates(upper)),
        )

    def _candidates(self, value: Fraction) -> tuple[Fraction, Fraction]:
        return value / (self.factor * PI_BELOW**self.pi_power), value / (self.factor * PI_ABOVE**self.pi_power)


def absolute_unit(unit: str, scale: Quantity) -> PrintedUnit:
    """The declared unit of a state, parameter or signal, for its absolute values."""
    return PrintedUnit(unit, scale.factor, scale.pi_power, ZERO_POINTS.get(unit, Fraction(0)))


def difference_unit(unit: str, scale: Quantity) -> PrintedUnit:
    """The declared unit, for differences from the equilibrium."""
    return PrintedUnit(DIFFERENCE_UNITS.get(unit, unit), scale.factor, scale.pi_power)


COHERENT: Final = PrintedUnit("SI")
"""Where no declared unit can be told: the value in coherent SI units, and the page says so."""
MILLISECOND: Final = PrintedUnit("ms", Fraction(1, 1000))
DEGREE: Final = PrintedUnit("deg", Fraction(1, 180), 1)
HERTZ: Final = PrintedUnit("Hz", Fraction(2), 1)
"""For frequencies: one hertz is 2 pi radians per second."""

_WRITTEN: Final = re.compile(r"^\s*([-+]?[0-9.]+(?:[eE][-+]?[0-9]+)?)\s*(.*?)\s*$")


def stated_unit(quantity: Quantity) -> PrintedUnit | None:
    """The unit in which a stated bound was written, recovered from its text and its exact SI value.

    None where that cannot be told: a bound of zero has no unit of its own.
    """
    match = _WRITTEN.match(quantity.written)
    if match is None:
        return None
    figure, name = Fraction(match[1]), match[2] or quantity.unit
    if name in ZERO_POINTS:
        return PrintedUnit(name, zero=ZERO_POINTS[name])
    if figure == 0 or quantity.factor == 0:
        return None
    return PrintedUnit(name, quantity.factor / figure, quantity.pi_power)


def convert(enclosure: Enclosure, unit: PrintedUnit) -> tuple[Fraction | None, Fraction | None]:
    """The ends of `enclosure`, which is in SI, in `unit`."""
    return unit.from_si(enclosure.lower, enclosure.upper)


def unit_text(unit: str) -> str:
    """A unit as printed: ``kg*m^2/s`` becomes ``kg m²/s``; a dimensionless unit becomes nothing."""
    if unit in _NAMES:
        return _NAMES[unit]
    text = re.sub(r"(?:\^|\*\*)\(?(-?\d+)\)?", lambda m: m[1].translate(_POWERS), unit)
    parts = re.split(r"([*/])", text)
    return "".join({"*": SPACE, "/": "/"}.get(p, _NAMES.get(p, p) if p != "1" else "1") for p in parts)


def with_unit(figure: str, unit: str) -> str:
    """A printed number and its unit; an angle's degree sign stands close."""
    name = unit_text(unit)
    if not name:
        return figure
    return f"{figure}{name}" if name == "°" else f"{figure}{SPACE}{name}"


def as_written(quantity: Quantity) -> str:
    """A stated quantity as the engineer wrote it, with printed signs and its unit."""
    return written(quantity.written, quantity.unit)


def written(text: str, unit: str = "") -> str:
    """A number as typed, perhaps with a unit, in printed signs; any other text unchanged."""
    match = _WRITTEN.match(text)
    if match is None:
        return text
    figure = match[1].lstrip("+").replace("-", "−") if "e" not in match[1].lower() else _power_of_ten(match[1])
    return with_unit(figure, match[2] or unit)


def _power_of_ten(text: str) -> str:
    mantissa, exponent = re.split("[eE]", text)
    power = str(int(exponent)).translate(_POWERS)
    return f"{mantissa.replace('-', '−')}{THIN}×{THIN}10{power}"
