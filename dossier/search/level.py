"""The largest level of a given V worth trying to prove: inside the slabs, below the first rise of V on sampled rays."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Final

import numpy as np
from flint import fmpq, fmpq_mat
from numpy.typing import NDArray

from dossier.model.polynomial import Exponents
from dossier.search.effort import Effort
from dossier.search.ellipsoid import redraw, sample_set, worst_points
from dossier.search.goal import Goal
from dossier.search.offsets import ScaledLoop

Array = NDArray[np.float64]

RAYS_PER_PAIR: Final = 200
"""Rays of the first sample, times the squared number of states; the refinement around the worst finds the rest."""
MOST_RAYS: Final = 4_000
"""Rays of the first sample at most."""
NEAREST_RADIUS: Final = 1e-3
"""Share of the largest radius at which a ray begins."""
RADII: Final = 48
"""Geometric steps along a ray; each crossing is then bisected."""
BISECTIONS: Final = 40
"""Halvings of a step: to rounding of double precision."""
WORST_RAYS: Final = 20
"""Rays kept at each refinement."""
SPREADS: Final = (0.3, 0.1, 0.03, 0.01, 0.003, 0.001)
"""Steps of the refinements on the unit sphere of V."""
CHILDREN: Final = 50
"""Rays tried around each kept one."""
ROUNDING: Final = 1e-9
"""Slack that lets the best ray so far be found again after rounding."""


def slab_levels(function: Mapping[Exponents, Fraction], goal: Goal) -> tuple[Fraction, ...]:
    """Levels at which the set reaches the slabs: max w'y over y'Py <= c is sqrt(c w'P^-1 w).  Zero for singular P."""
    size = len(next(iter(function)))
    matrix = fmpq_mat(size, size)
    for exponents, coefficient in function.items():
        i, j = (k for k, count in enumerate(exponents) for _ in range(count))
        half = fmpq(coefficient.numerator, 2 * coefficient.denominator)
        matrix[i, j] += half
        matrix[j, i] += half
    if matrix.det() == 0:
        return (Fraction(0),)
    inverse = matrix.inv()
    levels = []
    for slab in goal.slabs:
        weights = fmpq_mat(size, 1, [fmpq(w.numerator, w.denominator) for w in slab.weights])
        spread = (weights.transpose() * inverse * weights)[0, 0]
        if slab.reach is not None and slab.reach <= 0:
            levels.append(Fraction(0))
        elif slab.reach is not None and spread > 0:
            levels.append(slab.reach**2 / Fraction(int(spread.p), int(spread.q)))
    return tuple(levels)


def sampled_level(loop: ScaledLoop, matrix: Array, most: float, effort: Effort) -> float:
    """Least V at which V stops falling along rays from the equilibrium; `most` where none does below it.

    A ray is searched from near to far, so a band in which V rises is found where it is not thinner than
    one geometric step; around the worst rays the sample is made finer and finer.
    """
    generator = np.random.default_rng(loop.size)
    root = np.linalg.cholesky(np.linalg.inv(matrix)).T
    least = float(np.sqrt(most))
    count = min(RAYS_PER_PAIR * loop.size**2, MOST_RAYS, effort.samples)
    directions, parameters = sample_set(loop, matrix, count, generator)
    radii = first_rises(loop, matrix, _on_sphere(directions, matrix), parameters, least)
    if np.isinf(radii).all():
        directions, parameters = worst_points(loop, matrix / most, 0.0, effort.samples, generator)
        radii = first_rises(loop, matrix, _on_sphere(directions, matrix), parameters, least)
    for spread in SPREADS:
        best = np.argsort(radii, kind="stable")[:WORST_RAYS]
        if np.isinf(radii[best[0]]):
            break
        if radii[best[0]] <= 0:
            return 0.0
        least = min(least, float(radii[best[0]]) * (1 + ROUNDING))
        directions, parameters = _on_sphere(directions[best], matrix), parameters[best]
        steps = spread * generator.standard_normal((CHILDREN * len(best), loop.size)) @ root
        directions = np.vstack([directions, directions.repeat(CHILDREN, axis=0) + steps])
        parameters = np.vstack([parameters, redraw(loop, parameters.repeat(CHILDREN, axis=0), generator)])
        radii = first_rises(loop, matrix, _on_sphere(directions, matrix), parameters, least)
    return min(most, float(np.min(radii)) ** 2)


def _on_sphere(directions: Array, matrix: Array) -> Array:
    return directions / np.sqrt((directions @ matrix * directions).sum(1))[:, None]


def first_rises(loop: ScaledLoop, matrix: Array, directions: Array, parameters: Array, most: float) -> Array:
    """Radius in (0, most] at which V first does not fall along each ray (V = 1 at radius 1); inf where it falls."""
    result = np.full(len(directions), np.inf)
    waiting = np.arange(len(directions))
    below = 0.0
    for radius in np.geomspace(most * NEAREST_RADIUS, most, RADII):
        slopes = loop.slope(matrix, directions[waiting] * radius, parameters[waiting])
        risen = waiting[slopes >= 0]
        if len(risen):
            result[risen] = _bisect(loop, matrix, directions[risen], parameters[risen], below, radius)
            waiting = waiting[slopes < 0]
            if len(risen) >= WORST_RAYS or not len(waiting):
                break
        below = float(radius)
    return result


def _bisect(loop: ScaledLoop, matrix: Array, directions: Array, parameters: Array, below: float, above: float) -> Array:
    low, high = np.full(len(directions), below), np.full(len(directions), above)
    for _ in range(BISECTIONS):
        middle = (low + high) / 2
        rises = loop.slope(matrix, directions * middle[:, None], parameters) >= 0
        high, low = np.where(rises, middle, high), np.where(rises, low, middle)
    return low
