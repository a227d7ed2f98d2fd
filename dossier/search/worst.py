"""Seek the parameter combination at which the linear part is worst, in floating point; checks decide what it shows.

Corners first, then draws from the box, then a compass search from the best few (R. Hooke and T. A. Jeeves 1961;
T. G. Kolda, R. M. Lewis and V. Torczon, SIAM Review 45, 2003): the abscissa is not smooth where eigenvalues meet.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from itertools import islice
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from dossier.model.attempt import Attempt
from dossier.model.case import TOLERANCES, Case
from dossier.model.claim import CombinationClaim, SpectralRegion
from dossier.model.equilibrium import Equilibrium
from dossier.model.loop import model_hash
from dossier.model.polynomial import terms
from dossier.model.region import Box
from dossier.model.spectral_form import LinearForms, linear_forms
from dossier.search.effort import Effort

Array = NDArray[np.float64]

SEED: Final = 411
"""Seed of the draws, so that a search can be repeated."""

CORNERS: Final = 1024
"""Most corners looked at: ten parameters."""

STARTS: Final = 6
"""Points that the compass search starts from."""

FIRST_STEP: Final = 0.25
LAST_STEP: Final = 1e-4
"""Steps as shares of a side's width: below the last, the printed digits of the worst value no longer move."""

MOST_ROUNDS: Final = 400
"""Moves and halvings of one compass search: far more than smooth functions of ten parameters need."""

GRID: Final = 10**6
"""Parts into which each side is divided: combinations are rounded to these, so that they stay short."""


class _Family:
    """The linear part as an array function of points in the unit box of the spreads."""

    def __init__(self, forms: LinearForms) -> None:
        self.sides = [tuple(map(float, i.bounds)) for i in forms.box.intervals]
        self.size = len(forms.states)
        rest = [float(b.middle) for b in forms.balls.values()]
        self._rows = [self._table(row, rest) for row in forms.rows]
        self._denominator = self._table(forms.denominator, rest)

    def _table(self, polynomial, rest: Sequence[float]) -> list[tuple[int, float, tuple[int, ...]]]:
        """(column, coefficient, exponents of the parameters) of every term."""
        table, free = [], len(self.sides)
        for exponents, coefficient in terms(polynomial).items():
            powers = exponents[2 * self.size :]
            constant = float(coefficient)
            for value, power in zip(rest, powers[free:], strict=True):
                constant *= value**power
            column = next((i for i, k in enumerate(exponents[: self.size]) if k), 0)
            table.append((column, constant, powers[:free]))
        return table

    def _value(self, table: list[tuple[int, float, tuple[int, ...]]], at: Array) -> Array:
        """(columns, points)"""
        result = np.zeros((self.size, at.shape[0]))
        for column, constant, powers in table:
            result[column] += constant * np.prod(at ** np.array(powers, dtype=float), axis=1)
        return result

    def matrices(self, unit: Array) -> Array:
        """A at (points, parameters) of the unit box: (points, n, n); not finite where the denominator vanishes."""
        low = np.array([s[0] for s in self.sides])
        width = np.array([s[1] - s[0] for s in self.sides])
        at = low + unit * width
        rows = np.stack([self._value(t, at).T for t in self._rows], axis=1)
        with np.errstate(divide="ignore", invalid="ignore"):
            return rows / self._value(self._denominator, at)[0][:, None, None]


def badness(matrices: Array, region: SpectralRegion) -> Any:
    """The level that only just fails at each of (points, n, n): the greater, the worse; minus infinity if not finite.

    ``half-plane``: spectral abscissa; ``disc``: spectral radius; ``sector``: minus the damping ratio.
    """
    finite: Any = np.isfinite(matrices).all(axis=(1, 2))
    values = np.linalg.eigvals(np.where(finite[:, None, None], matrices, 0.0))
    if region == "half-plane":
        worst = values.real.max(axis=1)
    elif region == "disc":
        worst = np.abs(values).max(axis=1)
    else:
        sizes = np.abs(values)
        worst = np.where(sizes > 0, values.real / np.where(sizes > 0, sizes, 1.0), 1.0).max(axis=1)
    return np.where(finite, worst, -np.inf)


def seek_worst(
    case: Case, equilibrium: Equilibrium, region: SpectralRegion, effort: Effort, suffix: str
) -> tuple[tuple[Attempt, ...], CombinationClaim | None]:
    """A claim about the worst combination found over the box of the spreads; None where there is none to look at."""
    subject = f"{case.name}.{suffix}"
    method = f"worst combination of the linear part ({region})"
    forms = linear_forms(case, equilibrium, TOLERANCES)
    if isinstance(forms, str):
        return (Attempt(subject, method, "out of reach", forms),), None
    if not forms.box.names:
        return (), None
    if not (forms.constant_terms_vanish and equilibrium.fixed_for_all):
        return (Attempt(subject, method, "out of reach", "the equilibrium moves with the parameters"),), None
    point, points = _search(_Family(forms), len(forms.box.names), region, effort)
    claim = CombinationClaim(
        subject, model_hash(case), TOLERANCES, "", equilibrium.identifier, dict(_rounded(forms.box, point))
    )  # fmt: skip
    return (Attempt(subject, method, "found", f"{points} combinations looked at", {"combinations": points}),), claim


def _search(family: _Family, free: int, region: SpectralRegion, effort: Effort) -> tuple[Array, int]:
    random = np.random.default_rng(SEED)
    corners = np.array(list(islice(_unit_corners(free), CORNERS)))
    draws = random.random((effort.motions, free))
    pool = np.concatenate([corners, np.full((1, free), 0.5), draws])
    worth = badness(family.matrices(pool), region)
    points = len(pool)
    best_point, best = pool[0], -np.inf
    for start in np.argsort(-worth, kind="stable")[:STARTS]:
        at, value, used = _compass(family, pool[start], float(worth[start]), region)
        points += used
        if value > best:
            best_point, best = at, value
    return best_point, points


def _unit_corners(free: int):
    for index in range(2**free):
        yield [float(index >> k & 1) for k in range(free)]


def _compass(family: _Family, start: Array, value: float, region: SpectralRegion) -> tuple[Array, float, int]:
    step, at, used = FIRST_STEP, start, 0
    moves = np.concatenate([np.eye(len(start)), -np.eye(len(start))])
    for _ in range(MOST_ROUNDS):
        if step <= LAST_STEP:
            break
        around = np.clip(at + step * moves, 0.0, 1.0)
        worth = badness(family.matrices(around), region)
        used += len(around)
        chosen = int(np.argmax(worth))
        if worth[chosen] > value:
            at, value = around[chosen], float(worth[chosen])
        else:
            step /= 2
    return at, value, used


def _rounded(box: Box, unit: Array):
    """Names and rationals inside their sides, corners exactly."""
    for name, side, share in zip(box.names, box.intervals, unit, strict=True):
        yield name, side.bounds[0] + side.width * Fraction(round(share * GRID), GRID)
