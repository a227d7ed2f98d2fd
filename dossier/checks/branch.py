"""Follow the equilibrium of the operating point to other parameter combinations, in floating point."""

from __future__ import annotations

from typing import Final

import numpy as np
from numpy.typing import NDArray

from dossier.checks.field import Columns, Flow, Formulas, Rates

CONTINUATION_STEPS: Final = 8
NEWTON_STEPS: Final = 12
"""Parts of the way to a parameter combination, and Newton steps at each; ample for smooth branches."""

CLOSE_ENOUGH: Final = 1e-9
"""Last Newton step, as a share of the region, of an equilibrium counted as found."""

DIFFERENCE: Final = 1e-6
"""Step of central differences as a share of the region: balances truncation against rounding (about eps^(1/3))."""


def moved_equilibria(
    field: Formulas, centres: Columns, nominal: Columns, targets: Columns, scale: Columns, sampled: bool
) -> tuple[Columns, NDArray[np.bool_]]:
    """Equilibria at `targets` (m x N) continued from `centres` (n x N) at `nominal`, and which were found."""
    states, good = centres.copy(), np.ones(centres.shape[1], bool)
    for step in range(1, CONTINUATION_STEPS + 1):
        parameters = nominal[:, None] + (targets - nominal[:, None]) * (step / CONTINUATION_STEPS)
        states, here = newton(field, states, parameters, scale, sampled)
        good &= here
    return states, good


def newton(
    field: Formulas, states: Columns, parameters: Columns, scale: Columns, sampled: bool
) -> tuple[Columns, NDArray[np.bool_]]:
    """Newton's method for f = 0 (f = x for sampled models), one column per motion, and where it ended at rest."""
    count = states.shape[1]
    flow = Flow(field, states, parameters, sampled)
    rates = flow.select(np.arange(count))
    offsets, length = np.zeros_like(states), np.full(count, np.inf)

    def residual(at: Columns) -> Columns:
        return rates(at) - at if sampled else rates(at)

    for _ in range(NEWTON_STEPS):
        slopes = differences(residual, offsets, scale)
        right = residual(offsets)
        usable = np.isfinite(slopes).all(axis=(0, 1)) & np.isfinite(right).all(axis=0)
        size = np.max(np.abs(slopes), axis=1)
        size = np.where(usable & (size > 0), size, 1.0)
        matrices = np.where(usable, slopes / size[:, None], np.eye(len(scale))[:, :, None]).transpose(2, 0, 1)
        change = -(np.linalg.pinv(matrices) @ np.where(usable, right / size, 0.0).T[:, :, None])[:, :, 0].T
        offsets = offsets + change * scale[:, None]
        length = np.where(usable, np.max(np.abs(change), axis=0), np.inf)
    return states + offsets, length < CLOSE_ENOUGH


def differences(rates: Rates, offsets: Columns, scale: Columns) -> Columns:
    """Central differences of `rates`, per share of `scale`: an array n x n x N."""
    parts = []
    for j in range(len(scale)):
        shift = np.zeros((len(scale), 1))
        shift[j] = DIFFERENCE * scale[j]
        parts.append((rates(offsets + shift) - rates(offsets - shift)) / (2 * DIFFERENCE))
    return np.stack(parts, axis=1)


def linear_part(rates: Rates, scale: Columns) -> Columns:
    """Matrix of the linear part at offset zero, similar to the true one by the scaling of the states."""
    origin = np.zeros((len(scale), 1))
    return differences(rates, origin, scale)[:, :, 0] / scale[:, None]
