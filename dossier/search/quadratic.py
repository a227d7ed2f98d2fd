"""Seek a quadratic Lyapunov certificate: candidate P, largest promising level, Gram witnesses, short rationals.

Nothing found here is believed; the caller passes `verify`, which is asked before a claim is returned, so
that a candidate lost to rounding is replaced by a more modest one instead of failing later.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Final

import numpy as np
from flint import fmpq, fmpq_mat
from numpy.typing import NDArray

from dossier.model.attempt import Attempt
from dossier.model.case import Case, Scope
from dossier.model.claim import CoverClaim, LyapunovClaim
from dossier.model.decrease import decrease_form
from dossier.model.equilibrium import Equilibrium
from dossier.model.loop import model_hash
from dossier.model.polynomial import Exponents, NotRational
from dossier.search.effort import Effort
from dossier.search.ellipsoid import (
    Candidate,
    from_lyapunov_equation,
    from_program,
    region_corners,
    sample_set,
)
from dossier.search.goal import Goal
from dossier.search.multipliers import seek_witnesses
from dossier.search.offsets import ScaledLoop, scaled_loop
from dossier.search.rounding import to_matrix

Array = NDArray[np.float64]
Verify = Callable[[LyapunovClaim], bool]

MATRIX_BITS: Final = 24
"""Rounding of P relative to its largest scaled entry: short coefficients that keep six digits."""
LEVEL_BITS: Final = 30
LEVEL_SHARES: Final = tuple(
    Fraction(share) for share in ("1", "0.9999", "0.999", "0.99", "0.95", "0.9", "0.8", "0.6", "0.4", "0.2", "0.1")
)
"""Shares of the sampled level that are tried, largest first."""
SAMPLED_BACKOFF: Final = 0.9998
"""Share of the sampled level at which the first proof is tried: the sample may have missed the worst direction."""
RADII: Final = 48
"""Steps along a ray when the level is sampled; each crossing is then bisected."""
BISECTIONS: Final = 40
LARGE: Final = 1e6
"""Level (in units of the region's own) treated as unbounded by the samples."""
KEEP_OFF: Final = Fraction(1, 10**9)
"""Share by which a slab is kept away from, so that strict containment survives rounding."""


@dataclass(frozen=True, slots=True)
class Reach:
    """A claim and how much of the region it covers (1: all)."""

    claim: LyapunovClaim
    scale: float


def seek_quadratic(
    case: Case,
    equilibrium: Equilibrium,
    over: Scope,
    goal: Goal,
    effort: Effort,
    suffix: str,
    verify: Verify,
) -> tuple[tuple[Attempt, ...], tuple[LyapunovClaim, ...]]:
    """The first verified claim that covers the region inside all slabs, else the one that covers most of it.

    Where the region is covered and quantities are to be bounded (there are slabs), a second claim with the
    same V at the least level that still covers the region follows, as its bounds are tighter.
    """
    subject = goal.serves[0] if goal.serves else case.name
    try:
        loop = scaled_loop(case, equilibrium, over)
    except ArithmeticError as error:
        return (Attempt(subject, "quadratic", "out of reach", str(error)),), ()
    if isinstance(loop, NotRational):
        return (Attempt(subject, "quadratic, Gram matrices", "out of reach", loop.reason),), ()
    if len(loop.spread.names) and not loop.field.constant_terms_vanish:
        why = "the equilibrium moves with the parameters"
        return (Attempt(subject, "quadratic over tolerances", "out of reach", why),), ()
    attempts: list[Attempt] = []
    best: Reach | None = None
    for attempt, candidate in _candidates(loop, goal, effort, subject):
        if candidate is None:
            attempts.append(attempt)
            continue
        tried, reach = _prove(loop, equilibrium, over, goal, effort, suffix, verify, candidate, attempt)
        attempts.append(tried)
        if reach is not None and (best is None or reach.scale > best.scale):
            best = reach
        if best is not None and best.scale >= 1:
            break
    if best is None:
        return tuple(attempts), ()
    claims = [best.claim]
    if best.scale >= 1 and goal.slabs:
        claims += _tight(loop, equilibrium, over, goal, effort, suffix, verify, best.claim)
    return tuple(attempts), tuple(claims)


def _tight(
    loop: ScaledLoop,
    equilibrium: Equilibrium,
    over: Scope,
    goal: Goal,
    effort: Effort,
    suffix: str,
    verify: Verify,
    claim: LyapunovClaim,
) -> list[LyapunovClaim]:
    """The same V at the least level that covers the region, where that can be proved too."""
    need = max(_value(claim.function, corner) for corner in goal.region.corners())
    if need >= claim.level:
        return []
    tight, _, _ = prove_level(
        loop, equilibrium, over, claim.function, need, replace(effort, levels=1), f"{suffix}-tight", verify
    )
    return [] if tight is None else [tight]


def _value(function: Mapping[Exponents, Fraction], point: tuple[Fraction, ...]) -> Fraction:
    total = Fraction(0)
    for exponents, coefficient in function.items():
        term = coefficient
        for value, count in zip(point, exponents, strict=True):
            term *= value**count
        total += term
    return total


def _candidates(
    loop: ScaledLoop, goal: Goal, effort: Effort, subject: str
) -> Iterator[tuple[Attempt, Candidate | None]]:
    if goal.region.is_bounded:
        yield from_program(loop, goal, "smallest set", effort, subject)
        yield from_program(loop, goal, "widest margin", effort, subject)
    for candidate in from_lyapunov_equation(loop):
        yield Attempt(subject, f"quadratic, {candidate.method}", "found", "candidate only"), candidate


def _prove(
    loop: ScaledLoop,
    equilibrium: Equilibrium,
    over: Scope,
    goal: Goal,
    effort: Effort,
    suffix: str,
    verify: Verify,
    candidate: Candidate,
    attempt: Attempt,
) -> tuple[Attempt, Reach | None]:
    """Round P, then try levels from the largest promising one downward until a proof is verified."""
    function = rounded_function(candidate.matrix, loop.scales)
    bound = level_bound(loop, function, candidate.matrix, goal, effort)
    found, why, programs = prove_level(loop, equilibrium, over, function, bound, effort, suffix, verify)
    work = {**attempt.work, "levels": programs}
    if found is None:
        return replace(attempt, ending="no candidate", remark=f"no level could be proved: {why}", work=work), None
    scale = float(np.sqrt(float(found.level) / _worst_corner(loop, goal, candidate.matrix)))
    remark = f"proved at a level that covers {min(scale, 99):.4g} of the region"
    return replace(attempt, ending="found", remark=remark, work=work), Reach(found, scale)


def _worst_corner(loop: ScaledLoop, goal: Goal, matrix: Array) -> float:
    corners = region_corners(loop, goal)
    if not len(corners):
        return 1.0
    return float(np.max((corners @ matrix * corners).sum(1))) or 1.0


def rounded_function(matrix: Array, scales: tuple[Fraction, ...]) -> dict[Exponents, Fraction]:
    """V over unscaled offsets with short rational coefficients near z' `matrix` z."""
    rounded = to_matrix(matrix, MATRIX_BITS)
    size = len(scales)
    function: dict[Exponents, Fraction] = {}
    for i in range(size):
        for j in range(i, size):
            value = rounded[i][j] / (scales[i] * scales[j]) * (1 if i == j else 2)
            if value:
                function[tuple(int(k == i) + int(k == j) for k in range(size))] = value
    return function


def level_bound(
    loop: ScaledLoop, function: Mapping[Exponents, Fraction], matrix: Array, goal: Goal, effort: Effort
) -> Fraction:
    """The largest level worth trying: inside the slabs (exactly) and below the sampled first increase of V."""
    limits = slab_levels(function, goal)
    most = float(min(limits, default=Fraction(LARGE))) if limits else LARGE * _worst_corner(loop, goal, matrix)
    sampled = Fraction(round(sampled_level(loop, matrix, most, effort) * 2**LEVEL_BITS), 2**LEVEL_BITS)
    level = min([sampled, *(limit * (1 - KEEP_OFF) for limit in limits)])
    return Fraction(int(level * 2**LEVEL_BITS), 2**LEVEL_BITS)


def slab_levels(function: Mapping[Exponents, Fraction], goal: Goal) -> list[Fraction]:
    """Levels at which the set reaches the slabs: max w'y over y'Py <= c is sqrt(c w'P^-1 w)."""
    size = len(next(iter(function)))
    matrix = fmpq_mat(size, size)
    for exponents, coefficient in function.items():
        i, j = (k for k, count in enumerate(exponents) for _ in range(count))
        half = fmpq(coefficient.numerator, 2 * coefficient.denominator)
        matrix[i, j] += half
        matrix[j, i] += half
    if matrix.det() == 0:
        return [Fraction(0)]
    inverse = matrix.inv()
    levels = []
    for slab in goal.slabs:
        weights = fmpq_mat(size, 1, [fmpq(w.numerator, w.denominator) for w in slab.weights])
        spread = (weights.transpose() * inverse * weights)[0, 0]
        if slab.reach is not None and spread > 0:
            levels.append(slab.reach**2 / Fraction(int(spread.p), int(spread.q)))
    return levels


def sampled_level(loop: ScaledLoop, matrix: Array, most: float, effort: Effort) -> float:
    """Least V at which V stops falling along sampled rays, times `SAMPLED_BACKOFF`; `most` where it never does."""
    generator = np.random.default_rng(loop.size)
    directions, parameters = sample_set(loop, matrix, effort.samples, generator)
    directions = directions / np.sqrt((directions @ matrix * directions).sum(1))[:, None]
    level = most
    for _ in range(SHARPEN):
        radius, index = _first_rise(loop, matrix, directions, parameters, np.sqrt(level))
        if index is None or radius * radius >= level:
            break
        level = radius * radius
        base = directions[index]
        near = base + 0.1 * np.abs(base).max() * generator.standard_normal(directions.shape)
        directions = near / np.sqrt((near @ matrix * near).sum(1))[:, None]
        parameters = np.where(generator.integers(0, 2, len(parameters))[:, None] == 1, parameters[index], parameters)
    return level if level == most else level * SAMPLED_BACKOFF


SHARPEN: Final = 6
"""Times the sample is concentrated around the worst direction so far."""


def _first_rise(
    loop: ScaledLoop, matrix: Array, directions: Array, parameters: Array, most: float
) -> tuple[float, int | None]:
    """The least radius in (0, most] at which V does not fall, over all rays, and its ray."""
    best, ray = float(most), None
    for step in range(1, RADII + 1):
        radius = most * step / RADII
        if radius > best:
            break
        slopes = np.nan_to_num(loop.slope(matrix, directions * radius, parameters), nan=np.inf)
        rising = np.flatnonzero(slopes >= 0)
        if not len(rising):
            continue
        low = np.full(len(rising), most * (step - 1) / RADII)
        high = np.full(len(rising), radius)
        for _ in range(BISECTIONS):
            middle = (low + high) / 2
            points = directions[rising] * middle[:, None]
            up = np.nan_to_num(loop.slope(matrix, points, parameters[rising]), nan=np.inf) >= 0
            high, low = np.where(up, middle, high), np.where(up, low, middle)
        place = int(np.argmin(low))
        return float(low[place]), int(rising[place])
    return best, ray


def prove_level(
    loop: ScaledLoop,
    equilibrium: Equilibrium,
    over: Scope,
    function: Mapping[Exponents, Fraction],
    bound: Fraction,
    effort: Effort,
    suffix: str,
    verify: Verify,
) -> tuple[LyapunovClaim | None, str, int]:
    """The largest level among shares of `bound` at which witnesses exist and `verify` agrees; why not; levels tried."""
    form = decrease_form(loop.field, function)
    sign = _denominator_sign(loop) ** form.denominator_power
    why = "no level is left inside the slabs" if bound <= 0 else "no share was tried"
    for tried, share in enumerate(LEVEL_SHARES[: max(effort.levels, 1)], start=1):
        level = bound * share
        if level <= 0:
            break
        witnesses = seek_witnesses(loop.field, form, sign, function, level, loop.spread, loop.scales)
        if isinstance(witnesses, str):
            why = witnesses
            continue
        theorem = "T3" if loop.field.sampled else "T2"
        claim = LyapunovClaim(
            f"{loop.case.name}.{suffix}", model_hash(loop.case), over, theorem, equilibrium.identifier, "quadratic",
            function, level, loop.spread, witnesses,
        )  # fmt: skip
        if verify(claim):
            return claim, "", tried
        why = "the exact check did not accept the rounded certificate"
    return None, why, min(len(LEVEL_SHARES), effort.levels)


def _denominator_sign(loop: ScaledLoop) -> int:
    """Sign of the denominator at the equilibrium and the first vertex; the check proves it everywhere."""
    rest = [float(loop.field.balls[n].middle) for n in loop.field.ring.names[loop.size + len(loop.spread.names) :]]
    row = np.array([[0.0] * loop.size + list(loop.vertices[0]) + rest])
    return 1 if loop.denominator(row)[0] >= 0 else -1


def largest_level(
    case: Case,
    equilibrium: Equilibrium,
    over: Scope,
    function: Mapping[Exponents, Fraction],
    goal: Goal,
    effort: Effort,
    verify: Verify,
    suffix: str = "V2",
) -> tuple[tuple[Attempt, ...], LyapunovClaim | None]:
    """For a given quadratic V: the largest level that could be proved inside the goal's slabs."""
    loop = scaled_loop(case, equilibrium, over)
    if isinstance(loop, NotRational):
        return (Attempt(case.name, "quadratic, given V", "out of reach", loop.reason),), None
    matrix = _scaled_matrix(function, loop.scales)
    bound = level_bound(loop, function, matrix, goal, effort)
    claim, why, levels = prove_level(loop, equilibrium, over, function, bound, effort, suffix, verify)
    remark = why or "proved"
    attempt = Attempt(case.name, "quadratic, given V", "found" if claim else "no candidate", remark, {"levels": levels})
    return (attempt,), claim


def _scaled_matrix(function: Mapping[Exponents, Fraction], scales: tuple[Fraction, ...]) -> Array:
    matrix = np.zeros((len(scales), len(scales)))
    for exponents, coefficient in function.items():
        i, j = (k for k, count in enumerate(exponents) for _ in range(count))
        matrix[i, j] += float(coefficient * scales[i] * scales[j]) / 2
        matrix[j, i] += float(coefficient * scales[i] * scales[j]) / 2
    return matrix


def seek_cover_candidate(
    case: Case, equilibrium: Equilibrium, function: Mapping[Exponents, Fraction], level: Fraction, suffix: str
) -> CoverClaim:
    """A set for the interval check, where the equations are no quotients of polynomials."""
    theorem = "T3" if case.model.time == "sampled" else "T2"
    return CoverClaim(
        f"{case.name}.{suffix}", model_hash(case), "nominal", theorem, equilibrium.identifier, function, level, 0
    )
