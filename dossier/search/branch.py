"""Cut the box of the spreads into cells on which the equilibrium can be followed, or find where it cannot.

Floating continuation (Newton's method along the straight line from the nominal combination) gives a point for the
middle of every cell; the caller's `verify` decides.  Where the continuation ends on the way to a corner, that corner
is offered as a combination without an equilibrium.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import islice, product
from typing import Final

import numpy as np
from numpy.typing import NDArray

from dossier.model.affine import spread_box
from dossier.model.attempt import Attempt
from dossier.model.case import TOLERANCES, Case
from dossier.model.claim import AbsenceClaim, BranchCell, BranchClaim, EndClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import sub, symbol
from dossier.model.loop import model_hash, vector_field
from dossier.model.region import Box, Interval
from dossier.search.effort import Effort
from dossier.search.numeric import NumericFunction, nominal_floats, slopes_by_differences

Array = NDArray[np.float64]

STEPS: Final = 4
"""Parts of the way to a combination that are tried first."""
SHORTEST: Final = 2.0**-12
"""Shortest step, as a share of the way: a branch that needs shorter ones ends."""
NEWTON_STEPS: Final = 8
"""Newton steps at each of them."""
SETTLED: Final = 1e-7
"""Last Newton step, as a share of the reach, at a point counted as found."""
JUMP: Final = 0.5
"""How far, in reaches, a point may lie from where the last step points to; more may be another branch."""
SMALLEST: Final = Fraction(1, 256)
"""Share of a spread below which a cell is not cut."""
CORNERS: Final = 64
"""Most corners of the box that the continuation is sent to."""
FEW: Final = 4
"""Corners tried, those before which the continuation ends first."""
PER_CENT: Final = 100
"""Shares are whole per cents, so that the combination printed is short."""
GAPS: Final = (0.01, 0.05, 0.1)
"""Shares of the way before and after the end between which it is enclosed."""
SIZES: Final = tuple(Fraction(2) ** k for k in (-1, 0, 1, 2, 3, 4, -3, -5))
"""Half widths of the box about the end, in reaches of the states."""
BEND: Final = 1e-3
"""Weight of the plain movement beside its bend, so that a straight branch too is cut where it moves most."""

VerifyCell = Callable[[Box, tuple[Fraction, ...]], bool]
VerifyBranch = Callable[[BranchClaim], bool]
VerifyEnd = Callable[[EndClaim], bool]
VerifyAbsence = Callable[[AbsenceClaim], bool]


@dataclass(frozen=True)
class Continuation:
    """Newton's method from the nominal equilibrium to other combinations, in floating point."""

    function: NumericFunction
    size: int
    origin: Array
    nominal: Array
    reach: Array

    def to(self, values: Sequence[Fraction]) -> tuple[Array, float]:
        """The state reached, and the share of the way that succeeded (1: all of it)."""
        target = np.array([float(v) for v in values])
        state, slope = self.origin, np.zeros(self.size)
        at, length = 0.0, 1.0 / STEPS
        while at < 1.0:
            length = min(length, 1.0 - at)
            guess = state + slope * length
            found = self._newton(guess, self.nominal + (target - self.nominal) * (at + length))
            if found is not None and np.max(np.abs(found - guess) / self.reach) <= JUMP:
                slope = (found - state) / length
                state, at, length = found, at + length, 2 * length
            else:
                length /= 2
                if length < SHORTEST:
                    return state, at
        return state, 1.0

    def _newton(self, state: Array, parameters: Array) -> Array | None:
        scale = np.concatenate([self.reach, np.ones(len(parameters))])
        length = np.inf
        for _ in range(NEWTON_STEPS):
            point = np.concatenate([state, parameters])[:, None]
            value = self.function(point)[:, 0]
            slopes = slopes_by_differences(self.function, point, scale)[:, : self.size, 0]
            if not (np.isfinite(value).all() and np.isfinite(slopes).all()):
                return None
            try:
                change = np.linalg.solve(slopes * self.reach[None, :], value)
            except np.linalg.LinAlgError:
                return None
            state = state - change * self.reach
            length = float(np.max(np.abs(change)))
            if not np.isfinite(state).all():
                return None
            if length < SETTLED:
                return state
        return None


def continuation(case: Case, equilibrium: Equilibrium) -> Continuation:
    """From the nominal place of `equilibrium` over the parameters with a spread."""
    loop, whole = vector_field(case), spread_box(case)
    equations = loop.equations
    if loop.sampled:
        equations = tuple(sub(e, symbol(s)) for e, s in zip(equations, loop.states, strict=True))
    floats = nominal_floats(case)
    constants = {n: v for n, v in floats.items() if n not in whole.names}
    function = NumericFunction(equations, (*loop.states, *whole.names), constants)
    return Continuation(
        function, len(loop.states), np.array([float(b.middle) for b in equilibrium.state]),
        np.array([floats[n] for n in whole.names]), np.array([_reach(case, n) for n in loop.states]),
    )  # fmt: skip


def _reach(case: Case, state: str) -> float:
    for box in (case.region, case.search, case.model.domain):
        side = box[state]
        if side.is_bounded and not side.is_point:
            return float(side.width) / 2
    return 1.0


def seek_branch(
    case: Case, equilibrium: Equilibrium, effort: Effort, verify: VerifyCell, joins: VerifyBranch
) -> tuple[tuple[Attempt, ...], BranchClaim | None]:
    """A branch over the whole box of the spreads, or the reason why there is none."""
    whole, way = spread_box(case), continuation(case, equilibrium)
    subject, method = case.name, "branch of the equilibrium over the tolerances"
    cells, why = _cells(whole, way, effort.cells, verify)
    while not why:
        claim = BranchClaim(f"{case.name}.B1", model_hash(case), TOLERANCES, "E", equilibrium.identifier, tuple(cells))
        if joins(claim):
            word = "cell" if len(cells) == 1 else "cells"
            return (Attempt(subject, method, "found", f"{len(cells)} {word}", {"cells": len(cells)}),), claim
        if 2 * len(cells) > effort.cells:
            why = "neighbouring cells could not be joined"
            break
        halves = [h for c in cells for h in _halves(way, whole, c.parameters) or (c.parameters,)]
        cells, why = [], "" if len(halves) > len(cells) else "neighbouring cells could not be joined"
        for half in halves:
            middle = _middle(way, half)
            if middle is None or not verify(half, middle):
                why = "a smaller cell could not be proved"
                break
            cells.append(BranchCell(half, middle))
    return (Attempt(subject, method, "no candidate", why, {"cells": len(cells)}),), None


def seek_end(
    case: Case, equilibrium: Equilibrium, verify: VerifyEnd, absent: VerifyAbsence
) -> tuple[tuple[Attempt, ...], tuple[EndClaim | AbsenceClaim, ...]]:
    """A combination before which the equilibrium ceases to exist, and one at which the search box is empty."""
    whole, way = spread_box(case), continuation(case, equilibrium)
    subject, method = case.name, "end of the branch on the way to a corner of the tolerances"
    corners = islice(product(*(i.bounds for i in whole.intervals)), CORNERS)
    lost = sorted(((way.to(v)[1], v) for v in corners), key=lambda pair: pair[0])[:FEW]
    lost = [(share, v) for share, v in lost if share < 1]
    if not lost:
        return (), ()
    found: list[EndClaim | AbsenceClaim] = []
    for share, values in lost:
        end = _end(case, equilibrium, way, share, values, verify)
        if end is not None:
            found.append(end)
            break
    for _, values in lost:
        named = dict(zip(whole.names, values, strict=True))
        claim = AbsenceClaim(f"{case.name}.N1", model_hash(case), TOLERANCES, "E", case.search, named, 0)
        if absent(claim):
            found.append(claim)
            break
    remark = f"the continuation ends after {lost[0][0]:.3g} of the way to a corner"
    ending = "found" if found else "no candidate"
    return (Attempt(subject, method, ending, remark if found else f"{remark}; not proved"),), tuple(found)


def _end(
    case: Case, equilibrium: Equilibrium, way: Continuation, share: float, corner: tuple[Fraction, ...],
    verify: VerifyEnd,
) -> EndClaim | None:  # fmt: skip
    """A box about the place where the continuation ends, and the shares just before and after it."""
    whole = spread_box(case)
    nominal = {p.name: p.nominal.middle for p in case.model.parameters}

    def at(part: Fraction) -> list[Fraction]:
        return [nominal[n] + part * (v - nominal[n]) for n, v in zip(whole.names, corner, strict=True)]

    for gap in GAPS:
        before = Fraction(int((share - gap) * PER_CENT), PER_CENT)
        after = min(Fraction(-int(-(share + gap) * PER_CENT // 1), PER_CENT), Fraction(1))
        if before <= 0:
            continue
        state, reached = way.to(at(before))
        if reached < 1:
            continue
        target = dict(zip(whole.names, at(after), strict=True))
        for size in SIZES:
            sides = tuple(
                Interval(Fraction(float(x)) - size * Fraction(float(r)), Fraction(float(x)) + size * Fraction(float(r)))
                for x, r in zip(state, way.reach, strict=True)
            )
            claim = EndClaim(
                f"{case.name}.N2", model_hash(case), TOLERANCES, "E", equilibrium.identifier, target, before / after,
                Box(case.model.state_names, sides),
            )  # fmt: skip
            if verify(claim):
                return claim
    return None


def _cells(whole: Box, way: Continuation, budget: int, verify: VerifyCell) -> tuple[list[BranchCell], str]:
    waiting, done = [whole], list[BranchCell]()
    while waiting:
        box = waiting.pop()
        middle = _middle(way, box)
        if middle is None:
            return done, "the continuation from the nominal combination ends inside the tolerances"
        if verify(box, middle):
            done.append(BranchCell(box, middle))
            continue
        halves = _halves(way, whole, box)
        if halves is None or len(done) + len(waiting) + 2 > budget:
            why = f"the budget of {budget} cells is spent" if halves else "the equilibrium is not isolated enough"
            return done, why
        waiting.extend(halves)
    return done, ""


def _middle(way: Continuation, box: Box) -> tuple[Fraction, ...] | None:
    state, share = way.to([i.middle for i in box.intervals])
    return None if share < 1 else tuple(Fraction(float(v)) for v in state)


def _halves(way: Continuation, whole: Box, box: Box) -> tuple[Box, Box] | None:
    """Cut the side along which the branch bends most; None where all sides are too narrow."""
    middle = [i.middle for i in box.intervals]
    centre, _ = way.to(middle)
    effects: dict[int, float] = {}
    for j, (side, full) in enumerate(zip(box.intervals, whole.intervals, strict=True)):
        if side.width <= SMALLEST * full.width:
            continue
        ends = [way.to([bound if k == j else v for k, v in enumerate(middle)]) for bound in side.bounds]
        if min(share for _, share in ends) < 1:
            effects[j] = np.inf
            continue
        low, high = (state for state, _ in ends)
        bend = np.max(np.abs(low + high - 2 * centre) / way.reach)
        effects[j] = float(bend + BEND * np.max(np.abs(high - low) / way.reach))
    if not effects:
        return None
    cut = max(effects, key=effects.__getitem__)
    side = box.intervals[cut]
    parts = (Interval(side.lower, side.middle), Interval(side.middle, side.upper))
    first, second = (Box(box.names, tuple(p if k == cut else s for k, s in enumerate(box.intervals))) for p in parts)
    return first, second
