"""Discs that hold the roots of every polynomial within given balls, single or in clusters, by Rouche's theorem.

The polynomial of the midpoints is exact, and its roots z_j of multiplicity m_j are certified by python-flint.
On the circle |z - c| = r it is at least prod | |z_j - c| - r |^(m_j), and all polynomials within the balls differ
from it by at most sum rad_i (|c| + r)^i.  Where the first is larger, each of them has as many roots in the disc as
the midpoints' polynomial (E. Rouche 1862; for clusters cf. A. Neumaier, J. Comput. Appl. Math. 156, 2003, from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final, cast

from flint import acb, arb, fmpq, fmpq_poly

from dossier.model.ball import exact_value, to_fmpq
from dossier.model.linear_part import Number

SMALLEST: Final = 256
"""No radius below 2^-SMALLEST is tried: as fine as the working precision."""

WIDENINGS: Final = 400
"""Times a first radius is widened before a root is given up; from the smallest one that reaches beyond 1."""

GENTLE: Final = 32
GROWTH: Final = fmpq(9, 8)
"""The first widenings are by this factor, as the start is usually near the radius needed; later ones double."""

INSIDE: Final = fmpq(1, 2)
OUTSIDE: Final = fmpq(2)
"""Roots within half a radius belong to a disc, others must be two radii away: so accepted discs are disjoint."""


@dataclass(frozen=True)
class Disc:
    """`multiplicity` roots within `radius` (exact) of `centre` (exact); a single root of a real centre is real."""

    centre: acb
    radius: arb
    multiplicity: int
    members: frozenset[int]

    @property
    def enclosure(self) -> acb:
        """A rectangle around the disc, flat where the root is proved real."""
        reach = self.radius.union(-self.radius)
        real, imaginary = arb(self.centre.real) + reach, arb(self.centre.imag)
        flat = self.multiplicity == 1 and imaginary.is_zero()
        return acb(real, arb(0) if flat else imaginary + reach)


def root_discs(polynomial: Sequence[Number]) -> tuple[Disc, ...]:
    """Disjoint discs with all roots, highest power first in; () where none were proved.

    The leading coefficient must be an exact number other than zero.
    """
    lead = polynomial[0]
    if not isinstance(lead, fmpq) or lead == 0:
        return ()
    ascending = [c / lead for c in reversed(polynomial)]
    middles = fmpq_poly([_middle(c) for c in ascending])
    reaches = [arb(0) if isinstance(c, fmpq) else arb(c.rad()) for c in ascending]
    roots = distinct_roots(middles)
    discs: list[Disc] = []
    for k in range(len(roots)):
        if any(k in d.members for d in discs):
            continue
        disc = _widened(k, roots, reaches)
        if disc is None:
            return ()
        discs = [d for d in discs if not d.members & disc.members] + [disc]
    return tuple(discs) if sum(d.multiplicity for d in discs) == len(polynomial) - 1 else ()


def distinct_roots(polynomial: fmpq_poly) -> list[tuple[acb, int]]:
    """Certified enclosures of the roots of an exact polynomial that is not zero, with their multiplicities."""
    _, factors = (polynomial * polynomial.denom()).numer().factor_squarefree()
    pairs = [(cast(tuple[acb, int], pair)[0], m) for factor, m in factors for pair in factor.complex_roots()]
    return [(acb(r), m) for r, m in pairs]


def _middle(value: Number) -> fmpq:
    return value if isinstance(value, fmpq) else to_fmpq(exact_value(value.mid()))


def _widened(k: int, roots: list[tuple[acb, int]], reaches: list[arb]) -> Disc | None:
    """The disc around root k, from its first-order radius widened until the theorem holds."""
    centre = acb(roots[k][0].mid())
    distances = [abs(z - centre) for z, _ in roots]
    radius = _first_radius(k, roots, distances, reaches, abs(centre))
    for step in range(WIDENINGS):
        members = _separated(distances, radius)
        if members is not None and _dominates(distances, roots, radius, reaches, abs(centre)):
            return Disc(centre, radius, sum(roots[j][1] for j in members), members)
        radius = arb(((GROWTH if step < GENTLE else fmpq(2)) * radius).upper())
    return None


def _first_radius(k: int, roots: list[tuple[acb, int]], distances: list[arb], reaches: list[arb], size: arb) -> arb:
    """The least, over the q nearest roots counted as one cluster, of (perturbation / product of other distances)^(1/m).

    Only a place to start from: with q too small the quotient is too large, with q too large the root of it is.
    """
    perturbation = _perturbation(reaches, size)
    least = arb(4 * distances[k].upper()) + arb(2) ** (-SMALLEST)
    order = sorted(range(len(roots)), key=lambda j: (j != k, float(distances[j].mid())))
    others, best = arb(1), None
    for q in range(len(order), 0, -1):
        multiplicity = sum(roots[j][1] for j in order[:q])
        estimate = (perturbation / others) ** (arb(1) / multiplicity)
        if estimate.is_finite() and (best is None or estimate < best):
            best = estimate
        others = others * distances[order[q - 1]] ** roots[order[q - 1]][1]
    return arb((GROWTH * (least if best is None else least.max(best))).upper())


def _perturbation(reaches: list[arb], size: arb) -> arb:
    total = arb(0)
    for reach in reversed(reaches):
        total = total * size + reach
    return arb(total.upper())


def _separated(distances: list[arb], radius: arb) -> frozenset[int] | None:
    """The roots inside, None where one is neither clearly inside nor clearly outside."""
    inside = frozenset(j for j, d in enumerate(distances) if d < INSIDE * radius)
    clear = all(j in inside or d > OUTSIDE * radius for j, d in enumerate(distances))
    return inside if clear else None


def _dominates(distances: list[arb], roots: list[tuple[acb, int]], radius: arb, reaches: list[arb], size: arb) -> bool:
    least = arb(1)
    for distance, (_, multiplicity) in zip(distances, roots, strict=True):
        least = least * abs(distance - radius) ** multiplicity
    return bool(least > _perturbation(reaches, size + radius))
