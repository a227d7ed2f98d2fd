"""Denominators, roots and logarithms inside the model's domain: proved away from trouble, in trouble, or open.

Ball arithmetic over pieces of the domain (or of the search box where the domain is unbounded) and of all parameter
spreads decides; what it leaves open is a warning here and a premise that must be proved later.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from fractions import Fraction
from typing import Final, Literal

from flint import arb

from dossier.model.ball import WORKING_BITS, Ball, enclose, evaluate, precision
from dossier.model.case import Parameter
from dossier.model.expression import SATURATION, Condition, Expression, conditions, names, nodes, sub, substitute
from dossier.model.loop import ordered_signals
from dossier.model.region import Box, Interval
from dossier.project.dimensions import Checked
from dossier.project.faults import Ledger
from dossier.project.located import Text
from dossier.project.models import ModelReading

Answer = Literal["holds", "fails", "open"]

PIECES: Final = 256
"""Pieces of the box looked at for one condition: a hint while reading; the proofs have budgets of their own."""

_WORDS: Final = {
    "nonzero": ("becomes 0", "a value other than 0", "is not proved to stay away from 0"),
    "positive": ("becomes 0 or negative", "a positive value", "is not proved to stay positive"),
    "inside_unit": ("leaves -1 to 1", "a value between -1 and 1", "is not proved to stay between -1 and 1"),
}


def check_conditions(
    reading: ModelReading,
    asked: Sequence[tuple[Text, Checked]],
    box: Box,
    parameters: Mapping[str, Parameter],
    ledger: Ledger,
) -> None:
    """Report what is proved to be undefined somewhere in `box`; warn of what is not excluded.

    `asked` are the formulas of criteria, looked at like those of the model.
    """
    rest = {str(n): Interval.point(Fraction(0)) for n in reading.entry.disturbances or {}}
    sides = {**dict(box.items()), **{n: p.spread for n, p in parameters.items()}, **rest}
    nominal = {n: Interval(p.nominal.lower, p.nominal.upper) for n, p in parameters.items()}
    place = Box(tuple(sides), tuple(sides.values()))
    at_nominal = Box(place.names, tuple(nominal.get(n, i) for n, i in sides.items()))
    formulas = _inlined(reading)
    for text, checked in (*reading.formulas, *asked):
        for node in _inverted_limits(checked.expression, formulas, at_nominal):
            offset, source = checked.formula.excerpt(node)
            ledger.fault(
                text, "the lower limit lies above the upper one", text=source, expected="sat(value, lower, upper)",
                hint="exchange the limits", offset=offset,
            )  # fmt: skip
        for condition in conditions(checked.expression):
            answer = _answer(condition, substitute(condition.expression, formulas), place)
            offset, source = checked.formula.excerpt(condition.expression)
            if condition.expression not in checked.formula.spans:
                source = str(condition.expression)
            trouble, expected, unproved = _WORDS[condition.relation]
            if answer == "fails":
                ledger.fault(
                    text, f"{source} {trouble} in the domain or search box", text=source, expected=expected,
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


def _answer(condition: Condition, expression: Expression, place: Box) -> Answer:
    """What halving `place` shows within a budget of pieces.

    A denominator that has either sign somewhere is zero in between, as it is continuous where it is defined.
    """
    used = [(n, i) for n, i in place.items() if n in names(expression)]
    place = Box(tuple(n for n, _ in used), tuple(i for _, i in used))
    waiting, signs, looked, left_open = [place], set(), 0, False
    with precision(WORKING_BITS):
        while waiting:
            piece = waiting.pop(0)
            looked += 1
            sign = _sign(condition, expression, piece)
            if sign == "outside":
                return "fails"
            if sign != "open":
                signs.add(sign)
                if len(signs) > 1:
                    return "fails"
                continue
            halves = _halved(piece, place) if looked + len(waiting) < PIECES else None
            if halves is None:
                left_open = True
                continue
            waiting.extend(halves)
    return "open" if left_open else "holds"


def _sign(condition: Condition, expression: Expression, piece: Box) -> str:
    """``+`` or ``-`` where the condition holds with that sign, ``outside`` where it fails on all of `piece`."""
    value = evaluate(expression, {n: _ball(i) for n, i in piece.items()})
    if condition.relation == "inside_unit":
        value = 1 - abs(value)
    if not value.is_finite():
        return "open"
    if value > 0:
        return "+"
    if condition.relation == "nonzero":
        return "-" if value < 0 else "outside" if value.is_zero() else "open"
    return "outside" if value <= 0 else "open"


def _halved(piece: Box, whole: Box) -> tuple[Box, Box] | None:
    """Two halves along the bounded side that is widest, as a share of the whole; None where there is none."""
    shares = [
        p.width / w.width if w.is_bounded and not w.is_point else Fraction(0)
        for p, w in zip(piece.intervals, whole.intervals, strict=True)
    ]
    widest = max(range(len(shares)), key=shares.__getitem__, default=None)
    if widest is None or not shares[widest]:
        return None
    side = piece.intervals[widest]
    cuts = (Interval(side.lower, side.middle), Interval(side.middle, side.upper))
    first, second = (
        Box(piece.names, tuple(c if i == widest else s for i, s in enumerate(piece.intervals))) for c in cuts
    )
    return first, second


def _inverted_limits(expression: Expression, formulas: Mapping[str, Expression], place: Box) -> Iterator[Expression]:
    """Saturations whose lower limit is proved to lie above the upper one all over `place`."""
    for node in nodes(expression):
        if node.op == SATURATION:
            _, lower, upper = node.args
            room = substitute(sub(upper, lower), formulas)
            with precision(WORKING_BITS):
                if evaluate(room, {n: _ball(i) for n, i in place.items()}) < 0:
                    yield node
