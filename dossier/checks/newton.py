"""One interval Newton step for many boxes at once: exclude, contract, prove unique.

Boxes live in scaled coordinates y = x / s, s a power of two near the half width of the search box, so that
1e-3 m and 1e6 N look alike and scaling is exact.  Tests, in order (A. Neumaier, Interval Methods for Systems of
Equations, 1990, chapter 5; R. E. Moore, R. B. Kearfott, M. J. Cloud, Introduction to Interval Analysis, 2009):
natural and mean value exclusion, row-wise Gauss-Seidel, Gauss-Seidel preconditioned by the inverse of the midpoint
Jacobian, Krawczyk.  Row-wise sweeps make a linear row such as x' = v collapse at once.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

import numpy as np

from dossier.checks import intervals as iv
from dossier.checks.intervals import TINY, UNIT, Array, Mask, Span, down, up
from dossier.checks.tape import FirstOrder, Tape, Values
from dossier.model.ball import Ball
from dossier.model.expression import Expression
from dossier.model.region import Box, Interval

SLACK: Final = 2.0**-40
"""Relative margin over sums of non-negative terms: a sum of products of n <= 64 terms is rounded at most 100 times
per term, relative error below 100 u (1 + u)^100 < 2^-45."""
LARGEST_INVERSE: Final = 1e12
"""Entries of the scaled approximate inverse beyond which preconditioning is not tried: it would prove nothing."""
MOST_STATES: Final = 64
"""Number of unknowns for which SLACK is derived."""
RADII: Final = 2.0 ** np.arange(-40.0, 2.0)
"""Radii, in scaled coordinates, tried for a uniqueness box around a point: from rounding level to the search box."""
POLISH_STEPS: Final = 12


class System:
    """Equations over scaled boxes inside a bounded search box.

    Raises ValueError for an unbounded search box or more than `MOST_STATES` unknowns.
    """

    def __init__(
        self,
        equations: Iterable[Expression],
        states: tuple[str, ...],
        constants: Mapping[str, Ball],
        search: Box,
    ) -> None:
        if len(states) > MOST_STATES:
            raise ValueError(f"at most {MOST_STATES} unknowns")
        self.states = states
        self.tape = Tape(equations, states, constants)
        self.scale = np.array([_power_of_two_near(side) for side in search.intervals])
        ends = [[iv.bounds_of_fraction(v / Fraction(s)) for v in side.bounds] for side, s in self._sides(search)]
        self.search = Span(np.array([e[0][0] for e in ends]), np.array([e[1][1] for e in ends]))

    def _sides(self, box: Box) -> Iterable[tuple[Interval, float]]:
        return zip(box.intervals, self.scale.tolist(), strict=True)

    def scaled(self, box: Box) -> Span:
        """The largest scaled box of doubles inside the rational `box` (n,)."""
        ends = [[iv.bounds_of_fraction(v / Fraction(s)) for v in side.bounds] for side, s in self._sides(box)]
        return Span(np.array([e[0][1] for e in ends]), np.array([e[1][0] for e in ends]))

    def rational(self, box: Span) -> Box:
        """A scaled box (n,) as an exact box in the states' own units."""
        factors = [Fraction(s) for s in self.scale.tolist()]
        sides = zip(factors, box.lo.tolist(), box.hi.tolist(), strict=True)
        return Box(self.states, tuple(Interval(s * Fraction(lo), s * Fraction(hi)) for s, lo, hi in sides))

    def _unscaled(self, boxes: Span) -> Span:
        """Multiplication by a power of two: exact, except that numbers near 1e-308 underflow; TINY covers those."""
        s = self.scale[:, None]
        lower, upper = boxes.lo * s, boxes.hi * s
        return Span(
            np.where((np.abs(lower) < TINY) & (boxes.lo != 0), lower - TINY, lower),
            np.where((np.abs(upper) < TINY) & (boxes.hi != 0), upper + TINY, upper),
        )

    def values(self, boxes: Span) -> Values:
        """Values over scaled boxes (n, B)."""
        return self.tape.values(self._unscaled(boxes))

    def first_order(self, boxes: Span) -> FirstOrder:
        """Values and slopes with respect to the scaled coordinates over scaled boxes (n, B)."""
        result = self.tape.first_order(self._unscaled(boxes))
        s = self.scale[None, :, None]
        lower, upper = result.gradients.lo * s, result.gradients.hi * s
        gradients = Span(
            np.where(result.gradients.lo == 0, 0.0, lower - TINY),
            np.where(result.gradients.hi == 0, 0.0, upper + TINY),
        )
        return FirstOrder(result.values, gradients, result.valid, result.smooth, result.empty)


def _power_of_two_near(side: Interval) -> float:
    """A power of two near the half width of the side; near its size where it is a point."""
    lower, upper = side.bounds
    size = (upper - lower) / 2 or abs(lower) or Fraction(1)
    exponent = round(math.log2(size.numerator) - math.log2(size.denominator))
    return 2.0 ** max(-300, min(300, exponent))


@dataclass(frozen=True)
class Step:
    """Contracted boxes (n, B), which are proved to hold no solution, and which to hold exactly one."""

    boxes: Span
    excluded: Mask
    unique: Mask


def newton_step(system: System, boxes: Span) -> Step:
    """Apply all tests to scaled `boxes` (n, B); a contracted box keeps every solution of the original."""
    first = system.first_order(boxes)
    excluded = first.empty | iv.excludes_zero(first.values).any(axis=0)
    result = Span(boxes.lo.copy(), boxes.hi.copy())
    unique = np.zeros(excluded.shape, bool)
    work = np.flatnonzero(~excluded & first.smooth)
    if work.size:
        part = Span(boxes.lo[:, work], boxes.hi[:, work])
        slopes = Span(first.gradients.lo[:, :, work], first.gradients.hi[:, :, work])
        centre = iv.middle(part)
        values = system.values(iv.point(centre))
        usable = values.valid
        work = work[usable]
        part = Span(part.lo[:, usable], part.hi[:, usable])
        slopes = Span(slopes.lo[:, :, usable], slopes.hi[:, :, usable])
        value = Span(values.values.lo[:, usable], values.values.hi[:, usable])
        contracted, dead, sure = _linear_tests(part, centre[:, usable], value, slopes)
        result.lo[:, work], result.hi[:, work] = contracted.lo, contracted.hi
        excluded[work], unique[work] = dead, sure
    return Step(result, excluded, unique & ~excluded)


def _linear_tests(boxes: Span, centre: Array, value: Span, slopes: Span) -> tuple[Span, Mask, Mask]:
    """Tests on 0 = f(m) + A (x - m), which holds for every zero x in the box and some A in `slopes`."""
    current = _Sweep(boxes, centre)
    current.rows(value, slopes)
    inverse, usable = approximate_inverses(0.5 * (slopes.lo + slopes.hi))
    product, product_radius = _preconditioned(inverse, slopes)
    offset, offset_radius = _preconditioned(inverse, Span(value.lo[:, None], value.hi[:, None]))
    offset, offset_radius = offset[:, 0], offset_radius[:, 0]
    unique = usable & _maps_inside(boxes, centre, (offset, offset_radius), (product, product_radius))
    current.preconditioned(offset, offset_radius, product, product_radius, usable)
    # A box proved unique holds a solution, so nothing may exclude it; a contradiction would be a bug, not a proof.
    return Span(current.lo, current.hi), current.dead & ~unique, unique


class _Sweep:
    """Gauss-Seidel sweeps that shrink boxes in place."""

    def __init__(self, boxes: Span, centre: Array) -> None:
        self.lo, self.hi = boxes.lo.copy(), boxes.hi.copy()
        self.centre = centre
        self.dead = np.zeros(boxes.lo.shape[1], bool)

    def _offset(self, j: int) -> Span:
        """Enclosure of x_j - m_j."""
        return Span(down(self.lo[j] - self.centre[j]), up(self.hi[j] - self.centre[j]))

    def _shrink(self, j: int, rest: Span, pivot: Span, where: Mask) -> None:
        """x_j = m_j - rest/pivot wherever the pivot excludes zero."""
        quotient = iv.div(rest, pivot)
        lower, upper = down(self.centre[j] - quotient.hi), up(self.centre[j] - quotient.lo)
        use = where & iv.excludes_zero(pivot) & np.isfinite(lower) & np.isfinite(upper)
        self.lo[j] = np.where(use, np.maximum(self.lo[j], lower), self.lo[j])
        self.hi[j] = np.where(use, np.minimum(self.hi[j], upper), self.hi[j])
        self.dead |= self.lo[j] > self.hi[j]
        # An emptied side is closed again so that later arithmetic stays in order; the box is dead already.
        self.hi[j] = np.maximum(self.lo[j], self.hi[j])

    def rows(self, value: Span, slopes: Span) -> None:
        """Each row as it is: the mean value test, then each variable solved from the sum of all other terms."""
        n = self.lo.shape[0]
        everywhere = np.ones(self.dead.shape, bool)
        for i in range(n):
            active = [j for j in range(n) if slopes.lo[i, j].any() or slopes.hi[i, j].any()]
            terms = {j: iv.mul(_entry(slopes, i, j), self._offset(j)) for j in active}
            before = [Span(value.lo[i], value.hi[i])]
            for j in active:
                before.append(iv.add(before[-1], terms[j]))
            self.dead |= iv.excludes_zero(before[-1])
            after: Span | None = None
            for position in reversed(range(len(active))):
                j = active[position]
                rest = before[position] if after is None else iv.add(before[position], after)
                self._shrink(j, rest, _entry(slopes, i, j), everywhere)
                after = terms[j] if after is None else iv.add(after, terms[j])

    def preconditioned(self, offset: Array, radius: Array, product: Array, spread: Array, usable: Mask) -> None:
        """Rows of 0 = Y f(m) + (Y A)(x - m), with midpoints and radii (n, B) and (n, n, B)."""
        n = self.lo.shape[0]
        for i in range(n):
            rest = Span(down(offset[i] - radius[i]), up(offset[i] + radius[i]))
            for j in range(n):
                if j != i:
                    rest = iv.add(rest, iv.mul(_widened(product[i, j], spread[i, j]), self._offset(j)))
            self._shrink(i, rest, _widened(product[i, i], spread[i, i]), usable)


def _entry(slopes: Span, i: int, j: int) -> Span:
    return Span(slopes.lo[i, j], slopes.hi[i, j])


def _widened(middle: Array, radius: Array) -> Span:
    return Span(down(middle - radius), up(middle + radius))


def approximate_inverses(matrices: Array) -> tuple[Array, Mask]:
    """Floating inverses Y (n, n, B) of `matrices` (n, n, B), and where they are usable; identity elsewhere.

    Any finite Y is sound.  Rows are equilibrated first; a singular matrix spoils only its own box.
    """
    n = matrices.shape[0]
    stacked = np.moveaxis(matrices, 2, 0)
    with np.errstate(all="ignore"):
        size = np.abs(stacked).max(axis=2)
        usable = (np.isfinite(size) & (size > 0)).all(axis=1)
        size = np.where(usable[:, None], size, 1.0)
        balanced = np.where(usable[:, None, None], stacked / size[:, :, None], np.eye(n))
        inverses = _inverses(balanced)
        usable &= np.isfinite(inverses).all(axis=(1, 2)) & (np.abs(inverses).max(axis=(1, 2)) < LARGEST_INVERSE)
        inverses = inverses / size[:, None, :]
        usable &= np.isfinite(inverses).all(axis=(1, 2))
    inverses = np.where(usable[:, None, None], inverses, np.eye(n))
    return np.moveaxis(inverses, 0, 2), usable


def _inverses(matrices: Array) -> Array:
    """Batched inverses; where the batch holds an exactly singular matrix, that one becomes nan."""
    try:
        return np.asarray(np.linalg.inv(matrices), np.float64)
    except np.linalg.LinAlgError:
        result = np.full_like(matrices, np.nan)
        for k, matrix in enumerate(matrices):
            try:
                result[k] = np.linalg.inv(matrix)
            except np.linalg.LinAlgError:
                continue
        return result


def _preconditioned(inverse: Array, a: Span) -> tuple[Array, Array]:
    """Midpoints and radii of Y A for Y (n, n, B) and intervals A (n, k, B).

    With A = C +- R: |Y A - fl(Y C)| <= |Y| R + g |Y| |C|, where g = n u/(1 - n u) bounds the rounding of an inner
    product of n terms in any order (N. J. Higham, Accuracy and Stability of Numerical Algorithms, 2002, section
    3.1).  The radius is a sum of non-negative terms: SLACK covers its own rounding, TINY all underflow.
    """
    n = inverse.shape[0]
    centre = 0.5 * (a.lo + a.hi)
    radius = iv.reach(a, centre)
    growth = 2.0 * n * UNIT
    y, c, r = (np.moveaxis(v, 2, 0) for v in (inverse, centre, radius))
    product = y @ c
    spread = (np.abs(y) @ (r + growth * np.abs(c))) * (1 + SLACK) + TINY
    return np.moveaxis(product, 0, 2), np.moveaxis(spread, 0, 2)


def _maps_inside(boxes: Span, centre: Array, offset: tuple[Array, Array], product: tuple[Array, Array]) -> Mask:
    """Krawczyk: |Y f(m)|_i + sum_j |I - Y A|_ij |X_j - m_j| < distance of m_i to the nearer face, for every i.

    Then m - Y f(m) + (I - Y A)(X - m) lies in the interior of X, which proves one and only one zero in X
    (see `dossier.checks.slopes.krawczyk` for the argument).  All terms are non-negative; SLACK and TINY as above.
    """
    n = centre.shape[0]
    reach = iv.reach(boxes, centre)
    identity = np.eye(n)[:, :, None]
    spread = np.abs(identity - product[0]) + product[1]
    total = np.abs(offset[0]) + offset[1] + (spread * reach[None, :, :]).sum(axis=1)
    clear = down(np.minimum(centre - boxes.lo, boxes.hi - centre))
    return (total * (1 + SLACK) + TINY < clear).all(axis=0)


@dataclass(frozen=True)
class UniqueBox:
    """A scaled box (n,) with exactly one zero, and a scaled enclosure (n,) of that zero."""

    box: Span
    zero: Span


def polish(system: System, start: Array) -> Array | None:
    """Floating Newton from a scaled point; None where it fails.  A guess, nothing more."""
    state = start
    for _ in range(POLISH_STEPS):
        first = system.first_order(iv.point(state[:, None]))
        if not first.smooth[0]:
            return None
        inverse, usable = approximate_inverses(0.5 * (first.gradients.lo + first.gradients.hi))
        if not usable[0]:
            return None
        change = inverse[:, :, 0] @ (0.5 * (first.values.lo + first.values.hi))[:, 0]
        state = state - change
        if not np.isfinite(state).all():
            return None
        if np.abs(change).max() <= UNIT * (1 + np.abs(state).max()):
            break
    return state


def box_around(system: System, state: Array) -> UniqueBox | None:
    """The largest cube around a scaled point on which Krawczyk proves exactly one zero, all `RADII` in one batch."""
    boxes = Span(state[:, None] - RADII, state[:, None] + RADII)
    step = newton_step(system, boxes)
    proved = np.flatnonzero(step.unique)
    if not proved.size:
        return None
    largest, smallest = proved[-1], proved[0]
    return UniqueBox(
        Span(boxes.lo[:, largest], boxes.hi[:, largest]),
        Span(step.boxes.lo[:, smallest], step.boxes.hi[:, smallest]),
    )
