"""Signals within signals: no circle, and formulas of bounded size once every signal is written out."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final

from dossier.model.expression import Expression, fold
from dossier.project.dimensions import Checked, names_of
from dossier.project.faults import Ledger
from dossier.project.located import Text

MOST_PARTS: Final = 50_000
"""Nodes of one formula with its signals written out; its canonical text is a megabyte then."""
MOST_LEVELS: Final = 200
"""Levels of the same; comparing trees recurses once per level, far from the limit of the interpreter."""


@dataclass(frozen=True, slots=True)
class _Extent:
    parts: int
    levels: int


def check_inlining(
    formulas: Mapping[str, tuple[Text, Checked | None]], signals: frozenset[str], ledger: Ledger
) -> None:
    """Report a circle of signals, else every formula that grows too large; `formulas` hold the signals by name."""
    needs = {
        n: frozenset() if checked is None else names_of([checked.expression]) & signals
        for n, (_, checked) in formulas.items()
    }
    extents: dict[str, _Extent] = {}
    while ready := [n for n in needs if n not in extents and needs[n] <= extents.keys()]:
        for name in ready:
            text, checked = formulas[name]
            extents[name] = _Extent(1, 1) if checked is None else _extent(checked.expression, extents)
            if extents[name].parts > MOST_PARTS or extents[name].levels > MOST_LEVELS:
                ledger.fault(
                    text,
                    f"with its signals written out the formula has {_many(extents[name].parts)} parts on"
                    f" {extents[name].levels} levels",
                    expected=f"at most {MOST_PARTS} parts on {MOST_LEVELS} levels",
                    hint="use fewer signals within signals",
                )
                return
    circle = [n for n in needs if n not in extents and n in signals]
    if circle:
        ledger.fault(
            formulas[circle[0]][0],
            "signals define each other in a circle: " + ", ".join(circle),
            expected="signals that use states, parameters and earlier signals",
            hint="an algebraic loop needs a state, or a formula solved for the signal",
        )


def _many(count: int) -> str:
    return str(count) if count <= 10 * MOST_PARTS else f"more than {10 * MOST_PARTS}"


def _extent(expression: Expression, known: Mapping[str, _Extent]) -> _Extent:
    def visit(node: Expression, args: tuple[_Extent, ...]) -> _Extent:
        if node.op == "symbol":
            return known.get(str(node.value), _Extent(1, 1))
        return _Extent(1 + sum(a.parts for a in args), 1 + max((a.levels for a in args), default=0))

    return fold(expression, visit)
