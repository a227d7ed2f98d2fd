"""Criteria about equilibria: existence, complete list, value at the equilibrium (theorem E)."""

from __future__ import annotations

from fractions import Fraction
from typing import Final

from dossier.checks.along import combinations_to_try, range_along, value_at
from dossier.checks.boxes import range_over, split_widest
from dossier.checks.criteria.common import conclude, open_question, refute, refute_by_end, within
from dossier.checks.criteria.region import quantity_of
from dossier.checks.knowledge import Knowledge
from dossier.checks.lyapunov import parameter_box
from dossier.checks.movement import Movement, combination_text, words_of_values
from dossier.checks.path import place_at
from dossier.checks.solutions import lies_in
from dossier.model.affine import spread_box
from dossier.model.ball import Ball
from dossier.model.case import NOMINAL, Criterion, at_combination
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import Expression
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
    if _over_spreads(knowledge, criterion):
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
        if knowledge.case.none_expected and _over_spreads(knowledge, criterion):
            return open_question(knowledge, criterion, "that there is none is proved at the nominal combination only")
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
    if _over_spreads(knowledge, criterion):
        return _existence_over_tolerances(knowledge, criterion)
    premise = Premise(
        "unique", "at least one box is proved to hold exactly one equilibrium", "proved", "enclosed",
        found[0].identifier, evidence[0],
    )  # fmt: skip
    statement = "an equilibrium exists in the search box"
    return conclude(knowledge, criterion, "E", statement, (premise,), evidence, _found(knowledge))


def _over_spreads(knowledge: Knowledge, criterion: Criterion) -> bool:
    """Combinations other than the nominal one are meant."""
    return criterion.over != NOMINAL and bool(spread_box(knowledge.case).names)


def _existence_over_tolerances(knowledge: Knowledge, criterion: Criterion) -> Finding:
    fixed = next((e for e in _in_search(knowledge) if e.fixed_for_all), None)
    if fixed is not None:
        premise = Premise(
            "fixed", f"{fixed.identifier} is an equilibrium for every parameter combination", "proved", "exact",
            "the right-hand side vanishes there identically", fixed.identifier,
        )  # fmt: skip
        return conclude(knowledge, criterion, "E", "an equilibrium exists for every combination", (premise,), ())
    for absence, found in knowledge.absences():
        where = combination_text(knowledge.case, absence)
        return refute(
            knowledge, criterion, "E", found.statement, found.strength, (absence.identifier,), {"combination": where}
        )
    finding = knowledge.branch()
    if finding is None or knowledge.movement is None or not knowledge.movement.cells:
        return open_question(knowledge, criterion, _MOVES)
    hulls = [alone.course.hull() for alone in knowledge.movement.cells]
    inside = all(lies_in(hull, knowledge.case.search) for hull in hulls)
    premise = Premise(
        "search", "the equilibrium stays in the search box", "proved" if inside else "undecided", "enclosed",
        evidence=finding.subject,
    )  # fmt: skip
    statement = "an equilibrium exists in the search box for every combination"
    return conclude(knowledge, criterion, "E", statement, (*finding.premises, premise), (finding.subject,))


_MOVES: Final = "the equilibrium moves with the parameters, and its branch is not proved over the whole box"


def _value(knowledge: Knowledge, criterion: Criterion) -> Finding:
    chosen = knowledge.chosen
    if chosen is None:
        return open_question(knowledge, criterion, knowledge.why_no_equilibrium)
    if _over_spreads(knowledge, criterion) and not chosen.fixed_for_all:
        return _moving_value(knowledge, criterion, chosen)
    parameters = parameter_box(knowledge.case, criterion.over)
    sides = tuple(Interval(b.lower, b.upper) for b in chosen.state)
    place = Box((*knowledge.case.model.state_names, *parameters.names), (*sides, *parameters.intervals))
    ball = range_over(quantity_of(knowledge, criterion), place, PIECES)
    if ball is None:
        return open_question(knowledge, criterion, "the quantity has no finite enclosure at the equilibrium")
    value = Enclosure(ball.lower, ball.upper, "SI")
    inside = within(value, criterion)
    statement = _statement(criterion)
    facts = {"value": value}
    if inside is False:
        return _violated(knowledge, criterion, chosen, "nominal", value)
    premise = Premise(
        "value", statement, "proved" if inside else "undecided", "exact" if ball.is_exact else "enclosed",
        f"in {span(ball.lower, ball.upper)} (SI)", chosen.identifier,
    )  # fmt: skip
    return conclude(knowledge, criterion, "E", statement, (knowledge.place, premise), (), facts)


def _statement(criterion: Criterion) -> str:
    return f"the quantity {criterion.of_written} at the equilibrium stays within its bounds"


def _violated(knowledge: Knowledge, criterion: Criterion, chosen: Equilibrium, where: str, value: Enclosure) -> Finding:
    what = f"the quantity {criterion.of_written} at the equilibrium violates its bound"
    return refute(
        knowledge, criterion, "E", what, "enclosed", (chosen.identifier,), {"combination": where}, {"value": value}
    )


def _ranges(knowledge: Knowledge, criterion: Criterion, movement: Movement, quantity: Expression) -> list[Ball] | None:
    """The quantity on the cells of the branch, which are halved where that may decide; None without an enclosure."""
    case = knowledge.case
    waiting = [a.course.parameters for a in movement.cells or ()]
    balls: list[Ball] = []
    while waiting:
        cell = waiting.pop()
        place = movement.on(cell)
        ball = None if place is None else range_along(case, place, quantity)
        open_ = ball is None or within(Enclosure(ball.lower, ball.upper, "SI"), criterion) is not True
        halves = split_widest(cell, spread_box(case))
        if open_ and halves is not None and len(balls) + len(waiting) + 2 <= VALUE_CELLS:
            waiting.extend(halves)
        elif ball is None:
            return None
        else:
            balls.append(ball)
    return balls


VALUE_CELLS: Final = 128
"""Cells on which a quantity at a moving equilibrium is enclosed."""


def _moving_value(knowledge: Knowledge, criterion: Criterion, chosen: Equilibrium) -> Finding:
    """Over the cells of the branch; a corner of the box, or the nominal combination, may refute."""
    case, movement = knowledge.case, knowledge.movement
    quantity = quantity_of(knowledge, criterion)
    for absence, found in knowledge.absences():
        where = combination_text(case, absence)
        return refute(
            knowledge, criterion, "E", found.statement, found.strength, (absence.identifier,), {"combination": where}
        )
    for found in refute_by_end(knowledge, criterion):
        return found
    for values in combinations_to_try(case):
        there = place_at(case, chosen, values)
        ball = None if there is None else value_at(at_combination(case, values), there, quantity)
        value = None if ball is None else Enclosure(ball.lower, ball.upper, "SI")
        if value is not None and within(value, criterion) is False:
            return _violated(knowledge, criterion, chosen, words_of_values(case, values), value)
    finding = knowledge.branch()
    if finding is None or movement is None or not movement.cells:
        return open_question(knowledge, criterion, _MOVES)
    known = _ranges(knowledge, criterion, movement, quantity)
    if known is None:
        return open_question(knowledge, criterion, "the quantity has no finite enclosure at the equilibrium")
    value = Enclosure(min(b.lower for b in known), max(b.upper for b in known), "SI")
    inside = within(value, criterion)
    premise = Premise(
        "value", _statement(criterion), "proved" if inside else "undecided", "enclosed",
        "" if value.lower is None or value.upper is None else f"in {span(value.lower, value.upper)} (SI)",
        finding.subject,
    )  # fmt: skip
    premises = (knowledge.place, *finding.premises, premise)
    return conclude(knowledge, criterion, "E", _statement(criterion), premises, (finding.subject,), {"value": value})
