"""The certificates of one operating point: V typeset, level, method, how it was checked, theorem and premises."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from fractions import Fraction

from dossier.model.affine import spread_box
from dossier.model.claim import (
    AbsenceClaim,
    BranchClaim,
    CandidateClaim,
    CellsClaim,
    Claim,
    CoverClaim,
    EndClaim,
    LyapunovClaim,
    RootsClaim,
    SturmClaim,
)
from dossier.model.dossier import PointEvidence
from dossier.model.finding import Finding
from dossier.model.theorem import THEOREMS
from dossier.report import equations, formulas, numbers, speech, units, wording
from dossier.report.blocks import Block, Column, Equations, Facts, Paragraph, Row, Subheading, Table
from dossier.report.content.context import Context
from dossier.report.content.sides import side_text
from dossier.report.rich import Formula, Mono, Rich, rich

METHODS = {
    "quadratic": "quadratic form, proved by exact Gram identities",
    "sum of squares": "sum of squares, rounded to fractions and proved exactly",
    "given": "the engineer’s own candidate, proved as given",
}
SetClaim = LyapunovClaim | CoverClaim


def certificate_blocks(context: Context, point: PointEvidence) -> Iterator[Block]:
    """Every certificate with a function V, then the evidence of other kinds."""
    sets = [c for c in point.claims if isinstance(c, LyapunovClaim | CoverClaim)]
    in_cells = [c for c in point.claims if isinstance(c, CellsClaim)]
    others = [c for c in point.claims if _content(c)]
    given = [c for c in point.claims if isinstance(c, CandidateClaim)]
    if sets or in_cells or given:
        yield Paragraph((wording.CERTIFICATE_CAUTION,), "caution")
    for claim in sets:
        yield from _set_blocks(context, point, claim)
    for claim in in_cells:
        yield from _cell_blocks(context, point, claim)
    for claim in given:
        yield from _given_blocks(context, point, claim)
    if others:
        yield _other_table(context, point)
        for claim in others:
            if isinstance(claim, BranchClaim | AbsenceClaim | EndClaim):
                for finding in point.findings:
                    if finding.subject == claim.identifier and finding.premises:
                        yield premise_table(context, finding)


def _set_blocks(context: Context, point: PointEvidence, claim: SetClaim) -> Iterator[Block]:
    kind = "certificate" if isinstance(claim, LyapunovClaim) else "second witness by intervals"
    yield Subheading((f"{claim.identifier}, {kind}",), claim.identifier)
    states, notation = point.case.model.state_names, context.notations[point.case.model.name]
    degree = max((sum(e) for e in claim.function), default=0)
    twin = _earlier_twin(point, claim)
    if twin is None:
        said = f"function V of degree {degree} in the offsets of the states, with {len(claim.function)} terms"
        left, terms = formulas.function_of_offsets(claim.function, states, notation)
        yield Equations((equations.fitted(left, terms, said),))
    else:
        yield Paragraph(rich("The same function V as in ", context.link(twin.identifier), "."))
    yield Facts(tuple(_set_facts(context, point, claim, degree)))
    for finding in point.findings:
        if finding.subject == claim.identifier and finding.premises:
            yield premise_table(context, finding)


def _given_blocks(context: Context, point: PointEvidence, claim: CandidateClaim) -> Iterator[Block]:
    """The engineer's own function: proved, or refuted by a point."""
    finding = next((f for f in point.findings if f.subject == claim.identifier), None)
    verdict = "" if finding is None else f", {finding.result} as given"
    yield Subheading((f"{claim.identifier}, the engineer’s own function{verdict}",), claim.identifier)
    candidate, states = point.case.candidate, point.case.model.states
    facts: list[tuple[str, Rich]] = []
    if candidate is not None:
        facts.append(("Function", (Mono(candidate.written),)))
        facts.append(("Level", (numbers.number(candidate.level),)))
        facts.append(("Symbols", ("offsets from the equilibrium, as numbers in the units of the states",)))
    if claim.around is not None:
        parts = []
        for state, side in zip(states, claim.around.intervals, strict=True):
            parts.append(f"{state.name} in {side_text(side, units.difference_unit(state.unit, state.scale))}")
        facts.append(("Its set lies in", ("; ".join(parts),)))
    yield Facts(tuple(facts))
    if finding is not None:
        yield premise_table(context, finding)


def _cell_blocks(context: Context, point: PointEvidence, claim: CellsClaim) -> Iterator[Block]:
    """The cells of one certificate: which parameters were cut where; the functions stand in the certificate."""
    yield Subheading((f"{claim.identifier}, certificate in cells",), claim.identifier)
    yield Paragraph(
        (
            "No single function V was found for the whole box of spreads. The box is cut into the cells below; each "
            "has a quadratic V and a set of its own, printed in full in the certificate. A motion keeps its "
            "parameters, so it stays in one cell.",
        )
    )
    whole = spread_box(point.case)
    cut = [n for n in whole.names if any(c.parameters[n] != whole[n] for c in claim.cells)]
    printed = {p.name: units.absolute_unit(p.unit, p.scale) for p in point.case.model.parameters}
    rows = []
    for place, cell in enumerate(claim.cells, 1):
        sides = (side_text(cell.parameters[n], printed[n]) for n in cut)
        rows.append(Row(((str(place),), *((side,) for side in sides), (str(len(cell.decrease)),))))
    share = 68 // max(len(cut), 1)
    columns = (
        Column("Cell", "number", 8),
        *(Column(f"{n}, {units.unit_text(printed[n].name) or 1}", "number", share) for n in cut),
        Column("Identities", "number", 100 - 8 - share * len(cut)),
    )
    yield Table(f"Cells of {claim.identifier}", columns, tuple(rows))
    for finding in point.findings:
        if finding.subject == claim.identifier and finding.premises:
            yield premise_table(context, finding)


def _earlier_twin(point: PointEvidence, claim: SetClaim) -> SetClaim | None:
    """An earlier claim about the same function, so that it is printed once."""
    for other in point.claims:
        if other is claim:
            return None
        if isinstance(other, LyapunovClaim | CoverClaim) and other.function == claim.function:
            return other
    return None


def _set_facts(context: Context, point: PointEvidence, claim: SetClaim, degree: int) -> Iterator[tuple[str, Rich]]:
    level = numbers.enclosure(claim.level, claim.level)
    words = f"all states with V at most {speech.say_figure(level)}"
    yield (
        "Set",
        rich(Formula(rf"\{{V \le {formulas.figure(level)}\}}", words), " around ", context.link(claim.equilibrium)),
    )
    if isinstance(claim, LyapunovClaim):
        count = len(claim.decrease)
        identities = f"; {wording.counted(count, 'decrease identity', 'decrease identities')}" if count else ""
        yield "Form", (f"degree {degree}, {METHODS[claim.method]}{identities}",)
    else:
        yield "Form", (f"degree {degree}; the decrease was closed by {wording.counted(claim.boxes, 'box', 'boxes')}",)
    yield "Parameters", (wording.scope_words(claim.over),)
    theorem = THEOREMS.get(claim.theorem)
    if theorem is not None:
        yield "Theorem", (f"{theorem.name}, {theorem.title}: {theorem.conclusion}. Source: {theorem.source}.",)
    for finding in point.findings:
        if finding.subject == claim.identifier:
            word = wording.CHECK_WORDS[finding.check]
            yield (
                "Checked by",
                (f"{word}: {finding.result}, {wording.STRENGTH_WORDS[finding.strength]}. {finding.statement}.",),
            )


def premise_table(context: Context, finding: Finding) -> Table:
    """The premises of one finding, each with its own result and evidence."""
    rows = tuple(
        Row(
            (
                (p.label,),
                rich(p.statement, *([f" ({p.detail})"] if p.detail else [])),
                (f"{wording.RESULT_WORDS[p.result][0]} {wording.RESULT_WORDS[p.result][1]}",),
                (wording.STRENGTH_WORDS[p.strength],),
                context.links(p.evidence.split(", ")),
            )
        )
        for p in finding.premises
    )
    theorem = f", theorem {finding.theorem}" if finding.theorem else ""
    columns = (
        Column("Premise", "short", 11),
        Column("Statement", share=49),
        Column("Result", "short", 13),
        Column("Checked", "short", 10),
        Column("Evidence", "id", 17),
    )
    return Table(f"Premises for {finding.subject}, {finding.check} check{theorem}", columns, rows)


def _other_table(context: Context, point: PointEvidence) -> Table:
    rows = []
    for claim in point.claims:
        text = _content(claim)
        if not text:
            continue
        finding = next((f for f in point.findings if f.subject == claim.identifier), None)
        result = "–" if finding is None else f"{finding.result}, {wording.STRENGTH_WORDS[finding.strength]}"
        theorem = f"{claim.theorem}, {THEOREMS[claim.theorem].title}" if claim.theorem in THEOREMS else claim.theorem
        rows.append(Row(((Mono(claim.identifier),), (text,), (theorem,), (result,)), claim.identifier))
    columns = (
        Column("Evidence", "id", 20),
        Column("Content", share=38),
        Column("Theorem", share=27),
        Column("Check", "short", 15),
    )
    return Table("Other evidence of this operating point", columns, tuple(rows))


def _content(claim: Claim) -> str:
    """What a certificate without a function V holds; nothing for the kinds shown elsewhere."""
    if isinstance(claim, RootsClaim):
        boxes = wording.counted(len(claim.solutions), "uniqueness box", "uniqueness boxes")
        looked = wording.counted(claim.boxes, "box looked at", "boxes looked at")
        return f"{boxes}, {len(claim.undecided)} undecided, {looked}"
    if isinstance(claim, SturmClaim):
        real = wording.counted(len(claim.gain_crossings), "crossing")
        peaks = wording.counted(len(claim.peak_candidates), "candidate")
        circle = len(claim.phase_crossings)
        return f"loop {claim.loop}: {real} of the real axis, {circle} of the unit circle, {peaks} for the peak"
    if isinstance(claim, BranchClaim):
        return f"the equilibrium of the operating point on {wording.counted(len(claim.cells), 'parameter cell')}"
    if isinstance(claim, AbsenceClaim):
        return f"no equilibrium at {_combination(claim.values)} (SI)"
    if isinstance(claim, EndClaim):
        share = numbers.percent_below(claim.share)
        return (
            f"the equilibrium ends between {share} and 100 % of the straight way to {_combination(claim.values)} (SI)"
        )
    return ""


def _combination(values: Mapping[str, Fraction]) -> str:
    return ", ".join(f"{name} = {numbers.number(value)}" for name, value in values.items())
