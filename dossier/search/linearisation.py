"""Seek P for the Lyapunov inequality of the linear part: nominal by the equation, over a box by a common P on cells.

Candidates are floating point or rounded; the caller's `verify` decides.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import islice, product
from typing import Final

import numpy as np

from dossier.model.affine import spread_box
from dossier.model.attempt import Attempt
from dossier.model.case import NOMINAL, Case, Scope
from dossier.model.claim import Matrix, MatrixCell, MatrixClaim, SpectralRegion
from dossier.model.equilibrium import Equilibrium
from dossier.model.loop import model_hash
from dossier.model.polynomial import terms
from dossier.model.region import Box, Interval
from dossier.model.spectral_form import LinearForms, linear_forms
from dossier.search.balancing import balance, exactly, rounded_like, to_short
from dossier.search.effort import Effort
from dossier.search.inequality import Array, affine_matrices, common_matrix, decay_matrix, is_inside
from dossier.search.lyapunov_equation import from_equation
from dossier.search.rounding import rescale

VerifyCell = Callable[[LinearForms, MatrixCell, SpectralRegion, Fraction], bool]
Where = Callable[[Box], Equilibrium | None]
"""The equilibrium of the operating point for the combinations in a cell."""

COMMON_BITS: Final = (24, 40)
"""Rounding of a P found by a conic program, whose own digits end there."""
VERTICES: Final = 256
"""Most vertices of a cell put into one conic program."""
MOST_SLOPES: Final = 6
"""Parameters on which P may depend: 64 vertices in one conic program."""


@dataclass(frozen=True)
class _Family:
    """The linear part on any cell of the parameter box."""

    case: Case
    equilibrium: Equilibrium
    over: Scope
    whole: LinearForms | str
    where: Where | None

    def on(self, box: Box) -> LinearForms | str:
        """Forms for `box`, a part of the whole: derived again where they are sharper there."""
        if self.over != NOMINAL and not self.equilibrium.fixed_for_all and self.where is not None:
            place = self.where(box)
            if place is None:
                return "it is not proved where the equilibrium of a cell lies"
            return linear_forms(self.case, place, self.over, box)
        if isinstance(self.whole, LinearForms) and not self.whole.local:
            return replace(self.whole, box=box)
        return linear_forms(self.case, self.equilibrium, self.over, box) if box.names else self.whole


@dataclass(frozen=True)
class _Task:
    """`budget` counts cells; `common`: one P must serve all of them."""

    family: _Family
    region: SpectralRegion
    level: Fraction
    budget: int
    common: bool
    verify: VerifyCell


def seek_matrix(
    case: Case,
    equilibrium: Equilibrium,
    over: Scope,
    region: SpectralRegion,
    level: Fraction,
    effort: Effort,
    suffix: str,
    verify: VerifyCell,
    where: Where | None = None,
) -> tuple[tuple[Attempt, ...], MatrixClaim | None]:
    """A claim whose every cell `verify` accepts, or None with the reason; `where` tells of a moving equilibrium."""
    method = f"common quadratic function for the linear part ({region}, level {float(level):.6g})"
    subject = f"{case.name}.{suffix}"
    moves = over != NOMINAL and not equilibrium.fixed_for_all and where is not None
    forms = "" if moves else linear_forms(case, equilibrium, over)
    box = Box((), ()) if over == NOMINAL else spread_box(case)
    if isinstance(forms, str) and not box.names:
        return (Attempt(subject, method, "out of reach", forms),), None
    if isinstance(forms, LinearForms) and not forms.constant_terms_vanish:
        return (Attempt(subject, method, "out of reach", "the equilibrium moves with the parameters"),), None
    common = over != NOMINAL and any(p.varies and p.has_spread for p in case.model.parameters)
    task = _Task(_Family(case, equilibrium, over, forms, where), region, level, effort.cells, common, verify)
    cells, why = _cells(task, box)
    work = {"cells": len(cells)}
    if why:
        return (Attempt(subject, method, "no candidate", why, work),), None
    claim = MatrixClaim(
        subject, model_hash(case), over, "T1", equilibrium.identifier, region, level, tuple(cells)
    )  # fmt: skip
    remark = f"{len(cells)} cell{'' if len(cells) == 1 else 's'}"
    return (Attempt(subject, method, "found", remark, work),), claim


def _cells(task: _Task, whole: Box) -> tuple[list[MatrixCell], str]:
    """Halve cells without a P along their most influential side until all have one or the budget is spent."""
    waiting, done = [whole], []
    while waiting:
        box = waiting.pop(0)
        forms = task.family.on(box)
        if isinstance(forms, LinearForms):
            outside = _combination_outside(forms, task.region, float(task.level))
            if outside is not None:
                return done, f"an eigenvalue lies outside the region at {outside} (floating point)"
            room = task.budget - len(done) - len(waiting)
            tried = (
                _with(MatrixCell(box, matrix), task, room) for matrix in _candidates(forms, task.region, task.level)
            )
            found = next((cells for cells in tried if cells), None)
            if found is None and not task.common:
                tried = (_with(cell, task, room) for cell in _affine_candidates(forms, box, task))
                found = next((cells for cells in tried if cells), None)
            if found is not None:
                done.extend(found)
                continue
        if task.common or not box.names or len(done) + len(waiting) + 2 > task.budget:
            return done, _reason(task, box, forms, first=not done and box == whole)
        waiting.extend(_halves(forms, box))
    return done, ""


def _combination_outside(forms: LinearForms, region: SpectralRegion, level: float) -> str | None:
    """The first corner, or the centre, at which an eigenvalue is not inside the region: then no P exists."""
    middle = tuple(i.middle for i in forms.box.intervals)
    for point in (middle, *islice(forms.box.corners(), VERTICES)):
        if not is_inside(np.linalg.eigvals(_floats(_entries(forms, point))), region, level):
            named = (f"{n} = {float(v):.6g}" for n, v in zip(forms.box.names, point, strict=True))
            return ", ".join(named) or "the nominal parameters"
    return None


def _reason(task: _Task, box: Box, forms: LinearForms | str, *, first: bool) -> str:
    if isinstance(forms, str):
        return forms
    if task.common and box.names:
        return "no single P was found for the whole range, which a parameter that varies during a motion needs"
    return "no P was found" if first else "the budget of parameter cells is spent"


def _with(candidate: MatrixCell, task: _Task, room: int) -> list[MatrixCell]:
    """Cells with the same P that make up the candidate's, halved where the proof needs it; empty where it fails."""
    waiting, cells = [candidate.parameters], []
    while waiting:
        part = waiting.pop()
        forms = task.family.on(part)
        middle = tuple(i.middle for i in part.intervals)
        cell = MatrixCell(part, candidate.at(middle), candidate.slopes)
        if isinstance(forms, LinearForms) and task.verify(forms, cell, task.region, task.level):
            cells.append(cell)
        elif not part.names or len(cells) + len(waiting) + 2 > room or not _plausible(forms, cell, task):
            return []
        else:
            waiting.extend(_halves(forms, part))
    return cells


def _affine_candidates(forms: LinearForms, box: Box, task: _Task) -> Iterator[MatrixCell]:
    """A P that is affine in the parameters, rounded, for the unscaled states."""
    free = [k for k, side in enumerate(box.intervals) if side.width]
    if not free or len(free) > MOST_SLOPES:
        return
    middle = [i.middle for i in box.intervals]
    centre = _entries(forms, tuple(middle))
    scales = balance(_floats(centre))
    back = tuple(1 / s for s in scales)
    signs, vertices = [], []
    for choice in product((-1, 1), repeat=len(free)):
        point = list(middle)
        for k, sign in zip(free, choice, strict=True):
            point[k] = box.intervals[k].bounds[sign > 0]
        signs.append(choice)
        vertices.append(_scaled(_entries(forms, tuple(point)), scales))
    if not np.isfinite(vertices).all():
        return
    found = affine_matrices(
        np.array(vertices), np.array(signs, float), _scaled(centre, scales), task.region, float(task.level)
    )
    if found is None:
        return
    size = len(forms.states)
    nothing = tuple((Fraction(0),) * size for _ in range(size))
    base = exactly(found[0])
    for bits in COMMON_BITS:
        slopes = [nothing] * len(box.names)
        for k, part in zip(free, found[1], strict=True):
            half = box.intervals[k].width / 2
            rounded = rescale(rounded_like(exactly(part), base, bits), back)
            slopes[k] = tuple(tuple(v / half for v in row) for row in rounded)
        yield MatrixCell(box, rescale(to_short(found[0], bits), back), tuple(slopes))


def _plausible(forms: LinearForms | str, cell: MatrixCell, task: _Task) -> bool:
    """The inequality holds at the centre of the cell, in floating point: only then can smaller cells help."""
    if isinstance(forms, str):
        return True
    a = _entries(forms, tuple(i.middle for i in cell.parameters.intervals))
    scales = balance(_floats(a))
    p = _floats(rescale(cell.matrix, scales))
    m = decay_matrix(_scaled(a, scales), p / np.max(np.abs(p)), task.region, float(task.level))
    return bool(np.linalg.eigvalsh(m)[0] > 0)


def _candidates(forms: LinearForms, region: SpectralRegion, level: Fraction) -> Iterator[Matrix]:
    """Rounded P for the unscaled states."""
    corners = list(islice(forms.box.corners(), VERTICES))
    exact = [_entries(forms, c) for c in corners]
    centre = exact[0] if not forms.box.names else _entries(forms, tuple(i.middle for i in forms.box.intervals))
    scales = balance(_floats(centre))
    back = tuple(1 / s for s in scales)
    if not forms.box.names:
        scaled = [[v * s / t for v, s in zip(row, scales, strict=True)] for row, t in zip(centre, scales, strict=True)]
        yield from (rescale(p, back) for p in from_equation(scaled, region, level))
    vertices = np.array([_scaled(a, scales) for a in exact])
    p = common_matrix(vertices, _scaled(centre, scales), region, float(level))
    if p is not None:
        yield from (rescale(to_short(p, bits), back) for bits in COMMON_BITS)


def _entries(forms: LinearForms, point: tuple[Fraction, ...]) -> list[list[Fraction]]:
    """A at exact parameter values, uncertain constants at their midpoints; a pole counts as a denominator of one."""
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


def _floats(matrix: Matrix | list[list[Fraction]]) -> Array:
    return np.array([[float(v) for v in row] for row in matrix])


def _scaled(matrix: list[list[Fraction]], scales: tuple[Fraction, ...]) -> Array:
    """S^-1 A S."""
    s = np.array([float(v) for v in scales])
    return _floats(matrix) * s[None, :] / s[:, None]


def _halves(forms: LinearForms | str, box: Box) -> tuple[Box, Box]:
    """Cut the side whose ends change the linear part most, relative to its size; the relatively widest if unknown."""
    effects = [float(i.width / max(abs(b) for b in i.bounds)) for i in box.intervals]
    if isinstance(forms, LinearForms):
        centre = tuple(i.middle for i in box.intervals)
        scales = balance(_floats(_entries(forms, centre)))
        effects = []
        for i, side in enumerate(box.intervals):
            points = [tuple(bound if k == i else v for k, v in enumerate(centre)) for bound in side.bounds]
            low, high = (_scaled(_entries(forms, p), scales) for p in points)
            effects.append(float(np.abs(high - low).max()))
    widest = int(np.argmax(effects))
    side = box.intervals[widest]
    halves = (Interval(side.bounds[0], side.middle), Interval(side.middle, side.bounds[1]))
    first, second = (
        Box(box.names, tuple(h if k == widest else s for k, s in enumerate(box.intervals))) for h in halves
    )
    return first, second
