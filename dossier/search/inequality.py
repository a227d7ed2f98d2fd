"""The Lyapunov inequality of a region of the complex plane, in floating point: candidates for one common P.

Regions and forms as in `dossier.model.spectral_form`.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import lru_cache
from typing import Any, Final

import cvxpy
import numpy as np
import scipy.linalg
from numpy.typing import NDArray

from dossier.model.claim import SpectralRegion
from dossier.search.conic import solve

Array = NDArray[np.float64]

LEAST_MARGIN: Final = 1e-8
"""Margin of the conic program, relative to the fastest rate, below which rounding could undo the candidate."""

THINNEST: Final = 1e-4
"""Least eigenvalue of P where the largest is 1, in coordinates in which the centre of the cell is nearly normal."""

STEEPNESS: Final = (1.0, 1 / 4, 1 / 16, 1 / 64, 1 / 256)
"""Ratios of the geometric scaling of Schur vectors: one is steep enough for any matrix, the mildest is wanted."""

DOUBT: Final = 1e-3
"""Share of the largest eigenvalue by which a computed one may be off before it counts as outside.

Rounding moves an eigenvalue of multiplicity k by about eps^(1/k): a thousandth covers multiplicity five."""

PROGRAMS: Final = 32
"""Shapes of programs kept compiled: numbers of vertices and states, and regions."""

FIRST_CUTS: Final = 16
MORE_CUTS: Final = 8
"""Vertices in the first program, and most added per round: few of them bind."""

WORST_CONDITION: Final = 1e7
"""Eigenvectors worse conditioned than this count as defective; their P would be lost to rounding."""


def decay_matrix(a: Array, p: Array, region: SpectralRegion, level: float) -> Array:
    """The matrix that must be positive definite for the linear part `a` and `p`."""
    slope = level / np.sqrt(1 - level**2) if region == "sector" else 0.0
    return _form(a, slope * a, p, level, region, np.block)


def _form(a: Any, turned: Any, p: Any, level: Any, region: SpectralRegion, stack: Callable[..., Any]) -> Any:
    """The same for arrays or cvxpy expressions; `turned` is `a` times the tangent of the sector's angle."""
    if region == "disc":
        return stack([[level * p, a.T @ p], [p @ a, level * p]])
    real = -(a.T @ p + p @ a)
    if region == "half-plane":
        return real - 2 * level * p
    cross = turned.T @ p - p @ turned
    return stack([[real, cross], [cross.T, real]])


def is_inside(eigenvalues: NDArray[Any], region: SpectralRegion, level: float) -> bool:
    """Whether all lie in the region, as computed; strongly non-normal matrices are given the benefit of the doubt."""
    sizes = np.abs(eigenvalues)
    slack = DOUBT * float(np.max(sizes, initial=0.0))
    if region == "disc":
        return bool(np.all(sizes < level + slack))
    if region == "half-plane":
        return bool(np.all(np.real(eigenvalues) < -level + slack))
    return bool(np.all(np.real(eigenvalues) < -level * sizes + slack))


def normal_shapes(a: Array) -> Iterator[Array]:
    """P0 whose metric makes `a` nearly normal, mildest first: then P0 itself often solves the inequality.

    With eigenvectors V, Re((V V*)^-1); with Schur's form a = U T U*, Re(U diag(d^(-2k)) U*), whose off-diagonal
    entries shrink with d, also for defective matrices (R. A. Horn and C. R. Johnson, Matrix Analysis, 2.4.7).
    """
    vectors = np.linalg.eig(a).eigenvectors
    if np.linalg.cond(vectors) < WORST_CONDITION:
        inverse = np.linalg.inv(vectors)
        yield np.real(inverse.conj().T @ inverse)
    unitary = scipy.linalg.schur(a, output="complex")[1]
    powers = np.arange(len(a))
    for ratio in STEEPNESS:
        weights = ratio ** (-2.0 * powers)
        yield np.real(unitary @ np.diag(weights / weights.max()) @ unitary.conj().T)


def common_matrix(vertices: Array, centre: Array, region: SpectralRegion, level: float) -> Array | None:
    """P with the widest margin for all matrices `vertices` (V x n x n), None where the program finds none.

    Solved in coordinates in which `centre` is nearly normal, so that stiff and skew systems do no harm.
    """
    try:
        shape = next(normal_shapes(centre))
        factor = np.linalg.cholesky(shape / np.max(np.abs(shape))).T
        inverse = np.linalg.inv(factor)
    except np.linalg.LinAlgError:
        factor = inverse = np.eye(len(centre))
    turned = np.array([factor @ a @ inverse for a in vertices])
    p = _by_cuts(turned, region, level)
    if p is None:
        return None
    result = factor.T @ p @ factor
    return (result + result.T) / 2 / np.max(np.abs(result))


def affine_matrices(
    vertices: Array, signs: Array, centre: Array, region: SpectralRegion, level: float
) -> tuple[Array, Array] | None:
    """P0 (n x n) and P_k (k x n x n) such that P0 + sum of s_k P_k serves the vertex with the signs s (V x k).

    With the widest margin; None where the program finds none.  The centre must be served by P0.
    """
    try:
        shape = next(normal_shapes(centre))
        factor = np.linalg.cholesky(shape / np.max(np.abs(shape))).T
        inverse = np.linalg.inv(factor)
    except np.linalg.LinAlgError:
        factor = inverse = np.eye(len(centre))
    turned = [factor @ a @ inverse for a in (*vertices, centre)]
    rate = 1.0 if region == "disc" else float(np.max(np.abs(turned))) or 1.0
    size, free = len(centre), signs.shape[1]
    p0, margin = cvxpy.Variable((size, size), symmetric=True), cvxpy.Variable()
    parts = [cvxpy.Variable((size, size), symmetric=True) for _ in range(free)]
    scaled = level / rate if region == "half-plane" else level
    slope = level / np.sqrt(1 - level**2) if region == "sector" else 0.0
    constraints: list[Any] = [margin <= 1.0]
    for a, s in zip(turned, (*signs, np.zeros(free)), strict=True):
        p = p0 + sum(float(sign) * part for sign, part in zip(s, parts, strict=True))
        m = _form(a / rate, slope * a / rate, p, scaled, region, cvxpy.bmat)
        constraints += [p >> THINNEST * np.eye(size), p << np.eye(size)]
        constraints.append((m + m.T) / 2 >> margin * np.eye(m.shape[0]))
    solved = solve(cvxpy.Problem(cvxpy.Maximize(margin), constraints))
    if not solved.has_values or p0.value is None or float(margin.value or 0) < LEAST_MARGIN:
        return None
    found = [np.array(p0.value), *(np.array(part.value) for part in parts)]
    back = [factor.T @ p @ factor for p in found]
    back = [(p + p.T) / 2 / np.max(np.abs(back[0])) for p in back]
    if not np.isfinite(back).all() or np.linalg.eigvalsh(back[0])[0] <= 0:
        return None
    return back[0], np.array(back[1:])


def _by_cuts(vertices: Array, region: SpectralRegion, level: float) -> Array | None:
    """The widest margin over a growing choice of vertices: those that the last P served worst are added."""
    chosen = list(range(min(FIRST_CUTS, len(vertices))))
    while True:
        p = _widest_margin(vertices[chosen], region, level)
        if p is None or len(chosen) == len(vertices):
            return p
        least = np.array([np.linalg.eigvalsh(decay_matrix(a, p, region, level))[0] for a in vertices])
        worst = [int(i) for i in np.argsort(least) if least[i] <= 0 and int(i) not in chosen][:MORE_CUTS]
        if not worst:
            return p
        chosen += worst


def _widest_margin(vertices: Array, region: SpectralRegion, level: float) -> Array | None:
    rate = 1.0 if region == "disc" else float(np.max(np.abs(vertices))) or 1.0
    program = _program(len(vertices), vertices.shape[1], region)
    program.level.value = level / rate if region == "half-plane" else level
    slope = level / np.sqrt(1 - level**2) if region == "sector" else 0.0
    for place, turned, a in zip(program.vertices, program.turned, vertices, strict=True):
        place.value, turned.value = a / rate, slope * a / rate
    solved = solve(program.problem)
    p, margin = program.matrix.value, program.margin.value
    if not solved.has_values or p is None or margin is None or float(margin) < LEAST_MARGIN:
        return None
    found = np.array(p)
    # What a solver says is not believed, not even that it kept its constraints.
    return found if np.isfinite(found).all() and np.linalg.eigvalsh((found + found.T) / 2)[0] > 0 else None


@dataclass(frozen=True)
class _Program:
    """One compiled program per shape: cvxpy spends most of the time on compiling, not on solving."""

    problem: cvxpy.Problem
    matrix: cvxpy.Variable
    margin: cvxpy.Variable
    level: cvxpy.Parameter
    vertices: tuple[cvxpy.Parameter, ...]
    turned: tuple[cvxpy.Parameter, ...]


@lru_cache(maxsize=PROGRAMS)
def _program(count: int, size: int, region: SpectralRegion) -> _Program:
    p, margin = cvxpy.Variable((size, size), symmetric=True), cvxpy.Variable()
    level = cvxpy.Parameter(nonneg=True)
    vertices = tuple(cvxpy.Parameter((size, size)) for _ in range(count))
    turned = tuple(cvxpy.Parameter((size, size)) for _ in range(count))
    constraints = [p >> THINNEST * np.eye(size), p << np.eye(size), margin <= 1.0]
    for a, b in zip(vertices, turned, strict=True):
        m = _form(a, b, p, level, region, cvxpy.bmat)
        constraints.append((m + m.T) / 2 >> margin * np.eye(m.shape[0]))
    problem = cvxpy.Problem(cvxpy.Maximize(margin), constraints)
    return _Program(problem, p, margin, level, vertices, turned)
