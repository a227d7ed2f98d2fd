"""Candidates for V = z'Pz: from the Lyapunov equation, and from a conic program that holds region and limits.

The conic program asks for everything at once (region inside {V <= 1}, the set inside every slab, decrease
of the linear part at the parameter vertices, decrease at a pool of points) and its pool grows by the worst
points found inside the set.  S. Boyd, L. El Ghaoui, E. Feron, V. Balakrishnan, Linear Matrix Inequalities
in System and Control Theory, SIAM 1994, chapters 3 and 5, for the inequalities; the cuts are a cutting-plane loop.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Final, Literal

import cvxpy
import numpy as np
from numpy.typing import NDArray
from scipy.linalg import LinAlgError, solve_continuous_lyapunov, solve_discrete_lyapunov

from dossier.model.attempt import Attempt
from dossier.search.conic import solve
from dossier.search.effort import Effort
from dossier.search.goal import Goal
from dossier.search.offsets import ScaledLoop

Array = NDArray[np.float64]
Objective = Literal["tightest bounds", "smallest set", "widest margin"]

LEAST_EIGENVALUE: Final = 1e-6
"""P is kept this far from singular in scaled coordinates, where its entries are of order one."""
LEAST_MARGIN: Final = 1e-4
"""Decrease margin, as a share of the slowest decay, asked for beside `Wish.share` so that an optimum is interior."""
MARGIN_WEIGHT: Final = 1e-2
"""Small weight of the margin beside the size of the set, so that the set keeps some decrease in hand."""
INSIDE: Final = 1 + 1e-6
"""Slabs are tightened by this factor: rounding of P must not push the set over them."""
NEW_CUTS: Final = 25
"""Cuts added per round; more slow the program without sharpening it."""
STALE: Final = 1.1
"""Cuts at points with V above this lie outside the present set and are dropped."""
CORNERS: Final = 512
"""Region corners used; more than nine states use the first ones only."""
LINEAR_PARTS: Final = 48
"""Linear parts per program: the worst under the last P, of up to 512 vertices."""
KEPT: Final = 200
"""Points kept from one refinement of an attack to the next."""
SPREADS: Final = (0.4, 0.2, 0.1, 0.05, 0.02, 0.01)
"""Steps of the refinements, in units of the set's radius."""
APART: Final = 0.05
"""Cuts closer than this share of their size to a worse one add nothing."""


@dataclass(frozen=True, slots=True)
class Candidate:
    """P in scaled coordinates with {z'Pz <= 1} meant as the set, and where it came from."""

    matrix: Array
    method: str


@dataclass(frozen=True, slots=True)
class Wish:
    """What one program asks for: V falls at least at `share` of the slowest decay, `scale` x region is covered."""

    objective: Objective
    share: float
    scale: float = 1.0

    @property
    def method(self) -> str:
        """Words for the record."""
        part = "" if self.scale == 1 else f", {self.scale:.3g} of the region"
        return f"quadratic, conic program, {self.objective}, {self.share:g} of the slowest decay{part}"


def from_lyapunov_equation(loop: ScaledLoop) -> Iterator[Candidate]:
    """P of A'P + PA = -Q (continuous) or A'PA - P = -Q (sampled) at the mean linear part, for a few Q.

    Where the linear part decides nothing, the form that is round in scaled offsets is the only guess.
    """
    size = loop.size
    if not loop.is_settling:
        yield Candidate(np.eye(size), "sum of squared scaled offsets")
        return
    a = loop.linear.mean(axis=0)
    balance = np.diag(1.0 / np.maximum(np.abs(a).sum(1), 1e-3))
    for name, q in (("identity", np.eye(size)), ("balanced", balance)):
        try:
            p = solve_discrete_lyapunov(a.T, q) if loop.sampled else solve_continuous_lyapunov(a.T, -q)
        except (LinAlgError, ValueError):
            continue
        p = (p + p.T) / 2
        if np.isfinite(p).all() and np.linalg.eigvalsh(p).min() > 0:
            yield Candidate(p / np.abs(p).max(), f"Lyapunov equation, {name} right-hand side")


def region_corners(loop: ScaledLoop, goal: Goal) -> Array:
    """Corners of the region in scaled coordinates, one of each opposite pair where the region is symmetric."""
    if not goal.region.is_bounded:
        return np.zeros((0, loop.size))
    scales = [float(s) for s in loop.scales]
    rows: dict[tuple[float, ...], None] = {}
    for corner in goal.region.corners():
        row = tuple(float(c) / s for c, s in zip(corner, scales, strict=True))
        if tuple(-v for v in row) not in rows:
            rows[row] = None
        if len(rows) >= CORNERS:
            break
    return np.array(list(rows)).reshape(len(rows), loop.size)


def slab_vectors(loop: ScaledLoop, goal: Goal) -> Array:
    """w with |w'z| <= 1 for every slab that binds."""
    rows = [
        [float(w) * float(s) / float(slab.reach) * INSIDE for w, s in zip(slab.weights, loop.scales, strict=True)]
        for slab in goal.slabs
        if slab.reach is not None and slab.reach > 0
    ]
    return np.array(rows).reshape(len(rows), loop.size)


@dataclass
class Pool:
    """Points z with their images: V must fall at each."""

    points: Array
    images: Array

    def add(self, points: Array, images: Array) -> None:
        """Append rows."""
        self.points = np.vstack([self.points, points])
        self.images = np.vstack([self.images, images])

    def drop_outside(self, matrix: Array) -> None:
        """Forget points that the present set no longer holds."""
        keep = (self.points @ matrix * self.points).sum(1) <= STALE
        self.points, self.images = self.points[keep], self.images[keep]


def from_program(
    loop: ScaledLoop, goal: Goal, wish: Wish, effort: Effort, subject: str, pool: Pool
) -> tuple[Attempt, Candidate | None]:
    """Grow `pool` until no attack inside {V <= 1} finds a rise, or no P is left, or the rounds are spent.

    A candidate is returned in the last case too: a smaller level of it may do.
    """
    generator = np.random.default_rng(len(goal.slabs) + 7 * loop.size)
    corners, slabs = region_corners(loop, goal) * wish.scale, slab_vectors(loop, goal)
    candidate = None
    for rounds in range(1, effort.rounds + 1):
        linear = _worst_linear_parts(loop, candidate)
        matrix, why = _program(loop, corners, slabs, pool, linear, wish)
        work = {"programs": rounds, "points": len(pool.points)}
        if matrix is None:
            remark = f"no quadratic V for {len(pool.points)} points: {why}"
            return Attempt(subject, wish.method, "infeasible", remark, work), None
        candidate = Candidate(matrix, wish.method)
        points, images = attack(loop, matrix, wish.share / 2, effort.samples, generator)
        if not len(points):
            return Attempt(subject, wish.method, "found", "no rise of V found inside the set", work), candidate
        pool.drop_outside(matrix)
        pool.add(points, images)
    remark = "a rise of V was still found inside the set"
    return Attempt(subject, wish.method, "budget spent", remark, {"programs": effort.rounds}), candidate


def _worst_linear_parts(loop: ScaledLoop, candidate: Candidate | None) -> Array:
    """All linear parts where they are few, else those that decrease V least."""
    if len(loop.linear) <= LINEAR_PARTS:
        return loop.linear
    if candidate is None:
        step = len(loop.linear) // LINEAR_PARTS
        return loop.linear[::step]
    products = np.swapaxes(loop.linear, 1, 2) @ candidate.matrix
    forms = products @ loop.linear - candidate.matrix if loop.sampled else products + np.swapaxes(products, 1, 2)
    worst = np.linalg.eigvalsh(forms)[:, -1]
    return loop.linear[np.argsort(-worst, kind="stable")[:LINEAR_PARTS]]


def _program(
    loop: ScaledLoop, corners: Array, slabs: Array, pool: Pool, linear: Array, wish: Wish
) -> tuple[Array | None, str]:
    size, decay = loop.size, loop.decay
    p = cvxpy.Variable((size, size), symmetric=True)
    margin = cvxpy.Variable()
    flat = cvxpy.vec(p, order="C")
    kept = (wish.share if loop.sampled else 2 * wish.share) * decay
    constraints = [p >> LEAST_EIGENVALUE * np.eye(size), margin <= 1.0, margin >= LEAST_MARGIN]
    if len(corners):
        constraints.append(_products(corners, corners) @ flat <= 1.0)
    constraints += [p - np.outer(w, w) >> 0 for w in slabs]
    for a in linear:
        change = a.T @ p @ a - p if loop.sampled else a.T @ p + p @ a
        constraints.append(change + kept * p << -margin * decay * np.eye(size))
    if len(pool.points):
        constraints.append(_pool_rows(loop, pool, kept) @ flat <= -margin * decay)
    solved = solve(cvxpy.Problem(_objective(p, margin, slabs, len(corners), wish, constraints), constraints))
    if not solved.has_values or p.value is None or not np.isfinite(p.value).all():
        return None, solved.remark
    matrix = np.asarray((p.value + p.value.T) / 2)
    return (matrix, solved.remark) if np.linalg.eigvalsh(matrix)[0] > 0 else (None, "P came out singular")


def _objective(
    p: cvxpy.Variable, margin: cvxpy.Variable, slabs: Array, corners: int, wish: Wish, constraints: list
) -> cvxpy.Maximize:
    if wish.objective == "widest margin":
        return cvxpy.Maximize(margin + (0 if corners else -MARGIN_WEIGHT * cvxpy.trace(p)))
    if wish.objective == "smallest set":
        return cvxpy.Maximize(cvxpy.log_det(p) / p.shape[0] + MARGIN_WEIGHT * margin)
    reach = cvxpy.Variable(len(slabs))
    for k, w in enumerate(slabs):  # w'P^-1 w <= reach by the Schur complement
        block = cvxpy.bmat([[p, w[:, None]], [w[None, :], cvxpy.reshape(reach[k], (1, 1), order="C")]])
        constraints.append(block >> 0)
    return cvxpy.Maximize(-cvxpy.sum(reach) / len(slabs) + MARGIN_WEIGHT * margin)


def _pool_rows(loop: ScaledLoop, pool: Pool, kept: float) -> Array:
    """Rows r with r @ vec(P) = (change of V at the point + kept x V)/|z|^2."""
    points, images = pool.points, pool.images
    own = _products(points, points)
    mixed = _products(images, images) - own if loop.sampled else _products(points, images) + _products(images, points)
    return (mixed + kept * own) / (points**2).sum(1)[:, None]


def _products(left: Array, right: Array) -> Array:
    """Rows vec(l r') so that rows @ vec(P) = l'Pr."""
    return (left[:, :, None] * right[:, None, :]).reshape(len(left), -1)


def attack(
    loop: ScaledLoop, matrix: Array, share: float, samples: int, generator: np.random.Generator
) -> tuple[Array, Array]:
    """The worst distinct points of {z'Pz <= 1} where V falls slower than `share` of the decay, with their images."""
    points, parameters = worst_points(loop, matrix, share, samples, generator)
    slopes = loop.slope(matrix, points, parameters, share)
    chosen: list[int] = []
    for index in np.argsort(-slopes, kind="stable"):
        if slopes[index] <= 0 or len(chosen) >= NEW_CUTS:
            break
        apart = all(np.abs(points[index] - points[j]).max() > APART * np.abs(points[j]).max() for j in chosen)
        if apart:
            chosen.append(int(index))
    images = loop.image(points[chosen], parameters[chosen])
    usable = np.isfinite(images).all(axis=1)
    return points[chosen][usable], images[usable]


def worst_points(
    loop: ScaledLoop, matrix: Array, share: float, samples: int, generator: np.random.Generator
) -> tuple[Array, Array]:
    """Points of {z'Pz <= 1} with parameter rows where V falls slowest: a sample, refined by shrinking steps."""
    root = np.linalg.cholesky(np.linalg.inv(matrix)).T
    points, parameters = sample_set(loop, matrix, samples, generator)
    for spread in (0.0, *SPREADS):
        if spread:
            near = points.repeat(6, axis=0) + spread * generator.standard_normal((6 * len(points), loop.size)) @ root
            near = near / np.sqrt(np.maximum((near @ matrix * near).sum(1), 1.0))[:, None]
            moved = redraw(loop, parameters.repeat(6, axis=0), generator)
            points, parameters = np.vstack([points, near]), np.vstack([parameters, moved])
        slopes = loop.slope(matrix, points, parameters, share)
        best = np.argsort(-slopes, kind="stable")[:KEPT]
        points, parameters = points[best], parameters[best]
    return points, parameters


def redraw(loop: ScaledLoop, parameters: Array, generator: np.random.Generator) -> Array:
    """`parameters` with a third of the rows drawn anew."""
    fresh = generator.random((len(parameters), 1)) < 1 / 3
    return np.where(fresh, loop.draw(len(parameters), generator), parameters)


def sample_set(loop: ScaledLoop, matrix: Array, count: int, generator: np.random.Generator) -> tuple[Array, Array]:
    """Points of {z'Pz <= 1}, denser near the boundary, with parameter rows."""
    root = np.linalg.cholesky(np.linalg.inv(matrix))
    directions = generator.standard_normal((count, loop.size))
    directions /= np.linalg.norm(directions, axis=1)[:, None]
    radii = generator.random(count) ** 0.25
    return (directions * radii[:, None]) @ root.T, loop.draw(count, generator)
