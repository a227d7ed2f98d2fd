"""What is watched along motions: bounded quantities, the domain, rest, convergence and divergence."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
from numpy.typing import NDArray

from dossier.checks.field import Columns, Flow, Formulas, Rates
from dossier.checks.motion import Codes, Ending, Index
from dossier.model.case import Case, Criterion, value_of
from dossier.model.expression import Expression, symbol
from dossier.model.loop import inline_signals
from dossier.model.region import Interval

RowKind = Literal["state", "domain", "signal", "quantity"]

ROUNDING: Final = 1e-9
"""Share of a bound's size by which a value must pass it to count; far above double rounding of sums."""

NEIGHBOURHOOD: Final = 1e-3
"""A motion nearer than this share of the region, for long enough, has converged (the linear part is stable there)."""

REST: Final = 1e-6
"""A motion that moves less than this share of the region, for long enough, rests."""

FAR: Final = 100.0
"""A motion this many regions away where no further step could be made has escaped."""

MILESTONES: Final = (10.0, 1e4, 1e7, 1e10)
"""Distances, in regions, at which a motion that goes away is timed; at the first one it is integrated again."""

ACCELERATION: Final = 1.3
"""Growth rates from milestone to milestone must rise by this factor for a motion to count as escaping.

However far away, a motion may come back: x' = -x + xy, y' = -y carries starts a hundred million times away and
attracts them all.  An escape in finite time accelerates without bound; exponential growth (ratio one) does not count.
"""

LARGEST: Final = 1e300
"""Stands for an infinite distance where growth is measured."""


@dataclass(frozen=True, slots=True)
class Row:
    """A watched quantity with its allowed range; ``state`` rows are offsets, all others absolute (SI)."""

    name: str
    kind: RowKind
    lower: float
    upper: float

    @property
    def size(self) -> float:
        """The larger finite bound: what an excess is compared with; 1 where there is none."""
        return max((abs(b) for b in (self.lower, self.upper) if np.isfinite(b) and b != 0), default=1.0)


def range_of(side: Interval) -> tuple[float, float]:
    """Ends of `side` as floats, infinite where unbounded."""
    return (
        -np.inf if side.lower is None else float(side.lower),
        np.inf if side.upper is None else float(side.upper),
    )


def bounds_of(criterion: Criterion) -> tuple[float, float]:
    """Stated bounds of a criterion as floats, infinite where there is none."""
    lower = criterion.between[0] if criterion.between else criterion.at_least
    upper = criterion.between[1] if criterion.between else criterion.at_most
    return (
        -np.inf if lower is None else float(value_of(lower).middle),
        np.inf if upper is None else float(value_of(upper).middle),
    )


@dataclass(frozen=True, slots=True)
class Watched:
    """Rows to watch: offsets of all states, absolute states in the domain, then compiled formulas."""

    rows: tuple[Row, ...]
    states: int
    formulas: Formulas | None

    def values(self, flow: Flow, index: Index, offsets: Columns) -> Columns:
        """One row per watched quantity, one column per motion."""
        absolute = flow.absolute(index, offsets)
        parts = [offsets, absolute[: self.states]]
        if self.formulas is not None:
            parts.append(self.formulas(absolute))
        return np.concatenate(parts)

    def place(self, name: str, kind: RowKind) -> int:
        """Index of a row."""
        return next(i for i, r in enumerate(self.rows) if (r.name, r.kind) == (name, kind))


def watch(case: Case, criteria: tuple[Criterion, ...]) -> Watched:
    """Everything the `criteria` bound, the limits, the signal limits and the domain of `case`."""
    model = case.model
    rows = [Row(n, "state", *range_of(i)) for n, i in case.limits.items()]
    rows += [Row(n, "domain", *range_of(i)) for n, i in model.domain.items()]
    formulas: list[Expression] = []
    for signal in model.signals:
        if signal.limits.lower is not None or signal.limits.upper is not None:
            rows.append(Row(signal.name, "signal", *range_of(signal.limits)))
            formulas.append(inline_signals(symbol(signal.name), model))
    for criterion in criteria:
        if criterion.claim == "excursion" and criterion.of is not None:
            rows.append(Row(criterion.name, "quantity", *bounds_of(criterion)))
            formulas.append(inline_signals(criterion.of, model))
    names = (*model.state_names, *(p.name for p in model.parameters))
    return Watched(tuple(rows), len(model.states), Formulas(formulas, names) if formulas else None)


class Recorder:
    """Observer of motions: extremes of every watched row with their times, and the events that end a motion.

    `scale` is the size of the region per state; `dwell` how long a motion must stay near (or still) to count
    as converged (or at rest), infinite where nearness means nothing because the linear part is not stable.
    """

    def __init__(self, watched: Watched, flow: Flow, scale: Columns, dwell: float, rest: float) -> None:
        count, rows = flow.centres.shape[1], len(watched.rows)
        self.watched, self.flow, self.scale = watched, flow, scale[:, None]
        self.dwell, self.rest = dwell, rest
        self.least = np.full((rows, count), np.inf)
        self.greatest = np.full((rows, count), -np.inf)
        self.least_at, self.greatest_at = np.zeros((rows, count)), np.zeros((rows, count))
        self.near_since = np.full(count, np.inf)
        self.still_since = np.zeros(count)
        self.still_at = np.full((flow.centres.shape[0], count), np.inf)
        self.distance = np.zeros(count)
        self.milestone_at = np.full((len(MILESTONES), count), np.inf)
        self.milestone_distance = np.full((len(MILESTONES), count), np.nan)
        slack = ROUNDING * np.array([r.size for r in watched.rows])
        domain = np.array([r.kind == "domain" for r in watched.rows])
        self._lower = np.where(domain, np.array([r.lower for r in watched.rows]) - slack, -np.inf)[:, None]
        self._upper = np.where(domain, np.array([r.upper for r in watched.rows]) + slack, np.inf)[:, None]

    def __call__(self, index: Index, times: Columns, offsets: Columns) -> Codes:
        """Record one sight of the motions `index` and say which have ended."""
        values = self.watched.values(self.flow, index, offsets)
        self._extremes(index, times, values)
        codes = np.zeros(index.size, np.int8)
        with np.errstate(all="ignore"):
            distance = np.max(np.abs(offsets) / self.scale, axis=0)
        self.distance[index] = distance
        codes[self._still(index, times, offsets, distance)] = Ending.RESTS
        codes[self._near(index, times, distance)] = Ending.CONVERGED
        gone = self._gone(index, times, distance)
        codes[gone] = np.where(self._accelerates(index[gone]), Ending.DIVERGED, Ending.LOST)
        codes[((values < self._lower) | (values > self._upper)).any(axis=0)] = Ending.LEFT_DOMAIN
        return codes

    @property
    def far_at(self) -> Columns:
        """When each motion was first seen beyond the nearest milestone, infinite where it never was."""
        return self.milestone_at[0]

    def _gone(self, index: Index, times: Columns, distance: Columns) -> NDArray[np.bool_]:
        """Time at most one milestone per sight; true where the last one is passed, or the place is not finite."""
        size = np.minimum(np.where(np.isnan(distance), 0.0, distance), LARGEST)
        earlier = np.isfinite(self.milestone_at[:, index])
        for k in reversed(range(len(MILESTONES))):
            new = (size > MILESTONES[k]) & ~earlier[k] & (earlier[k - 1] if k else True)
            self.milestone_at[k, index[new]] = times[new]
            self.milestone_distance[k, index[new]] = size[new]
        return np.isfinite(self.milestone_at[-1, index]) | np.isnan(distance)

    def _accelerates(self, index: Index) -> NDArray[np.bool_]:
        """The growth rate rises from each pair of milestones to the next."""
        with np.errstate(all="ignore"):
            growth = np.diff(np.log(self.milestone_distance[:, index]), axis=0)
            rates = growth / np.diff(self.milestone_at[:, index], axis=0)
            return (rates[1:] >= ACCELERATION * rates[:-1]).all(axis=0) & (rates[0] > 0)

    def _extremes(self, index: Index, times: Columns, values: Columns) -> None:
        for store, at, better in (
            (self.least, self.least_at, values < self.least[:, index]),
            (self.greatest, self.greatest_at, values > self.greatest[:, index]),
        ):
            row, column = np.nonzero(better)
            store[row, index[column]] = values[row, column]
            at[row, index[column]] = times[column]

    def _near(self, index: Index, times: Columns, distance: Columns) -> NDArray[np.bool_]:
        near = distance < NEIGHBOURHOOD
        since = np.where(near, np.minimum(self.near_since[index], times), np.inf)
        self.near_since[index] = since
        return near & (times - since >= self.dwell)

    def _still(self, index: Index, times: Columns, offsets: Columns, distance: Columns) -> NDArray[np.bool_]:
        with np.errstate(all="ignore"):
            moved = ~(np.max(np.abs(offsets - self.still_at[:, index]) / self.scale, axis=0) <= REST)
        self.still_at[:, index[moved]] = offsets[:, moved]
        self.still_since[index[moved]] = times[moved]
        return (distance >= NEIGHBOURHOOD) & (times - self.still_since[index] >= self.rest)


class FallRecorder(Recorder):
    """Also watches a function V of the offsets, which must fall from sight to sight: keeps its largest rise."""

    def __init__(self, watched: Watched, flow: Flow, scale: Columns, pace: tuple[float, float], fall: Rates) -> None:
        super().__init__(watched, flow, scale, *pace)
        count = flow.centres.shape[1]
        self.fall = fall
        self.last, self.last_at = np.full(count, np.inf), np.zeros(count)
        self.rise, self.rise_from, self.rise_to = np.full(count, -np.inf), np.zeros(count), np.zeros(count)

    def __call__(self, index: Index, times: Columns, offsets: Columns) -> Codes:
        """As `Recorder`, and compare V with its value at the last sight."""
        now = self.fall(offsets)
        rise = now - self.last[index]
        larger = rise > self.rise[index]
        chosen = index[larger]
        self.rise[chosen], self.rise_from[chosen], self.rise_to[chosen] = (
            rise[larger], self.last_at[chosen], times[larger]
        )  # fmt: skip
        self.last[index], self.last_at[index] = now, times
        return super().__call__(index, times, offsets)
