"""Second witness: the decrease of V on {0 < V <= c} by interval branch and bound on the original formulas.

It shares no polynomial algebra with the exact check: V' (or V(next) - V) is evaluated from the equations as
written, with enclosures of their values, gradients and Hessians over boxes, and nothing is left out but the
equilibrium itself.

W(y) = V' is expanded to second order in coordinates y = Tz in which the quadratic parts of V and of W are
nearly diagonal (T is any invertible double matrix; it only affects speed).  On a box with midpoint m and
half widths h, Taylor's theorem gives for the Hessian H of W in z, enclosed over the box as -2I + E,
  W(m + d) <= W(m) + sum_i (g_i d_i - d_i^2) + h'|E|h / 2,
and max over |d| <= h of g d - d^2 is g^2/4 if |g| <= 2h, else |g| h - h^2.
The equilibrium is closed by W(z) = z'H z / 2 on the hull of the box and zero (W and its gradient vanish at
the equilibrium exactly, V being quadratic and f zero there): row sums of |E| below 2 make H negative definite.
Method: interval branch and bound, R. E. Moore, R. B. Kearfott, M. J. Cloud 2009; second-order form derived here.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

import numpy as np
from numpy.typing import NDArray

from dossier.checks.intervals import Array, Mask, Span, add, down, is_sound, mul, point, square, sub, up
from dossier.checks.lyapunov import Ellipsoid, absolute_box, ellipsoid
from dossier.checks.tape import Tape
from dossier.model.ball import Ball
from dossier.model.case import NOMINAL, Case
from dossier.model.claim import CoverClaim, LyapunovClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.figures import figure
from dossier.model.finding import Finding, Premise, Result, weakest
from dossier.model.loop import model_hash, vector_field

BATCH: Final = 2_048
"""Boxes per batch: the working set stays in the cache."""
SMALLEST: Final = 1e-7
"""Boxes narrower than this share of the set are not cut further: undecided."""
DIAGONAL: Final = 2.0
"""The Hessian of W is written -DIAGONAL * I + E; near the equilibrium E is small in the chosen coordinates."""
SetClaim = LyapunovClaim | CoverClaim


@dataclass(frozen=True, slots=True)
class Verdict:
    """How the branch and bound ended: boxes closed, boxes looked at, and the reason where it did not finish."""

    proved: bool
    boxes: int
    reason: str


def check_cover(case: Case, equilibrium: Equilibrium, claim: SetClaim, boxes: int) -> Finding:
    """Verify T2 (T3) for the set of `claim` at the nominal combination, with at most `boxes` boxes."""
    premises = tuple(_premises(case, equilibrium, claim, boxes))
    result, strength = weakest(premises)
    theorem = "T3" if case.model.time == "sampled" else "T2"
    statement = (
        f"V falls everywhere in the set V ≤ {figure(claim.level)} but at {claim.equilibrium}, at the nominal parameters"
    )
    evidence = (claim.identifier,)
    return Finding(
        claim.identifier, "interval", result, strength, NOMINAL, theorem, statement, premises, evidence=evidence
    )


def _premises(case: Case, equilibrium: Equilibrium, claim: SetClaim, boxes: int) -> Iterator[Premise]:
    ident = claim.identifier
    meant = claim.model_hash == model_hash(case) and claim.equilibrium == equilibrium.identifier
    meant = meant and (claim.over == NOMINAL or not isinstance(claim, CoverClaim))
    shape = ellipsoid(claim, len(case.model.states)) if meant else None
    yield Premise(
        "d", "V = y'Py with P positive definite and a positive level, for this closed loop",
        "undecided" if shape is None else "proved", "exact", evidence=ident,
    )  # fmt: skip
    if shape is None:
        return
    place = absolute_box(equilibrium, case.model.state_names, shape.half_widths)
    inside = case.model.domain.contains(place, strictly=True)
    yield Premise(
        "b", "the set is compact and lies in the interior of the domain", "proved" if inside else "undecided",
        "exact", evidence=ident,
    )  # fmt: skip
    verdict = prove_decrease(case, equilibrium, shape, boxes)
    result: Result = "proved" if verdict.proved else "undecided"
    detail = verdict.reason or f"{verdict.boxes} boxes"
    yield Premise(
        "c",
        "the right-hand side is twice continuously differentiable on every box used",
        result,
        "enclosed",
        detail,
        ident,
    )
    yield Premise("e", "V falls everywhere in the set but at the equilibrium", result, "enclosed", detail, ident)


class Problem:
    """W and its derivatives over boxes of z; `basis` T, `curvature` enclosures of T'PT."""

    def __init__(self, case: Case, equilibrium: Equilibrium, shape: Ellipsoid) -> None:
        field = vector_field(case)
        self.sampled = field.sampled
        self.size = len(field.states)
        constants = {p.name: p.nominal for p in case.model.parameters}
        self.tape = Tape(field.equations, field.states, constants)
        self.centre = _spans([Ball(b.middle, b.radius) for b in equilibrium.state])
        self.matrix = _matrix_span(shape.matrix)
        self.level = down(np.array(float(shape.level)))
        self.level_above = up(np.array(float(shape.level)))
        self.basis = self._basis()
        self.form = self._congruence(_broadcast(self.matrix, 1))

    def _basis(self) -> Array:
        """T with T'QT near I and T'PT near diagonal, Q the negated quadratic part of W; else T'PT near I."""
        matrix = (self.matrix.lo + self.matrix.hi) / 2
        jacobian = self._jacobian()
        quadratic = (
            matrix - jacobian.T @ matrix @ jacobian if self.sampled else -(jacobian.T @ matrix + matrix @ jacobian)
        )
        try:
            root = np.linalg.cholesky((quadratic + quadratic.T) / 2)
            inverse = np.linalg.inv(root)
            _, turn = np.linalg.eigh(inverse @ matrix @ inverse.T)
            basis = inverse.T @ turn
        except np.linalg.LinAlgError:
            basis = np.linalg.inv(np.linalg.cholesky(matrix)).T
        return np.asarray(basis, dtype=np.float64)

    def _jacobian(self) -> Array:
        centre = Span(self.centre.lo.reshape(-1, 1), self.centre.hi.reshape(-1, 1))
        gradients = self.tape.first_order(centre).gradients
        return ((gradients.lo + gradients.hi) / 2)[:, :, 0]

    def offsets(self, z: Span) -> Span:
        """Hull of T z over boxes z (n x B)."""
        return _matrix_times(self.basis, z)

    def derivatives(self, z: Span) -> tuple[Span, Span, Span, Mask]:
        """W (B), its gradient (n x B) and Hessian (n x n x B) in z over boxes, and where they are sound."""
        y = self.offsets(z)
        x = Span(down(self.centre.lo[:, None] + y.lo), up(self.centre.hi[:, None] + y.hi))
        f = self.tape.second_order(x)
        combine = self._sampled if self.sampled else self._continuous
        value, gradient, hessian = combine(y, f.values, f.gradients, f.hessians)
        gradient_z = _transposed_times(self.basis, gradient)
        hessian_z = self._congruence(hessian)
        return value, gradient_z, hessian_z, f.twice & is_sound(value)

    def _continuous(self, y: Span, f: Span, jacobian: Span, hessians: Span) -> tuple[Span, Span, Span]:
        """W = 2 y'Pf: gradient 2(Pf + J'Py), Hessian 2(PJ + J'P + sum_i (Py)_i H_i)."""
        py = _apply(self.matrix, y)
        pf = _apply(self.matrix, f)
        value = _double(_dot(py, f))
        gradient = _double(add(pf, _transpose_apply(jacobian, py)))
        pj = _product(_broadcast(self.matrix, 1), jacobian)
        hessian = _double(add(add(pj, _swap(pj)), _weighted(py, hessians)))
        return value, gradient, hessian

    def _sampled(self, y: Span, f: Span, jacobian: Span, hessians: Span) -> tuple[Span, Span, Span]:
        """W = F'PF - y'Py with F = f - x*: gradient 2(J'PF - Py), Hessian 2(J'PJ + sum_i (PF)_i H_i - P)."""
        step = Span(down(f.lo - self.centre.hi[:, None]), up(f.hi - self.centre.lo[:, None]))
        py, pf = _apply(self.matrix, y), _apply(self.matrix, step)
        value = sub(_dot(pf, step), _dot(py, y))
        gradient = _double(sub(_transpose_apply(jacobian, pf), py))
        inner = _product(_swap(jacobian), _product(_broadcast(self.matrix, 1), jacobian))
        hessian = _double(sub(add(inner, _weighted(pf, hessians)), _broadcast(self.matrix, 1)))
        return value, gradient, hessian

    def _congruence(self, hessian: Span) -> Span:
        """T' H T."""
        basis = point(self.basis[:, :, None])
        return _product(_swap(basis), _product(hessian, basis))

    def least_function(self, z: Span) -> Array:
        """A lower bound of V over boxes: diagonal terms by squares, the small rest by magnitudes."""
        total = np.zeros(z.lo.shape[1])
        size = np.maximum(np.abs(z.lo), np.abs(z.hi))
        for i in range(self.size):
            squares = square(Span(z.lo[i], z.hi[i]))
            total = down(total + down(squares.lo * self.form.lo[i, i, 0]))
            for j in range(self.size):
                if i != j:
                    reach = max(abs(self.form.lo[i, j, 0]), abs(self.form.hi[i, j, 0]))
                    total = down(total - up(up(size[i] * size[j]) * reach))
        return total


def prove_decrease(case: Case, equilibrium: Equilibrium, shape: Ellipsoid, boxes: int) -> Verdict:
    """Branch and bound over the whole set; proved when every box is outside the set, decreasing, or closed at zero."""
    try:
        with np.errstate(all="ignore"):
            return _run(Problem(case, equilibrium, shape), boxes)
    except (ArithmeticError, ValueError) as error:
        return Verdict(False, 0, str(error))


def _run(problem: Problem, boxes: int) -> Verdict:
    half = _start(problem)
    waiting = [Span(-half[:, None], half[:, None])]
    looked = 0
    while waiting:
        batch = _take(waiting)
        looked += batch.lo.shape[1]
        inside = ~(problem.least_function(batch) > problem.level_above)
        batch = Span(batch.lo[:, inside], batch.hi[:, inside])
        if not batch.lo.shape[1]:
            continue
        closed, axes = _close(problem, batch)
        batch, axes = Span(batch.lo[:, ~closed], batch.hi[:, ~closed]), axes[~closed]
        if not batch.lo.shape[1]:
            continue
        if looked + sum(w.lo.shape[1] for w in waiting) + 2 * batch.lo.shape[1] > boxes:
            return Verdict(False, looked, "the box budget is spent")
        if ((batch.hi - batch.lo).max(axis=0) < SMALLEST * half.max()).any():
            return Verdict(False, looked, "a box too small to cut is not decided")
        waiting.append(_halves(batch, axes))
    return Verdict(True, looked, "")


def _start(problem: Problem) -> Array:
    """Half widths in z of a box that holds the set z'Fz <= c, F = T'PT.

    Scaled to unit diagonal, F is at least 1 minus its largest off-diagonal row sum (S. A. Gershgorin 1931),
    so z_i^2 <= c / (F_ii times that).  Raises ArithmeticError where the row sum is 1 or more, or where numbers
    leave the range in which they are as precise as that needs.
    """
    diagonal = np.array([problem.form.lo[i, i, 0] for i in range(problem.size)])
    if not (diagonal > LEAST_DIAGONAL).all():
        raise ArithmeticError("the coordinates of the interval check are badly scaled")
    size = np.maximum(np.abs(problem.form.lo[:, :, 0]), np.abs(problem.form.hi[:, :, 0]))
    scale = np.sqrt(diagonal)
    relative = size / np.outer(scale, scale)
    rest = relative.sum(axis=1) - np.diag(relative)
    least = 1.0 - rest.max() * (1 + SAFETY)
    if not least > SAFETY:
        raise ArithmeticError("the coordinates of the interval check are too ill-conditioned")
    half = np.sqrt(float(problem.level_above) / least) / scale * (1 + SAFETY)
    if not (np.isfinite(half) & (half > LEAST_DIAGONAL)).all():
        raise ArithmeticError("the coordinates of the interval check are badly scaled")
    return half


LEAST_DIAGONAL: Final = 1e-200
"""Diagonal entries and half widths below this would come near underflow in products; no scaled set has them."""

SAFETY: Final = 1e-9
"""Relative widening of the start box: far above the rounding of the few operations that give it."""


def _take(waiting: list[Span]) -> Span:
    """Up to `BATCH` boxes from the end of the list."""
    parts: list[Span] = []
    count = 0
    while waiting and count < BATCH:
        part = waiting.pop()
        room = BATCH - count
        if part.lo.shape[1] > room:
            waiting.append(Span(part.lo[:, room:], part.hi[:, room:]))
            part = Span(part.lo[:, :room], part.hi[:, :room])
        parts.append(part)
        count += part.lo.shape[1]
    return Span(np.concatenate([p.lo for p in parts], axis=1), np.concatenate([p.hi for p in parts], axis=1))


def _close(problem: Problem, batch: Span) -> tuple[Mask, NDArray[np.intp]]:
    """Which boxes are proved decreasing, and along which axis the others are best cut."""
    middle = (batch.lo + batch.hi) / 2
    half = up(np.maximum(batch.hi - middle, middle - batch.lo))
    _, _, hessian, valid = problem.derivatives(batch)
    value, gradient, _, valid_middle = problem.derivatives(point(middle))
    excess = _excess(hessian)
    bend = _row_products(excess, half)
    slope = np.maximum(np.abs(gradient.lo), np.abs(gradient.hi))
    gain = np.where(slope <= 2 * half, up(up(slope * slope) / 4), up(up(slope * half) - down(half * half)))
    total = value.hi
    for i in range(problem.size):
        total = up(total + up(gain[i] + up(up(bend[i] * half[i]) / 2)))
    closed = valid & valid_middle & (total < 0)
    rest = np.flatnonzero(~closed)
    if len(rest):
        closed[rest] = _closed_at_zero(problem, Span(batch.lo[:, rest], batch.hi[:, rest]))
    weight = np.nan_to_num(half * (bend + 2 * half), nan=np.inf, posinf=np.inf)
    flat = ~np.isfinite(weight).all(axis=0)
    relative = half / half.max(axis=1, keepdims=True)
    axes = np.where(flat, relative.argmax(axis=0), np.where(np.isfinite(weight), weight, 0).argmax(axis=0))
    return closed, axes


def _closed_at_zero(problem: Problem, boxes: Span) -> Mask:
    """W(z) = z'Hz/2 with H negative definite over the hull of each box and the origin."""
    hull = Span(np.minimum(boxes.lo, 0.0), np.maximum(boxes.hi, 0.0))
    _, _, hessian, valid = problem.derivatives(hull)
    excess = _excess(hessian)
    sums = np.zeros(excess.shape[1:])
    for j in range(problem.size):
        sums = up(sums + excess[:, j])
    return valid & (sums < DIAGONAL).all(axis=0)


def _excess(hessian: Span) -> Array:
    """|E| for H = -2I + E, rounded up (n x n x B)."""
    shift = DIAGONAL * np.eye(hessian.lo.shape[0])[:, :, None]
    moved = Span(down(hessian.lo + shift), up(hessian.hi + shift))
    return np.maximum(np.abs(moved.lo), np.abs(moved.hi))


def _row_products(matrix: Array, vector: Array) -> Array:
    """matrix (n x n x B) times vector (n x B), all non-negative, rounded up."""
    total = np.zeros(vector.shape)
    for j in range(vector.shape[0]):
        total = up(total + up(matrix[:, j] * vector[j][None, :]))
    return total


def _halves(boxes: Span, axes: NDArray[np.intp]) -> Span:
    columns = np.arange(boxes.lo.shape[1])
    cut = (boxes.lo[axes, columns] + boxes.hi[axes, columns]) / 2
    left_hi, right_lo = boxes.hi.copy(), boxes.lo.copy()
    left_hi[axes, columns] = cut
    right_lo[axes, columns] = cut
    return Span(np.concatenate([boxes.lo, right_lo], axis=1), np.concatenate([left_hi, boxes.hi], axis=1))


# --- small interval linear algebra over batches -----------------------------------------------------


def _spans(balls: list[Ball]) -> Span:
    """Balls as doubles, rounded outward."""
    return Span(np.array([_below(b.lower) for b in balls]), np.array([_above(b.upper) for b in balls]))


def _below(value: Fraction) -> float:
    result = float(value)
    return result if Fraction(result) <= value else float(np.nextafter(result, -np.inf))


def _above(value: Fraction) -> float:
    result = float(value)
    return result if Fraction(result) >= value else float(np.nextafter(result, np.inf))


def _matrix_span(matrix: tuple[tuple[Fraction, ...], ...]) -> Span:
    return Span(
        np.array([[_below(v) for v in row] for row in matrix]), np.array([[_above(v) for v in row] for row in matrix])
    )


def _broadcast(matrix: Span, count: int) -> Span:
    return Span(matrix.lo[:, :, None].repeat(count, axis=2), matrix.hi[:, :, None].repeat(count, axis=2))


def _swap(matrix: Span) -> Span:
    return Span(matrix.lo.swapaxes(0, 1), matrix.hi.swapaxes(0, 1))


def _double(a: Span) -> Span:
    return Span(2.0 * a.lo, 2.0 * a.hi)


def _sum(parts: list[Span]) -> Span:
    total = parts[0]
    for part in parts[1:]:
        total = add(total, part)
    return total


def _matrix_times(matrix: Array, vector: Span) -> Span:
    """A double matrix times interval vectors (n x B)."""
    size = matrix.shape[0]
    rows = [
        _sum([mul(point(np.array(matrix[i, j])), Span(vector.lo[j], vector.hi[j])) for j in range(size)])
        for i in range(size)
    ]
    return Span(np.stack([r.lo for r in rows]), np.stack([r.hi for r in rows]))


def _transposed_times(matrix: Array, vector: Span) -> Span:
    return _matrix_times(np.ascontiguousarray(matrix.T), vector)


def _apply(matrix: Span, vector: Span) -> Span:
    """An interval matrix (n x n) times interval vectors (n x B)."""
    size = matrix.lo.shape[0]
    rows = []
    for i in range(size):
        entries = [mul(Span(matrix.lo[i, j], matrix.hi[i, j]), Span(vector.lo[j], vector.hi[j])) for j in range(size)]
        rows.append(_sum(entries))
    return Span(np.stack([r.lo for r in rows]), np.stack([r.hi for r in rows]))


def _transpose_apply(matrices: Span, vector: Span) -> Span:
    """J'v for J (n x n x B) with J[i, j] = df_i/dx_j."""
    size = vector.lo.shape[0]
    rows = []
    for j in range(size):
        entries = [
            mul(Span(matrices.lo[i, j], matrices.hi[i, j]), Span(vector.lo[i], vector.hi[i])) for i in range(size)
        ]
        rows.append(_sum(entries))
    return Span(np.stack([r.lo for r in rows]), np.stack([r.hi for r in rows]))


def _dot(a: Span, b: Span) -> Span:
    return _sum([mul(Span(a.lo[i], a.hi[i]), Span(b.lo[i], b.hi[i])) for i in range(a.lo.shape[0])])


def _product(a: Span, b: Span) -> Span:
    """Matrix products over a batch (n x n x B, either batch may be 1)."""
    size = a.lo.shape[0]
    parts = [mul(Span(a.lo[:, k, None], a.hi[:, k, None]), Span(b.lo[None, k], b.hi[None, k])) for k in range(size)]
    return _sum(parts)


def _weighted(weights: Span, hessians: Span) -> Span:
    """sum_i w_i H_i for w (n x B) and H (n x n x n x B), first index the equation."""
    parts = [
        mul(Span(weights.lo[i][None, None], weights.hi[i][None, None]), Span(hessians.lo[i], hessians.hi[i]))
        for i in range(weights.lo.shape[0])
    ]
    return _sum(parts)
