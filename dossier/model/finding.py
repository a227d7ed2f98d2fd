"""What a check established about one statement, how strongly, and on which premises."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Final, Literal

from dossier.model.case import Scope

Result = Literal["proved", "refuted", "undecided", "not run"]
Strength = Literal["exact", "enclosed", "floating", "sampled"]

WEAKEST_STRENGTH_FIRST: Final[tuple[Strength, ...]] = ("sampled", "floating", "enclosed", "exact")


SCALE: Final = "proved scale of the spreads"
"""Fact of a claim over tolerances: it holds on the spreads widened about their middles by this factor, at least 1."""


@dataclass(frozen=True, slots=True)
class Enclosure:
    """A measured quantity as a closed enclosure in `unit`; an end None: no finite value exists there."""

    lower: Fraction | None
    upper: Fraction | None
    unit: str


@dataclass(frozen=True, slots=True)
class Premise:
    """One premise of a theorem: its label there, what was to be shown, and what the check found."""

    label: str
    statement: str
    result: Result
    strength: Strength
    detail: str = ""
    evidence: str = ""


@dataclass(frozen=True, slots=True)
class Finding:
    """The outcome of one check on one subject.

    `subject` is the id of a claim (certificate) or of a criterion; `check` is ``exact``, ``interval``
    or ``simulation``.  `facts` are named enclosures the check also established (excursion bounds,
    scale of the region that fits, ...).  `evidence` are the ids of the claims it rests on.
    """

    subject: str
    check: Literal["exact", "interval", "simulation"]
    result: Result
    strength: Strength
    over: Scope
    theorem: str
    statement: str
    premises: tuple[Premise, ...] = ()
    facts: Mapping[str, Enclosure] = field(default_factory=dict)
    evidence: tuple[str, ...] = ()
    counter_example: Mapping[str, str] = field(default_factory=dict)

    @property
    def is_rigorous(self) -> bool:
        """Established by exact or interval arithmetic."""
        return self.strength in ("exact", "enclosed")


def weakest(premises: tuple[Premise, ...]) -> tuple[Result, Strength]:
    """Result and strength of a conclusion that needs every premise."""
    strength: Strength = "exact"
    for candidate in reversed(WEAKEST_STRENGTH_FIRST):
        if any(p.strength == candidate for p in premises):
            strength = candidate
    if any(p.result == "refuted" for p in premises):
        return "refuted", strength
    if all(p.result == "proved" for p in premises):
        return "proved", strength
    return ("not run" if any(p.result == "not run" for p in premises) else "undecided"), strength
