"""One parameter: its exact nominal value and its spread, as declared and as set by an operating point."""

from __future__ import annotations

from dataclasses import dataclass, replace
from fractions import Fraction

from dossier.model.ball import Ball
from dossier.model.case import Parameter, Quantity, value_of
from dossier.model.region import Interval
from dossier.project.decimals import NumberError, split
from dossier.project.faults import Ledger
from dossier.project.located import Items, Text
from dossier.project.quantities import Meaning, end, read_interval, read_quantity, scale_of
from dossier.project.schema import ParameterEntry, SetEntry
from dossier.project.units import PERCENT, Unit


@dataclass(frozen=True, slots=True)
class ParameterReading:
    """A parameter and how its spread was declared, so that a set value can carry a relative tolerance along."""

    parameter: Parameter
    unit: Unit
    relative: Fraction | None
    tolerance_written: str


@dataclass(frozen=True, slots=True)
class _Spread:
    interval: Interval
    kind: str
    written: str
    relative: Fraction | None = None


def read_parameter(name: Text, entry: ParameterEntry, unit: Unit | None, ledger: Ledger) -> ParameterReading | None:
    """The parameter as declared; None where it has a fault."""
    before = len(ledger.faults)
    nominal = read_quantity(entry.value, Meaning(unit), ledger)
    spread = _spread(entry.value, nominal, entry.tolerance, entry.range, unit, ledger)
    varies = entry.varies == "true"
    if varies and entry.range is None and entry.tolerance is None:
        ledger.fault(
            entry.varies or name, f"{name} varies but has no range", expected="range: [lower, upper]",
            hint="state the range within which it changes",
        )  # fmt: skip
    if nominal is None or unit is None or spread is None or len(ledger.faults) > before:
        return None
    parameter = Parameter(
        str(name), str(entry.unit), scale_of(unit), value_of(nominal), spread.interval, spread.kind, varies,  # type: ignore[arg-type]
        str(entry.meaning or ""), str(entry.source or ""), str(entry.value), spread.written,
    )  # fmt: skip
    written = str(entry.tolerance or "")
    return ParameterReading(parameter, unit, spread.relative, written)


def set_parameter(
    name: Text, setting: Text | SetEntry, declared: ParameterReading, ledger: Ledger
) -> ParameterReading | None:
    """`declared` with the value an operating point sets; None where the setting has a fault.

    A plain value fixes the parameter; a relative tolerance is kept and applies to the new value.
    """
    before = len(ledger.faults)
    text = setting if isinstance(setting, Text) else setting.value
    unit = declared.unit
    nominal = read_quantity(text, Meaning(unit), ledger)
    if isinstance(setting, Text):
        spread = None if nominal is None else _kept(nominal, declared)
        varies = False
    else:
        spread = _spread(text, nominal, setting.tolerance, setting.range, unit, ledger)
        if spread is not None and nominal is not None and setting.tolerance is None and setting.range is None:
            spread = _kept(nominal, declared)
        varies = declared.parameter.varies and spread is not None and spread.kind != "exact"
    if nominal is None or spread is None or len(ledger.faults) > before:
        return None
    value = value_of(nominal)
    old = declared.parameter
    if old.kind == "tolerance" and spread.kind == "exact":
        ledger.warn(
            text, f"{name} is set to {text} exactly; its tolerance {old.spread_written} is absolute and dropped"
        )
    if old.kind == "range" and not old.spread.contains(Interval(value.lower, value.upper)):
        ledger.warn(text, f"{name} is set to {text}, outside its declared range {old.spread_written}")
    parameter = replace(
        old, nominal=value, spread=spread.interval, kind=spread.kind, varies=varies, written=str(text),
        spread_written=spread.written,
    )  # fmt: skip
    return replace(declared, parameter=parameter)


def _kept(nominal: Quantity, declared: ParameterReading) -> _Spread:
    if declared.relative is None:
        return _Spread(_exact(nominal), "exact", "")
    return _around(nominal, declared.relative, declared.tolerance_written)


def _exact(nominal: Quantity) -> Interval:
    return Interval(end(nominal, "down"), end(nominal, "up"))


def _around(nominal: Quantity, relative: Fraction, written: str) -> _Spread:
    value = _exact(nominal)
    low, high = value.bounds
    half = max(abs(low), abs(high)) * relative
    return _Spread(Interval(low - half, high + half), "tolerance", f"± {written}", relative)


def _spread(
    text: Text, nominal: Quantity | None, tolerance: Text | None, sides: object, unit: Unit | None, ledger: Ledger
) -> _Spread | None:
    if tolerance is not None and sides is not None:
        ledger.fault(
            tolerance, "a tolerance and a range for one parameter", expected="one of the two",
            hint="tolerance is the spread in production, range the spread in use",
        )  # fmt: skip
        return None
    if isinstance(sides, Items):
        return _range(text, nominal, sides, unit, ledger)
    if tolerance is not None:
        return _tolerance(tolerance, nominal, unit, ledger)
    return None if nominal is None else _Spread(_exact(nominal), "exact", "")


def _range(text: Text, nominal: Quantity | None, sides: Items, unit: Unit | None, ledger: Ledger) -> _Spread | None:
    found = read_interval(sides, Meaning(unit), ledger, "outward")
    if found is None or nominal is None:
        return None
    value: Ball = value_of(nominal)
    if not found[0].contains(Interval(value.lower, value.upper)):
        ledger.fault(
            text, "the value lies outside its range", expected=f"a value within [{sides[0]}, {sides[1]}]",
            hint="correct the value or the range",
        )  # fmt: skip
        return None
    return _Spread(found[0], "range", f"{sides[0]} … {sides[1]}")


def _tolerance(text: Text, nominal: Quantity | None, unit: Unit | None, ledger: Ledger) -> _Spread | None:
    if text.is_absent or unit is None:
        return None
    relative = _is_relative(text)
    if relative and unit.is_percent:
        ledger.fault(
            text, "% of a percentage may mean two things", expected="a range", hint="write range: [lower, upper]"
        )
        return None
    if relative and unit.zero:
        ledger.fault(text, "a relative tolerance of a temperature in degC has no meaning", expected="a tolerance in K")
        return None
    meaning = Meaning(PERCENT) if relative else Meaning(unit, difference=True)
    half = read_quantity(text, meaning, ledger, "a half width, such as 3 % or a quantity in the unit of the value")
    if half is None or nominal is None:
        return None
    if half.factor < 0:
        ledger.fault(text, "the tolerance is negative", expected="a half width of at least 0", hint="drop the sign")
        return None
    if relative:
        return _around(nominal, half.factor, str(text))
    low, high = _exact(nominal).bounds
    width = end(half, "up")
    return _Spread(Interval(low - width, high + width), "tolerance", f"± {text}")


def _is_relative(text: Text) -> bool:
    try:
        return split(text).unit == PERCENT.text
    except NumberError:
        return False
