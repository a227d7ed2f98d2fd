"""Candidates for V = z'Pz: from the Lyapunov equation, and from a conic program that holds region and limits.

The conic program asks for everything at once (region inside {V <= 1}, the set inside every slab, decrease
of the linear part at all parameter vertices, decrease at a pool of points) and its pool grows by the worst
points found inside the set: S. Boyd et al., Linear Matrix Inequalities in System and Control Theory, 1994,
for the inequalities; the cuts are a cutting-plane loop.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Final, Literal

import cvxpy
import numpy as np
from numpy.typing import NDArray
from scipy.linalg import LinAlgError, solve_continuous_lyapunov, solve_discrete_lyapunov

from dossier.model.attempt import Attempt, Ending
from dossier.search.conic import solve
from dossier.search.effort import Effort
from dossier.search.goal import Goal
from dossier.search.offsets import ScaledLoop

Array = NDArray[np.float64]
Objective = Literal["widest margin", "smallest set"]

LEAST_EIGENVALUE: Final = 1e-6
"""P is kept this far from singular in scaled coordinates, where its entries are of order one."""
LEAST_MARGIN: Final = 1e-5
"""A decrease margin below this share of the rate does not survive rounding: no candidate."""
KEPT_MARGIN: Final = 0.25
"""Share of the widest possible margin that the smallest set must keep: thin margins need long Gram proofs."""
VIOLATION: Final = -1e-9
"""Slope above which an attack point becomes a cut: the next program must push it below."""
NEW_CUTS: Final = 25
"""Cuts added per round; more slow the program without sharpening it."""
STALE: Final = 1.1
"""Cuts at points with V above this lie outside the present set and are dropped."""
REGION_SHARE: Final = 0.99
"""V asked for at the region's corners: the level may then come out a hundredth below 1 and still cover them."""
SLAB_SHARE: Final = 1.005
"""The set at level 1 is asked to stay this much inside the slabs, so that rounding cannot push it out."""
CORNERS: Final = 512
"""Region corners used (half of them, V being even); more than nine states use the first ones only."""


@dataclass(frozen=True, slots=True)
class Candidate:
    """P in scaled coordinates with {z'Pz <= 1} meant as the set, and where it came from."""

    matrix: Array
    method: str


def from_lyapunov_equation(loop: ScaledLoop) -> Iterator[Candidate]:
    """P of A'P + PA = -Q (continuous) or A'PA - P = -Q (sampled) at the mean linear part, for two Q."""
    size = loop.size
    a = loop.linear.mean(axis=0)
    for name, q in (("identity", np.eye(size)), ("balanced", np.diag(1.0 / np.maximum(np.abs(a).sum(1), 1e-3)))):
        try:
            p = solve_discrete_lyapunov(a.T, q) if loop.field.sampled else solve_continuous_lyapunov(a.T, -q)
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
    rows: list[tuple[float, ...]] = []
    for corner in goal.region.corners():
        row = tuple(float(c) / s for c, s in zip(corner, scales, strict=True))
        if tuple(-v for v in row) not in rows:
            rows.append(row)
        if len(rows) >= CORNERS:
            break
    return np.array(rows).reshape(len(rows), loop.size)


def slab_vectors(loop: ScaledLoop, goal: Goal) -> Array:
    """w with |w'z| <= 1 for every slab that binds."""
    rows = [
        [float(w) * float(s) / float(slab.reach) for w, s in zip(slab.weights, loop.scales, strict=True)]
        for slab in goal.slabs
        if slab.reach is not None and slab.reach > 0
    ]
    return np.array(rows).reshape(len(rows), loop.size)


@dataclass
class Pool:
    """Points z with their images: 2 z'P image < 0 (or image'P image < z'Pz) must hold at each."""

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
    loop: ScaledLoop, goal: Goal, objective: Objective, effort: Effort, subject: str
) -> tuple[Attempt, Candidate | None]:
    """Grow the pool until no attack inside {V <= 1} finds an increase, or no P is left, or the rounds are spent."""
    generator = np.random.default_rng(len(goal.slabs) + 7 * loop.size)
    pool = Pool(np.zeros((0, loop.size)), np.zeros((0, loop.size)))
    corners, slabs = region_corners(loop, goal), slab_vectors(loop, goal)
    method = f"quadratic, conic program, {objective}"
    ending: Ending = "budget spent"
    remark = "an increase of V was still found inside the set"
    candidate, programs, least = None, 0, LEAST_MARGIN
    if objective == "smallest set":
        _, widest, _ = _program(loop, corners, slabs, pool, "widest margin", LEAST_MARGIN)
        least = max(LEAST_MARGIN, KEPT_MARGIN * widest)
    for _ in range(effort.rounds):
        programs += 1
        matrix, _, why = _program(loop, corners, slabs, pool, objective, least)
        if matrix is None:
            ending, remark = "infeasible", f"no quadratic V for {len(pool.points)} points: {why}"
            candidate = None
            break
        candidate = Candidate(matrix, method)
        worst = attack(loop, matrix, effort.samples, generator)
        if not len(worst[0]):
            ending, remark = "found", "no increase of V found inside the set"
            break
        pool.drop_outside(matrix)
        pool.add(*worst)
    work = {"programs": programs, "points": len(pool.points)}
    return Attempt(subject, method, ending, remark, work), candidate


def _program(
    loop: ScaledLoop, corners: Array, slabs: Array, pool: Pool, objective: Objective, least: float
) -> tuple[Array | None, float, str]:
    """P, its decrease margin and the solver's remark; None where there is no P with margin at least `least`."""
    size = loop.size
    p = cvxpy.Variable((size, size), symmetric=True)
    margin = cvxpy.Variable()
    flat = cvxpy.vec(p, order="C")
    constraints = [p >> LEAST_EIGENVALUE * np.eye(size), margin <= 1.0]
    if len(corners):
        constraints.append(_products(corners, corners) @ flat <= REGION_SHARE)
    constraints += [p - SLAB_SHARE * np.outer(w, w) >> 0 for w in slabs]
    constraints += [_linear_decrease(loop, p, a) << -margin * np.eye(size) for a in loop.linear]
    if len(pool.points):
        lengths = (pool.points**2).sum(1)
        constraints.append((_pool_rows(loop, pool) / lengths[:, None]) @ flat <= -margin * POOL_SHARE)
    if objective == "widest margin":
        goal = cvxpy.Maximize(margin + (0 if len(corners) else -cvxpy.trace(p)))
    else:
        constraints.append(margin >= least)
        goal = cvxpy.Maximize(cvxpy.log_det(p) / size + LOG_MARGIN_WEIGHT * margin)
    solved = solve(cvxpy.Problem(goal, constraints))
    if not solved.has_values or p.value is None or not np.isfinite(p.value).all():
        return None, 0.0, solved.remark
    if margin.value is None or float(margin.value) < least / 2:
        return None, 0.0, "the decrease margin is too thin"
    return np.asarray((p.value + p.value.T) / 2), float(margin.value), solved.remark


POOL_SHARE: Final = 0.2
"""Decrease asked for at pool points, as a share of the linear part's margin: thin there is enough to prove."""
LOG_MARGIN_WEIGHT: Final = 1e-2
"""Small weight of the margin beside the volume, so that the smallest set keeps some decrease in hand."""


def _pool_rows(loop: ScaledLoop, pool: Pool) -> Array:
    """Rows whose product with vec(P) is the change of V at each point of the pool."""
    if loop.field.sampled:
        return _products(pool.images, pool.images) - _products(pool.points, pool.points)
    return _products(pool.points, pool.images) + _products(pool.images, pool.points)


def _products(left: Array, right: Array) -> Array:
    """Rows vec(l r') so that rows @ vec(P) = l'Pr."""
    return (left[:, :, None] * right[:, None, :]).reshape(len(left), -1)


def _linear_decrease(loop: ScaledLoop, p: cvxpy.Variable, a: Array) -> cvxpy.Expression:
    return a.T @ p @ a - p if loop.field.sampled else a.T @ p + p @ a


def attack(loop: ScaledLoop, matrix: Array, samples: int, generator: np.random.Generator) -> tuple[Array, Array]:
    """The worst distinct points of {z'Pz <= 1} where V does not fall, with their images; empty when none is found."""
    points, parameters = sample_set(loop, matrix, samples, generator)
    for spread in (0.3, 0.1, 0.03):
        slopes = np.nan_to_num(loop.slope(matrix, points, parameters), nan=np.inf)
        best = np.argsort(slopes)[::-1][: max(samples // 40, 50)]
        near = points[best].repeat(6, axis=0)
        near = near + spread * np.abs(near).max() * generator.standard_normal(near.shape)
        inside = np.sqrt(np.maximum((near @ matrix * near).sum(1), 1.0))
        points = np.vstack([points, near / inside[:, None]])
        parameters = np.vstack([parameters, parameters[best].repeat(6, axis=0)])
    slopes = np.nan_to_num(loop.slope(matrix, points, parameters), nan=np.inf)
    chosen: list[int] = []
    for index in np.argsort(slopes)[::-1][:2000]:
        if slopes[index] <= VIOLATION or len(chosen) >= NEW_CUTS:
            break
        apart = all(np.abs(points[index] - points[j]).max() > 0.05 * np.abs(points[j]).max() for j in chosen)
        if apart:
            chosen.append(int(index))
    images = loop.image(points[chosen], parameters[chosen]) if chosen else np.zeros((0, loop.size))
    usable = np.isfinite(images).all(axis=1)
    return points[chosen][usable].reshape(-1, loop.size), images[usable]


def sample_set(loop: ScaledLoop, matrix: Array, count: int, generator: np.random.Generator) -> tuple[Array, Array]:
    """Points of {z'Pz <= 1}, denser near the boundary, with parameter rows."""
    root = np.linalg.cholesky(np.linalg.inv(matrix))
    directions = generator.standard_normal((count, loop.size))
    directions /= np.linalg.norm(directions, axis=1)[:, None]
    radii = generator.random(count) ** 0.25
    return (directions * radii[:, None]) @ root.T, loop.draw(count, generator)
