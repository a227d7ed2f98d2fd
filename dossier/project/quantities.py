"""Stated quantities: a number, with or without a unit, to its exact SI value; intervals on the safe side."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Final, Literal

from dossier.model.case import Quantity, value_of
from dossier.model.region import Interval
from dossier.project.decimals import NumberError, Written, split
from dossier.project.faults import Ledger, suggestion
from dossier.project.located import Text
from dossier.project.units import DECIBEL, Dimension, Unit, UnitError, known_names, parse_unit

END_BITS: Final = 110
"""Bits kept of an interval end that carries pi: a relative error below 2^-100, and still a short fraction."""

Direction = Literal["outward", "inward"]


@dataclass(frozen=True, slots=True)
class Meaning:
    """What a number stands for: the declared unit (None: broken and already reported), and of what kind.

    `unitless` says whether a plain number is allowed; `difference` asks for offsets and half widths,
    where degrees Celsius become kelvin.
    """

    unit: Unit | None
    difference: bool = False
    plain: bool = True


def read_unit(text: Text, ledger: Ledger) -> Unit | None:
    """The unit declared as `text`; None where it is faulty."""
    if text.is_absent:
        return None
    try:
        unit = parse_unit(str(text))
    except UnitError as error:
        _report_unit(text, str(text), 0, error, ledger)
        return None
    if unit.is_decibel:
        ledger.fault(text, "dB is no unit of a quantity", expected="a unit", hint="dB is for gain margins only")
        return None
    return unit


def _report_unit(where: Text, unit: str, start: int, error: UnitError, ledger: Ledger) -> None:
    word = str(error).removeprefix("unknown unit ")
    hint = error.hint or suggestion(word, known_names(), "units are those of the SI, such as m, kN/mm or 1/s")
    ledger.fault(where, str(error), text=unit, expected="a known unit", hint=hint, offset=start + error.offset)


def read_quantity(text: Text, meaning: Meaning, ledger: Ledger, expected: str = "") -> Quantity | None:
    """The SI value of `text`; None where it is faulty, or where its declared unit is."""
    if text.is_absent:
        return None
    try:
        written = split(text)
    except NumberError as error:
        ledger.fault(text, str(error), expected=expected or "a number", hint=error.hint)
        return None
    unit = _unit_of(text, written, meaning, ledger)
    return None if unit is None else _quantity(written, unit, meaning)


def _unit_of(text: Text, written: Written, meaning: Meaning, ledger: Ledger) -> Unit | None:
    declared = meaning.unit
    if not written.unit:
        if declared is None or meaning.plain:
            return declared.difference if declared is not None and meaning.difference else declared
        hint = f"write it with its unit, such as {written.figure} {declared.text}"
        ledger.fault(text, "a number without a unit", expected=f"a quantity in {declared.text}", hint=hint)
        return None
    try:
        unit = parse_unit(written.unit)
    except UnitError as error:
        _report_unit(text, written.unit, written.offset, error, ledger)
        return None
    if declared is None:
        return None
    if meaning.difference and unit.zero:
        ledger.fault(
            text, "degC is for absolute temperatures", text=written.unit, expected="K",
            hint="differences, offsets and tolerances take K", offset=written.offset,
        )  # fmt: skip
        return None
    if unit.is_percent and not (declared.is_percent or declared.is_decibel or declared.text == "1"):
        ledger.fault(
            text, "a percentage is a ratio", text=written.unit, expected=f"a quantity in {declared.text}",
            hint=f"write it in {declared.text}, or give a reserve a criterion of its own", offset=written.offset,
        )  # fmt: skip
        return None
    if unit.is_decibel != declared.is_decibel or unit.dimension != declared.dimension:
        _report_dimension(text, written, unit, declared, ledger)
        return None
    return unit


def _report_dimension(text: Text, written: Written, unit: Unit, declared: Unit, ledger: Ledger) -> None:
    if declared.is_decibel:
        expected, hint = "a gain in dB", "20 log10 of the factor; a factor of 2 is 6.02 dB"
    elif unit.is_decibel:
        expected, hint = f"a quantity in {declared.text}", "dB is for gain margins only"
    else:
        expected = f"a quantity in {declared.text}"
        hint = f"{written.unit} measures {unit.dimension}, {declared.text} measures {declared.dimension}"
    ledger.fault(
        text, f"the unit {written.unit} does not fit", text=written.unit, expected=expected, hint=hint,
        offset=written.offset,
    )  # fmt: skip


def _quantity(written: Written, unit: Unit, meaning: Meaning) -> Quantity:
    zero = Fraction(0) if meaning.difference else unit.zero
    factor = written.value * unit.factor + zero
    figure = written.figure.removeprefix("+")
    name = "" if unit.text == "1" else unit.text
    return Quantity(factor, unit.pi_power if factor else 0, unit.coherent, f"{figure} {name}".strip())


def scale_of(unit: Unit) -> Quantity:
    """One of a declared unit, in SI (the zero of degrees Celsius apart)."""
    return Quantity(unit.factor, unit.pi_power, unit.coherent, f"1 {unit.text}")


def decibels() -> Meaning:
    """Gains, in dB only."""
    return Meaning(parse_unit(DECIBEL), plain=False)


def unit_for(dimension: Dimension) -> Unit | None:
    """The coherent unit of a dimension."""
    try:
        return parse_unit(str(dimension) or "1")
    except UnitError:
        return None


def end(quantity: Quantity, side: Literal["down", "up"]) -> Fraction:
    """A rational bound of `quantity`; itself where it carries no pi."""
    if quantity.pi_power == 0:
        return quantity.factor
    ball = value_of(quantity)
    value = ball.lower if side == "down" else ball.upper
    size = abs(value)
    bits = END_BITS - (size.numerator.bit_length() - size.denominator.bit_length())
    scaled = value * Fraction(2) ** bits
    whole = scaled.numerator // scaled.denominator
    if side == "up" and whole != scaled:
        whole += 1
    return Fraction(whole) / Fraction(2) ** bits


def read_interval(
    sides: Sequence[Text], meaning: Meaning, ledger: Ledger, direction: Direction
) -> tuple[Interval, tuple[Quantity, Quantity]] | None:
    """Two stated bounds as an interval, each end moved `direction` where it carries pi; None where faulty."""
    lower, upper = (read_quantity(t, meaning, ledger) for t in sides)
    if lower is None or upper is None:
        return None
    outward = direction == "outward"
    low, high = end(lower, "down" if outward else "up"), end(upper, "up" if outward else "down")
    if low > high:
        ledger.fault(
            sides[0], "the range is empty", text=f"[{sides[0]}, {sides[1]}]", expected="the smaller bound first",
            hint=f"write [{sides[1]}, {sides[0]}]" if str(sides[0]) != str(sides[1]) else "write two different bounds",
        )  # fmt: skip
        return None
    return Interval(low, high), (lower, upper)


def read_sides(
    table: Mapping[Text, Sequence[Text]], units: Mapping[str, Unit | None], ledger: Ledger, direction: Direction,
    difference: bool, what: str,
) -> dict[str, Interval]:  # fmt: skip
    """Intervals per name; names outside `units` are faults."""
    result = {}
    for name, sides in table.items():
        if name not in units:
            ledger.fault(
                name, f"{name} is no state, so it has no {what}", expected="a state: " + ", ".join(units),
                hint=suggestion(name, units, "only states have one: write a state of the model"),
            )  # fmt: skip
            continue
        interval = read_interval(sides, Meaning(units[name], difference), ledger, direction)
        if interval is not None:
            result[str(name)] = interval[0]
    return result
