"""P of the nominal linear part without a conic program: Lyapunov's equation, exact where it is short, or a shape.

A. M. Lyapunov 1892; for maps P. Stein, J. Res. NBS 48, 1952.
"""

from __future__ import annotations

import warnings
from collections.abc import Iterator
from fractions import Fraction
from typing import Final

import numpy as np
import scipy.linalg
from flint import fmpq, fmpq_mat

from dossier.model.ball import to_fmpq, to_fraction
from dossier.model.claim import Matrix, SpectralRegion
from dossier.search.balancing import shortened, to_short
from dossier.search.inequality import Array, normal_shapes

FLOAT_BITS: Final = (24, 48)
"""Rounding of floating-point solutions: short first, then all the digits they have."""

EXACT_BITS: Final = (64, 100, 160, 260, 400)
"""Rounding of the exact solution, which strongly non-normal matrices need."""

LARGEST_EXACT: Final = 14
"""Up to this many states the equation is solved in rationals (n(n+1)/2 unknowns)."""


def from_equation(a: list[list[Fraction]], region: SpectralRegion, level: Fraction) -> Iterator[Matrix]:
    """Candidates for P of balanced `a`, the cheapest and shortest first."""
    floating = np.array([[float(v) for v in row] for row in a])
    shapes = list(normal_shapes(floating)) if region == "sector" else _in_floating_point(floating, region, float(level))
    for bits in FLOAT_BITS:
        yield from (to_short(p, bits) for p in shapes if np.isfinite(p).all() and np.all(np.diag(p) > 0))
    if region != "sector" and len(a) <= LARGEST_EXACT:
        solution = solve_exactly(a, region, level)
        if solution is not None and all(solution[i][i] > 0 for i in range(len(a))):
            yield from (shortened(solution, bits) for bits in EXACT_BITS)


def _in_floating_point(a: Array, region: SpectralRegion, level: float) -> list[Array]:
    unit = np.eye(len(a))
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # an ill-conditioned equation gives a candidate that fails its check
        try:
            if region == "disc":
                return [scipy.linalg.solve_discrete_lyapunov(a.T / level, unit)]
            return [scipy.linalg.solve_continuous_lyapunov((a + level * unit).T, -unit)]
        except (np.linalg.LinAlgError, ValueError):
            return []


def solve_exactly(a: list[list[Fraction]], region: SpectralRegion, level: Fraction) -> Matrix | None:
    """P of B'P + PB = -I with B = A + level I, or of A'PA/level^2 - P = -I; None where singular."""
    n = len(a)
    pairs = [(i, j) for i in range(n) for j in range(i, n)]
    index = {p: k for k, p in enumerate(pairs)} | {(j, i): k for k, (i, j) in enumerate(pairs)}
    system = fmpq_mat(len(pairs), len(pairs))
    right = fmpq_mat(len(pairs), 1)
    for row, (i, j) in enumerate(pairs):
        right[row, 0] = fmpq(-1 if i == j else 0)
        if region == "disc":
            for k in range(n):
                for m in range(n):
                    system[row, index[k, m]] += to_fmpq(a[k][i] * a[m][j] / level**2)
            system[row, index[i, j]] -= 1
        else:
            for k in range(n):
                system[row, index[k, j]] += to_fmpq(a[k][i] + (level if k == i else 0))
                system[row, index[i, k]] += to_fmpq(a[k][j] + (level if k == j else 0))
    try:
        solved = system.solve(right)
    except ZeroDivisionError:
        return None
    return tuple(tuple(to_fraction(solved[index[i, j], 0]) for j in range(n)) for i in range(n))
