"""Geometry of a proved ellipsoid: which region fits, how far a quantity can go.  Exact where possible."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Final

from dossier.checks.boxes import range_over
from dossier.checks.exact import quadratic_form, root_above, root_below
from dossier.checks.lyapunov import Ellipsoid, absolute_box, parameter_box, spread_box
from dossier.model.ball import Ball
from dossier.model.case import NOMINAL, Case, Scope
from dossier.model.decrease import bernstein_coefficients
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import Expression
from dossier.model.polynomial import NotRational, Quotient, Ring, collapse, quotient_of, split_constants
from dossier.model.region import Box

RANGE_PIECES: Final = 4_096
"""Pieces for the range of a non-linear quantity over the set's bounding box."""


def covers(shape: Ellipsoid, region: Box) -> bool:
    """Every corner of `region` (offsets) lies in the ellipsoid; V is convex, so the whole box does."""
    return all(quadratic_form(shape.matrix, corner) <= shape.level for corner in region.corners())


def covered_scale(shape: Ellipsoid, region: Box) -> Fraction:
    """A proved scale s: s times `region` lies in the ellipsoid.  Raises ValueError for an unbounded region."""
    worst = max(quadratic_form(shape.matrix, corner) for corner in region.corners())
    if worst == 0:
        return Fraction(1)
    return root_below(shape.level / worst)


@dataclass(frozen=True, slots=True)
class Bound:
    """Bounds of a quantity over the set, its value at the equilibrium, and whether exact algebra gave them."""

    over_set: Ball
    at_equilibrium: Ball
    exact: bool


def bound_over_set(
    case: Case, equilibrium: Equilibrium, shape: Ellipsoid, quantity: Expression, over: Scope
) -> Bound | None:
    """Enclose `quantity` (states and parameters, absolute values) over x* + the ellipsoid, for every combination.

    A quantity that is affine in the offsets is bounded by the support function of the ellipsoid,
    max w'y = sqrt(level w'P^-1 w), convex in (constant, w), hence largest at the Bernstein
    coefficients over the parameter box.  Others are enclosed over the bounding box by ball arithmetic.
    None where no finite enclosure was found.
    """
    names = case.model.state_names
    box = parameter_box(case, over)
    place = Box(
        (*names, *box.names),
        (*absolute_box(equilibrium, names, (Fraction(0),) * len(names)).intervals, *box.intervals),
    )
    at_rest = range_over(quantity, place, RANGE_PIECES)
    if at_rest is None:
        return None
    affine = _affine_bound(case, equilibrium, shape, quantity, over)
    if affine is not None:
        return Bound(affine, at_rest, True)
    around = absolute_box(equilibrium, names, shape.half_widths)
    whole = Box(place.names, (*around.intervals, *box.intervals))
    ranged = range_over(quantity, whole, RANGE_PIECES)
    return None if ranged is None else Bound(ranged, at_rest, False)


def _affine_bound(
    case: Case, equilibrium: Equilibrium, shape: Ellipsoid, quantity: Expression, over: Scope
) -> Ball | None:
    names = case.model.state_names
    free = Box((), ()) if over == NOMINAL else spread_box(case)
    known = {p.name: p.nominal for p in case.model.parameters if p.name not in free.names}
    try:
        (converted,), balls = split_constants((quantity,), frozenset((*names, *free.names)), known)
    except ArithmeticError:
        return None
    balls = {**balls, **{f"shift of {n}": Ball(Fraction(0), b.radius) for n, b in _inexact(equilibrium, names)}}
    ring = Ring((*names, *free.names, *balls))
    one = ring.constant(Fraction(1))
    values = {n: Quotient(ring.gen(n), one) for n in (*free.names, *balls)}
    for name, ball in zip(names, equilibrium.state, strict=True):
        shifted = ring.constant(ball.middle) + ring.gen(name)
        values[name] = Quotient(shifted + ring.gen(f"shift of {name}") if ball.radius else shifted, one)
    quotient = quotient_of(converted, ring, values)
    if isinstance(quotient, NotRational) or not quotient.denominator.is_constant():
        return None
    bounds = []
    for _, coefficient in bernstein_coefficients(quotient.numerator, ring, free):
        support = _support(collapse(coefficient, ring, len(names), balls), shape, len(names))
        if support is None:
            return None
        bounds.append(support)
    return Ball.from_bounds(min(b.lower for b in bounds), max(b.upper for b in bounds))


def _inexact(equilibrium: Equilibrium, names: tuple[str, ...]) -> list[tuple[str, Ball]]:
    return [(n, b) for n, b in zip(names, equilibrium.state, strict=True) if b.radius]


def _support(coefficients: dict[tuple[int, ...], Ball], shape: Ellipsoid, size: int) -> Ball | None:
    """Bounds of constant + w'y over the ellipsoid, or None for a polynomial of higher degree."""
    if any(sum(e) > 1 for e in coefficients):
        return None
    zero = Ball(Fraction(0))
    weights = [coefficients.get(tuple(int(i == j) for j in range(size)), zero) for i in range(size)]
    constant = coefficients.get((0,) * size, zero)
    reach = root_above(shape.level * quadratic_form(shape.inverse, [w.middle for w in weights]))
    slack = sum((w.radius * h for w, h in zip(weights, shape.half_widths, strict=True)), Fraction(0))
    return Ball(constant.middle, constant.radius + reach + slack)
