"""Verify a quadratic Lyapunov certificate exactly: definiteness, decrease over the whole set and parameter box.

Theorems T2 and T3 with T7 (`dossier.model.theorem`).  The set is Omega = {V <= level} with V = y'Py and
P > 0, an ellipsoid, hence compact and connected; its bounding box is |y_i| <= sqrt(level (P^-1)_ii).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction

from dossier.checks.boxes import BoxProof, condition_holds, polynomial_sign
from dossier.checks.exact import (
    expand,
    inverse,
    is_positive_definite,
    is_positive_gram,
    is_positive_semidefinite,
    is_well_formed,
    multiply,
    quadratic_form,
    root_above,
    subtract,
    vanishes_only_at_zero,
)
from dossier.model.affine import affine_parts, offset_forms, spread_box
from dossier.model.ball import Ball
from dossier.model.case import NOMINAL, Case, Scope
from dossier.model.claim import CoverClaim, DecreaseWitness, LyapunovClaim, Matrix
from dossier.model.decrease import bernstein_coefficients, bernstein_count, decrease_form
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import SATURATION, Expression, conditions, fold, neg, rebuild, sub
from dossier.model.figures import figure, span
from dossier.model.finding import Finding, Premise, Result, Strength, weakest
from dossier.model.loop import model_hash, vector_field
from dossier.model.polynomial import Exponents, NotRational, OffsetField, collapse, offset_field, terms
from dossier.model.region import Box, Interval
from dossier.model.remainders import HIGHEST_ORDER

QUADRATIC = 2


@dataclass(frozen=True, slots=True)
class Ellipsoid:
    """{y'Py <= level} with its exact inverse P^-1 and rational half widths at or above the true ones."""

    matrix: Matrix
    inverse: Matrix
    level: Fraction
    half_widths: tuple[Fraction, ...]


def quadratic_matrix(function: Mapping[Exponents, Fraction], size: int) -> Matrix | None:
    """P of V = y'Py, or None where V is not a quadratic form in `size` variables."""
    matrix = [[Fraction(0)] * size for _ in range(size)]
    for exponents, coefficient in function.items():
        if len(exponents) != size or sum(exponents) != QUADRATIC or min(exponents) < 0:
            return None
        places = [i for i, k in enumerate(exponents) for _ in range(k)]
        i, j = places
        matrix[i][j] += coefficient / 2
        matrix[j][i] += coefficient / 2
    return tuple(tuple(row) for row in matrix)


def ellipsoid(claim: LyapunovClaim | CoverClaim, size: int) -> Ellipsoid | None:
    """The set of a quadratic claim, or None unless P is proved positive definite and the level positive."""
    matrix = quadratic_matrix(claim.function, size)
    if matrix is None or claim.level <= 0 or not is_positive_definite(matrix):
        return None
    inverted = inverse(matrix)
    if inverted is None:
        return None
    widths = tuple(root_above(claim.level * inverted[i][i]) for i in range(size))
    return Ellipsoid(matrix, inverted, claim.level, widths)


def parameter_box(case: Case, over: Scope) -> Box:
    """All parameters: the nominal balls, or each one's whole spread."""
    sides = tuple(
        Interval(p.nominal.lower, p.nominal.upper) if over == NOMINAL else p.spread for p in case.model.parameters
    )
    return Box(tuple(p.name for p in case.model.parameters), sides)


def absolute_box(equilibrium: Equilibrium, names: tuple[str, ...], half_widths: tuple[Fraction, ...]) -> Box:
    """The bounding box of the set in absolute coordinates, whatever the equilibrium's exact place in its ball."""
    return Box(
        names,
        tuple(Interval(b.lower - w, b.upper + w) for b, w in zip(equilibrium.state, half_widths, strict=True)),
    )


Where = Callable[[Box], Equilibrium | None]
"""The equilibrium of the operating point for the combinations in a cell (`dossier.checks.movement`)."""


def check_lyapunov(case: Case, equilibrium: Equilibrium, claim: LyapunovClaim, where: Where | None = None) -> Finding:
    """Verify every premise of T2 (T3 for sampled models) for the set of `claim`, without its region.

    `where` tells of an equilibrium that moves; without it, only one that is the same for every combination will do.
    Undecided, never proved, where anything is missing or another model was meant.
    """
    theorem = "T3" if case.model.time == "sampled" else "T2"
    premises = tuple(set_premises(case, equilibrium, claim, where))
    result, strength = weakest(premises)
    return Finding(
        claim.identifier, "exact", result, strength, claim.over, theorem, _statement(case, claim), premises,
        evidence=(claim.identifier,),
    )  # fmt: skip


def _statement(case: Case, claim: LyapunovClaim) -> str:
    verb = "falls from every sample to the next" if case.model.time == "sampled" else "decreases along every motion"
    scope = "at the nominal parameters" if claim.over == NOMINAL else "for every parameter combination"
    return f"V is positive and {verb} in the set V ≤ {figure(claim.level)} around {claim.equilibrium}, {scope}"


def set_premises(
    case: Case, equilibrium: Equilibrium, claim: LyapunovClaim, where: Where | None = None, *, of_cell: bool = False
) -> Iterator[Premise]:
    """Every premise about the set of `claim`; with `of_cell` it may be about a part of the box of spreads only."""
    ident = claim.identifier
    if claim.model_hash != model_hash(case) or claim.equilibrium != equilibrium.identifier:
        yield _premise("model", "the certificate is about this closed loop and equilibrium", False, ident)
        return
    names = case.model.state_names
    shape = ellipsoid(claim, len(names))
    yield _premise("d", "V = y'Py with P positive definite and a positive level", shape is not None, ident)
    expected = Box((), ()) if claim.over == NOMINAL else spread_box(case)
    fits = claim.parameters == expected
    if of_cell and claim.over != NOMINAL:
        fits = claim.parameters.names == expected.names and expected.contains(claim.parameters)
    yield _premise("scope", "the parameter box is the one asked for", fits, ident)
    if shape is None or not fits or not 0 <= claim.expansion <= HIGHEST_ORDER:
        if shape is not None and fits:
            yield _premise("remainders", f"the order of expansion is at most {HIGHEST_ORDER}", False, ident)
        return
    if claim.over != NOMINAL and not equilibrium.fixed_for_all and where is not None:
        place = where(claim.parameters)
        moved = place is not None and place.course is not None
        yield _premise("moved", "where the equilibrium of every combination lies is proved", moved, ident, "enclosed")
        varying = any(p.varies and p.has_spread for p in case.model.parameters)
        yield _premise("rest", "no parameter varies during a motion, as the equilibrium moves", not varying, ident)
        if place is None or not moved:
            return
        equilibrium = place
    yield from _place(case, equilibrium, claim, shape)
    yield from _decrease(case, equilibrium, claim, shape)


def _premise(
    label: str, statement: str, shown: bool, evidence: str, strength: Strength = "exact", detail: str = ""
) -> Premise:
    result: Result = "proved" if shown else "undecided"
    return Premise(label, statement, result, strength, detail, evidence)


def _place(case: Case, equilibrium: Equilibrium, claim: LyapunovClaim, shape: Ellipsoid) -> Iterator[Premise]:
    """T2 (b) and (c): the set lies in the open domain, and the equations are regular there."""
    names = case.model.state_names
    place = absolute_box(equilibrium, names, shape.half_widths)
    inside = case.model.domain.contains(place, strictly=True)
    yield _premise(
        "b", "the set is compact and lies in the interior of the domain", inside, claim.identifier,
        detail=f"bounding box of the set {_sides(place)}",
    )  # fmt: skip
    sides = dict(parameter_box(case, claim.over).items()) | dict(claim.parameters.items())
    whole = Box((*place.names, *sides), (*place.intervals, *sides.values()))
    asked = list(dict.fromkeys(c for e in vector_field(case).equations for c in conditions(e)))
    proofs = [condition_holds(c, whole) for c in asked]
    yield _premise(
        "c", "the right-hand side is smooth near the set: denominators, roots and logarithms stay regular",
        all(p.holds for p in proofs), claim.identifier, "exact" if all(p.exact for p in proofs) else "enclosed",
        f"{len(asked)} conditions on the bounding box, {sum(p.pieces for p in proofs)} pieces"
        if asked else "no denominator, root or logarithm",
    )  # fmt: skip


def _sides(box: Box) -> str:
    return ", ".join(f"{n} in {span(*i.bounds)}" for n, i in box.items())


def certified_field(
    case: Case, equilibrium: Equilibrium, over: Scope, place: Box | None = None, order: int = 0,
    equations: tuple[Expression, ...] | None = None,
) -> OffsetField | NotRational:  # fmt: skip
    """The closed loop in offsets from `equilibrium` over the scope's symbolic parameters.

    With a `place`, elementary functions are expanded to `order` there; `equations` that are equal to those of the case
    on the set in question may take their place.
    """
    symbolic = () if over == NOMINAL else spread_box(case).names
    loop = vector_field(case)
    return offset_field(
        equations or loop.equations, loop.states, equilibrium.state,
        {p.name: p.nominal for p in case.model.parameters}, symbolic, sampled=loop.sampled, place=place, order=order,
        course=equilibrium.course,
    )  # fmt: skip


def _field_on_set(
    case: Case, equilibrium: Equilibrium, claim: LyapunovClaim, shape: Ellipsoid
) -> OffsetField | NotRational:
    """As certified; where there are elementary functions, expanded on the bounding box of the set.

    A saturation or absolute value whose argument is proved to keep its branch on the set is that branch.
    """
    equations = tuple(
        _on_branch(e, case, equilibrium, claim, shape) for e in vector_field(case).equations
    )  # fmt: skip
    field = certified_field(case, equilibrium, claim.over, equations=equations)
    if not isinstance(field, NotRational):
        return field
    place = absolute_box(equilibrium, case.model.state_names, shape.half_widths)
    whole = Box((*place.names, *claim.parameters.names), (*place.intervals, *claim.parameters.intervals))
    return certified_field(case, equilibrium, claim.over, whole, claim.expansion, equations)


def _on_branch(
    expression: Expression, case: Case, equilibrium: Equilibrium, claim: LyapunovClaim, shape: Ellipsoid
) -> Expression:
    """`expression` with every kink resolved whose distance is affine in the offsets and keeps its sign on the set."""

    def above_zero(distance: Expression) -> bool:
        bound = affine_range(case, equilibrium, shape, distance, claim.over, claim.parameters)
        return bound is not None and bound.lower > 0

    def visit(node: Expression, args: tuple[Expression, ...]) -> Expression:
        if node.op == "abs":
            return args[0] if above_zero(args[0]) else neg(args[0]) if above_zero(neg(args[0])) else rebuild(node, args)
        if node.op == SATURATION:
            argument, lower, upper = args
            if above_zero(sub(argument, lower)) and above_zero(sub(upper, argument)):
                return argument
        return rebuild(node, args)

    return fold(expression, visit)


def affine_range(
    case: Case, equilibrium: Equilibrium, shape: Ellipsoid, quantity: Expression, over: Scope, cell: Box
) -> Ball | None:
    """Bounds over x* + the ellipsoid of a quantity that is affine in the offsets, for the combinations of a cell.

    By the support function, max w'y = sqrt(level w'P^-1 w), convex in (constant, w), hence largest at the Bernstein
    coefficients over the cell.  None for other quantities.
    """
    forms = offset_forms(case, equilibrium, quantity, over, None if over == NOMINAL else cell)
    if forms is None:
        return None
    bounds = []
    for form in forms:
        parts = affine_parts(form, len(case.model.states))
        if parts is None:
            return None
        bounds.append(_support(*parts, shape))
    return Ball.from_bounds(min(b.lower for b in bounds), max(b.upper for b in bounds))


def _support(constant: Ball, weights: tuple[Ball, ...], shape: Ellipsoid) -> Ball:
    """Bounds of constant + w'y over the ellipsoid, for every value of the balls."""
    reach = root_above(shape.level * quadratic_form(shape.inverse, [w.middle for w in weights]))
    slack = sum((w.radius * h for w, h in zip(weights, shape.half_widths, strict=True)), Fraction(0))
    return Ball(constant.middle, constant.radius + reach + slack)


def _decrease(case: Case, equilibrium: Equilibrium, claim: LyapunovClaim, shape: Ellipsoid) -> Iterator[Premise]:
    """T2 (e) and the conditions of T7."""
    ident = claim.identifier
    try:
        field = _field_on_set(case, equilibrium, claim, shape)
    except ArithmeticError as error:
        yield _premise("polynomial", "the equations have finite constants", False, ident, detail=str(error))
        return
    if isinstance(field, NotRational):
        yield _premise("polynomial", "the equations are quotients of polynomials", False, ident, detail=field.reason)
        return
    if field.factors.names:
        yield _premise(
            "remainders", "elementary functions of the states lie between the polynomials used, on the bounding box "
            "of the set", True, ident, "enclosed", f"{len(field.factors.names)} functions, order {claim.expansion}",
        )  # fmt: skip
    if claim.over != NOMINAL and equilibrium.course is None:
        yield _premise(
            "fixed", "the equilibrium is the same for every parameter combination",
            field.constant_terms_vanish and all(b.is_exact for b in equilibrium.state), ident,
        )  # fmt: skip
    form = decrease_form(field, claim.function)
    proof = _denominator_sign(field, claim, shape)
    sign = proof.sign**form.denominator_power if proof.holds else 0
    yield _premise(
        "polynomial", "the cleared denominator keeps one sign on the set", sign != 0, ident,
        "exact" if proof.exact else "enclosed",
    )  # fmt: skip
    if sign == 0:
        return
    numerator = form.numerator * field.ring.constant(Fraction(sign))
    box = Box((*claim.parameters.names, *field.factors.names), (*claim.parameters.intervals, *field.factors.intervals))
    expected = bernstein_count(numerator, field.ring, box)
    complete = expected == len(claim.decrease)
    shown = 0
    if complete:
        pairs = zip(bernstein_coefficients(numerator, field.ring, box), claim.decrease, strict=True)
        for (index, coefficient), witness in pairs:
            target = collapse(-coefficient, field.ring, len(field.states), field.balls)
            if witness.index != index or not _decreases(target, witness, claim, len(field.states)):
                break
            shown += 1
    strength: Strength = "enclosed" if field.balls or field.factors.names else "exact"
    yield _premise(
        "e", "V decreases everywhere in the set but at the equilibrium", complete and shown == expected, ident,
        strength, f"{shown} of {expected} "
        + ("Bernstein coefficients over the parameter box" if box.names else "identities")
        + " shown by positive definite Gram matrices",
    )  # fmt: skip


def _denominator_sign(field: OffsetField, claim: LyapunovClaim, shape: Ellipsoid) -> BoxProof:
    """The sign of D on the set times the parameter box."""
    ring = field.ring
    sides = [Interval(-w, w) for w in shape.half_widths]
    sides += [*claim.parameters.intervals, *field.factors.intervals]
    sides += [Interval(field.balls[n].lower, field.balls[n].upper) for n in ring.names[len(sides) :]]
    return polynomial_sign(terms(field.denominator), Box(ring.names, tuple(sides)))


def _decreases(target: Mapping[Exponents, Ball], witness: DecreaseWitness, claim: LyapunovClaim, size: int) -> bool:
    """-g = main + multiplier (level - V) with main positive away from zero and multiplier >= 0 on the whole space."""
    main, multiplier = witness.main, witness.multiplier
    if not (is_well_formed(main, size) and is_well_formed(multiplier, size)):
        return False
    if not vanishes_only_at_zero(main.basis, size) or not is_positive_semidefinite(multiplier.matrix):
        return False
    gap = {e: -c for e, c in claim.function.items()}
    gap[(0,) * size] = claim.level
    return is_positive_gram(subtract(target, multiply(expand(multiplier), gap)), main)
