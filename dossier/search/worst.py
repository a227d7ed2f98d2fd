"""Seek the parameter combination at which the linear part is worst, in floating point; checks decide what it shows.

Corners first, then draws from the box, then a compass search from the best few (R. Hooke and T. A. Jeeves 1961;
T. G. Kolda, R. M. Lewis and V. Torczon, SIAM Review 45, 2003): the abscissa is not smooth where eigenvalues meet.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from itertools import islice
from typing import Any, Final, Protocol

import numpy as np
from numpy.typing import NDArray

from dossier.model.affine import spread_box
from dossier.model.attempt import Attempt
from dossier.model.case import TOLERANCES, Case
from dossier.model.claim import CombinationClaim, SpectralRegion
from dossier.model.equilibrium import Equilibrium
from dossier.model.loop import model_hash, vector_field
from dossier.model.polynomial import terms
from dossier.model.region import Box
from dossier.model.spectral_form import LinearForms, linear_forms
from dossier.search.effort import Effort
from dossier.search.numeric import NumericFunction, nominal_floats, slopes_by_differences

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

WAY_STEPS: Final = 6
NEWTON_STEPS: Final = 4
"""Parts of the way to a combination and Newton steps at each, for all points at once."""

SETTLED: Final = 1e-6
"""Last Newton step, in reaches of the states, at an equilibrium counted as found."""

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
    if not spread_box(case).names:
        return (), None
    if equilibrium.fixed_for_all:
        forms = linear_forms(case, equilibrium, TOLERANCES)
        if isinstance(forms, str):
            return (Attempt(subject, method, "out of reach", forms),), None
        if not forms.constant_terms_vanish:
            return (Attempt(subject, method, "out of reach", "the equilibrium moves with the parameters"),), None
        family: Family = _Family(forms)
    else:
        family = MovingFamily(case, equilibrium)
    box = spread_box(case)
    point, points = _search(family, len(box.names), region, effort)
    claim = CombinationClaim(
        subject, model_hash(case), TOLERANCES, "", equilibrium.identifier, dict(_rounded(box, point))
    )  # fmt: skip
    return (Attempt(subject, method, "found", f"{points} combinations looked at", {"combinations": points}),), claim


class Family(Protocol):
    """Linear parts over the unit box of the spreads."""

    def matrices(self, unit: Array) -> Array:
        """A at (points, parameters): (points, n, n); not finite where there is none."""
        ...


class MovingFamily:
    """Linear parts at the equilibrium of each combination, followed from the nominal one by Newton's method."""

    def __init__(self, case: Case, equilibrium: Equilibrium) -> None:
        loop, whole = vector_field(case), spread_box(case)
        floats = nominal_floats(case)
        constants = {n: v for n, v in floats.items() if n not in whole.names}
        self.field = NumericFunction(loop.equations, (*loop.states, *whole.names), constants)
        self.sampled, self.size = loop.sampled, len(loop.states)
        self.origin = np.array([float(b.middle) for b in equilibrium.state])
        self.nominal = np.array([floats[n] for n in whole.names])
        self.low = np.array([float(i.bounds[0]) for i in whole.intervals])
        self.width = np.array([float(i.width) for i in whole.intervals])
        self.reach = np.array([_reach(case, n) for n in loop.states])

    def matrices(self, unit: Array) -> Array:
        """As for `Family`; not finite where the equilibrium was lost on the way."""
        target = (self.low + unit * self.width).T
        state = np.repeat(self.origin[:, None], target.shape[1], axis=1)
        lost = np.zeros(target.shape[1], bool)
        for step in range(1, WAY_STEPS + 1):
            at = self.nominal[:, None] + (target - self.nominal[:, None]) * (step / WAY_STEPS)
            for _ in range(NEWTON_STEPS):
                state, length = self._newton(state, at)
            lost |= ~(length < SETTLED)
            state = np.where(lost, self.origin[:, None], state)
        slopes = np.moveaxis(self._slopes(state, target), 2, 0)
        return np.where(lost[:, None, None], np.nan, slopes)

    def _slopes(self, state: Array, parameters: Array) -> Array:
        scale = np.concatenate([self.reach, np.ones(len(parameters))])
        points = np.concatenate([state, parameters])
        return slopes_by_differences(self.field, points, scale)[:, : self.size]

    def _newton(self, state: Array, parameters: Array) -> tuple[Array, Array]:
        value = self.field(np.concatenate([state, parameters]))
        slopes = self._slopes(state, parameters)
        if self.sampled:
            value = value - state
            slopes = slopes - np.eye(self.size)[:, :, None]
        usable = np.isfinite(value).all(axis=0) & np.isfinite(slopes).all(axis=(0, 1))
        matrices = np.where(usable, slopes * self.reach[None, :, None], np.eye(self.size)[:, :, None]).transpose(
            2, 0, 1
        )
        change = (np.linalg.pinv(matrices) @ np.where(usable, value, 0.0).T[:, :, None])[:, :, 0].T
        length = np.where(usable, np.max(np.abs(change), axis=0), np.inf)
        return state - change * self.reach[:, None], length


def _reach(case: Case, state: str) -> float:
    for box in (case.region, case.search, case.model.domain):
        side = box[state]
        if side.is_bounded and not side.is_point:
            return float(side.width) / 2
    return 1.0


def _search(family: Family, free: int, region: SpectralRegion, effort: Effort) -> tuple[Array, int]:
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


def _compass(family: Family, start: Array, value: float, region: SpectralRegion) -> tuple[Array, float, int]:
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
