"""Verify that all eigenvalues of the linear part lie in a region, for every parameter of a box (T1 with T7)."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from fractions import Fraction

from flint import arb, fmpq_mpoly

from dossier.checks.boxes import constant_sign
from dossier.checks.exact import is_positive_definite, is_positive_definite_for_all, root_above
from dossier.model.affine import spread_box
from dossier.model.ball import Ball, to_fmpq
from dossier.model.case import NOMINAL, Case
from dossier.model.claim import MatrixCell, MatrixClaim, SpectralRegion
from dossier.model.decrease import bernstein_coefficients
from dossier.model.equilibrium import Equilibrium
from dossier.model.finding import Enclosure, Finding, Premise, Strength, weakest
from dossier.model.loop import model_hash
from dossier.model.polynomial import collapse, terms
from dossier.model.region import Box, Interval
from dossier.model.spectral_form import LinearForms, linear_forms, spectral_form

REGION_TEXT: Mapping[SpectralRegion, str] = {
    "half-plane": "every eigenvalue has a real part below −{level} 1/s",
    "disc": "every multiplier has a modulus below {level}",
    "sector": "every mode has a damping ratio above {level}",
}


def check_matrix(case: Case, equilibrium: Equilibrium, claim: MatrixClaim) -> Finding:
    """Verify the Lyapunov inequality of `claim` on every cell, and that the cells cover the scope's box."""
    premises = tuple(_premises(case, equilibrium, claim))
    result, strength = weakest(premises)
    scope = "at the nominal parameters" if claim.over == NOMINAL else "for every parameter combination"
    text = REGION_TEXT[claim.region].format(level=claim.level)
    return Finding(
        claim.identifier, "interval" if strength == "enclosed" else "exact", result, strength, claim.over, "T1",
        f"{text}, {scope}", premises, {"level": Enclosure(claim.level, claim.level, "1")}, (claim.identifier,),
    )  # fmt: skip


def _shown(
    label: str, statement: str, shown: bool, claim: MatrixClaim, strength: Strength, detail: str = ""
) -> Premise:
    return Premise(label, statement, "proved" if shown else "undecided", strength, detail, claim.identifier)


def _premises(case: Case, equilibrium: Equilibrium, claim: MatrixClaim) -> Iterator[Premise]:
    meant = claim.model_hash == model_hash(case) and claim.equilibrium == equilibrium.identifier
    sampled = case.model.time == "sampled"
    fits = claim.region == "disc" if sampled else claim.region in ("half-plane", "sector")
    allowed = (
        claim.level > 0
        if claim.region == "disc"
        else claim.level >= 0 and (claim.region == "half-plane" or claim.level < 1)
    )
    yield _shown(
        "model",
        "the certificate is about this loop and a region that fits it",
        meant and fits and allowed,
        claim,
        "exact",
    )
    if not (meant and fits and allowed):
        return
    whole = Box((), ()) if claim.over == NOMINAL else spread_box(case)
    cells = [c.parameters for c in claim.cells]
    common = len(cells) == 1 or claim.over == NOMINAL or not any(p.varies for p in case.model.parameters)
    yield _shown(
        "vertices", "the cells cover the parameter box", covers_exactly(cells, whole) and common, claim, "exact",
        f"{len(cells)} cell{'' if len(cells) == 1 else 's'}",
    )  # fmt: skip
    forms = linear_forms(case, equilibrium, claim.over)
    if isinstance(forms, str):
        yield _shown("smooth", "the linear part is known exactly or enclosed", False, claim, "exact", forms)
        return
    strength: Strength = "enclosed" if forms.balls else "exact"
    yield _shown("smooth", "the linear part is known exactly or enclosed", True, claim, strength)
    if claim.over != NOMINAL:
        fixed = forms.constant_terms_vanish and all(b.is_exact for b in equilibrium.state)
        yield _shown("fixed", "the equilibrium is the same for every parameter combination", fixed, claim, "exact")
    held = sum(cell_holds(forms, cell, claim.region, claim.level) for cell in claim.cells)
    yield _shown(
        "spectrum", "P and the Lyapunov form of the region are positive definite on every cell",
        held == len(claim.cells), claim, strength, f"{held} of {len(claim.cells)} cells",
    )  # fmt: skip


def cell_holds(forms: LinearForms, cell: MatrixCell, region: SpectralRegion, level: Fraction) -> bool:
    """P > 0, and every Bernstein coefficient of the region's form over the cell is positive definite."""
    if len(cell.matrix) != len(forms.states) or not is_positive_definite(cell.matrix):
        return False
    if cell.parameters.names != forms.parameters:
        return False
    sign = _denominator_sign(forms, cell.parameters)
    if sign == 0:
        return False
    slope = tangent_above(level) if region == "sector" else level
    form = spectral_form(forms, cell.matrix, region, slope, sign)
    variables = len(forms.states) * (2 if region == "sector" else 1)
    return all(
        _is_definite(coefficient, forms, variables)
        for _, coefficient in bernstein_coefficients(form, forms.ring, cell.parameters)
    )


def tangent_above(sine: Fraction) -> Fraction:
    """A rational at or above tan(asin(sine)).

    The form of the sector is convex in t and even (w -> -w turns t to -t), so positive definiteness at a
    larger t implies it at the true one.
    """
    return root_above(sine**2 / (1 - sine**2))


def _denominator_sign(forms: LinearForms, parameters: Box) -> int:
    names = (*parameters.names, *forms.balls)
    sides = (*parameters.intervals, *(Interval(b.lower, b.upper) for b in forms.balls.values()))
    coefficients = terms(forms.denominator)

    def value(environment: Mapping[str, arb]) -> arb:
        total = arb(0)
        for exponents, coefficient in coefficients.items():
            term = arb(to_fmpq(coefficient))
            for name, count in zip(forms.ring.names, exponents, strict=True):
                for _ in range(count):
                    term = term * environment[name]
            total = total + term
        return total

    proof = constant_sign(value, Box(names, sides))
    return proof.sign if proof.holds else 0


def _is_definite(form: fmpq_mpoly, forms: LinearForms, variables: int) -> bool:
    """The quadratic form is positive definite in its first `variables` variables, for every value of the balls."""
    size = 2 * len(forms.states)
    middle = [[Fraction(0)] * variables for _ in range(variables)]
    radius = [[Fraction(0)] * variables for _ in range(variables)]
    for exponents, ball in collapse(form, forms.ring, size, forms.balls).items():
        places = [i for i, k in enumerate(exponents) for _ in range(k)]
        if len(places) != len(("row", "column")) or max(places) >= variables:
            return False
        _add(middle, radius, places, ball)
    return is_positive_definite_for_all(middle, radius)


def _add(middle: list[list[Fraction]], radius: list[list[Fraction]], places: list[int], ball: Ball) -> None:
    i, j = places
    share = Fraction(1) if i == j else Fraction(1, 2)
    for a, b in {(i, j), (j, i)}:
        middle[a][b] += ball.middle * share
        radius[a][b] += ball.radius * share


def covers_exactly(cells: list[Box], whole: Box) -> bool:
    """The union of `cells` holds `whole`; every cell is over the same parameters.

    Recursive: where the cells that meet the box leave a face inside it, cut there; a box inside one cell
    is covered.  Ends because cuts only happen at the finitely many faces.
    """
    if any(cell.names != whole.names for cell in cells):
        return False
    if any(cell.contains(whole) for cell in cells):
        return True
    for cell in cells:
        for i, (side, inner) in enumerate(zip(whole.intervals, cell.intervals, strict=True)):
            for cut in inner.bounds:
                if side.bounds[0] < cut < side.bounds[1]:
                    halves = (Interval(side.bounds[0], cut), Interval(cut, side.bounds[1]))
                    parts = [
                        Box(whole.names, tuple(h if k == i else s for k, s in enumerate(whole.intervals)))
                        for h in halves
                    ]
                    meeting = [[c for c in cells if _meets(c, part)] for part in parts]
                    return all(covers_exactly(m, part) for m, part in zip(meeting, parts, strict=True))
    return False


def _meets(a: Box, b: Box) -> bool:
    pairs = zip(a.intervals, b.intervals, strict=True)
    return all(x.bounds[0] <= y.bounds[1] and y.bounds[0] <= x.bounds[1] for x, y in pairs)
