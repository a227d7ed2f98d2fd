"""The linear part at the operating point: eigenvalue discs, what was proved of them, and loop margins."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from dossier.model.case import Case
from dossier.model.claim import CombinationClaim, MatrixClaim, RouthClaim
from dossier.model.dossier import PointEvidence
from dossier.model.equilibrium import Eigenvalue, Equilibrium
from dossier.model.finding import Finding
from dossier.report import formulas, numbers, wording
from dossier.report.blocks import Block, Column, Equations, Paragraph, Row, Table
from dossier.report.content.context import Context
from dossier.report.content.quantities import margin_rows
from dossier.report.rich import Formula, Mono, Rich, rich

LARGEST_MATRIX = 5
"""Rows up to which a matrix is printed; the certificate holds every one."""

LARGEST_POLYNOMIAL = 8
"""Degree up to which a characteristic polynomial is printed; the certificate holds every one."""


def linear_blocks(context: Context, point: PointEvidence) -> Iterator[Block]:
    """Eigenvalues of every equilibrium, and the claims about the linear part."""
    shown = [e for e in point.equilibria if e.eigenvalues]
    claims = [c for c in point.claims if isinstance(c, CombinationClaim | MatrixClaim | RouthClaim)]
    if not shown and not claims:
        return
    yield Paragraph((wording.LINEAR_CAUTION,), "caution")
    if shown:
        yield _eigenvalue_table(point, shown)
    if claims:
        yield _claim_table(context, point)
    for claim in claims:
        if isinstance(claim, RouthClaim) and 1 < len(claim.polynomial) <= LARGEST_POLYNOMIAL + 1:
            yield Equations((_polynomial(claim),), f"characteristic polynomial, {claim.identifier}")
        small = isinstance(claim, MatrixClaim) and len(claim.cells[0].matrix) <= LARGEST_MATRIX
        if isinstance(claim, MatrixClaim) and len(claim.cells) == 1 and small and not claim.cells[0].slopes:
            yield Equations((_matrix(claim),), f"matrix of the Lyapunov inequality, {claim.identifier}")


def _eigenvalue_table(point: PointEvidence, shown: list[Equilibrium]) -> Table:
    unit = "1" if point.case.model.time == "sampled" else "1/s"
    rows = [row for equilibrium in shown for row in _disc_rows(equilibrium)]
    columns = (
        Column(f"Real part in {unit}", "number", 26),
        Column(f"Imaginary part in {unit}", "number", 26),
        Column(f"Radius of the disc in {unit}", "number", 28),
        Column("Holds", "number", 20),
    )
    note: Rich = (
        "Each disc is proved to hold the stated number of eigenvalues of the nominal linear part; of its centre the "
        "first digits are printed.",
    )
    return Table("Eigenvalues", columns, tuple(rows), note)


def _disc_rows(equilibrium: Equilibrium) -> Iterator[Row]:
    yield Row(((Mono(equilibrium.identifier), f"  {equilibrium.stability}"),), spanning=True)
    for value in equilibrium.eigenvalues:
        yield Row(_disc(value))


def _disc(value: Eigenvalue) -> tuple[Rich, ...]:
    return (
        (_centre(value.real),),
        (_centre(value.imaginary),),
        (f"≤ {numbers.radius(value.radius)}" if value.radius else "exact",),
        (str(value.multiplicity),),
    )


def _centre(value: Fraction) -> str:
    return numbers.first_digits(value, value) or "0"


def _claim_table(context: Context, point: PointEvidence) -> Table:
    rows = []
    for claim in point.claims:
        if not isinstance(claim, CombinationClaim | MatrixClaim | RouthClaim):
            continue
        finding = next((f for f in point.findings if f.subject == claim.identifier), None)
        result = "not checked" if finding is None else f"{finding.result}, {finding.strength}"
        statement, method = _words(point.case, claim, finding)
        cells = ((Mono(claim.identifier),), statement, (method,), (wording.scope_short(claim.over),), (result,))
        rows.append(Row(cells, claim.identifier))
    columns = (
        Column("Evidence", "id", 18),
        Column("Statement", share=36),
        Column("Method", share=22),
        Column("Parameters", "short", 11),
        Column("Check", "short", 13),
    )
    return Table("What was proved of the linear part", columns, tuple(rows))


def _words(case: Case, claim: CombinationClaim | MatrixClaim | RouthClaim, finding: Finding | None) -> tuple[Rich, str]:
    if isinstance(claim, MatrixClaim):
        return _matrix_words(claim)
    return _routh_words(claim) if isinstance(claim, RouthClaim) else _combination_words(case, claim, finding)


def _combination_words(case: Case, claim: CombinationClaim, finding: Finding | None) -> tuple[Rich, str]:
    order = [p.name for p in case.model.parameters if p.name in claim.values]
    at = ", ".join(f"{name} = {numbers.number(claim.values[name])}" for name in order)
    premise = next((p.statement for p in finding.premises if p.label == "spectrum"), "") if finding else ""
    return (f"{premise}; the worst combination found is {at} (SI)",), "root count and discs at one combination"


def _matrix_words(claim: MatrixClaim) -> tuple[Rich, str]:
    affine = ", P affine in the parameters" if any(c.slopes for c in claim.cells) else ""
    return _region(claim), f"Lyapunov inequality, {wording.counted(len(claim.cells), 'parameter cell')}{affine}"


def _routh_words(claim: RouthClaim) -> tuple[Rich, str]:
    inside = wording.counted(claim.inside, "eigenvalue")
    statement = f"{inside} inside, {claim.boundary} on, {claim.outside} outside the stability boundary"
    return (statement,), "Routh array of exact integers" if claim.array else "characteristic polynomial"


def _region(claim: MatrixClaim) -> Rich:
    level = formulas.figure(numbers.number(claim.level))
    said = numbers.number(claim.level)
    if claim.region == "half-plane":
        negative = formulas.figure(numbers.number(-claim.level))
        return rich(
            "every eigenvalue has ",
            Formula(rf"\operatorname{{Re}}\lambda < {negative}", f"real part below minus {said}"),
            " 1/s",
        )
    if claim.region == "disc":
        return rich("every multiplier has ", Formula(rf"\left|\lambda\right| < {level}", f"modulus below {said}"))
    return rich("every mode has a damping ratio above ", Formula(level, said))


def _matrix(claim: MatrixClaim) -> Formula:
    rows = claim.cells[0].matrix
    body, exact = formulas.rounded_matrix(rows)
    size = len(rows)
    words = f"P, a symmetric matrix of {size} rows and columns; its entries are in the certificate"
    return Formula(rf"P {'=' if exact else chr(92) + 'approx'} {body}", words, display=True)


def _polynomial(claim: RouthClaim) -> Formula:
    degree = len(claim.polynomial) - 1
    exact = all(b.is_exact and numbers.exactly(b.middle) for b in claim.polynomial)
    body = ""
    for power, ball in zip(range(degree, -1, -1), claim.polynomial, strict=True):
        if ball.is_exact and ball.middle == 0:
            continue
        size = formulas.figure(numbers.number(abs(ball.middle)))
        monomial = "" if power == 0 else r"\lambda" if power == 1 else rf"\lambda^{{{power}}}"
        sign = "-" if ball.middle < 0 else "+" if body else ""
        body += f" {sign} {monomial if monomial and abs(ball.middle) == 1 else size + chr(92) + ',' + monomial}"
    relation = "=" if exact else r"\approx"
    return Formula(rf"\chi(\lambda) {relation}{body}", "characteristic polynomial of the linear part", display=True)


def margin_blocks(context: Context, point: PointEvidence) -> Iterator[Block]:
    """The measured margins of every loop."""
    if not point.margins:
        return
    yield Paragraph((wording.MARGIN_CAUTION,), "caution")
    rows = [
        Row(((Mono(margins.loop),), (name,), (value,), (at,), (context.link(margins.evidence),)))
        for margins in point.margins
        for name, value, at in margin_rows(margins)
        if value != "–"
    ]
    columns = (
        Column("Loop", "id", 16),
        Column("Margin", share=22),
        Column("Enclosure", "number", 26),
        Column("At", "number", 18),
        Column("Evidence", "id", 18),
    )
    yield Table("Margins of the loops, nominal", columns, tuple(rows))
