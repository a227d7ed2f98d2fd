"""The traceability matrix: from requirement and hazard to criterion, assumptions, evidence and verdict."""

from __future__ import annotations

from dossier.model.dossier import PointEvidence
from dossier.model.outcome import Outcome
from dossier.report import wording
from dossier.report.blocks import (
    Block,
    Bullets,
    Cell,
    Column,
    PageReference,
    Paragraph,
    Row,
    Section,
    Subheading,
    Table,
    VerdictMark,
)
from dossier.report.content import quantities
from dossier.report.content.context import Context, assumptions_of, spoken_id
from dossier.report.content.verdicts import criterion_of
from dossier.report.rich import Link, joined


def trace_section(context: Context, number: str) -> Section:
    """One row per criterion, and what has no partner."""
    rows = tuple(
        Row(_cells(context, point, outcome)) for point in context.evidence.points for outcome in point.outcomes
    )
    columns = (
        Column("Requirement", "id", 9),
        Column("Hazard", "id", 7),
        Column("Criterion", "id", 13),
        Column("Claim", share=17),
        Column("Required", "number", 9),
        Column("Assumptions", share=8),
        Column("Evidence", "id", 14),
        Column("Verdict", "short", 13),
        Column("Checked", "short", 6),
        Column("Where", "short", 4),
    )
    blocks: list[Block] = [Table("From requirement to evidence", columns, rows)]
    blocks.extend(_orphans(context))
    return Section("trace", number, "Traceability", tuple(blocks), landscape=True)


def _cells(context: Context, point: PointEvidence, outcome: Outcome) -> tuple[Cell, ...]:
    criterion = criterion_of(point, outcome)
    return (
        (criterion.requirement or quantities.NOTHING,),
        (criterion.hazard or quantities.NOTHING,),
        (Link(outcome.identifier, outcome.identifier),),
        (f"{wording.claim_name(criterion.claim)}, {wording.scope_short(criterion.over)}",),
        (quantities.required(criterion) or quantities.NOTHING,),
        context.links(assumptions_of(context.evidence, point, outcome.identifier)),
        context.links(outcome.evidence),
        VerdictMark(outcome.verdict),
        ("–" if outcome.strength is None else wording.STRENGTH_WORDS[outcome.strength],),
        PageReference(outcome.identifier, spoken_id(outcome.identifier)),
    )


def _orphans(context: Context) -> list[Block]:
    pairs = [(p, o) for p in context.evidence.points for o in p.outcomes]
    without = [o.identifier for p, o in pairs if not criterion_of(p, o).requirement]
    used = {e for _, o in pairs for e in o.evidence}
    unused = [c.identifier for p in context.evidence.points for c in p.claims if c.identifier not in used]
    items = []
    if without:
        items.append(("Criteria without a requirement: ", *joined([context.link(i) for i in without]), "."))
    if unused:
        items.append(("Evidence no verdict rests on: ", *joined([context.link(i) for i in unused]), "."))
    if not items:
        return [Paragraph(("Every criterion names a requirement, and every certificate serves a verdict.",), "small")]
    return [Subheading(("Without a partner",)), Bullets(tuple(items))]
