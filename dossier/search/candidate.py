"""What can be said of the engineer's own V and level: a box for the interval check, or a point where V fails.

Floating sampling along rays from the equilibrium; the checks decide.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from fractions import Fraction
from typing import Final

import numpy as np
import scipy.optimize
from numpy.typing import NDArray

from dossier.model.attempt import Attempt
from dossier.model.case import NOMINAL, TOLERANCES, Case, Scope
from dossier.model.claim import CandidateClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import Expression, differentiate, simplify
from dossier.model.loop import model_hash, vector_field
from dossier.model.polynomial import Exponents, Quotient, Ring, quotient_of, terms
from dossier.model.region import Box, Interval
from dossier.search.numeric import NumericFunction, nominal_floats

Array = NDArray[np.float64]
VerifyGiven = Callable[[CandidateClaim], bool]

SEED: Final = 733
"""Seed of the rays."""
RAYS: Final = 4_000
"""Rays from the equilibrium, evenly spread in direction."""
RADII: Final = 200
"""Steps along a ray out to the farthest point looked at."""
BISECTIONS: Final = 50
"""Halvings of the step in which V exceeds the level: to rounding of double precision."""
FARTHEST: Final = 64.0
"""How far rays go, in typical sizes of the states."""
ROOMS: Final = (1.02, 1.05, 1.1, 1.2, 1.4)
"""Sizes of the box about the set, relative to the set as sampled."""
WORST: Final = 4
"""Rays from which the worst point is sought more closely."""
SHORT: Final = Fraction(1, 2**30)
"""A point is rounded to this share of the typical size of its states."""
INWARD: Final = (0.0, 1e-7, 1e-5, 1e-3)
"""Shares by which a counter-example is drawn towards the equilibrium, so that it surely lies in the set."""

QUADRATIC: Final = 2


def quadratic_terms(case: Case) -> dict[Exponents, Fraction] | None:
    """Coefficients of the candidate where it is a quadratic form, else None."""
    if case.candidate is None:
        return None
    ring = Ring(case.model.state_names)
    one = ring.constant(Fraction(1))
    found = quotient_of(simplify(case.candidate.function), ring, {n: Quotient(ring.gen(n), one) for n in ring.names})
    if not isinstance(found, Quotient) or not found.denominator.is_constant():
        return None
    coefficients = terms(found.numerator / found.denominator.leading_coefficient())
    return coefficients if coefficients and all(sum(e) == QUADRATIC for e in coefficients) else None


def seek_given(
    case: Case, equilibrium: Equilibrium, sizes: tuple[float, ...], verify: VerifyGiven
) -> tuple[tuple[Attempt, ...], CandidateClaim | None]:
    """A verified proof or counter-example by sampling V and its change along rays; None where neither was found.

    `sizes` are typical sizes of the offsets, in SI.
    """
    candidate = case.candidate
    if candidate is None:
        return (), None
    look = _Look(case, equilibrium, candidate.function, float(candidate.level), np.array(sizes))
    subject, method = case.name, "the engineer's own V and level, as given"
    for point in look.counter_examples():
        claim = _claim(case, equilibrium, None, point)
        if verify(claim):
            return (Attempt(subject, method, "found", "a point where V fails"),), claim
    extent = look.extent()
    if extent is None:
        return (Attempt(subject, method, "no candidate", "the set V <= level was not seen to be bounded"),), None
    for room in ROOMS:
        sides = tuple(Interval(_short(low * room), _short(high * room)) for low, high in extent)
        claim = _claim(case, equilibrium, Box(case.model.state_names, sides), ())
        if verify(claim):
            return (Attempt(subject, method, "found", "proved as given"),), claim
    return (Attempt(subject, method, "no candidate", "neither proved nor refuted"),), None


def given_scopes(case: Case) -> Iterator[Scope]:
    """Over tolerances where a criterion asks for it and there are spreads, then nominal."""
    if any(p.has_spread for p in case.model.parameters) and any(c.over == TOLERANCES for c in case.criteria):
        yield TOLERANCES
    yield NOMINAL


def _claim(case: Case, equilibrium: Equilibrium, around: Box | None, against: tuple[Fraction, ...]) -> CandidateClaim:
    assert case.candidate is not None
    theorem = "T3" if case.model.time == "sampled" else "T2"
    return CandidateClaim(
        f"{case.name}.V-given", model_hash(case), NOMINAL, theorem, equilibrium.identifier, case.candidate.level,
        around, against,
    )  # fmt: skip


def _short(value: float) -> Fraction:
    """A rational near `value` with few digits."""
    size = abs(value) or 1.0
    unit = Fraction(2) ** (int(np.floor(np.log2(size))) - 20)
    return round(Fraction(value) / unit) * unit


class _Look:
    """V and its change in scaled offsets, as seen along rays."""

    def __init__(self, case: Case, equilibrium: Equilibrium, function: Expression, level: float, sizes: Array) -> None:
        loop = vector_field(case)
        names = loop.states
        self.level, self.sizes, self.sampled = level, sizes, loop.sampled
        self.value_function = NumericFunction((function,), names, {})
        self.slope_function = NumericFunction([simplify(differentiate(function, n)) for n in names], names, {})
        self.field = NumericFunction(loop.equations, names, nominal_floats(case))
        self.rest = np.array([float(b.middle) for b in equilibrium.state])
        generator = np.random.default_rng(SEED)
        directions = generator.standard_normal((len(names), RAYS))
        axes = np.concatenate([np.eye(len(names)), -np.eye(len(names))], axis=1)
        directions = np.concatenate([axes, directions], axis=1)
        self.directions = directions / np.linalg.norm(directions, axis=0)
        self.radii = np.geomspace(1e-4, FARTHEST, RADII)
        self.edges = self.edges_along(self.directions)

    def value(self, points: Array) -> Array:
        """V at scaled offsets (n, N)."""
        return self.value_function(points * self.sizes[:, None])[0]

    def change(self, points: Array) -> Array:
        """W at scaled offsets (n, N)."""
        offsets = points * self.sizes[:, None]
        image = self.field(self.rest[:, None] + offsets)
        if self.sampled:
            return self.value_function(image - self.rest[:, None])[0] - self.value_function(offsets)[0]
        return (self.slope_function(offsets) * image).sum(axis=0)

    def edges_along(self, directions: Array) -> Array:
        """Radius at which V first exceeds the level along each direction (n, N); infinity where it does not."""
        count = directions.shape[1]
        low, high = np.zeros(count), np.full(count, np.inf)
        for radius in self.radii:
            waiting = np.isinf(high)
            if not waiting.any():
                break
            within = self.value(directions[:, waiting] * radius) <= self.level
            places = np.flatnonzero(waiting)
            low[places[within]] = radius
            high[places[~within]] = radius
        found = np.isfinite(high)
        for _ in range(BISECTIONS):
            middle = (low[found] + high[found]) / 2
            within = self.value(directions[:, found] * middle) <= self.level
            low[found] = np.where(within, middle, low[found])
            high[found] = np.where(within, high[found], middle)
        return np.where(found, low, np.inf)

    def extent(self) -> list[tuple[float, float]] | None:
        """Least and greatest offset of the set per state; None where a ray does not leave it."""
        if not np.isfinite(self.edges).all():
            return None
        edges = self.directions * self.edges * self.sizes[:, None]
        return [(float(row.min()), float(row.max())) for row in edges]

    def counter_examples(self) -> Iterator[tuple[Fraction, ...]]:
        """Offsets at which V is not positive or does not fall, the worst first."""
        shares = np.linspace(0.02, 1.0, 50)
        reach = np.where(np.isfinite(self.edges), self.edges, FARTHEST)
        worst: list[tuple[float, float, int]] = []
        for share in shares:
            points = self.directions * reach * share
            sizes = np.maximum((points**2).sum(axis=0), 1e-300)
            rise = self.change(points) / sizes
            fall = -self.value(points) / sizes
            badness = np.fmax(np.where(np.isfinite(rise), rise, -np.inf), np.where(np.isfinite(fall), fall, -np.inf))
            best = int(np.argmax(badness))
            worst.append((float(badness[best]), float(share), best))
            worst += [(float(badness[k]), float(share), int(k)) for k in np.argsort(-badness)[1:3]]
        worst.sort(key=lambda w: -w[0])
        for bad, share, ray in worst[:WORST]:
            point = self.directions[:, ray] * reach[ray] * share
            if bad < 0:
                point = self._worse(point)
            if point is None:
                continue
            for inward in INWARD:
                shrunk = point * (1 - inward) * self.sizes
                yield tuple(
                    round(Fraction(float(v)) / (SHORT * Fraction(float(s)))) * SHORT * Fraction(float(s))
                    for v, s in zip(shrunk, self.sizes, strict=True)
                )

    def _worse(self, point: Array) -> Array | None:
        """The worst point near `point` on the edge of the set, where V rises there."""

        def badness(direction: Array) -> float:
            length = float(np.linalg.norm(direction))
            edge = float(self.edges_along((direction / length)[:, None])[0]) if length > 0 else np.inf
            if not np.isfinite(edge) or edge <= 0:
                return 0.0
            return -float(self.change((direction / length * edge)[:, None])[0])

        found = scipy.optimize.minimize(
            badness, point / np.linalg.norm(point), method="Nelder-Mead", options={"maxfev": 400}
        )
        if not found.fun < 0:
            return None
        direction = found.x / np.linalg.norm(found.x)
        return direction * float(self.edges_along(direction[:, None])[0])
