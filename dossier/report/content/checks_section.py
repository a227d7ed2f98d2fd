"""Independent checks, counter-examples and failed attempts of one operating point."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Final

from dossier.model.dossier import Campaign, PointEvidence
from dossier.report import numbers, wording
from dossier.report.blocks import Block, Column, Facts, Paragraph, Row, Subheading, Table
from dossier.report.content.context import Context
from dossier.report.content.quantities import NOTHING
from dossier.report.rich import Formula, Mono, Rich, joined, rich

REVEALS: Final = {
    "exact": "an inequality that fails, however slightly; rounding that spoilt a certificate",
    "interval": "a mistake in the algebra of the exact check: the original expressions are evaluated box by box",
    "simulation": "a violating motion",
}


def check_blocks(context: Context, point: PointEvidence) -> Iterator[Block]:
    """The checks by kind, the campaign, what it found, and what searches did not find."""
    if point.findings:
        yield _check_table(context, point)
    if point.campaign is not None:
        yield from _campaign_blocks(context, point, point.campaign)
    yield from _counter_examples(context, point)
    if point.attempts:
        yield Paragraph((wording.ATTEMPT_CAUTION,), "caution")
        yield _attempt_table(context, point)


def _check_table(context: Context, point: PointEvidence) -> Table:
    rows = []
    for kind in REVEALS:
        findings = [f for f in point.findings if f.check == kind]
        if findings:
            marked = joined(
                [rich(wording.RESULT_WORDS[f.result][0], numbers.GROUP, context.link(f.subject)) for f in findings],
                "  ",
            )
            rows.append(Row(((wording.CHECK_WORDS[kind],), (REVEALS[kind],), marked)))
    columns = (
        Column("Check", share=22),
        Column("What it would reveal", share=30),
        Column("Of, with its result", share=48),
    )
    key = "; ".join(f"{mark} {word}" for mark, word in wording.RESULT_WORDS.values())
    return Table("Checks", columns, tuple(rows), (f"Results: {key}.",))


def _campaign_blocks(context: Context, point: PointEvidence, campaign: Campaign) -> Iterator[Block]:
    yield Subheading((f"{campaign.identifier}, simulation campaign",), campaign.identifier)
    yield Paragraph((wording.SAMPLING_CAUTION,), "caution")
    facts: list[tuple[str, Rich]] = [
        ("Method", (campaign.method,)),
        ("Plan", (f"{campaign.plan}; seed {campaign.seed}",)),
        ("Motions", (f"{numbers.count(campaign.motions)}, to {campaign.horizon}",)),
        ("Violations", (f"{numbers.count(campaign.violations)}; inconclusive {numbers.count(campaign.inconclusive)}",)),
    ]
    if campaign.confidence:
        facts.append(("Confidence", (campaign.confidence,)))
    if campaign.worst:
        facts.append(("Most extreme", (campaign.worst,)))
    yield Facts(tuple(facts))
    if campaign.extremes:
        yield _extremes_table(context, point, campaign.extremes)


def _extremes_table(context: Context, point: PointEvidence, extremes: Mapping[str, tuple[float, float]]) -> Table:
    rows = tuple(
        Row(
            (
                (Formula(context.notations[point.case.model.name].latex(name), name),),
                (Mono(name),),
                (numbers.estimate(low),),
                (numbers.estimate(high),),
            )
        )
        for name, (low, high) in extremes.items()
    )
    columns = (
        Column("Quantity", "formula", 20),
        Column("Name", "mono", 30),
        Column("Least, SI", "number", 25),
        Column("Greatest, SI", "number", 25),
    )
    return Table("Extremes met by the campaign, offsets from the equilibrium", columns, rows, ("Sampled, not bounds.",))


def _counter_examples(context: Context, point: PointEvidence) -> Iterator[Block]:
    found = [o for o in point.outcomes if o.counter_example]
    if not found:
        return
    rows = tuple(
        Row(
            (
                context.links((o.identifier,)),
                ("yes" if o.verdict == "refuted" else "no",),
                ("; ".join(f"{name}: {text}" for name, text in o.counter_example.items()),),
                context.links(o.evidence),
            )
        )
        for o in found
    )
    columns = (
        Column("Criterion", "id", 20),
        Column("Verified", "short", 10),
        Column("Counter-example", share=50),
        Column("Evidence", "id", 20),
    )
    yield Table("Counter-examples", columns, rows)


def _attempt_table(context: Context, point: PointEvidence) -> Table:
    rows = tuple(
        Row(
            (
                context.links((a.subject,)),
                (a.method,),
                rich(wording.ENDING_WORDS[a.ending], *([f": {a.remark}"] if a.remark else [])),
                (", ".join(f"{numbers.count(n)} {name}" for name, n in a.work.items()) or NOTHING,),
            )
        )
        for a in point.attempts
    )
    columns = (
        Column("For", "id", 18),
        Column("Method", share=28),
        Column("Why it ended", share=36),
        Column("Work", share=18),
    )
    return Table("Searches and how they ended", columns, rows)
