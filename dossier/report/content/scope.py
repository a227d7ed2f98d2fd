"""Scope and exclusions, and the assumption register."""

from __future__ import annotations

from dossier.report import wording
from dossier.report.blocks import Block, Bullets, Column, Facts, Paragraph, Row, Section, Subheading, Table
from dossier.report.content.context import Context
from dossier.report.content.quantities import NOTHING
from dossier.report.rich import Link, Mono, Rich, joined, rich

EXCLUSIONS = (
    "safety of the machine, its guards and its safety functions; random hardware faults; software defects",
    "behaviour outside the listed regions, domains, parameter spreads and operating points",
    "transitions between operating points, start-up, emergency stop and its release",
    "effects the models leave out: resonances above the modelled band, unmodelled friction, quantisation, estimator "
    "and measurement noise, sampling and delay where the model has none",
)


def scope_section(context: Context, number: str) -> Section:
    """What the dossier covers, and what it does not."""
    document = context.evidence.document
    blocks: list[Block] = [Paragraph((document.scope or "The project states no scope.",))]
    rows = tuple(
        Row(
            (
                (Link(p.case.name, p.case.name),),
                (p.case.meaning or NOTHING,),
                (Link(f"model-{p.case.model.name}", p.case.model.name),),
                (p.case.model.time,),
                (str(len(p.case.criteria)),),
            )
        )
        for p in context.evidence.points
    )
    columns = (
        Column("Operating point", "id", 20),
        Column("Meaning", share=38),
        Column("Model", "id", 22),
        Column("Time", "short", 10),
        Column("Criteria", "number", 10),
    )
    blocks.append(Table("Operating points", columns, rows))
    if document.standards:
        standards = joined(document.standards)
        blocks.append(
            Facts((("Named as applicable", standards), ("Standing", ("named by the project, not assessed here",))))
        )
    if context.evidence.warnings:
        blocks.append(Subheading(("Remarked while reading the project file",)))
        blocks.append(Bullets(tuple((text,) for text in context.evidence.warnings)))
    blocks.append(Subheading(("Not covered",)))
    blocks.append(Bullets(tuple((text,) for text in EXCLUSIONS)))
    return Section("scope", number, "Scope and exclusions", tuple(blocks), new_page=True)


def assumption_section(context: Context, number: str) -> Section:
    """The assumption register."""
    assumptions = context.evidence.assumptions
    if not assumptions:
        return Section("assumptions", number, "Assumptions", (Paragraph(("The project states no assumption.",)),))
    rows = tuple(
        Row(
            (
                (Mono(a.name),),
                rich(a.text, *_kept(a.kept_by)),
                (a.kind or NOTHING,),
                _covers(context, a.covers),
                (a.basis or NOTHING,),
                (a.owner or NOTHING,),
                (a.state or NOTHING,),
            ),
            a.name,
        )
        for a in assumptions
    )
    columns = (
        Column("Id", "id", 6),
        Column("Statement, and how it is kept true", share=34),
        Column("Kind", "short", 11),
        Column("Covers", share=16),
        Column("Basis", share=15),
        Column("Owner", share=9),
        Column("State", "short", 9),
    )
    lead = Paragraph(
        (
            "The verdicts rest on these statements, which this dossier does not check. If one fails, every verdict on "
            "what it covers falls.",
        )
    )
    return Section("assumptions", number, "Assumptions", (lead, Table("Assumption register", columns, rows)))


def _kept(text: str) -> tuple[str, ...]:
    return (f" Kept true by: {text}.",) if text else ()


def _covers(context: Context, covers: tuple[str, ...]) -> Rich:
    models = {p.case.model.name for p in context.evidence.points}
    parts = [Link(f"model-{c}", c) if c in models else context.link(c) for c in covers]
    return joined(parts) or (NOTHING,)


def caution_section(number: str) -> Section:
    """The fixed cautions; nothing in a project can change them."""
    return Section(
        "cautions", number, "Cautions and deferral", tuple(Paragraph((t,)) for t in wording.CAUTIONS), new_page=True
    )
