"""Guess equilibria by Newton's method from many seeded starts.  Guesses only spare the proof some work."""

from __future__ import annotations

from typing import Final

import numpy as np

from dossier.model.case import Case
from dossier.search.effort import Effort
from dossier.search.numeric import NumericFunction, Points, rest_function, slopes_by_differences

SEED: Final = 1_907
"""Seed of the starts, so that a build can be repeated."""
STEPS: Final = 30
"""Newton steps per start; from a good start 6 are enough."""
SETTLED: Final = 1e-8
"""Last step and residual, relative to the search box, of a start that counts as settled."""
SAME: Final = 1e-6
"""Guesses nearer than this, relative to the search box, are one."""
OUTSIDE: Final = 1e-6
"""Guesses further outside the search box than this, relative to it, are of no use."""

Guess = tuple[float, ...]


def seed_equilibria(case: Case, effort: Effort) -> tuple[Guess, ...]:
    """Floating guesses of equilibria in SI, the stated or guessed point first; the list may miss any.

    Starts fill the search box, where it is unbounded the region around the stated or guessed point.
    """
    lower, upper, scale = _start_box(case)
    generator = np.random.default_rng(SEED)
    starts = lower[:, None] + (upper - lower)[:, None] * generator.random((len(lower), effort.newton_starts))
    stated = [p for p in (case.fixed, case.near) if p is not None]
    if stated:
        starts = np.concatenate((np.array(stated, float).T, starts), axis=1)
    found = _settled(rest_function(case), starts, scale)
    inside = (found >= lower[:, None] - OUTSIDE * scale[:, None]) & (found <= upper[:, None] + OUTSIDE * scale[:, None])
    return _distinct(found[:, inside.all(axis=0)], scale)


def _start_box(case: Case) -> tuple[Points, Points, Points]:
    """Lower and upper ends of the box to fill, and its half widths (1 where it is a point)."""
    centre = case.fixed or case.near or tuple(0 for _ in case.model.states)
    sides = []
    for middle, search, region in zip(centre, case.search.intervals, case.region.intervals, strict=True):
        reach = float(region.width) / 2 if region.is_bounded else 1.0
        lower = float(middle) - reach if search.lower is None else float(search.lower)
        upper = float(middle) + reach if search.upper is None else float(search.upper)
        sides.append((min(lower, upper), max(lower, upper)))
    lower, upper = np.array(sides).T
    half = (upper - lower) / 2
    return lower, upper, np.where(half > 0, half, 1.0)


def _settled(function: NumericFunction, starts: Points, scale: Points) -> Points:
    """Newton from all starts at once; the columns that came to rest."""
    state = starts.copy()
    length = np.full(starts.shape[1], np.inf)
    for _ in range(STEPS):
        slopes = slopes_by_differences(function, state, scale) * scale[None, :, None]
        value = function(state)
        good = np.isfinite(slopes).all(axis=(0, 1)) & np.isfinite(value).all(axis=0)
        size = np.abs(slopes).max(axis=1)
        size = np.where(good & (size > 0), size, 1.0)
        matrices = np.moveaxis(np.where(good, slopes / size[:, None], np.eye(len(scale))[:, :, None]), 2, 0)
        right = np.where(good, value / size, 0.0).T[:, :, None]
        change = (np.linalg.pinv(matrices) @ right)[:, :, 0].T
        # The residual counts too: on a saturated plateau the Jacobian is singular and the step stays small.
        length = np.where(good, np.maximum(np.abs(change).max(axis=0), np.abs(right[:, :, 0]).max(axis=1)), np.inf)
        state = np.where(good, state - change * scale[:, None], state)
    return state[:, length < SETTLED]


def _distinct(points: Points, scale: Points) -> tuple[Guess, ...]:
    kept: list[Points] = []
    for point in points.T:
        if all(np.abs((point - other) / scale).max() > SAME for other in kept):
            kept.append(point)
    return tuple(tuple(p.tolist()) for p in kept)
