"""Integrate many motions at once, each with its own step and error, and drop the finished ones.

Explicit Runge-Kutta pair of orders 5 and 4: J. R. Dormand, P. J. Prince, "A family of embedded
Runge-Kutta formulae", J. Comput. Appl. Math. 6 (1980); coefficients as in E. Hairer, S. P. Norsett,
G. Wanner, Solving Ordinary Differential Equations I, 2nd ed. 1993, table II.5.2.  Values inside a step
from the fourth-order interpolant of L. F. Shampine, Math. Comp. 46 (1986).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from enum import IntEnum
from fractions import Fraction
from typing import Final

import numpy as np
from numpy.typing import NDArray

from dossier.checks.field import Columns, Rates

Index = NDArray[np.intp]
Codes = NDArray[np.int8]


def _row(text: str) -> tuple[Fraction, ...]:
    return tuple(Fraction(part) for part in text.split())


STAGES: Final = tuple(
    _row(text)
    for text in (
        "",
        "1/5",
        "3/40 9/40",
        "44/45 -56/15 32/9",
        "19372/6561 -25360/2187 64448/6561 -212/729",
        "9017/3168 -355/33 46732/5247 49/176 -5103/18656",
        "35/384 0 500/1113 125/192 -2187/6784 11/84",
    )
)
"""Weights of earlier slopes in each stage; the last row is the fifth-order step itself."""

FOURTH_ORDER: Final = _row("5179/57600 0 7571/16695 393/640 -92097/339200 187/2100 1/40")
"""Weights of the embedded fourth-order step."""

DENSE: Final = tuple(
    _row(text)
    for text in (
        "1 -8048581381/2820520608 8663915743/2820520608 -12715105075/11282082432",
        "0 0 0 0",
        "0 131558114200/32700410799 -68118460800/10900136933 87487479700/32700410799",
        "0 -1754552775/470086768 14199869525/1410260304 -10690763975/1880347072",
        "0 127303824393/49829197408 -318862633887/49829197408 701980252875/199316789632",
        "0 -282668133/205662961 2019193451/616988883 -1453857185/822651844",
        "0 40617522/29380423 -110615467/29380423 69997945/29380423",
    )
)
"""Weight of each slope inside a step, as a polynomial theta, theta^2, theta^3, theta^4."""

_A = [np.array([float(v) for v in row]) for row in STAGES]
_E = np.array([float(b - e) for b, e in zip((*STAGES[-1], Fraction(0)), FOURTH_ORDER, strict=True)])
_P = np.array([[float(v) for v in row] for row in DENSE])

INSIDE: Final = (0.5, 1.0)
"""Places in a step that are looked at; steps are short at the tolerances used here."""

SAFETY: Final = 0.9
SHRINK: Final = 0.2
GROW: Final = 5.0
ORDER: Final = 5
"""Step control of Hairer, Norsett, Wanner (1993), II.4: factor 0.9 err^(-1/5) within [0.2, 5]."""

SMALLEST_STEP: Final = 1e-13
"""Relative to the horizon: below it the motion cannot be continued (a singularity or a blow-up)."""


class Ending(IntEnum):
    """Why a motion ended."""

    RUNNING = 0
    CONVERGED = 1
    LEFT_DOMAIN = 2
    DIVERGED = 3
    RESTS = 4
    HORIZON = 5
    WORK = 6
    SINGULAR = 7
    LOST = 8


Observer = Callable[[Index, Columns, Columns], Codes]
"""Sees (motions, times, offsets) in order of time and says which of them have ended, and why."""


@dataclass(frozen=True, slots=True)
class Work:
    """`horizon` in s per motion (N), relative error, absolute error per state, steps per motion, first step."""

    horizon: Columns
    relative: float
    absolute: Columns
    steps: int
    first: float


@dataclass(frozen=True, slots=True)
class Motions:
    """Ending, last time and last offsets of every motion, and the steps the longest one took."""

    endings: Codes
    times: Columns
    offsets: Columns
    steps: int


def never_stop(index: Index, times: Columns, offsets: Columns) -> Codes:
    """The observer that lets every motion run to its horizon."""
    return np.zeros(index.size, np.int8)


class _Group:
    """The motions still running, compacted: index, time, step, offsets, slope at the start of the step."""

    def __init__(self, select: Callable[[Index], Rates], starts: Columns, work: Work) -> None:
        count = starts.shape[1]
        self.select = select
        self.index: Index = np.arange(count)
        self.time = np.zeros(count)
        self.step = np.minimum(work.first, work.horizon)
        self.offsets = starts.copy()
        self.horizon = work.horizon.copy()
        self.rates = select(self.index)
        self.slope = self.rates(self.offsets)

    def keep(self, mask: NDArray[np.bool_]) -> None:
        self.index = self.index[mask]
        self.time, self.step, self.horizon = self.time[mask], self.step[mask], self.horizon[mask]
        self.offsets, self.slope = self.offsets[:, mask], self.slope[:, mask]
        self.rates = self.select(self.index)


def integrate(select: Callable[[Index], Rates], starts: Columns, observe: Observer, work: Work) -> Motions:
    """Motions of x' = f from `starts` (n x N) until the observer, the horizon or the step limit ends them."""
    count = starts.shape[1]
    endings = observe(np.arange(count), np.zeros(count), starts).astype(np.int8)
    times, offsets = np.zeros(count), starts.copy()
    group = _Group(select, starts, work)
    group.keep(endings == Ending.RUNNING)
    steps = 0
    while group.index.size and steps < work.steps:
        steps += 1
        taken = _advance(group, work)
        codes = _look(group, taken, observe)
        _settle(group, taken)
        codes[(codes == Ending.RUNNING) & (group.time >= group.horizon)] = Ending.HORIZON
        stuck = group.step < SMALLEST_STEP * group.horizon
        codes[(codes == Ending.RUNNING) & stuck] = Ending.SINGULAR
        times[group.index], offsets[:, group.index] = group.time, group.offsets
        endings[group.index] = codes
        if codes.any():
            group.keep(codes == Ending.RUNNING)
    endings[group.index] = Ending.WORK
    return Motions(endings, times, offsets, steps)


@dataclass(frozen=True, slots=True)
class _Step:
    """One step tried for every motion: which were accepted, slopes per stage, ends, factor for the next step."""

    accepted: NDArray[np.bool_]
    slopes: Columns
    after: Columns
    factor: Columns


def _weighted(weights: Columns, slopes: Columns) -> Columns:
    """Weighted sum over the first axis (one matrix product, without the bookkeeping of tensordot)."""
    flat = weights @ slopes.reshape(len(weights), -1)
    return flat.reshape(slopes.shape[1:])


def _advance(group: _Group, work: Work) -> _Step:
    """Try one step of every motion, none beyond its horizon."""
    step = group.step = np.minimum(group.step, group.horizon - group.time)
    slopes = np.empty((len(STAGES), *group.offsets.shape))
    slopes[0] = group.slope
    after: Columns = group.offsets
    with np.errstate(all="ignore"):
        for stage in range(1, len(STAGES)):
            after = group.offsets + step * _weighted(_A[stage], slopes[:stage])
            slopes[stage] = group.rates(after)
        size = work.absolute[:, None] + work.relative * np.maximum(np.abs(group.offsets), np.abs(after))
        error = np.max(np.abs(step * _weighted(_E, slopes)) / size, axis=0)
        error[~np.isfinite(error)] = np.inf
        accepted = error <= 1
        wanted = SAFETY * np.power(error, -1 / ORDER)
        factor = np.clip(wanted, SHRINK, np.where(accepted, GROW, 1.0))
    return _Step(accepted, slopes, after, factor)


def _look(group: _Group, taken: _Step, observe: Observer) -> Codes:
    """Show the accepted steps to the observer, in order of time; a motion that has ended is not shown again."""
    codes = np.zeros(group.index.size, np.int8)
    for theta in INSIDE:
        seen = np.flatnonzero(taken.accepted & (codes == Ending.RUNNING))
        if not seen.size:
            break
        step = group.step[seen]
        if theta == INSIDE[-1]:
            offsets = taken.after[:, seen]
        else:
            weights = _P @ (theta ** np.arange(1, _P.shape[1] + 1))
            offsets = group.offsets[:, seen] + step * _weighted(weights, taken.slopes[:, :, seen])
        codes[seen] = observe(group.index[seen], group.time[seen] + theta * step, offsets)
    return codes


def _settle(group: _Group, taken: _Step) -> None:
    """Move the accepted motions to the end of their step (its last slope is the next first one)."""
    last = group.step >= group.horizon - group.time
    reached = np.where(last, group.horizon, group.time + group.step)
    group.time = np.where(taken.accepted, reached, group.time)
    group.offsets = np.where(taken.accepted, taken.after, group.offsets)
    group.slope = np.where(taken.accepted, taken.slopes[-1], group.slope)
    group.step = group.step * taken.factor


def iterate(select: Callable[[Index], Rates], starts: Columns, observe: Observer, samples: NDArray[np.intp]) -> Motions:
    """Motions of x+ = f from `starts`, each over its own number of `samples`; time is counted in samples."""
    count = starts.shape[1]
    endings = observe(np.arange(count), np.zeros(count), starts).astype(np.int8)
    times, offsets = np.zeros(count), starts.copy()
    endings[(endings == Ending.RUNNING) & (samples <= 0)] = Ending.HORIZON
    index = np.flatnonzero(endings == Ending.RUNNING)
    rates, now, step = select(index), starts[:, index], 0
    while index.size:
        step += 1
        now = rates(now)
        codes = observe(index, np.full(index.size, float(step)), now)
        codes[(codes == Ending.RUNNING) & (step >= samples[index])] = Ending.HORIZON
        times[index], offsets[:, index], endings[index] = step, now, codes
        if codes.any():
            index = index[codes == Ending.RUNNING]
            rates, now = select(index), offsets[:, index]
    return Motions(endings, times, offsets, step)
