"""One operating point: what is asked, the verdicts, its equilibria, linear part, margins and certificates."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from fractions import Fraction

from dossier.model.dossier import PointEvidence
from dossier.model.finding import SCALE
from dossier.report import numbers, units, wording
from dossier.report.blocks import (
    Block,
    Card,
    Column,
    Facts,
    Heading,
    Paragraph,
    Picture,
    Row,
    Section,
    Table,
)
from dossier.report.content import quantities
from dossier.report.content.certificates import certificate_blocks
from dossier.report.content.checks_section import check_blocks
from dossier.report.content.context import Context
from dossier.report.content.equilibria import equilibrium_blocks
from dossier.report.content.linear import linear_blocks, margin_blocks
from dossier.report.content.sides import absolute_side, offset_side
from dossier.report.content.verdicts import criterion_of, issue_sentence
from dossier.report.notation import spoken
from dossier.report.rich import Formula, Link, Mono, Rich, Strong, rich


def point_section(context: Context, point: PointEvidence, number: str, pictures: Sequence[Picture]) -> Section:
    """The section of one operating point; parts without content are left out."""

    def drawn(kind: str) -> tuple[Picture, ...]:
        return tuple(p for p in pictures if p.kind == kind)

    parts: tuple[tuple[str, str, Sequence[Block]], ...] = (
        ("asked", "What is asked", tuple(_asked(context, point))),
        ("verdicts", "Verdicts", (*drawn("reserves"), *_cards(context, point))),
        ("equilibria", "Equilibria", tuple(equilibrium_blocks(context, point))),
        ("linear", "Linear part", (*linear_blocks(context, point), *drawn("eigenvalues"))),
        ("margins", "Loop margins", (*margin_blocks(context, point), *drawn("loop"))),
        ("certificates", "Certificates", (*certificate_blocks(context, point), *drawn("plane"))),
        ("checks", "Independent checks and failed attempts", tuple(check_blocks(context, point))),
    )
    blocks: list[Block] = []
    for index, (anchor, title, content) in enumerate((p for p in parts if p[2]), start=1):
        blocks.append(Heading(f"{point.case.name}-{anchor}", f"{number}.{index}", title))
        blocks.extend(content)
    return Section(point.case.name, number, f"Operating point {point.case.name}", tuple(blocks), new_page=True)


def _asked(context: Context, point: PointEvidence) -> Iterator[Block]:
    case = point.case
    facts: list[tuple[str, Rich]] = [
        ("Meaning", (case.meaning or quantities.NOTHING,)),
        ("Model", (Link(f"model-{case.model.name}", case.model.title or case.model.name),)),
        ("Fingerprint as analysed", (Mono(point.model_hash),)),
    ]
    if case.set_values:
        facts.append(("Set here", ("; ".join(f"{n} = {units.written(v)}" for n, v in case.set_values),)))
    facts.append(("Equilibrium", (_equilibrium_words(point),)))
    if case.candidate is not None:
        level = numbers.number(case.candidate.level)
        facts.append(("Own function V", rich(Mono(case.candidate.written), f" up to the level {level}")))
    yield Facts(tuple(facts))
    yield _sets_table(context, point)
    if case.model.time == "sampled":
        yield Paragraph((wording.SAMPLED_MODEL_CAUTION,), "caution")


def _equilibrium_words(point: PointEvidence) -> str:
    if point.case.none_expected:
        return "none is expected"
    if point.case.fixed is not None:
        return "stated by the engineer, the same for every parameter combination"
    return "the one nearest to the engineer’s guess at the nominal parameter values"


def _sets_table(context: Context, point: PointEvidence) -> Table:
    case = point.case
    rows = tuple(
        Row(
            (
                (Formula(context.notations[case.model.name].latex(name), spoken(name)),),
                (absolute_side(case, name, case.model.domain[name]),),
                (absolute_side(case, name, case.search[name]),),
                (offset_side(case, name, case.region[name]),),
                (offset_side(case, name, case.limits[name]),),
            )
        )
        for name in case.model.state_names
    )
    columns = (
        Column("State", "formula", 12),
        Column("Domain, absolute", "number", 22),
        Column("Search box, absolute", "number", 22),
        Column("Region of starts, offset", "number", 22),
        Column("Limits, offset", "number", 22),
    )
    return Table("Sets of this operating point", columns, rows)


def _cards(context: Context, point: PointEvidence) -> Iterator[Block]:
    for outcome in point.outcomes:
        criterion = criterion_of(point, outcome)
        title = rich(Strong(outcome.identifier), "  ", wording.claim_name(criterion.claim))
        blocks: list[Block] = [Paragraph(issue_sentence(context, point, outcome))]
        if outcome.because and (outcome.verdict != "proved" or outcome.contradiction):
            blocks.append(Paragraph((outcome.because,), "small"))
        facts = _card_facts(context, point, outcome.identifier)
        if facts:
            blocks.append(Facts(facts))
        yield Card(outcome.identifier, outcome.verdict, title, tuple(blocks))


def _card_facts(context: Context, point: PointEvidence, identifier: str) -> tuple[tuple[str, Rich], ...]:
    outcome = next(o for o in point.outcomes if o.identifier == identifier)
    criterion = criterion_of(point, outcome)
    facts: list[tuple[str, Rich]] = []
    asked = quantities.required(criterion)
    value = quantities.obtained(outcome, criterion, point.case)
    if asked and value:
        gauge = quantities.reserve(outcome)
        left = f", reserve {gauge.text}" if gauge is not None else ""
        words = f"required {asked}, obtained {value}{left} ("
        facts.append(("Value", rich(words, context.links(outcome.evidence), ")")))
    scales = [
        f for f in point.findings if f.subject == identifier and f.result == "proved" and SCALE in f.facts
    ]  # fmt: skip
    if outcome.verdict == "proved" and scales:
        widest = max(scales, key=lambda f: f.facts[SCALE].lower or Fraction(1))
        factor = numbers.below(widest.facts[SCALE].lower or Fraction(1))
        words = f"still proved with every spread {factor} times as wide about its middle ("
        facts.append(("Tolerance reserve", rich(words, context.links(widest.evidence), ")")))
    if outcome.sub_scope:
        facts.append(("Proved part", (outcome.sub_scope,)))
    if outcome.counter_example:
        words = "; ".join(f"{name}: {text}" for name, text in outcome.counter_example.items())
        facts.append(("Counter-example", (words,)))
    return tuple(facts)
