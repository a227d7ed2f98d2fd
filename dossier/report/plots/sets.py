"""Proved sets as outlines in a plane: sections and shadows of ellipsoids, contours of other functions."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

import contourpy
import numpy as np

from dossier.model.claim import CoverClaim, LyapunovClaim
from dossier.model.dossier import PointEvidence
from dossier.model.polynomial import Exponents
from dossier.report.svg import Point

OUTLINE_POINTS: Final = 180
CONTOUR_GRID: Final = 241
"""Points of an ellipse, and of each side of the grid on which another function is contoured."""

SETS_SHOWN: Final = 2

SetClaim = LyapunovClaim | CoverClaim


@dataclass(frozen=True, slots=True)
class ProvedSet:
    """A set {V <= level} that was proved, and the ids of all the evidence for it."""

    claim: SetClaim
    evidence: tuple[str, ...]

    @property
    def quadratic(self) -> bool:
        """V is a quadratic form."""
        return all(sum(e) == 2 for e in self.claim.function)  # noqa: PLR2004


def proved_sets(point: PointEvidence) -> tuple[ProvedSet, ...]:
    """The sets around the chosen equilibrium with a rigorous proof, equal ones once, in the order of the claims."""
    chosen = point.chosen
    shown: dict[tuple[object, ...], ProvedSet] = {}
    proved = {f.subject for f in point.findings if f.result == "proved" and f.is_rigorous}
    for claim in point.claims:
        if not isinstance(claim, LyapunovClaim | CoverClaim) or claim.identifier not in proved:
            continue
        if chosen is None or claim.equilibrium != chosen.identifier:
            continue
        key = (tuple(sorted(claim.function.items())), claim.level)
        known = shown.get(key)
        shown[key] = ProvedSet(known.claim if known else claim, (*(known.evidence if known else ()), claim.identifier))
    return tuple(shown.values())[:SETS_SHOWN]


def section(
    proved: ProvedSet, places: tuple[int, int], states: int, window: tuple[tuple[float, float], tuple[float, float]]
) -> list[list[Point]]:
    """Outlines of the section of the set by the plane of the states `places`, in offsets; `window` is what is seen."""
    if proved.quadratic:
        return [ellipse(proved.claim, places, states, project=False)]
    xs, ys = (np.linspace(*side, CONTOUR_GRID) for side in window)
    grid = dict(zip(places, np.meshgrid(xs, ys), strict=True))
    values = np.zeros((CONTOUR_GRID, CONTOUR_GRID))
    for exponents, coefficient in proved.claim.function.items():
        if all(e == 0 or i in places for i, e in enumerate(exponents)):
            term = float(coefficient)
            values += term * grid[places[0]] ** exponents[places[0]] * grid[places[1]] ** exponents[places[1]]
    lines = contourpy.contour_generator(xs, ys, values).lines(float(proved.claim.level))
    return [[(float(x), float(y)) for x, y in line] for line in lines]  # type: ignore[misc]


def _matrix(function: Mapping[Exponents, Fraction], size: int) -> np.ndarray:
    matrix = np.zeros((size, size))
    for exponents, coefficient in function.items():
        i, j = (k for k, e in enumerate(exponents) for _ in range(e))
        matrix[i, j] += float(coefficient) / 2
        matrix[j, i] += float(coefficient) / 2
    return matrix


def ellipse(claim: SetClaim, places: tuple[int, int], size: int, *, project: bool) -> list[Point]:
    """Outline of the section of {y'Py <= c} by the plane, or of its shadow on the plane."""
    matrix = _matrix(claim.function, size)
    chosen = np.ix_(places, places)
    shape = np.linalg.inv(np.linalg.inv(matrix)[chosen]) if project else matrix[chosen]
    factor = np.linalg.cholesky(shape)
    angles = np.linspace(0, 2 * math.pi, OUTLINE_POINTS, endpoint=False)
    circle = np.stack((np.cos(angles), np.sin(angles))) * math.sqrt(float(claim.level))
    return [(float(x), float(y)) for x, y in np.linalg.solve(factor.T, circle).T]
