"""Print intervals that the engineer stated: domains, regions, limits and spreads, in the declared units."""

from __future__ import annotations

from dossier.model.case import Case
from dossier.model.region import Interval
from dossier.report import numbers, units


def side_text(side: Interval, unit: units.PrintedUnit) -> str:
    """An interval that the engineer stated, in the declared unit."""
    if side.lower is None and side.upper is None:
        return "not bounded"
    low, high = unit.from_si(side.lower, side.upper)
    left = "" if low is None else numbers.stated(low)
    right = "" if high is None else numbers.stated(high)
    if low is None:
        return f"up to {right}"
    return f"from {left}" if high is None else f"{left} {numbers.ELLIPSIS} {right}"


def offset_side(case: Case, name: str, side: Interval) -> str:
    """A region or limit side, as an offset from the equilibrium, with its unit."""
    state = next(s for s in case.model.states if s.name == name)
    unit = units.difference_unit(state.unit, state.scale)
    text = side_text(side, unit)
    return text if text == "not bounded" else units.with_unit(text, unit.name)


def absolute_side(case: Case, name: str, side: Interval) -> str:
    """A domain or search side, in the state's unit."""
    state = next(s for s in case.model.states if s.name == name)
    unit = units.absolute_unit(state.unit, state.scale)
    text = side_text(side, unit)
    return text if text == "not bounded" else units.with_unit(text, unit.name)
