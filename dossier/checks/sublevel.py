"""V and its change W over boxes about the equilibrium: where V exceeds a level, where V > 0 > W, and at the centre.

Used by `dossier.checks.candidate`, where the method and its sources stand.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np

from dossier.checks import intervals as iv
from dossier.checks.intervals import Array, Mask, Span, down, up
from dossier.checks.tape import SecondOrder, Tape
from dossier.model.ball import Ball
from dossier.model.case import Candidate, Case
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import Expression, add, differentiate, mul, number, simplify, sub, substitute, symbol
from dossier.model.loop import vector_field
from dossier.model.region import Box

BATCH: Final = 2_048
"""Boxes per batch: the working set stays in the cache."""
SMALLEST: Final = 2.0**-26
"""Boxes narrower than this share of the start are not cut further: undecided."""
FACE_BOXES: Final = 100_000
"""Boxes per face of B."""


def change_of(case: Case, equilibrium: Equilibrium, function: Expression) -> tuple[Expression, dict[str, Ball]]:
    """W over the offsets (symbols of the states), and the balls of its other symbols, at the nominal combination.

    Exact parameters and coordinates of the equilibrium become numbers; f(x*) = 0 is not used, W(0) = 0 follows from
    the vanishing gradient of V.
    """
    loop = vector_field(case)
    known = {p.name: p.nominal for p in case.model.parameters}
    exact = {n: number(b.middle) for n, b in known.items() if b.is_exact}
    balls = {n: b for n, b in known.items() if not b.is_exact}
    places: dict[str, Expression] = {}
    for name, ball in zip(loop.states, equilibrium.state, strict=True):
        rest = number(ball.middle) if ball.is_exact else symbol(rest_of(name))
        if not ball.is_exact:
            balls[rest_of(name)] = ball
        places[name] = add(rest, symbol(name))
    field = [substitute(e, {**exact, **places}) for e in loop.equations]
    if loop.sampled:
        rests = [number(b.middle) if b.is_exact else symbol(rest_of(n)) for n, b in
                 zip(loop.states, equilibrium.state, strict=True)]  # fmt: skip
        steps = {n: sub(f, r) for n, f, r in zip(loop.states, field, rests, strict=True)}
        return sub(substitute(function, steps), function), balls
    slopes = [simplify(differentiate(function, n)) for n in loop.states]
    return add(*(mul(s, f) for s, f in zip(slopes, field, strict=True))), balls


def rest_of(state: str) -> str:
    """Name of the symbol for an inexact coordinate of the equilibrium; no project name has a space."""
    return f"{state} at rest"


class Sublevel:
    """V and W over boxes of scaled coordinates z with y = T z."""

    def __init__(self, case: Case, equilibrium: Equilibrium, candidate: Candidate, around: Box) -> None:
        self.names, self.candidate = case.model.state_names, candidate
        change, balls = change_of(case, equilibrium, candidate.function)
        self.tape = Tape((candidate.function, change), self.names, balls)
        self.value_tape = Tape((candidate.function,), self.names, {})
        low, high = iv.bounds_of_fraction(candidate.level)
        self.level, self.above = low, high
        ends = [(iv.bounds_of_fraction(i.bounds[0]), iv.bounds_of_fraction(i.bounds[1])) for i in around.intervals]
        self.around = Span(np.array([a[0] for a, _ in ends]), np.array([b[1] for _, b in ends]))
        self.inner = Span(np.array([a[1] for a, _ in ends]), np.array([b[0] for _, b in ends]))
        self.size = len(self.names)
        self.basis = self._basis()
        self.start = self._start()

    def _basis(self) -> Array:
        """T with T'QT near I, Q the negated quadratic part of W, and T'PT near diagonal, P that of V."""
        zero = np.zeros((self.size, 1))
        found = self.tape.second_order(iv.point(zero))
        hessians = (0.5 * (found.hessians.lo + found.hessians.hi))[..., 0]
        root = np.linalg.cholesky(-hessians[1] / 2)
        inverse = np.linalg.inv(root)
        _, turn = np.linalg.eigh(inverse @ (hessians[0] / 2) @ inverse.T)
        return np.asarray(inverse.T @ turn, np.float64)

    def _start(self) -> Array:
        """Half widths in z of a box that holds T^-1 of the stated box.

        With an approximate inverse X and R = I - X T of row sums at most r, |T^-1 y - X y| <= r/(1 - r) max |X y|.
        """
        reach = np.maximum(-self.around.lo, self.around.hi)
        inverse = np.linalg.inv(self.basis)
        sizes = np.abs(inverse) @ np.abs(self.basis)
        residual = np.abs(np.eye(self.size) - inverse @ self.basis) + 4 * self.size * np.finfo(float).eps * sizes
        half = np.abs(inverse) @ reach
        if not (np.isfinite(half).all() and residual.sum(axis=1).max() < SLACK / 4):
            raise ArithmeticError("the coordinates of the interval check are too ill-conditioned")
        return half * (1 + SLACK) + SLACK * half.max()

    def gradient_vanishes(self) -> bool:
        """Exactly, by algebra."""
        zeros = {n: number(0) for n in self.names}
        parts = [self.candidate.function, *(differentiate(self.candidate.function, n) for n in self.names)]
        folded = [simplify(substitute(p, zeros)) for p in parts]
        return all(f.op == "number" and f.fraction == 0 for f in folded)

    def offsets(self, z: Span) -> Span:
        """Hull of T z (n x B)."""
        rows = []
        for i in range(self.size):
            total: Span | None = None
            for j in range(self.size):
                term = iv.mul(iv.point(np.array(self.basis[i, j])), Span(z.lo[j], z.hi[j]))
                total = term if total is None else iv.add(total, term)
            assert total is not None
            rows.append(total)
        return Span(np.stack([r.lo for r in rows]), np.stack([r.hi for r in rows]))

    def walls_are_higher(self) -> bool:
        """V > level on every face of the box."""
        for i in range(self.size):
            for bound in (self.around.lo[i], self.around.hi[i]):
                low, high = self.around.lo.copy(), self.around.hi.copy()
                low[i] = high[i] = bound
                # The face at an outward-rounded end lies outside the stated box; one inside it is looked at too.
                inner = self.inner.lo[i] if bound == self.around.lo[i] else self.inner.hi[i]
                low[i], high[i] = min(bound, inner), max(bound, inner)
                if not self._is_higher(Span(low[:, None], high[:, None])):
                    return False
        return True

    def _is_higher(self, box: Span) -> bool:
        """V > level on the whole box."""
        waiting, looked, width = [box], 0, (box.hi - box.lo).max()
        while waiting:
            batch = waiting.pop()
            looked += batch.lo.shape[1]
            first = self.value_tape.first_order(batch)
            centre = iv.middle(batch)
            middle = self.value_tape.values(iv.point(centre))
            lowest = np.maximum(first.values.lo[0], _mean_value_below(first.gradients, middle.values, batch, centre))
            open_ = ~(first.smooth & middle.valid & (lowest > self.above))
            rest = Span(batch.lo[:, open_], batch.hi[:, open_])
            count = rest.lo.shape[1]
            if looked + 2 * count > FACE_BOXES or (
                count and ((rest.hi - rest.lo).max(axis=0) < SMALLEST * width).any()
            ):
                return False
            if count:
                waiting += _batches(_halved(rest, rest.hi - rest.lo))
        return True

    def run(self, boxes: int) -> tuple[bool, int, str]:
        """Whether every box is closed, how many were looked at, and why not."""
        waiting, looked = [Span(-self.start[:, None], self.start[:, None])], 0
        while waiting:
            batch = waiting.pop()
            looked += batch.lo.shape[1]
            y = self.offsets(batch)
            outside = ((y.lo > self.around.hi[:, None]) | (y.hi < self.around.lo[:, None])).any(axis=0)
            batch = Span(batch.lo[:, ~outside], batch.hi[:, ~outside])
            if not batch.lo.shape[1]:
                continue
            closed = self._closed(batch)
            rest = Span(batch.lo[:, ~closed], batch.hi[:, ~closed])
            count = rest.lo.shape[1]
            if not count:
                continue
            if looked + sum(w.lo.shape[1] for w in waiting) + 2 * count > boxes:
                return False, looked, "the box budget is spent"
            if ((rest.hi - rest.lo).max(axis=0) < SMALLEST * self.start.max()).any():
                return False, looked, "a box too small to cut is not decided"
            waiting += _batches(_halved(rest, (rest.hi - rest.lo) / self.start[:, None]))
        return True, looked, ""

    def _closed(self, batch: Span) -> Mask:
        """Outside the set, or V > 0 > W, or closed at the equilibrium."""
        whole = self._second(batch)
        centre = iv.middle(batch)
        middle = self._second(iv.point(centre))
        valid = whole.twice & middle.twice
        lowest = np.maximum(whole.values.lo[0], _taylor(middle, whole, batch, centre, 0, below=True))
        highest = np.minimum(whole.values.hi[1], _taylor(middle, whole, batch, centre, 1, below=False))
        closed = valid & ((lowest > self.above) | ((lowest > 0) & (highest < 0)))
        rest = np.flatnonzero(~closed)
        if len(rest):
            hull = Span(np.minimum(batch.lo[:, rest], 0.0), np.maximum(batch.hi[:, rest], 0.0))
            found = self._second(hull)
            closed[rest] = found.twice & _is_definite(found.hessians, 0, 1.0) & _is_definite(found.hessians, 1, -1.0)
        return closed

    def _second(self, z: Span) -> SecondOrder:
        """Values, gradients and Hessians in z."""
        found = self.tape.second_order(self.offsets(z))
        gradients = [self._turned(Span(found.gradients.lo[k], found.gradients.hi[k])) for k in range(2)]
        hessians = [self._congruent(Span(found.hessians.lo[k], found.hessians.hi[k])) for k in range(2)]
        return SecondOrder(
            found.values, _stacked(gradients), _stacked(hessians), found.valid, found.smooth, found.twice, found.empty
        )  # fmt: skip

    def _turned(self, gradient: Span) -> Span:
        """T' g."""
        rows = []
        for i in range(self.size):
            terms = [iv.mul(iv.point(np.array(self.basis[j, i])), Span(gradient.lo[j], gradient.hi[j])) for j in
                     range(self.size)]  # fmt: skip
            rows.append(_sum(terms))
        return _stacked(rows)

    def _congruent(self, hessian: Span) -> Span:
        """T' H T."""
        columns = [self._turned(Span(hessian.lo[:, j], hessian.hi[:, j])) for j in range(self.size)]
        rows = [
            self._turned(_stacked([Span(c.lo[i], c.hi[i]) for c in columns])) for i in range(self.size)
        ]  # fmt: skip
        return _stacked(rows)


SLACK: Final = 1e-6
"""Widening of the start box in z, relative to its largest side: far above the rounding of what gives it."""


def _sum(terms: list[Span]) -> Span:
    total = terms[0]
    for term in terms[1:]:
        total = iv.add(total, term)
    return total


def _stacked(parts: Sequence[Span]) -> Span:
    return Span(np.stack([p.lo for p in parts]), np.stack([p.hi for p in parts]))


def _mean_value_below(gradients: Span, middle: Span, boxes: Span, centre: Array) -> Array:
    """A lower bound of the first expression by the mean value form."""
    total = middle.lo[0]
    for j in range(centre.shape[0]):
        step = Span(down(boxes.lo[j] - centre[j]), up(boxes.hi[j] - centre[j]))
        total = down(total + iv.mul(Span(gradients.lo[0, j], gradients.hi[0, j]), step).lo)
    return np.where(np.isfinite(total), total, -np.inf)


def _taylor(middle: SecondOrder, whole: SecondOrder, boxes: Span, centre: Array, k: int, *, below: bool) -> Array:
    """A bound of expression `k` by m + g d + d'Hd/2 with H over the box; minus or plus infinity where not finite."""
    half = up(np.maximum(boxes.hi - centre, centre - boxes.lo))
    total = middle.values.lo[k] if below else middle.values.hi[k]
    bend = np.zeros_like(total)
    for i in range(len(half)):
        slope = np.maximum(np.abs(middle.gradients.lo[k, i]), np.abs(middle.gradients.hi[k, i]))
        bend = up(bend + up(slope * half[i]))
        for j in range(len(half)):
            low, high = whole.hessians.lo[k, i, j], whole.hessians.hi[k, i, j]
            if i == j:  # d_i^2 lies in [0, half_i^2]
                worst = np.maximum(-low, 0.0) if below else np.maximum(high, 0.0)
            else:
                worst = np.maximum(np.abs(low), np.abs(high))
            bend = up(bend + up(up(worst * half[i]) * half[j]) / 2)
    result = down(total - bend) if below else up(total + bend)
    return np.where(np.isfinite(result), result, -np.inf if below else np.inf)


def _is_definite(hessians: Span, k: int, sign: float) -> Mask:
    """`sign` times the Hessian of expression `k` is positive definite, by diagonal dominance."""
    low, high = hessians.lo[k], hessians.hi[k]
    ok = np.ones(low.shape[2], bool)
    for i in range(low.shape[0]):
        diagonal = low[i, i] if sign > 0 else -high[i, i]
        rest = np.zeros(low.shape[2])
        for j in range(low.shape[0]):
            if j != i:
                rest = up(rest + np.maximum(np.abs(low[i, j]), np.abs(high[i, j])))
        ok &= diagonal > rest
    return ok


def _halved(boxes: Span, widths: Array) -> Span:
    axes = widths.argmax(axis=0)
    columns = np.arange(boxes.lo.shape[1])
    cut = (boxes.lo[axes, columns] + boxes.hi[axes, columns]) / 2
    left, right = boxes.hi.copy(), boxes.lo.copy()
    left[axes, columns] = cut
    right[axes, columns] = cut
    return Span(np.concatenate([boxes.lo, right], axis=1), np.concatenate([left, boxes.hi], axis=1))


def _batches(boxes: Span) -> list[Span]:
    count = boxes.lo.shape[1]
    return [Span(boxes.lo[:, k : k + BATCH], boxes.hi[:, k : k + BATCH]) for k in range(0, count, BATCH)]
