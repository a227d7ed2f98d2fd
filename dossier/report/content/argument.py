"""The argument for every criterion as indented text: claim, reason, premises, evidence, context."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Final

from dossier.model.dossier import PointEvidence
from dossier.model.finding import Finding, Premise
from dossier.model.outcome import Outcome
from dossier.model.theorem import THEOREMS
from dossier.report import wording
from dossier.report.blocks import Argument, Block, Heading, Paragraph, Section, Step
from dossier.report.content.context import Context, assumptions_of, short_hash
from dossier.report.content.verdicts import criterion_of, property_text
from dossier.report.rich import Link, Rich, Strong, rich

SETTLED: Final = ("proved", "refuted", "no operating point", "contradicted")
"""Verdicts that rest on a finding; all others leave the claim undeveloped."""


INTRODUCTION: Final = (
    "Each claim is supported by the lines indented below it. A mark at the margin says how far a line is established."
)


def argument_section(context: Context, number: str) -> Section:
    """Top claim, then one argument per criterion."""
    blocks: list[Block] = [Paragraph((INTRODUCTION,)), Argument(tuple(_top(context)))]
    for index, point in enumerate(context.evidence.points, start=1):
        blocks.append(Heading(f"argument-{point.case.name}", f"{number}.{index}", f"Operating point {point.case.name}"))
        blocks.extend(
            Argument(tuple(_criterion(context, point, outcome)), f"argument-{outcome.identifier}")
            for outcome in point.outcomes
        )
    return Section("argument", number, "Argument", tuple(blocks), new_page=True)


def _top(context: Context) -> Iterator[Step]:
    machine = context.evidence.document.machine
    represented = Strong("as represented by the models listed")
    stated = "models, sets and parameter spreads as stated ("
    yield Step(
        0,
        "Claim",
        rich(
            f"In the operating points listed, the controlled motion of {machine}, ", represented,
            ", meets the criteria below.",
        ),
    )  # fmt: skip
    yield Step(
        1, "Context", (stated, Link("models", "Models"), "); assumptions (", Link("assumptions", "Assumptions"), ")")
    )
    yield Step(1, "Not claimed", ("safety of the machine, behaviour under faults, transitions between points",))
    yield Step(
        1, "Reason", ("over operating points and criteria, each from its own evidence, checked apart from search",)
    )


def _criterion(context: Context, point: PointEvidence, outcome: Outcome) -> Iterator[Step]:
    criterion = criterion_of(point, outcome)
    asked = f": {property_text(criterion)}, {wording.scope_words(criterion.over)}"
    mark = wording.VERDICT_WORDS[outcome.verdict].mark
    yield Step(0, "Claim", (Link(outcome.identifier, outcome.identifier), asked), mark)
    yield Step(1, "Context", _setting(context, point, outcome))
    theorem = THEOREMS.get(outcome.theorem)
    if theorem is not None:
        yield Step(1, "Reason", (f"{theorem.name}, {theorem.title}: {theorem.conclusion}",))
    finding = deciding_finding(point, outcome)
    if finding is None:
        yield _without_finding(context, outcome)
        return
    if not finding.premises:
        yield Step(1, "Finding", (finding.statement,), wording.RESULT_WORDS[finding.result][0])
    for premise in finding.premises:
        yield Step(2, "Premise", _premise(context, premise), wording.RESULT_WORDS[premise.result][0])
    yield Step(1, "Evidence", context.links(finding.evidence, "the stated model alone"))


def _setting(context: Context, point: PointEvidence, outcome: Outcome) -> Rich:
    name = point.case.model.name
    model = rich("model ", Link(f"model-{name}", name), " ", short_hash(point.model_hash))
    covered = assumptions_of(context.evidence, point, outcome.identifier)
    return rich(model, "; assumptions ", context.links(covered)) if covered else model


def _without_finding(context: Context, outcome: Outcome) -> Step:
    words = outcome.because or "no check established anything"
    if outcome.verdict not in SETTLED:
        return Step(1, "Undeveloped", (words,))
    return Step(1, "Finding", rich(words, " ", context.links(outcome.evidence, "")))


def _premise(context: Context, premise: Premise) -> Rich:
    detail = f" ({premise.detail})" if premise.detail else ""
    said = f"{premise.label}: {premise.statement}{detail}; {wording.STRENGTH_WORDS[premise.strength]}"
    return rich(said, ", ", context.links(premise.evidence.split(", "))) if premise.evidence else (said,)


def deciding_finding(point: PointEvidence, outcome: Outcome) -> Finding | None:
    """The finding whose result the outcome follows, or the furthest one where it is open."""
    about = [f for f in point.findings if f.subject == outcome.identifier]
    wanted = {"proved": "proved", "refuted": "refuted", "contradicted": "refuted"}.get(outcome.verdict, "undecided")
    exact = [f for f in about if f.result == wanted and f.evidence == outcome.evidence]
    return next(iter(exact), next((f for f in about if f.result == wanted), None))
