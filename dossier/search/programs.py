"""Which programs to ask in which order, how large a set of a candidate is worth trying, and how sets compare."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from fractions import Fraction
from typing import Final

import numpy as np
from numpy.typing import NDArray

from dossier.model.attempt import Attempt
from dossier.model.polynomial import Exponents
from dossier.search.effort import Effort
from dossier.search.ellipsoid import Candidate, Objective, Pool, Wish, from_program, region_corners
from dossier.search.goal import Goal
from dossier.search.level import sampled_level, slab_levels
from dossier.search.offsets import ScaledLoop
from dossier.search.rounding import rounded_function, scaled_matrix, short_below, value_at

Array = NDArray[np.float64]
Function = Mapping[Exponents, Fraction]

DECREASE_SHARES: Final = (0.02, 0.15, 0.4)
"""Shares of the slowest decay V must keep: more is asked for when less could not be proved."""
REGION_SHARES: Final = (0.85, 0.7, 0.5, 0.25, 0.1)
"""Parts of a region asked for when the whole cannot be had."""
REFINEMENTS: Final = 3
"""Bisections between a part of the region that has an answer and one that has none: to about 5 %."""
SAMPLED: Final = Fraction(99999, 100000)
"""Share of the sampled level taken as promising: the sample may have missed the very worst ray."""
KEEP_OFF: Final = Fraction(1, 10**9)
"""Share by which a slab is kept away from, so that containment is strict."""
SHRINKS: Final = (2.0**-24, 2.0**-22, 2.0**-20, 2.0**-18)
"""Excess by which V is scaled down when rounding has lifted a corner of the region above V = 1."""
FARTHEST: Final = 16
"""A set is not grown beyond this multiple of the region: it would only worsen the numbers."""
UNBOUNDED_LEVEL: Final = Fraction(10**6)
"""Level at which a search stops where nothing bounds it."""


def covering_candidates(
    loop: ScaledLoop, goal: Goal, effort: Effort, subject: str, *, partial: bool = True
) -> Iterator[tuple[Attempt, Candidate | None]]:
    """Programs for the whole region, then, where none of them has an answer and `partial`, for parts of it.

    The caller stops when it has proved what it wants: asking on means that the last candidate failed.
    """
    if not goal.region.is_bounded:
        return
    if not loop.is_settling:
        why = "a linear part, at nominal or at a vertex, is not asymptotically stable"
        yield Attempt(subject, "quadratic, conic program", "no candidate", why), None
        return
    broken = next((s.label for s in goal.slabs if s.reach is not None and s.reach <= 0), None)
    if broken is not None:
        why = f"the equilibrium itself does not keep within: {broken}"
        yield Attempt(subject, "quadratic, conic program", "no candidate", why), None
        return
    found = False
    for objective in _objectives(goal):
        pool = _empty_pool(loop)
        for share in DECREASE_SHARES:
            attempt, candidate = from_program(loop, goal, Wish(objective, share), effort, subject, pool)
            yield attempt, candidate
            if candidate is None:
                break
            found = True
    if not found and partial:
        yield from _partial_candidates(loop, goal, effort, subject)


def _partial_candidates(
    loop: ScaledLoop, goal: Goal, effort: Effort, subject: str
) -> Iterator[tuple[Attempt, Candidate | None]]:
    """Programs for smaller and smaller parts of the region until one has an answer, then bisection upward."""
    refused, granted = 1.0, 0.0
    for scale in REGION_SHARES:
        wish = Wish("widest margin", DECREASE_SHARES[0], scale)
        attempt, candidate = from_program(loop, goal, wish, effort, subject, _empty_pool(loop))
        yield attempt, candidate
        if candidate is not None:
            granted = scale
            break
        refused = scale
    for _ in range(REFINEMENTS if granted else 0):
        scale = (granted * refused) ** 0.5
        wish = Wish("smallest set", DECREASE_SHARES[0], scale)
        attempt, candidate = from_program(loop, goal, wish, effort, subject, _empty_pool(loop))
        yield attempt, candidate
        granted, refused = (granted, scale) if candidate is None else (scale, refused)


def _objectives(goal: Goal) -> tuple[Objective, ...]:
    bounded = any(s.reach is not None for s in goal.slabs)
    return ("tightest bounds", "smallest set", "widest margin") if bounded else ("smallest set", "widest margin")


def _empty_pool(loop: ScaledLoop) -> Pool:
    return Pool(np.zeros((0, loop.size)), np.zeros((0, loop.size)))


def normalised(loop: ScaledLoop, goal: Goal, matrix: Array) -> Function:
    """V with short coefficients such that {V <= 1} holds the region, barely; largest entry 1 without a region."""
    corners = region_corners(loop, goal)
    worst = float(np.max((corners @ matrix * corners).sum(1), initial=0.0))
    if worst <= 0:
        return rounded_function(matrix / np.abs(matrix).max(), loop.scales)
    corner_points = tuple(goal.region.corners())
    function = rounded_function(matrix / worst, loop.scales)
    for shrink in SHRINKS:
        need = max(value_at(function, corner) for corner in corner_points)
        if need <= 1:
            break
        worst *= float(need) * (1 + shrink)
        function = rounded_function(matrix / worst, loop.scales)
    return function


def promising_level(loop: ScaledLoop, goal: Goal, effort: Effort, function: Function, most: Fraction) -> Fraction:
    """The largest level <= `most` worth trying: inside the slabs (exactly), below the sampled first rise of V."""
    most = min([most, *(level * (1 - KEEP_OFF) for level in slab_levels(function, goal))])
    if most <= 0:
        return Fraction(0)
    matrix = scaled_matrix(function, loop.scales)
    sampled = Fraction(sampled_level(loop, matrix, float(most), effort))
    return short_below(most if sampled >= Fraction(float(most)) else min(most, sampled * SAMPLED))


def largest_useful(goal: Goal) -> Fraction:
    """The level beyond which a normalised V is not grown."""
    return Fraction(FARTHEST**2) if goal.region.is_bounded else UNBOUNDED_LEVEL


def extent(loop: ScaledLoop, goal: Goal, function: Function, level: Fraction) -> float:
    """Share of the region covered by a normalised V, or the volume (but for a constant) without a region."""
    if goal.region.is_bounded:
        return float(level) ** 0.5
    return float(np.linalg.det(scaled_matrix(function, loop.scales) / float(level)) ** -0.5)
