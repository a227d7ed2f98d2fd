"""The value of a quantity at an equilibrium that moves: over the combinations of a cell, or at one of them.

On a course x*(p) = c + S (p - m) + r the quantity is q(p, r); with g its slopes over the cell,
  q(p, r) lies in q(m, 0) + g_p (Q - m) + g_r [-rest, rest]   (mean value form, one parameter after the other),
which is sharper than the plain range as S makes what p and x* do to the quantity add up before the box is put in.
(A. Neumaier, Interval Methods for Systems of Equations, 1990, section 2.3.)
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from fractions import Fraction
from itertools import islice, product
from typing import Final

from flint import arb

from dossier.checks.boxes import range_over
from dossier.checks.lyapunov import parameter_box
from dossier.checks.slopes import value_and_slopes
from dossier.model.affine import spread_box
from dossier.model.ball import Ball, enclose, evaluate, from_arb, precision, to_fmpq
from dossier.model.case import NOMINAL, Case
from dossier.model.course import shift_of
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import Expression, substitute
from dossier.model.polynomial import shifts
from dossier.model.region import Box, Interval
from dossier.model.spectral_form import rest_expressions

VALUE_BITS: Final = 160
"""Working precision; sharpness comes from the size of the cells."""
CORNERS: Final = 64
"""Corners of the box of the spreads that are tried as counter-examples, the first ones in order."""


def combinations_to_try(case: Case) -> Iterator[dict[str, Fraction]]:
    """The nominal combination where it is exact, then corners of the box of the spreads."""
    whole = spread_box(case)
    nominal = {p.name: p.nominal for p in case.model.parameters if p.name in whole.names}
    if all(b.is_exact for b in nominal.values()):
        yield {n: b.middle for n, b in nominal.items()}
    for corner in islice(product(*(i.bounds for i in whole.intervals)), CORNERS):
        yield dict(zip(whole.names, corner, strict=True))


def value_at(case: Case, equilibrium: Equilibrium, quantity: Expression) -> Ball | None:
    """An enclosure of `quantity` (states and parameters) at the equilibrium and the nominal combination of `case`."""
    parameters = parameter_box(case, NOMINAL)
    sides = tuple(Interval(b.lower, b.upper) for b in equilibrium.state)
    place = Box((*case.model.state_names, *parameters.names), (*sides, *parameters.intervals))
    return range_over(quantity, place, 1)


def range_along(case: Case, equilibrium: Equilibrium, quantity: Expression) -> Ball | None:
    """An enclosure of `quantity` at the equilibria of all combinations of the course of `equilibrium`.

    None where there is no finite one.  Raises ValueError without a course.
    """
    course = equilibrium.course
    if course is None:
        raise ValueError("the equilibrium has no course")
    states = case.model.state_names
    moved = shifts(states, equilibrium.state, course)
    places = dict(zip(states, rest_expressions(case, equilibrium, moved), strict=True))
    formula = substitute(quantity, places)
    with precision(VALUE_BITS):
        known = {
            p.name: enclose(p.nominal) for p in case.model.parameters if p.name not in course.parameters.names
        }  # fmt: skip
        middle = {n: arb(to_fmpq(i.middle)) for n, i in course.parameters.items()}
        middle |= {shift_of(s): arb(0) for s in states if shift_of(s) in moved}
        reach = {n: enclose(Ball.from_bounds(*i.bounds)) for n, i in course.parameters.items()}
        reach |= {n: enclose(b) for n, b in moved.items()}
        return from_arb(_mean_value(formula, known, middle, reach))


def _mean_value(
    formula: Expression, known: Mapping[str, arb], middle: Mapping[str, arb], reach: Mapping[str, arb]
) -> arb:
    environment = {**known, **middle}
    total = evaluate(formula, environment)
    for name, side in reach.items():
        step = side - environment[name]
        environment[name] = side
        value, (slope,) = value_and_slopes(formula, (name,), environment)
        if not (value.is_finite() and slope.is_finite()):
            return arb("nan")
        total = total + slope * step
    return total
