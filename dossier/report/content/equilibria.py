"""The equilibria of an operating point: where they are, whether the list is complete, what class they have."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Final

from dossier.model.claim import AbsenceClaim, BranchClaim, EndClaim, RootsClaim
from dossier.model.dossier import PointEvidence
from dossier.model.equilibrium import Equilibrium
from dossier.model.finding import Finding
from dossier.report import numbers, units, wording
from dossier.report.blocks import Block, Bullets, Column, Paragraph, Row, Table
from dossier.report.content.context import Context
from dossier.report.notation import spoken
from dossier.report.rich import Formula, Mono, Rich, rich

STATES_IN_ONE_TABLE: Final = 5
"""With more states than this, each equilibrium gets its own table: a row would not fit the page."""


def equilibrium_blocks(context: Context, point: PointEvidence) -> Iterator[Block]:
    """The list of equilibria and how complete it is."""
    yield Paragraph(_completeness(context, point))
    if point.equilibria:
        yield from _tables(context, point)
        yield _class_table(point)
    yield from _movement(context, point)
    if point.clusters:
        yield Bullets(tuple((f"Not resolved: {c}.",) for c in point.clusters))


def _movement(context: Context, point: PointEvidence) -> Iterator[Block]:
    """Where the equilibrium of the operating point lies over the tolerances, or where it ends."""
    for claim in point.claims:
        finding = next((f for f in point.findings if f.subject == claim.identifier and f.result == "proved"), None)
        if finding is None or not isinstance(claim, BranchClaim | AbsenceClaim | EndClaim):
            continue
        if isinstance(claim, BranchClaim):
            cells = wording.counted(len(claim.cells), "cell")
            yield Paragraph(
                rich(
                    "Proved: over the tolerances and ranges the equilibrium of the operating point moves continuously "
                    "and stays isolated (", context.link(claim.identifier), f", {cells}, theorem {claim.theorem}). "
                    "It stays within the bounds below; every criterion over tolerances is about each combination’s "
                    "own equilibrium.",
                )
            )  # fmt: skip
            yield _bounds_at_rest(point, finding)
        else:
            yield Paragraph(
                rich("Proved: ", finding.statement, " (", context.link(claim.identifier), ", SI)."), "caution"
            )


def _bounds_at_rest(point: PointEvidence, finding: Finding) -> Table:
    rows = []
    for state in point.case.model.states:
        fact = finding.facts[f"{state.name} at rest"]
        low, high = units.absolute_unit(state.unit, state.scale).from_si(fact.lower, fact.upper)
        lower = "–" if low is None else numbers.below(low)
        upper = "–" if high is None else numbers.above(high)
        rows.append(Row(((spoken(state.name),), (lower,), (upper,), (units.unit_text(state.unit) or "1",))))
    columns = (
        Column("State", "short", 25),
        Column("At least", "number", 25),
        Column("At most", "number", 25),
        Column("Unit", "short", 25),
    )
    return Table("The equilibrium over all combinations", columns, tuple(rows))


def _completeness(context: Context, point: PointEvidence) -> Rich:
    roots = next((c for c in point.claims if isinstance(c, RootsClaim)), None)
    if roots is None:
        return ("No search box was closed, so nothing is said about further equilibria.",)
    boxes = wording.counted(roots.boxes, "box", "boxes")
    proof = rich(" (", context.link(roots.identifier), f", {boxes}, theorem {roots.theorem}).")
    count = len(point.equilibria)
    if point.equilibria_complete and count == 0:
        return rich("Proved: the model has no equilibrium in the search box at the nominal parameter values", proof)
    if point.equilibria_complete:
        noun = "one equilibrium" if count == 1 else f"{count} equilibria"
        return rich(
            f"Proved: the search box holds exactly {noun} at the nominal parameter values, the listed one"
            f"{'' if count == 1 else 's'}", proof,
        )  # fmt: skip
    parts = wording.counted(len(roots.undecided), "part")
    return rich(f"The list is not proved to be complete: {parts} of the search box stayed undecided", proof)


def _tables(context: Context, point: PointEvidence) -> Iterator[Table]:
    notation = context.notations[point.case.model.name]
    states = point.case.model.states
    if len(states) <= STATES_IN_ONE_TABLE:
        share = 78 // (len(states) or 1)
        columns = [Column("Equilibrium", "id", 22)]
        columns.extend(Column(f"{spoken(s.name)} in {units.unit_text(s.unit) or '1'}", "number", share) for s in states)
        rows = [Row(((Mono(e.identifier),), *((_value(e, i, point),) for i in range(len(states)))), e.identifier)
                for e in point.equilibria]  # fmt: skip
        yield Table("Equilibria", tuple(columns), tuple(rows), _digits_note())
        return
    for equilibrium in point.equilibria:
        rows = [
            Row(
                (
                    (Formula(notation.latex(s.name), spoken(s.name)),),
                    (_value(equilibrium, i, point),),
                    (units.unit_text(s.unit) or "1",),
                )
            )
            for i, s in enumerate(states)
        ]
        yield Table(
            f"Equilibrium {equilibrium.identifier}",
            (Column("State", "formula", 30), Column("Value", "number", 40), Column("Unit", "short", 30)),
            tuple(rows),
            _digits_note(),
        )


def _digits_note() -> Rich:
    return ("Digits followed by … are the first digits of a value enclosed far more closely in the certificate.",)


def _value(equilibrium: Equilibrium, index: int, point: PointEvidence) -> str:
    state, ball = point.case.model.states[index], equilibrium.state[index]
    low, high = units.absolute_unit(state.unit, state.scale).from_si(ball.lower, ball.upper)
    return numbers.enclosure(low, high)


def _class_table(point: PointEvidence) -> Table:
    rows = tuple(
        Row(
            (
                (Mono(e.identifier),),
                (e.stability,),
                ("yes" if e.chosen else "no",),
                ("yes" if e.inside_domain else "no",),
                ("every combination" if e.fixed_for_all else "nominal",),
                ("; ".join(e.remarks) or "–",),
            )
        )
        for e in point.equilibria
    )
    columns = (
        Column("Equilibrium", "id", 22),
        Column("Linear class", "short", 14),
        Column("Operating point", "short", 14),
        Column("Inside domain", "short", 14),
        Column("Holds for", "short", 16),
        Column("Remark", share=20),
    )
    return Table("Class of each equilibrium", columns, rows)
