"""Geometry of a proved ellipsoid: which region fits, how far a quantity can go.  Exact where possible."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Final

from dossier.checks.boxes import range_over
from dossier.checks.exact import quadratic_form, root_below
from dossier.checks.lyapunov import Ellipsoid, absolute_box, affine_range, parameter_box
from dossier.model.affine import spread_box
from dossier.model.ball import Ball
from dossier.model.case import Case, Scope
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import Expression
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
    case: Case, equilibrium: Equilibrium, shape: Ellipsoid, quantity: Expression, over: Scope, cell: Box | None = None
) -> Bound | None:
    """Enclose `quantity` (states and parameters, absolute values) over x* + the ellipsoid, for every combination.

    A quantity that is affine in the offsets is bounded by the support function of the ellipsoid,
    max w'y = sqrt(level w'P^-1 w), convex in (constant, w), hence largest at the Bernstein
    coefficients over the parameter box.  Others are enclosed over the bounding box by ball arithmetic.
    With a `cell` of the spreads only its combinations are meant.  None where no finite enclosure was found.
    """
    names = case.model.state_names
    box = parameter_box(case, over)
    if cell is not None:
        sides = dict(box.items()) | dict(cell.items())
        box = Box(tuple(sides), tuple(sides.values()))
    place = Box(
        (*names, *box.names),
        (*absolute_box(equilibrium, names, (Fraction(0),) * len(names)).intervals, *box.intervals),
    )
    at_rest = range_over(quantity, place, RANGE_PIECES)
    if at_rest is None:
        return None
    affine = affine_range(case, equilibrium, shape, quantity, over, cell or spread_box(case))
    if affine is not None:
        return Bound(affine, at_rest, True)
    around = absolute_box(equilibrium, names, shape.half_widths)
    whole = Box(place.names, (*around.intervals, *box.intervals))
    ranged = range_over(quantity, whole, RANGE_PIECES)
    return None if ranged is None else Bound(ranged, at_rest, False)
