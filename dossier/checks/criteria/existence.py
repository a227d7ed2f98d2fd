"""Criteria about equilibria: existence, complete list, value at the equilibrium (theorem E)."""

from __future__ import annotations

from fractions import Fraction
from typing import Final

from dossier.checks.boxes import range_over
from dossier.checks.criteria.common import conclude, open_question, refute, within
from dossier.checks.criteria.region import quantity_of
from dossier.checks.knowledge import Knowledge
from dossier.checks.lyapunov import parameter_box
from dossier.checks.solutions import lies_in
from dossier.model.case import NOMINAL, Criterion
from dossier.model.equilibrium import Equilibrium
from dossier.model.figures import span
from dossier.model.finding import Enclosure, Finding, Premise
from dossier.model.region import Box, Interval

PIECES: Final = 1_024
"""Pieces for the range of a quantity over the enclosure of the equilibrium and the parameter box."""


def roots_claim_id(knowledge: Knowledge) -> str:
    """Id of the certificate that lists the equilibria."""
    return f"{knowledge.case.name}.R1"


def establish_existence(knowledge: Knowledge, criterion: Criterion) -> tuple[Finding, ...]:
    """Findings for ``existence``, ``equilibria_listed`` and ``equilibrium_value``."""
    if criterion.claim == "equilibrium_value":
        return (_value(knowledge, criterion),)
    if criterion.claim == "equilibria_listed":
        return (_listed(knowledge, criterion),)
    return (_existence(knowledge, criterion),)


def _listing_premises(knowledge: Knowledge) -> tuple[Premise, ...]:
    finding = knowledge.listing()
    if finding is not None:
        return finding.premises
    why = knowledge.unavailable.get("equilibria", "the cover of the search box is not complete")
    return (Premise("cover", "every part of the search box is decided", "undecided", "enclosed", why),)


def _in_search(knowledge: Knowledge) -> tuple[Equilibrium, ...]:
    """The proved equilibria in the search box; a point stated with ``at`` may lie outside it."""
    return tuple(e for e in knowledge.equilibria if lies_in(e.state, knowledge.case.search))


def _found(knowledge: Knowledge) -> dict[str, Enclosure]:
    count = Fraction(len(_in_search(knowledge)))
    return {"equilibria found": Enclosure(count, count, "1")}


def _listed(knowledge: Knowledge, criterion: Criterion) -> Finding:
    if criterion.over != NOMINAL:
        return open_question(knowledge, criterion, "the list is proved at the nominal combination only")
    listed = _in_search(knowledge)
    unclear = [e.identifier for e in listed if e.stability == "undecided"]
    classified = Premise(
        "class", "every listed equilibrium is classified by its linear part", "undecided" if unclear else "proved",
        "enclosed", f"not decided: {', '.join(unclear)}" if unclear else "",
    )  # fmt: skip
    count = len(listed)
    statement = f"the search box holds exactly {count} equilibri{'um' if count == 1 else 'a'}, each classified"
    premises = (*_listing_premises(knowledge), classified)
    return conclude(knowledge, criterion, "E", statement, premises, (roots_claim_id(knowledge),), _found(knowledge))


def _existence(knowledge: Knowledge, criterion: Criterion) -> Finding:
    evidence = (roots_claim_id(knowledge),)
    found = _in_search(knowledge)
    if not found:
        listing = knowledge.listing()
        if listing is None:
            why = knowledge.unavailable.get(
                "equilibria", "no equilibrium was found, but the search box is not fully decided"
            )
            return open_question(knowledge, criterion, why, _found(knowledge))
        if knowledge.case.none_expected:
            statement = "no equilibrium exists in the search box, as expected"
            return conclude(knowledge, criterion, "E", statement, listing.premises, evidence, _found(knowledge))
        return refute(
            knowledge, criterion, "E", "no equilibrium exists in the search box", "enclosed", evidence,
            {"combination": "nominal"}, _found(knowledge),
        )  # fmt: skip
    if knowledge.case.none_expected:
        return refute(
            knowledge, criterion, "E", "an equilibrium exists where none is expected", "enclosed", evidence,
            {"combination": "nominal", "equilibrium": found[0].identifier}, _found(knowledge),
        )  # fmt: skip
    if criterion.over != NOMINAL:
        return _existence_over_tolerances(knowledge, criterion)
    premise = Premise(
        "unique", "at least one box is proved to hold exactly one equilibrium", "proved", "enclosed",
        found[0].identifier, evidence[0],
    )  # fmt: skip
    statement = "an equilibrium exists in the search box"
    return conclude(knowledge, criterion, "E", statement, (premise,), evidence, _found(knowledge))


def _existence_over_tolerances(knowledge: Knowledge, criterion: Criterion) -> Finding:
    fixed = next((e for e in _in_search(knowledge) if e.fixed_for_all), None)
    if fixed is None:
        return open_question(knowledge, criterion, "the equilibrium moves with the parameters; only nominal is proved")
    premise = Premise(
        "fixed", f"{fixed.identifier} is an equilibrium for every parameter combination", "proved", "exact",
        "the right-hand side vanishes there identically", fixed.identifier,
    )  # fmt: skip
    return conclude(knowledge, criterion, "E", "an equilibrium exists for every combination", (premise,), ())


def _value(knowledge: Knowledge, criterion: Criterion) -> Finding:
    chosen = knowledge.chosen
    if chosen is None:
        return open_question(knowledge, criterion, "the operating point has no proved equilibrium")
    if criterion.over != NOMINAL and not chosen.fixed_for_all:
        return open_question(knowledge, criterion, "the equilibrium moves with the parameters; only nominal is proved")
    parameters = parameter_box(knowledge.case, criterion.over)
    sides = tuple(Interval(b.lower, b.upper) for b in chosen.state)
    place = Box((*knowledge.case.model.state_names, *parameters.names), (*sides, *parameters.intervals))
    ball = range_over(quantity_of(knowledge, criterion), place, PIECES)
    if ball is None:
        return open_question(knowledge, criterion, "the quantity has no finite enclosure at the equilibrium")
    value = Enclosure(ball.lower, ball.upper, "SI")
    inside = within(value, criterion)
    statement = f"the quantity {criterion.of_written} at the equilibrium stays within its bounds"
    facts = {"value": value}
    if inside is False:
        what = f"the quantity {criterion.of_written} at the equilibrium violates its bound"
        return refute(
            knowledge, criterion, "E", what, "enclosed",
            (chosen.identifier,), {"combination": "nominal"}, facts,
        )  # fmt: skip
    premise = Premise(
        "value", statement, "proved" if inside else "undecided", "exact" if ball.is_exact else "enclosed",
        f"in {span(ball.lower, ball.upper)} (SI)", chosen.identifier,
    )  # fmt: skip
    return conclude(knowledge, criterion, "E", statement, (knowledge.place, premise), (), facts)
