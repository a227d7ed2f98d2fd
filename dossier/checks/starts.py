"""Where simulated motions start: corners and random interior of region and tolerances, boundary of proved sets.

Regions are centred on each parameter combination's own equilibrium, found by continuation of Newton's
method from the nominal one; combinations where that fails are left out and counted.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from itertools import product
from typing import Final

import numpy as np
from numpy.typing import NDArray

from dossier.checks.branch import moved_equilibria
from dossier.checks.field import Columns, Flow, Formulas
from dossier.model.case import NOMINAL, Case, Scope
from dossier.model.equilibrium import Equilibrium
from dossier.model.polynomial import Exponents
from dossier.model.region import Box, Interval

CORNERS: Final = 512
"""Corners taken at most; beyond that, this many corners are picked at random."""

LONGEST_RAY: Final = 1e6
RAY_STEPS: Final = 240
BISECTIONS: Final = 60
"""Search for {V = c} along a ray: geometric steps up to a million regions, then halving down to rounding."""


@dataclass(frozen=True, slots=True)
class Starts:
    """`offsets` (n x N), `parameters` (m x N), `centres` (n x N); `drawn` marks the independent random draws."""

    offsets: Columns
    parameters: Columns
    centres: Columns
    drawn: NDArray[np.bool_]
    lost: int = 0

    def flow(self, field: Formulas, sampled: bool) -> Flow:
        """The closed loop for these motions."""
        return Flow(field, self.centres, self.parameters, sampled)

    def only(self, column: int) -> Starts:
        """The start of one motion."""
        one = slice(column, column + 1)
        return Starts(self.offsets[:, one], self.parameters[:, one], self.centres[:, one], self.drawn[one])


def nominal_point(case: Case, equilibrium: Equilibrium) -> tuple[Columns, Columns]:
    """Equilibrium and nominal parameters as float columns."""
    centre = np.array([float(b.middle) for b in equilibrium.state])
    return centre, np.array([float(p.nominal.middle) for p in case.model.parameters])


def scale_of(case: Case, region: Box) -> Columns:
    """Size per state: the largest offset of the region, else of the limits, else half the domain, else 1."""
    sizes = []
    for name in case.model.state_names:
        wide = case.model.domain[name]
        half = Interval(-wide.width / 2, wide.width / 2) if wide.is_bounded else wide
        ends = [
            max((abs(float(e)) for e in (i.lower, i.upper) if e is not None), default=0.0)
            for i in (region[name], case.limits[name], half)
        ]
        sizes.append(next((e for e in ends if e > 0), 1.0))
    return np.array(sizes)


def _corner_columns(sides: Iterable[Interval], random: np.random.Generator, at_most: int) -> Columns:
    """Corners of a bounded box as columns: all of them, or `at_most` picked at random."""
    ends = [(float(i.lower or 0), float(i.upper or 0)) if not i.is_point else (float(i.lower or 0),) for i in sides]
    if np.prod([float(len(e)) for e in ends]) <= at_most:
        return np.array(list(product(*ends)), dtype=float).reshape(-1, len(ends)).T
    return np.array([random.choice(e, at_most) for e in ends])


def _drawn_columns(sides: Iterable[Interval], random: np.random.Generator, count: int) -> Columns:
    rows = [random.uniform(float(i.lower or 0), float(i.upper or 0), count) for i in sides]
    return np.array(rows).reshape(-1, count)


def region_starts(
    case: Case, equilibrium: Equilibrium, field: Formulas, region: Box, over: Scope, motions: int,
    random: np.random.Generator,
) -> Starts:  # fmt: skip
    """Corners of the region at nominal (and at corners of the tolerances), then `motions` independent draws.

    The draws are uniform over the region, and over the box of tolerances where `over` asks for it.
    """
    centre, nominal = nominal_point(case, equilibrium)
    corners = _corner_columns(region.intervals, random, CORNERS)
    draws = _drawn_columns(region.intervals, random, motions)
    offsets, parameters = [corners, draws], [_repeat(nominal, corners), _repeat(nominal, draws)]
    if over != NOMINAL:
        spreads = [p.spread for p in case.model.parameters]
        both = _corner_columns((*region.intervals, *spreads), random, CORNERS)
        offsets.insert(1, both[: len(region.names)])
        parameters.insert(1, both[len(region.names) :])
        parameters[-1] = _drawn_columns(spreads, random, motions)
    chosen = np.concatenate(offsets, axis=1)
    combinations = np.concatenate(parameters, axis=1)
    drawn = np.arange(chosen.shape[1]) >= chosen.shape[1] - motions
    return _centred(case, equilibrium, field, region, Starts(chosen, combinations, _repeat(centre, chosen), drawn))


def _repeat(column: Columns, like: Columns) -> Columns:
    return np.repeat(column[:, None], like.shape[1], axis=1)


def _centred(case: Case, equilibrium: Equilibrium, field: Formulas, region: Box, starts: Starts) -> Starts:
    """The same starts about each combination's own equilibrium."""
    if equilibrium.fixed_for_all:
        return starts
    sampled = case.model.time == "sampled"
    _, nominal = nominal_point(case, equilibrium)
    moved = (starts.parameters != nominal[:, None]).any(axis=0)
    centres, found = starts.centres.copy(), np.ones(moved.size, bool)
    if moved.any():
        scale = scale_of(case, region)
        centres[:, moved], found[moved] = moved_equilibria(
            field, starts.centres[:, moved], nominal, starts.parameters[:, moved], scale, sampled
        )
    return Starts(
        starts.offsets[:, found], starts.parameters[:, found], centres[:, found], starts.drawn[found],
        int(np.count_nonzero(~found)),
    )  # fmt: skip


def polynomial_values(function: Mapping[Exponents, Fraction], offsets: Columns) -> Columns:
    """V at every column of `offsets`."""
    total = np.zeros(offsets.shape[1])
    for exponents, coefficient in function.items():
        term = np.full(offsets.shape[1], float(coefficient))
        for row, power in zip(offsets, exponents, strict=True):
            for _ in range(power):
                term = term * row
        total += term
    return total


def boundary_points(
    function: Mapping[Exponents, Fraction], level: float, scale: Columns, count: int, random: np.random.Generator
) -> Columns:
    """Up to `count` points of {V = level}: the first crossing along random rays from the equilibrium."""
    rays = random.normal(size=(len(scale), count))
    rays = rays / np.linalg.norm(rays, axis=0) * scale[:, None]
    inner, outer = np.zeros(count), np.full(count, np.nan)
    for length in np.geomspace(1 / LONGEST_RAY, LONGEST_RAY, RAY_STEPS):
        beyond = polynomial_values(function, rays * length) >= level
        outer = np.where(np.isnan(outer) & beyond, length, outer)
        inner = np.where(np.isnan(outer), length, inner)
    met = np.isfinite(outer)
    rays, inner, outer = rays[:, met], inner[met], outer[met]
    for _ in range(BISECTIONS):
        middle = (inner + outer) / 2
        beyond = polynomial_values(function, rays * middle) >= level
        inner, outer = np.where(beyond, inner, middle), np.where(beyond, middle, outer)
    return rays * inner


def set_starts(
    case: Case, equilibrium: Equilibrium, field: Formulas, offsets: Columns, over: Scope, random: np.random.Generator
) -> Starts:
    """Motions from the given `offsets`, at random tolerances where `over` asks for them, else nominal."""
    centre, nominal = nominal_point(case, equilibrium)
    parameters = _repeat(nominal, offsets)
    if over != NOMINAL:
        parameters = _drawn_columns([p.spread for p in case.model.parameters], random, offsets.shape[1])
    starts = Starts(offsets, parameters, _repeat(centre, offsets), np.zeros(offsets.shape[1], bool))
    return _centred(case, equilibrium, field, case.region, starts)
