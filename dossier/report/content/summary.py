"""The summary for the review board: the conclusion in one sentence, one row per criterion, what limits it."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator

from dossier.model.case import TOLERANCES
from dossier.model.dossier import Evidence, PointEvidence
from dossier.model.outcome import VERDICTS, Outcome, Verdict, roll_up
from dossier.report import numbers, wording
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
from dossier.report.content.context import Context, spoken_id
from dossier.report.content.verdicts import criterion_of
from dossier.report.rich import Link, Mono, Part, Rich, joined, rich

NEEDS_ACTION: tuple[Verdict, ...] = (
    "refuted", "contradicted", "no operating point", "not established", "supported", "not attempted",
)  # fmt: skip
SCALE_FACT = "proved scale of the region"


def all_outcomes(evidence: Evidence) -> tuple[Outcome, ...]:
    """Every outcome in the order of the operating points."""
    return tuple(o for p in evidence.points for o in p.outcomes)


def weakest(evidence: Evidence) -> Verdict:
    """The weakest verdict of the dossier."""
    return roll_up(tuple(o.verdict for o in all_outcomes(evidence)))


def conclusion(evidence: Evidence) -> str:
    """How many criteria are proved, and what became of the others."""
    counts = Counter(o.verdict for o in all_outcomes(evidence))
    total = sum(counts.values())
    if counts["proved"] == total:
        return f"All {total} criteria are proved for the models and sets stated."
    rest = [f"{counts[v]} {wording.VERDICT_WORDS[v].word}" for v in VERDICTS if v != "proved" and counts[v]]
    return f"{counts['proved']} of {total} criteria are proved for the models and sets stated; {', '.join(rest)}."


def summary_section(context: Context, number: str) -> Section:
    """Section 1."""
    blocks: list[Block] = [Paragraph((conclusion(context.evidence),), "lead")]
    blocks.extend(_contradictions(context))
    blocks.append(_criteria_table(context))
    blocks.append(Subheading(("What limits these results",)))
    blocks.append(Bullets(tuple(_limitations(context))))
    return Section("summary", number, "Summary", tuple(blocks), new_page=True)


def _contradictions(context: Context) -> Iterator[Block]:
    for outcome in all_outcomes(context.evidence):
        if outcome.contradiction:
            yield Paragraph(
                rich(
                    "Internal contradiction: a proof and counter-evidence stand against each other for ",
                    context.link(outcome.identifier), ". This issue must not be used until it is resolved.",
                ),
                "caution",
            )  # fmt: skip


def _criteria_table(context: Context) -> Table:
    rows = [row for point in context.evidence.points for row in _point_rows(context, point)]
    columns = (
        Column("Criterion", "id", 8),
        Column("Asks", share=21),
        Column("Parameters", "short", 9),
        Column("Required", "number", 14),
        Column("Obtained", "number", 14),
        Column("Reserve", "short", 9),
        Column("Verdict", "short", 16),
        Column("Checked", "short", 6),
        Column("Where", "short", 3),
    )
    return Table("Criteria and verdicts", columns, tuple(rows), _reserve_note())


def _point_rows(context: Context, point: PointEvidence) -> Iterator[Row]:
    meaning = f"  {point.case.meaning}" if point.case.meaning else ""
    yield Row((rich(Link(point.case.name, point.case.name), meaning),), spanning=True)
    for outcome in point.outcomes:
        yield Row(_summary_cells(context, point, outcome))


def _reserve_note() -> Rich:
    return (
        "Reserve: what is left of the way to the limit, rounded down; for an excursion from the equilibrium, "
        "otherwise relative to the limit.",
    )


def _summary_cells(context: Context, point: PointEvidence, outcome: Outcome) -> tuple[Cell, ...]:
    criterion = criterion_of(point, outcome)
    asks: list[Part] = [wording.claim_name(criterion.claim)]
    if criterion.of_written:
        asks.append(f" of {criterion.of_written}")
    if criterion.loop:
        asks.append(f", loop {criterion.loop}")
    value = quantities.obtained(outcome, criterion, point.case) or _scale(point, outcome)
    return (
        (Link(outcome.identifier, spoken_id(outcome.identifier)),),
        tuple(asks),
        (wording.scope_short(criterion.over),),
        (quantities.required(criterion) or quantities.NOTHING,),
        (value or quantities.NOTHING,),
        quantities.reserve(outcome) or (quantities.NOTHING,),
        VerdictMark(outcome.verdict),
        ("–" if outcome.strength is None else wording.STRENGTH_WORDS[outcome.strength],),
        PageReference(outcome.identifier, spoken_id(outcome.identifier)),
    )


def _scale(point: PointEvidence, outcome: Outcome) -> str:
    """The proved scale of the region of starts, for claims that have no value of their own."""
    scales = [
        fact.lower
        for f in point.findings
        if f.subject == outcome.identifier and (fact := f.facts.get(SCALE_FACT)) is not None and fact.lower is not None
    ]
    return f"scale ≥ {numbers.below(max(scales), 3)}" if scales else ""


def _limitations(context: Context) -> Iterator[Rich]:
    evidence = context.evidence
    unmet = [o for o in all_outcomes(evidence) if o.verdict in NEEDS_ACTION]
    if unmet:
        worst_first = sorted(unmet, key=lambda o: NEEDS_ACTION.index(o.verdict))
        yield rich(
            f"{len(unmet)} criteria are not proved and need a decision: ",
            context.links(o.identifier for o in worst_first), ".",
        )  # fmt: skip
    open_ones = [a for a in evidence.assumptions if a.state not in ("accepted", "confirmed")]
    if open_ones:
        yield rich("Assumptions not yet accepted: ", joined([context.link(a.name) for a in open_ones]), ".")
    for point in evidence.points:
        if not point.equilibria_complete:
            yield rich("The list of equilibria of ", context.link(point.case.name), " is not proved to be complete.")
        for warning in point.warnings:
            yield rich(context.link(point.case.name), f": {warning.rstrip('.')}.")
    nominal = [o for o in all_outcomes(evidence) if o.over != TOLERANCES and o.verdict == "proved"]
    if nominal:
        yield (f"{len(nominal)} of the proved criteria hold at the nominal parameter values only.",)
    sampled = sorted({p.case.model.name for p in evidence.points if p.case.model.time == "sampled"})
    if sampled:
        yield rich(
            "Sampled models say nothing between the sampling instants: ", joined([Mono(n) for n in sampled]), "."
        )
    yield ("All statements are about the models of section 4; whether they describe the machine is not assessed here.",)
