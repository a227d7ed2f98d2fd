"""Denominators, roots and logarithms inside the model's domain: proved away from trouble, in trouble, or open.

Ball arithmetic over the whole domain (or the search box where the domain is unbounded) and all parameter
spreads decides; what it leaves open is a warning here and a premise that must be proved later.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Final, Literal

from flint import arb

from dossier.model.ball import WORKING_BITS, Ball, enclose, evaluate, precision
from dossier.model.expression import Condition, Expression, conditions, substitute
from dossier.model.loop import ordered_signals
from dossier.model.region import Box, Interval
from dossier.project.dimensions import Checked
from dossier.project.faults import Ledger
from dossier.project.located import Text
from dossier.project.models import ModelReading

Answer = Literal["holds", "fails", "open"]

_WORDS: Final = {
    "nonzero": ("is 0", "a value other than 0", "is not proved to stay away from 0"),
    "positive": ("is never positive", "a positive value", "is not proved to stay positive"),
    "inside_unit": ("is never between -1 and 1", "a value between -1 and 1", "is not proved to stay between -1 and 1"),
}


def check_conditions(
    reading: ModelReading,
    asked: Sequence[tuple[Text, Checked]],
    box: Box,
    spreads: Mapping[str, Interval],
    ledger: Ledger,
) -> None:
    """Report what is proved to be undefined everywhere in `box`; warn of what is not excluded.

    `asked` are the formulas of criteria, looked at like those of the model.
    """
    environment = {n: _ball(i) for n, i in box.items()} | {n: _ball(i) for n, i in spreads.items()}
    environment |= {str(n): arb(0) for n in reading.entry.disturbances or {}}
    formulas = _inlined(reading)
    for text, checked in (*reading.formulas, *asked):
        for condition in conditions(checked.expression):
            answer = _answer(condition, substitute(condition.expression, formulas), environment)
            offset, source = checked.formula.excerpt(condition.expression)
            if condition.expression not in checked.formula.spans:
                source = str(condition.expression)
            never, expected, unproved = _WORDS[condition.relation]
            if answer == "fails":
                ledger.fault(
                    text, f"{source} {never} everywhere in the domain or search box", text=source, expected=expected,
                    hint="correct the formula, the values or the domain", offset=offset,
                )  # fmt: skip
            elif answer == "open":
                ledger.warn(text, f"{source} {unproved} in the domain; it becomes a premise of every proof", offset)


def _inlined(reading: ModelReading) -> dict[str, Expression]:
    """Formula of every signal in states, parameters and disturbances."""
    if reading.model is None:
        return {}
    signals = {s.name: s.expression for s in reading.model.signals}
    formulas: dict[str, Expression] = {}
    for name in ordered_signals(reading.model):
        formulas[name] = substitute(signals[name], formulas)
    return formulas


def _ball(side: Interval) -> arb:
    if side.is_bounded:
        return enclose(Ball.from_bounds(*side.bounds))
    return arb(0, float("inf"))


def _answer(condition: Condition, expression: Expression, environment: Mapping[str, arb]) -> Answer:
    with precision(WORKING_BITS):
        value = evaluate(expression, environment)
        if condition.relation == "inside_unit":
            value = 1 - abs(value)
        if not value.is_finite():
            return "open"
        if value > 0 or (condition.relation == "nonzero" and value < 0):
            return "holds"
        if condition.relation == "nonzero":
            return "fails" if value.is_zero() else "open"
        return "fails" if value <= 0 else "open"
