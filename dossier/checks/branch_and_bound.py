"""Find and prove all zeros of a system in its search box by branch and bound with interval Newton steps.

Boxes are excluded, contracted, proved to hold exactly one zero, or split, breadth first, so that what cannot be
decided is known to an even resolution when the box budget is spent.  A zero that is already boxed in (a *known*
uniqueness box) removes every box inside it.  The methods are cited in `dossier.checks.newton`.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import Final

import numpy as np

from dossier.checks.intervals import Array, Mask, Span, middle
from dossier.checks.newton import System, UniqueBox, box_around, newton_step, polish

BATCH: Final = 4096
"""Boxes per step: large enough to hide the cost of calls, small enough for the cache."""
SPLIT: Final = 0.4921
"""Boxes are cut off-centre: symmetric models have zeros on the planes of halving, and a zero on a face is undecided."""
SHRUNK: Final = 0.7
"""A box whose widest side fell below this share goes round again unsplit."""
RESOLUTION: Final = 2.0**-30
"""Scaled width (1e-9 of the search box) below which a box is not split: double zeros are known to 1e-8 in doubles."""
FEW_DOUBLES: Final = 2.0**-49
"""16 units in the last place: a narrower side cannot be cut usefully (a small search box far from zero)."""
FAILED_ATTEMPTS: Final = 16
"""Newton attempts from undecided boxes that may fail before no more are made: at a continuum all would."""
NEAR: Final = 2.0**-10
"""A Newton attempt must end this close, in scaled coordinates, to the box it started from."""
FINE_CLUSTER: Final = 2_000
"""Up to so many undecided boxes clusters are formed from the boxes themselves, above from cells of a grid."""
CELLS: Final = 64
"""Grid cells per scaled unit for coarse clusters."""


@dataclass
class Cover:
    """What is known about the search box: zeros, undecided clusters (hulls), boxes spent, budget kept.

    Complete when `undecided` is empty: every point of the search box is excluded or in a uniqueness box.
    """

    zeros: list[UniqueBox]
    undecided: list[Span] = field(default_factory=list)
    boxes: int = 0
    within_budget: bool = True


class _Open:
    """The boxes still to be treated, first in first out."""

    def __init__(self, start: Span) -> None:
        self._chunks: deque[Span] = deque([start])

    def __bool__(self) -> bool:
        return bool(self._chunks)

    def take(self, count: int) -> Span:
        """Up to `count` boxes from the front."""
        parts: list[Span] = []
        size = 0
        while self._chunks and size < count:
            chunk = self._chunks.popleft()
            room = count - size
            if chunk.lo.shape[1] > room:
                self._chunks.appendleft(Span(chunk.lo[:, room:], chunk.hi[:, room:]))
                chunk = Span(chunk.lo[:, :room], chunk.hi[:, :room])
            parts.append(chunk)
            size += chunk.lo.shape[1]
        return _joined(parts)

    def put(self, boxes: Span) -> None:
        """Add at the back."""
        if boxes.lo.shape[1]:
            self._chunks.append(boxes)

    def rest(self) -> list[Span]:
        """All chunks left."""
        return list(self._chunks)


def _joined(parts: list[Span]) -> Span:
    return Span(np.concatenate([p.lo for p in parts], axis=1), np.concatenate([p.hi for p in parts], axis=1))


def _chosen(boxes: Span, mask: Mask) -> Span:
    return Span(boxes.lo[:, mask], boxes.hi[:, mask])


def _column(boxes: Span, k: int) -> Span:
    return Span(boxes.lo[:, k].copy(), boxes.hi[:, k].copy())


def inside_known(boxes: Span, known: Iterable[UniqueBox]) -> Mask:
    """Which boxes (n, B) lie in one of the uniqueness boxes."""
    result = np.zeros(boxes.lo.shape[1], bool)
    for zero in known:
        result |= ((boxes.lo >= zero.box.lo[:, None]) & (boxes.hi <= zero.box.hi[:, None])).all(axis=0)
    return result


def cover(system: System, known: Iterable[UniqueBox], budget: int) -> Cover:
    """Treat the whole search box of `system` with at most `budget` boxes.

    `known` are uniqueness boxes proved before.  A uniqueness box may reach beyond the search box; whether its
    zero lies inside is for the caller to decide.  One zero may be boxed in more than once.
    """
    result = Cover(list(known))
    waiting = _Open(Span(system.search.lo[:, None], system.search.hi[:, None]))
    stuck: list[Span] = []
    failures = 0
    while waiting:
        boxes = waiting.take(BATCH)
        result.boxes += boxes.lo.shape[1]
        boxes = _chosen(boxes, ~inside_known(boxes, result.zeros))
        if result.boxes > budget:
            result.within_budget = False
            stuck.extend((boxes, *waiting.rest()))
            break
        if not boxes.lo.shape[1]:
            continue
        step = newton_step(system, boxes)
        for k in np.flatnonzero(step.unique):
            result.zeros.append(UniqueBox(_column(boxes, int(k)), _column(step.boxes, int(k))))
        left = ~step.excluded & ~step.unique
        before, after = _chosen(boxes, left), _chosen(step.boxes, left)
        small = _is_tiny(after)
        if small.any():
            tiny = _chosen(after, small)
            failures += _attempt(system, tiny, result.zeros, FAILED_ATTEMPTS - failures)
            stuck.append(tiny)
        for part in _next_boxes(_chosen(before, ~small), _chosen(after, ~small)):
            waiting.put(part)
    undecided = [_chosen(s, ~inside_known(s, result.zeros)) for s in stuck]
    result.undecided = clusters(_joined(undecided)) if undecided else []
    return result


def _is_tiny(boxes: Span) -> Mask:
    """Not to be split: below the resolution, or a few neighbouring doubles wide."""
    least = RESOLUTION + FEW_DOUBLES * np.maximum(np.abs(boxes.lo), np.abs(boxes.hi))
    return np.asarray(((boxes.hi - boxes.lo) < least).all(axis=0))


def _attempt(system: System, boxes: Span, zeros: list[UniqueBox], allowed: int) -> int:
    """Try to box in zeros at the borders of tiny boxes, by Newton and Krawczyk; returns the number of failures."""
    failures = 0
    for k in range(boxes.lo.shape[1]):
        if failures >= allowed:
            break
        box = _column(boxes, k)
        if inside_known(Span(box.lo[:, None], box.hi[:, None]), zeros).any():
            continue
        zero = polish(system, middle(box))
        near = zero is not None and bool((np.abs(zero - middle(box)) < NEAR).all())
        found = box_around(system, zero) if zero is not None and near else None
        if found is None:
            failures += 1
        else:
            zeros.append(found)
    return failures


def _next_boxes(before: Span, after: Span) -> tuple[Span, Span]:
    """Boxes that shrank enough, and the halves of all others, cut along their widest side."""
    widths = after.hi - after.lo
    shrunk = widths.max(axis=0, initial=0.0) < SHRUNK * (before.hi - before.lo).max(axis=0, initial=0.0)
    rest = _chosen(after, ~shrunk)
    axis, column = np.argmax(rest.hi - rest.lo, axis=0), np.arange(rest.lo.shape[1])
    cut = rest.lo[axis, column] + (rest.hi[axis, column] - rest.lo[axis, column]) * SPLIT
    first_hi, second_lo = rest.hi.copy(), rest.lo.copy()
    first_hi[axis, column] = cut
    second_lo[axis, column] = cut
    return _chosen(after, shrunk), _joined([Span(rest.lo, first_hi), Span(second_lo, rest.hi)])


def clusters(boxes: Span) -> list[Span]:
    """Hulls of groups of touching boxes (n, B); many boxes are first gathered in the cells of a grid."""
    if boxes.lo.shape[1] > FINE_CLUSTER:
        boxes = _cell_hulls(boxes)
    label = np.full(boxes.lo.shape[1], -1)
    result: list[Span] = []
    for start in range(len(label)):
        if label[start] >= 0:
            continue
        members = _touching(boxes, start, label, len(result))
        result.append(Span(boxes.lo[:, members].min(axis=1), boxes.hi[:, members].max(axis=1)))
    return result


def _touching(boxes: Span, start: int, label: Array, name: int) -> Mask:
    """Label everything connected to box `start`; boxes nearer than RESOLUTION count as touching."""
    label[start] = name
    todo = [start]
    while todo:
        k = todo.pop()
        near = (boxes.lo <= boxes.hi[:, k : k + 1] + RESOLUTION) & (boxes.hi >= boxes.lo[:, k : k + 1] - RESOLUTION)
        fresh = np.flatnonzero(near.all(axis=0) & (label < 0))
        label[fresh] = name
        todo.extend(int(i) for i in fresh)
    return label == name


def _cell_hulls(boxes: Span) -> Span:
    """One hull per occupied grid cell, by the boxes' centres."""
    cells = np.floor(middle(boxes) * CELLS)
    _, place = np.unique(cells, axis=1, return_inverse=True)
    count = int(place.max()) + 1
    lower = np.full((boxes.lo.shape[0], count), np.inf)
    upper = np.full((boxes.lo.shape[0], count), -np.inf)
    for row in range(boxes.lo.shape[0]):
        np.minimum.at(lower[row], place.ravel(), boxes.lo[row])
        np.maximum.at(upper[row], place.ravel(), boxes.hi[row])
    return Span(lower, upper)
