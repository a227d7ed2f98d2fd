"""The argument for every criterion as indented text: claim, reason, premises, evidence, context."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Final

from dossier.model.dossier import PointEvidence
from dossier.model.finding import Finding
from dossier.model.outcome import Outcome
from dossier.model.theorem import THEOREMS
from dossier.report import wording
from dossier.report.blocks import Argument, Block, Heading, Paragraph, Section, Step
from dossier.report.content.context import Context, assumptions_of, short_hash
from dossier.report.content.verdicts import criterion_of, property_text
from dossier.report.rich import Link, Rich, Strong, joined, rich


SETTLED: Final = ("proved", "refuted", "no operating point", "contradicted")
"""Verdicts that rest on a finding; all others leave the claim undeveloped."""


def argument_section(context: Context, number: str) -> Section:
    """Top claim, then one argument per criterion."""
    blocks: list[Block] = [
        Paragraph(
            (
                "Each claim is supported by the lines indented below it. A mark at the margin says how far a line is established.",
            )
        ),
        Argument(tuple(_top(context))),
    ]
    for index, point in enumerate(context.evidence.points, start=1):
        blocks.append(Heading(f"argument-{point.case.name}", f"{number}.{index}", f"Operating point {point.case.name}"))
        blocks.extend(
            Argument(tuple(_criterion(context, point, outcome)), f"argument-{outcome.identifier}")
            for outcome in point.outcomes
        )
    return Section("argument", number, "Argument", tuple(blocks), new_page=True)


def _top(context: Context) -> Iterator[Step]:
    machine = context.evidence.document.machine
    yield Step(0, "Claim", rich(f"In the operating points listed, the controlled motion of {machine}, ",
                                Strong("as represented by the models listed"), ", meets the criteria below."))  # fmt: skip
    yield Step(1, "Context", rich("models, sets and parameter spreads as stated (", Link("models", "Models"), "); assumptions (",
                                  Link("assumptions", "Assumptions"), ")"))  # fmt: skip
    yield Step(
        1, "Not claimed", ("safety of the machine, behaviour under faults, transitions between operating points",)
    )
    yield Step(
        1,
        "Reason",
        ("argue over operating points and criteria, each from its own evidence, checked apart from the search",),
    )


def _criterion(context: Context, point: PointEvidence, outcome: Outcome) -> Iterator[Step]:
    criterion = criterion_of(point, outcome)
    word = wording.VERDICT_WORDS[outcome.verdict]
    yield Step(0, "Claim", rich(Link(outcome.identifier, outcome.identifier), " ", property_text(criterion),
                                ", ", wording.scope_words(criterion.over), "."), word.mark)  # fmt: skip
    covered = assumptions_of(context.evidence, point, outcome.identifier)
    model = rich(
        "model ", Link(f"model-{point.case.model.name}", point.case.model.name), " ", short_hash(point.model_hash)
    )
    yield Step(
        1, "Context", rich(model, "; assumptions ", joined([context.link(a) for a in covered])) if covered else model
    )
    theorem = THEOREMS.get(outcome.theorem)
    if theorem is not None:
        yield Step(1, "Reason", (f"{theorem.name}, {theorem.title}: {theorem.conclusion}",))
    finding = deciding_finding(point, outcome)
    if finding is None:
        settled = outcome.verdict in SETTLED
        text = rich(
            outcome.because or "no check established anything",
            *((" ", *context.links(outcome.evidence, "")) if settled else ()),
        )
        yield Step(1, "Finding" if settled else "Undeveloped", text)
        return
    if not finding.premises:
        yield Step(1, "Finding", rich(finding.statement, "; ", context.links(finding.evidence)),
                   wording.RESULT_WORDS[finding.result][0])  # fmt: skip
    for premise in finding.premises:
        detail = f" ({premise.detail})" if premise.detail else ""
        sources = context.links(premise.evidence.split(", "), "") if premise.evidence else ()
        text: Rich = rich(f"{premise.label}: {premise.statement}{detail}; {wording.STRENGTH_WORDS[premise.strength]}",
                          *((", ", *sources) if sources else ()))  # fmt: skip
        yield Step(2, "Premise", text, wording.RESULT_WORDS[premise.result][0])
    yield Step(1, "Evidence", context.links(finding.evidence, "the stated model alone"))


def deciding_finding(point: PointEvidence, outcome: Outcome) -> Finding | None:
    """The finding whose result the outcome follows, or the furthest one where it is open."""
    about = [f for f in point.findings if f.subject == outcome.identifier]
    wanted = {"proved": "proved", "refuted": "refuted", "contradicted": "refuted"}.get(outcome.verdict, "undecided")
    exact = [f for f in about if f.result == wanted and f.evidence == outcome.evidence]
    return next(iter(exact), next((f for f in about if f.result == wanted), None))
