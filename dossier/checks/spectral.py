"""Verify that all eigenvalues of the linear part lie in a region, for every parameter of a box (T1 with T7)."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from fractions import Fraction

from flint import arb, fmpq_mpoly

from dossier.checks.boxes import condition_holds, constant_sign
from dossier.checks.exact import is_positive_definite, is_positive_definite_for_all, is_symmetric, root_above
from dossier.checks.lyapunov import parameter_box
from dossier.model.affine import spread_box
from dossier.model.ball import Ball, to_fmpq
from dossier.model.case import NOMINAL, Case
from dossier.model.claim import MatrixCell, MatrixClaim, SpectralRegion
from dossier.model.decrease import bernstein_coefficients
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import SATURATION, Condition, Expression, conditions, nodes, sub
from dossier.model.figures import figure
from dossier.model.finding import SCALE, Enclosure, Finding, Premise, Strength, weakest
from dossier.model.loop import model_hash, vector_field
from dossier.model.polynomial import collapse, terms
from dossier.model.region import Box, Interval
from dossier.model.spectral_form import LinearForms, linear_forms, spectral_form

REGION_TEXT: Mapping[SpectralRegion, str] = {
    "half-plane": "every eigenvalue has a real part below −{level} 1/s",
    "disc": "every multiplier has a modulus below {level}",
    "sector": "every mode has a damping ratio above {level}",
}


NO_VARYING = "no parameter varies during a motion, as the equilibrium moves"
"""Statement of the premise that a moving equilibrium needs: a motion has one equilibrium only."""


def region_text(region: SpectralRegion, level: Fraction) -> str:
    """What the region asks of every eigenvalue, in words."""
    if region == "half-plane" and level == 0:
        return "every eigenvalue has a negative real part"
    return REGION_TEXT[region].format(level=figure(level))


Where = Callable[[Box], Equilibrium | None]
"""The equilibrium of the operating point for the combinations in a cell (`dossier.checks.movement`)."""


def check_matrix(case: Case, equilibrium: Equilibrium, claim: MatrixClaim, where: Where | None = None) -> Finding:
    """Verify the Lyapunov inequality of `claim` on every cell, and that the cells cover the scope's box.

    `where` tells of an equilibrium that moves; without it, only one that is the same for every combination will do.
    """
    premises = tuple(_premises(case, equilibrium, claim, where))
    result, strength = weakest(premises)
    facts = {"level": Enclosure(claim.level, claim.level, "1")}
    if result == "proved" and claim.over != NOMINAL:
        scale = proved_scale(spread_box(case), [c.parameters for c in claim.cells])
        facts[SCALE] = Enclosure(scale, scale, "1")
    scope = "at the nominal parameters" if claim.over == NOMINAL else "for every parameter combination"
    text = region_text(claim.region, claim.level)
    return Finding(
        claim.identifier, "interval" if strength == "enclosed" else "exact", result, strength, claim.over, "T1",
        f"{text}, {scope}", premises, facts, (claim.identifier,),
    )  # fmt: skip


def _shown(
    label: str, statement: str, shown: bool, claim: MatrixClaim, strength: Strength, detail: str = ""
) -> Premise:
    return Premise(label, statement, "proved" if shown else "undecided", strength, detail, claim.identifier)


def _premises(case: Case, equilibrium: Equilibrium, claim: MatrixClaim, where: Where | None) -> Iterator[Premise]:
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
    complete = covers_exactly(cells, whole)
    yield _shown(
        "vertices", "the cells cover the parameter box", complete, claim, "exact",
        f"{len(cells)} cell{'' if len(cells) == 1 else 's'}",
    )  # fmt: skip
    if not complete:
        return
    if claim.over != NOMINAL and any(p.varies and p.has_spread for p in case.model.parameters):
        common = len({c.matrix for c in claim.cells}) == 1 and not any(c.slopes for c in claim.cells)
        yield _shown("common", "one P serves all cells, as parameters vary during a motion", common, claim, "exact")
    if claim.over == NOMINAL:
        yield _smooth(case, equilibrium, claim)
    elif equilibrium.fixed_for_all or where is None:
        yield _regular(case, claim, [(equilibrium, _all_parameters(case, hull_of(whole, cells)))])
    else:
        places = [(where(box), box) for box in cells]
        yield _regular(case, claim, [(e, _all_parameters(case, box)) for e, box in places if e is not None])
    yield from _spectrum(case, equilibrium, claim, where)


def _smooth(case: Case, equilibrium: Equilibrium, claim: MatrixClaim) -> Premise:
    forms = linear_forms(case, equilibrium, NOMINAL)
    return _shown(
        "smooth", "the right-hand side is continuously differentiable at the equilibrium",
        not isinstance(forms, str), claim, "enclosed" if isinstance(forms, str) or forms.balls else "exact",
        forms if isinstance(forms, str) else "",
    )  # fmt: skip


def _all_parameters(case: Case, cell: Box) -> Box:
    """The parameters of the cell, and the nominal balls of the others."""
    sides = dict(parameter_box(case, NOMINAL).items()) | dict(cell.items())
    return Box(tuple(sides), tuple(sides.values()))


def _regular(case: Case, claim: MatrixClaim, places: Sequence[tuple[Equilibrium, Box]]) -> Premise:
    """Over the whole parameter box the equations are smooth at the equilibrium and keep one branch."""
    equations = vector_field(case).equations
    asked = list(dict.fromkeys(c for e in equations for c in conditions(e)))
    kinks = list(dict.fromkeys(k for e in equations for k in kink_distances(e)))
    nominal_inside = all(p.spread.contains(Interval(p.nominal.lower, p.nominal.upper)) for p in case.model.parameters)
    proofs = []
    for equilibrium, parameters in places:
        states = tuple(Interval(b.lower, b.upper) for b in equilibrium.state)
        place = Box((*case.model.state_names, *parameters.names), (*states, *parameters.intervals))
        proofs += [condition_holds(c, place) for c in (*asked, *(Condition("nonzero", k) for k in kinks))]
    return _shown(
        "smooth", "the right-hand side is continuously differentiable at the equilibrium for every combination, and no "
        "saturation or absolute value changes its branch", nominal_inside and all(p.holds for p in proofs), claim,
        "exact" if all(p.exact for p in proofs) else "enclosed",
        f"{len(asked)} conditions, {len(kinks)} kinks" if proofs else "",
    )  # fmt: skip


def kink_distances(expression: Expression) -> Iterator[Expression]:
    """Expressions that keep their sign while every ``abs`` and ``sat`` keeps its branch."""
    for node in nodes(expression):
        if node.op == "abs":
            yield node.args[0]
        elif node.op == SATURATION:
            argument, lower, upper = node.args
            yield from (sub(argument, lower), sub(upper, argument), sub(upper, lower))


def _spectrum(case: Case, equilibrium: Equilibrium, claim: MatrixClaim, where: Where | None) -> Iterator[Premise]:
    moves = claim.over != NOMINAL and not equilibrium.fixed_for_all and where is not None
    whole = "" if moves else linear_forms(case, equilibrium, claim.over)
    held, strength, why = 0, "exact", ""
    fixed = True
    for cell in claim.cells:
        forms = whole
        place = where(cell.parameters) if moves and where is not None else equilibrium
        if place is None or (moves and place.course is None):
            why = "it is not proved where the equilibrium of a cell lies"
            break
        fits = not isinstance(whole, str) and not whole.local and whole.box.contains(cell.parameters)
        if claim.over != NOMINAL and not fits:
            forms = linear_forms(case, place, claim.over, cell.parameters)
        if isinstance(forms, str):
            why = forms
            break
        strength = "enclosed" if forms.balls else strength
        fixed = fixed and forms.constant_terms_vanish
        if not cell_holds(forms, cell, claim.region, claim.level):
            break
        held += 1
    if moves:
        yield _shown(
            "moved", "where the equilibrium of every combination lies is proved", held == len(claim.cells) > 0, claim,
            "enclosed",
        )  # fmt: skip
        yield _shown(
            "rest", NO_VARYING, not any(p.varies and p.has_spread for p in case.model.parameters), claim, "exact"
        )
    elif claim.over != NOMINAL:
        yield _shown(
            "fixed", "the equilibrium is the same for every parameter combination", held > 0 and fixed, claim, "exact"
        )
    yield _shown(
        "spectrum", "P and the Lyapunov form of the region are positive definite on every cell",
        held == len(claim.cells) > 0, claim, strength, why or f"{held} of {len(claim.cells)} cells",
    )  # fmt: skip


def cell_holds(forms: LinearForms, cell: MatrixCell, region: SpectralRegion, level: Fraction) -> bool:
    """P > 0, and every Bernstein coefficient of the region's form over the cell is positive definite."""
    if not _is_positive(forms, cell):
        return False
    if not forms.box.contains(cell.parameters):
        return False
    sign = _denominator_sign(forms, cell.parameters)
    if sign == 0:
        return False
    slope = tangent_above(level) if region == "sector" else level
    form = spectral_form(forms, cell, region, slope, sign)
    variables = len(forms.states) * (1 if region == "half-plane" else 2)
    return all(
        _is_definite(coefficient, forms, variables)
        for _, coefficient in bernstein_coefficients(form, forms.ring, cell.parameters)
    )


def hull_of(whole: Box, cells: Sequence[Box]) -> Box:
    """The smallest box that holds `whole` and all cells; cells that are not over the same parameters are left out."""
    sides = []
    for i, side in enumerate(whole.intervals):
        ends = [side.bounds, *(c.intervals[i].bounds for c in cells if c.names == whole.names and c.is_bounded)]
        sides.append(Interval(min(e[0] for e in ends), max(e[1] for e in ends)))
    return Box(whole.names, tuple(sides))


def proved_scale(whole: Box, cells: Sequence[Box]) -> Fraction:
    """The largest factor, at least 1, by which `whole` may be widened about its middle and is still covered by `cells`.

    Only the factor at which the widened box meets the hull of the cells is looked at.
    """
    hull = hull_of(whole, cells)
    ratios = [
        min(side.middle - outer.bounds[0], outer.bounds[1] - side.middle) / (side.width / 2)
        for side, outer in zip(whole.intervals, hull.intervals, strict=True)
        if side.width
    ]
    scale = min(ratios, default=Fraction(1))
    return scale if scale > 1 and covers_exactly(list(cells), widened(whole, scale)) else Fraction(1)


def widened(whole: Box, scale: Fraction) -> Box:
    """The box scaled about its middle."""
    return Box(
        whole.names,
        tuple(Interval(i.middle - scale * i.width / 2, i.middle + scale * i.width / 2) for i in whole.intervals),
    )


def _is_positive(forms: LinearForms, cell: MatrixCell) -> bool:
    """P of the cell is positive definite for every combination: it is affine, so the corners decide."""
    size = len(forms.states)
    if any(len(m) != size or any(len(row) != size for row in m) for m in (cell.matrix, *cell.slopes)):
        return False
    if not cell.slopes:
        return is_positive_definite(cell.matrix)
    if len(cell.slopes) != len(cell.parameters.names) or not all(map(is_symmetric, cell.slopes)):
        return False
    return all(is_positive_definite(cell.at(corner)) for corner in cell.parameters.corners())


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
    if any(cell.names != whole.names or not cell.is_bounded for cell in cells):
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
