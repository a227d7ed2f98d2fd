"""Print what a criterion requires, what was obtained and the reserve, in the unit the engineer used."""

from __future__ import annotations

from fractions import Fraction
from typing import Final

from dossier.model.case import NOMINAL, Case, Criterion, Quantity
from dossier.model.finding import Enclosure
from dossier.model.outcome import LoopMargins, Outcome
from dossier.report import numbers, units
from dossier.report.blocks import Gauge
from dossier.report.units import PrintedUnit

NOTHING: Final = "–"
WANTED_UP: Final = "≥"
WANTED_DOWN: Final = "≤"


def unit_of(criterion: Criterion, case: Case) -> PrintedUnit:
    """The unit to print the criterion's quantity in: that of its bounds, else of its state or signal, else SI."""
    bounds = _bounds(criterion)
    told = next((u for u in map(units.stated_unit, bounds) if u is not None), None)
    if told is not None:
        return told
    for declared in (*case.model.states, *case.model.signals, *case.model.parameters):
        if declared.name == criterion.of_written:
            return units.absolute_unit(declared.unit, declared.scale)
    coherent = PrintedUnit(bounds[0].unit) if bounds else units.COHERENT
    return _HABITS.get(criterion.claim, coherent)


_HABITS: Final = {
    "phase_margin": units.DEGREE,
    "delay_margin": units.MILLISECOND,
    "gain_margin": PrintedUnit("dB"),
    "decay_rate": PrintedUnit("1/s"),
    "exponential_stability": PrintedUnit("1/s"),
    "damping_ratio": PrintedUnit("1"),
    "contraction": PrintedUnit("1"),
    "peak_sensitivity": PrintedUnit("1"),
}


def _bounds(criterion: Criterion) -> tuple[Quantity, ...]:
    pair = criterion.between or ()
    return tuple(q for q in (*pair, criterion.at_least, criterion.at_most) if q is not None)


def required(criterion: Criterion) -> str:
    """The bounds as the engineer wrote them; nothing for a yes-no claim."""
    if criterion.between is not None:
        low, high = (units.as_written(q) for q in criterion.between)
        figure, _, unit = low.partition(units.SPACE)
        shared = unit and high.endswith(units.SPACE + unit)
        return f"{figure if shared else low} {numbers.ELLIPSIS} {high}"
    if criterion.at_least is not None:
        return f"{WANTED_UP}{units.SPACE}{units.as_written(criterion.at_least)}"
    if criterion.at_most is not None:
        return f"{WANTED_DOWN}{units.SPACE}{units.as_written(criterion.at_most)}"
    return ""


def required_words(criterion: Criterion) -> str:
    """The bounds as part of a sentence."""
    if criterion.between is not None:
        low, high = criterion.between
        return f"between {units.as_written(low)} and {units.as_written(high)}"
    if criterion.at_least is not None:
        return f"at least {units.as_written(criterion.at_least)}"
    if criterion.at_most is not None:
        return f"at most {units.as_written(criterion.at_most)}"
    return ""


def obtained(outcome: Outcome, criterion: Criterion, case: Case) -> str:
    """The value obtained: a proved bound from its less favourable side, other enclosures from both.

    What was measured at the nominal combination only, where tolerances were asked for, says so.
    """
    text = _obtained(outcome, criterion, case)
    only_nominal = criterion.over != NOMINAL and outcome.verdict in ("not attempted", "not applicable")
    return f"nominal only: {text}" if text and only_nominal else text


def _obtained(outcome: Outcome, criterion: Criterion, case: Case) -> str:
    value = outcome.value
    if value is None:
        return ""
    unit = unit_of(criterion, case)
    low, high = units.convert(value, unit)
    if outcome.verdict == "proved" and criterion.between is None:
        if criterion.at_least is not None:
            return _one_sided(WANTED_UP, low, unit)
        if criterion.at_most is not None:
            return _one_sided(WANTED_DOWN, high, unit)
    if low is None and high is None:
        return numbers.NO_FINITE_VALUE
    return units.with_unit(numbers.enclosure(low, high), unit.name)


def _one_sided(sign: str, end: Fraction | None, unit: PrintedUnit) -> str:
    if end is None:
        return numbers.NO_FINITE_VALUE
    figure = numbers.below(end) if sign == WANTED_UP else numbers.above(end)
    return f"{sign}{units.SPACE}{units.with_unit(figure, unit.name)}"


def reserve(outcome: Outcome) -> Gauge | None:
    """The proved reserve, rounded down, with its bar; None where there is none."""
    if outcome.reserve is None or outcome.reserve.lower is None:
        return None
    share = outcome.reserve.lower
    return Gauge(share, numbers.percent_below(share))


def printed(enclosure: Enclosure | None, unit: PrintedUnit) -> str:
    """An SI enclosure in `unit`."""
    if enclosure is None:
        return NOTHING
    low, high = units.convert(enclosure, unit)
    if low is None and high is None:
        return numbers.NO_FINITE_VALUE
    return units.with_unit(numbers.enclosure(low, high), unit.name)


def margin_rows(margins: LoopMargins) -> tuple[tuple[str, str, str], ...]:
    """Quantity, value and the frequency at which it occurs, for each margin of one loop."""
    decibel, plain = PrintedUnit("dB"), PrintedUnit("1")
    rows = (
        ("gain may rise by", margins.gain_up, decibel, margins.gain_up_at),
        ("gain may fall by", margins.gain_down, decibel, margins.gain_down_at),
        ("phase margin", margins.phase, units.DEGREE, margins.phase_at),
        ("delay margin", margins.delay, units.MILLISECOND, margins.delay_at),
        ("peak sensitivity", margins.peak_sensitivity, plain, margins.peak_sensitivity_at),
    )
    return tuple((name, printed(value, unit), printed(at, units.HERTZ)) for name, value, unit, at in rows)
