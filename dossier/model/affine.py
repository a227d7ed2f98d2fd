"""A quantity as a polynomial in the offsets from an equilibrium, one per Bernstein coefficient of the parameter box."""

from __future__ import annotations

from fractions import Fraction

from dossier.model.ball import Ball
from dossier.model.case import NOMINAL, Case, Scope
from dossier.model.decrease import bernstein_coefficients
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import Expression
from dossier.model.polynomial import (
    Exponents,
    NotRational,
    Quotient,
    Ring,
    collapse,
    places_at_rest,
    quotient_of,
    shifts,
    split_constants,
)
from dossier.model.region import Box


def spread_box(case: Case) -> Box:
    """Every parameter with a spread, in the model's order."""
    free = [p for p in case.model.parameters if p.has_spread]
    return Box(tuple(p.name for p in free), tuple(p.spread for p in free))


def offset_forms(
    case: Case, equilibrium: Equilibrium, quantity: Expression, over: Scope, cell: Box | None = None
) -> tuple[dict[Exponents, Ball], ...] | None:
    """Coefficients over the offsets at every Bernstein index; the value anywhere in the box is a convex combination.

    The box is that of the spreads, or a `cell` of it.

    None where `quantity` (states and parameters only) is no polynomial in the states and spread parameters.
    """
    names = case.model.state_names
    free = Box((), ()) if over == NOMINAL else spread_box(case) if cell is None else cell
    known = {p.name: p.nominal for p in case.model.parameters if p.name not in free.names}
    try:
        (converted,), balls = split_constants((quantity,), frozenset((*names, *free.names)), known)
    except ArithmeticError:
        return None
    balls = {**balls, **shifts(names, equilibrium.state, equilibrium.course)}
    ring = Ring((*names, *free.names, *balls))
    one = ring.constant(Fraction(1))
    values = {n: Quotient(ring.gen(n), one) for n in (*free.names, *balls)}
    for name, place in zip(names, places_at_rest(ring, names, equilibrium.state, equilibrium.course), strict=True):
        values[name] = Quotient(place + ring.gen(name), one)
    quotient = quotient_of(converted, ring, values)
    if isinstance(quotient, NotRational) or not quotient.denominator.is_constant():
        return None
    coefficients = bernstein_coefficients(quotient.numerator, ring, free)
    return tuple(collapse(c, ring, len(names), balls) for _, c in coefficients)


def affine_parts(coefficients: dict[Exponents, Ball], size: int) -> tuple[Ball, tuple[Ball, ...]] | None:
    """(constant, weights) of a polynomial of degree at most 1 in the offsets, else None."""
    if any(sum(e) > 1 for e in coefficients):
        return None
    zero = Ball(Fraction(0))
    weights = tuple(coefficients.get(tuple(int(i == j) for j in range(size)), zero) for i in range(size))
    return coefficients.get((0,) * size, zero), weights
