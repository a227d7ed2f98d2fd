"""Seek P for the Lyapunov inequality of the linear part: nominal by the equation, over a box by a common P on cells."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

import cvxpy
import numpy as np
from flint import fmpq, fmpq_mat
from numpy.typing import NDArray

from dossier.model.attempt import Attempt
from dossier.model.ball import to_fmpq, to_fraction
from dossier.model.case import NOMINAL, Case, Scope
from dossier.model.claim import Matrix, MatrixCell, MatrixClaim, SpectralRegion
from dossier.model.equilibrium import Equilibrium
from dossier.model.loop import model_hash
from dossier.model.polynomial import terms
from dossier.model.region import Box, Interval
from dossier.model.spectral_form import LinearForms, linear_forms
from dossier.search.conic import solve
from dossier.search.effort import Effort
from dossier.search.rounding import power_of_two_near, rescale, to_matrix

Array = NDArray[np.float64]
VerifyCell = Callable[[LinearForms, MatrixCell, SpectralRegion, Fraction], bool]

ENTRY_BITS: Final = (24, 40, 64, 100, 160, 260, 400)
"""Rounding of P tried in turn: strongly non-normal matrices need many digits, ordinary ones few."""
LARGEST_EXACT: Final = 14
"""Up to this many states the Lyapunov equation is solved in rationals (n(n+1)/2 unknowns)."""
LEAST_MARGIN: Final = 1e-7
"""Margin of the conic program, in scaled units, below which rounding could undo the candidate."""
VERTICES: Final = 256
"""Most vertices of a cell put into one conic program."""


def seek_matrix(
    case: Case,
    equilibrium: Equilibrium,
    over: Scope,
    region: SpectralRegion,
    level: Fraction,
    effort: Effort,
    suffix: str,
    verify: VerifyCell,
) -> tuple[tuple[Attempt, ...], MatrixClaim | None]:
    """A claim whose every cell `verify` accepts, or None with the reason."""
    method = f"common quadratic function for the linear part ({region}, level {float(level):.6g})"
    subject = f"{case.name}.{suffix}"
    forms = linear_forms(case, equilibrium, over)
    if isinstance(forms, str):
        return (Attempt(subject, method, "out of reach", forms),), None
    if over != NOMINAL and not forms.constant_terms_vanish:
        return (Attempt(subject, method, "out of reach", "the equilibrium moves with the parameters"),), None
    varies = any(p.varies for p in case.model.parameters)
    spread = tuple(p.spread for p in case.model.parameters if p.name in forms.parameters)
    whole = Box(forms.parameters, spread)
    budget = 1 if varies else effort.cells
    done, why = _cells(forms, whole, region, level, budget, verify)
    work = {"cells": len(done)}
    if why:
        return (Attempt(subject, method, "no candidate", why, work),), None
    claim = MatrixClaim(
        subject, model_hash(case), over, "T1", equilibrium.identifier, region, level, tuple(done)
    )
    return (Attempt(subject, method, "found", f"{len(done)} cell{'' if len(done) == 1 else 's'}", work),), claim


def _cells(
    forms: LinearForms, whole: Box, region: SpectralRegion, level: Fraction, budget: int, verify: VerifyCell
) -> tuple[list[MatrixCell], str]:
    """Halve cells without a P along their most influential side until all have one or the budget is spent."""
    waiting, done = [whole], []
    while waiting:
        box = waiting.pop(0)
        cell = next((c for c in _candidates(forms, box, region, level) if verify(forms, c, region, level)), None)
        if cell is not None:
            done.append(cell)
            continue
        if not box.names or len(done) + len(waiting) + 2 > budget:
            return done, "no P was found for the whole box" if len(done) + len(waiting) == 0 else "cell budget spent"
        waiting.extend(_halves(forms, box))
    return done, ""


@dataclass(frozen=True)
class Linear:
    """Linear parts at the vertices of a cell in scaled states (V x n x n), and the scales."""

    matrices: Array
    scales: tuple[Fraction, ...]


def _candidates(forms: LinearForms, box: Box, region: SpectralRegion, level: Fraction) -> Iterator[MatrixCell]:
    if not box.names:
        yield from (MatrixCell(box, m) for m in _from_equation(forms, region, level))
        return
    linear = _linear(forms, box)
    p = _common(linear, region, float(level))
    if p is not None:
        for bits in ENTRY_BITS[:2]:
            inverse = tuple(1 / s for s in linear.scales)
            yield MatrixCell(box, rescale(to_matrix(p, bits), inverse))


def _entries(forms: LinearForms, point: tuple[Fraction, ...]) -> list[list[Fraction]]:
    """A at exact parameter values, uncertain constants at their midpoints."""
    size = len(forms.states)
    rest = (*point, *(b.middle for b in forms.balls.values()))

    def value(polynomial) -> dict[int, Fraction]:
        result: dict[int, Fraction] = {}
        for exponents, coefficient in terms(polynomial).items():
            total = coefficient
            for v, k in zip(rest, exponents[2 * size :], strict=True):
                total *= v**k
            column = next((i for i, k in enumerate(exponents[:size]) if k), -1)
            result[column] = result.get(column, Fraction(0)) + total
        return result

    denominator = value(forms.denominator).get(-1, Fraction(0)) or Fraction(1)
    rows = [value(r) for r in forms.rows]
    return [[row.get(j, Fraction(0)) / denominator for j in range(size)] for row in rows]


def balance(matrix: Array) -> tuple[Fraction, ...]:
    """Powers of two S so that S^-1 A S has rows and columns of similar size (B. Parlett and C. Reinsch 1969)."""
    size = len(matrix)
    scales = np.ones(size)
    for _ in range(10):
        for i in range(size):
            scaled = np.abs(matrix * scales[None, :] / scales[:, None])
            row, column = scaled[i].sum() - scaled[i, i], scaled[:, i].sum() - scaled[i, i]
            if row > 0 and column > 0:
                scales[i] *= float(power_of_two_near(float(np.sqrt(row / column))))
    return tuple(power_of_two_near(float(s)) for s in scales)


def _linear(forms: LinearForms, box: Box) -> Linear:
    corners = list(box.corners())[:VERTICES]
    exact = [_entries(forms, c) for c in corners]
    matrices = np.array([[[float(v) for v in row] for row in m] for m in exact])
    scales = balance(matrices.mean(axis=0))
    s = np.array([float(v) for v in scales])
    return Linear(matrices * s[None, None, :] / s[None, :, None], scales)


def _from_equation(forms: LinearForms, region: SpectralRegion, level: Fraction) -> Iterator[Matrix]:
    """P from the exact Lyapunov equation of the shifted (turned: by the conic program) linear part."""
    linear = _linear(forms, Box((), ()))
    inverse = tuple(1 / s for s in linear.scales)
    if region == "sector":
        p = _common(linear, region, float(level))
        if p is not None:
            yield from (rescale(to_matrix(p, bits), inverse) for bits in ENTRY_BITS)
        return
    if len(forms.states) > LARGEST_EXACT:
        p = _common(linear, region, float(level))
        if p is not None:
            yield from (rescale(to_matrix(p, bits), inverse) for bits in ENTRY_BITS[:3])
        return
    entries = _entries(forms, ())
    scaled = [
        [v * s / t for v, s in zip(row, linear.scales, strict=True)]
        for row, t in zip(entries, linear.scales, strict=True)
    ]
    solution = _solve_exactly(scaled, region, level)
    if solution is not None:
        yield from (rescale(_rounded(solution, bits), inverse) for bits in ENTRY_BITS)


def _solve_exactly(a: list[list[Fraction]], region: SpectralRegion, level: Fraction) -> Matrix | None:
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


def _rounded(matrix: Matrix, bits: int) -> Matrix:
    """Entries rounded to `bits` below the largest one."""
    largest = max(abs(v) for row in matrix for v in row) or Fraction(1)
    unit = Fraction(2) ** (largest.numerator.bit_length() - largest.denominator.bit_length() - bits)
    n = len(matrix)
    return tuple(
        tuple(round(matrix[min(i, j)][max(i, j)] / unit) * unit for j in range(n)) for i in range(n)
    )


def _common(linear: Linear, region: SpectralRegion, level: float) -> Array | None:
    """P with the widest margin at all vertices of the cell, by a conic program; None where there is none."""
    size = linear.matrices.shape[1]
    p = cvxpy.Variable((size, size), symmetric=True)
    margin = cvxpy.Variable()
    constraints = [p >> 1e-3 * np.eye(size), p << np.eye(size), margin <= 1.0]
    rate = float(np.max(np.abs(linear.matrices))) or 1.0
    for a in linear.matrices:
        constraints.append(_inequality(p, a, region, level, margin, rate))
    solved = solve(cvxpy.Problem(cvxpy.Maximize(margin), constraints))
    if not solved.has_values or p.value is None or margin.value is None or float(margin.value) < LEAST_MARGIN:
        return None
    value = np.asarray(p.value)
    return (value + value.T) / 2


def _inequality(
    p: cvxpy.Variable, a: Array, region: SpectralRegion, level: float, margin: cvxpy.Variable, rate: float
) -> cvxpy.Constraint:
    size = len(a)
    if region == "disc":
        return a.T @ p @ a - level**2 * p << -margin * np.eye(size)
    b = a / rate
    if region == "half-plane":
        return b.T @ p + p @ b + 2 * level / rate * p << -margin * np.eye(size)
    slope = level / np.sqrt(1 - level**2)
    real, cross = b.T @ p + p @ b, slope * (b.T @ p - p @ b)
    return cvxpy.bmat([[real, cross], [cross.T, real]]) << -margin * np.eye(2 * size)


def _halves(forms: LinearForms, box: Box) -> tuple[Box, Box]:
    """Cut the side whose ends change the linear part most, relative to its size."""
    centre = tuple(i.middle for i in box.intervals)
    base = np.array([[float(v) for v in row] for row in _entries(forms, centre)])
    scales = np.array([float(s) for s in balance(base)])
    effects = []
    for i, side in enumerate(box.intervals):
        ends = []
        for bound in side.bounds:
            point = tuple(bound if k == i else v for k, v in enumerate(centre))
            ends.append(np.array([[float(v) for v in row] for row in _entries(forms, point)]))
        effects.append(float(np.abs((ends[1] - ends[0]) * scales[None, :] / scales[:, None]).max()))
    widest = int(np.argmax(effects))
    side = box.intervals[widest]
    halves = (Interval(side.bounds[0], side.middle), Interval(side.middle, side.bounds[1]))
    first, second = (
        Box(box.names, tuple(h if k == widest else s for k, s in enumerate(box.intervals))) for h in halves
    )
    return first, second
