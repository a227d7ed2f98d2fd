"""Seek a quadratic Lyapunov certificate: candidate P, promising level, Gram witnesses, short rationals.

Nothing found here is believed; the caller passes `verify`, which is asked before a claim is returned, so
that a candidate lost to rounding is replaced by a more modest one instead of failing later.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Final, Literal

import numpy as np
from numpy.typing import NDArray

from dossier.model.attempt import Attempt
from dossier.model.case import Case, Scope
from dossier.model.claim import LyapunovClaim
from dossier.model.decrease import decrease_form
from dossier.model.equilibrium import Equilibrium
from dossier.model.loop import model_hash
from dossier.model.polynomial import Exponents, NotRational, OffsetField
from dossier.search.effort import Effort
from dossier.search.ellipsoid import (
    Candidate,
    Objective,
    Pool,
    Wish,
    from_lyapunov_equation,
    from_program,
    region_corners,
)
from dossier.search.goal import Goal
from dossier.search.level import sampled_level, slab_levels
from dossier.search.multipliers import NoWitness, Target, seek_witnesses
from dossier.search.offsets import ScaledLoop, denominator_sign, scaled_loop
from dossier.search.rounding import power_of_two_near, rounded_function, scaled_matrix, short_below, value_at

Array = NDArray[np.float64]
Verify = Callable[[LyapunovClaim], bool]
Function = Mapping[Exponents, Fraction]

DECREASE_SHARES: Final = (0.02, 0.15, 0.4)
"""Shares of the slowest decay V must keep: more is asked for when less could not be proved."""
REGION_SHARES: Final = (0.85, 0.7, 0.5, 0.25, 0.1)
"""Parts of a region asked for when the whole cannot be had."""
LEVEL_SHARES: Final = tuple(Fraction(s) for s in ("1", "0.9998", "0.999", "0.99"))
"""Shares of the promising level tried before bisection: mostly the first or second is proved."""
SAMPLED: Final = Fraction(99999, 100000)
"""Share of the sampled level taken as promising: the sample may have missed the very worst ray."""
KEEP_OFF: Final = Fraction(1, 10**9)
"""Share by which a slab is kept away from, so that containment is strict."""
FARTHEST: Final = 16
"""A set is not grown beyond this multiple of the region: it would only worsen the numbers."""
UNBOUNDED_LEVEL: Final = Fraction(10**6)
"""Level at which a search for the largest level stops where nothing bounds it."""
LEAST_SHARE: Final = 1e-5
"""Share of the promising level at which bisection begins where nothing is proved yet."""
CLOSE_ENOUGH: Final = 1.01
"""Ratio of a refused to a proved level at which bisection ends."""


@dataclass(frozen=True)
class Task:
    """One search: the loop, what is wanted of it, and who is asked before a claim is returned."""

    loop: ScaledLoop
    field: OffsetField
    equilibrium: Equilibrium
    over: Scope
    goal: Goal
    effort: Effort
    suffix: str
    verify: Verify

    @property
    def subject(self) -> str:
        """What the attempts are about."""
        return self.goal.serves[0] if self.goal.serves else self.loop.case.name


@dataclass(frozen=True, slots=True)
class Proved:
    """The largest verified claim if any, how many levels were tried, and why the last one was refused."""

    claim: LyapunovClaim | None
    levels: int
    why: str = ""


def seek_quadratic(
    case: Case, equilibrium: Equilibrium, over: Scope, goal: Goal, effort: Effort, suffix: str, verify: Verify
) -> tuple[tuple[Attempt, ...], tuple[LyapunovClaim, ...]]:
    """Claims that cover the region inside all slabs, else the one that covers most of it, else none.

    The first claim is the largest set proved.  Where the region is covered and quantities are to be
    bounded (there are slabs), the same V at the least level that covers the region follows, as its
    bounds are tighter.
    """
    task = _task(case, equilibrium, over, goal, effort, suffix, verify)
    if isinstance(task, Attempt):
        return (task,), ()
    attempts: list[Attempt] = []
    candidates: list[Candidate] = []
    for attempt, claims in _covering(task, candidates):
        attempts.append(attempt)
        if claims:
            return tuple(attempts), claims
    best: LyapunovClaim | None = None
    candidates += from_lyapunov_equation(task.loop)
    for candidate in candidates:
        function = _normalised(task, candidate.matrix)
        proved = largest_proved(task, function, _promising(task, function, candidate.matrix))
        attempts.append(_told(task, candidate, proved))
        if proved.claim is not None and (best is None or _extent(task, proved.claim) > _extent(task, best)):
            best = proved.claim
    return tuple(attempts), () if best is None else (best,)


def largest_level(
    case: Case, equilibrium: Equilibrium, over: Scope, function: Function, goal: Goal, effort: Effort, verify: Verify,
    suffix: str = "V2",
) -> tuple[tuple[Attempt, ...], LyapunovClaim | None]:  # fmt: skip
    """For a given quadratic V: the largest level that could be proved inside the goal's slabs."""
    task = _task(case, equilibrium, over, goal, effort, suffix, verify)
    if isinstance(task, Attempt):
        return (task,), None
    matrix = scaled_matrix(function, task.loop.scales)
    if np.linalg.eigvalsh(matrix)[0] <= 0:
        return (Attempt(task.subject, "quadratic, given V", "no candidate", "V is not positive definite"),), None
    bound = _bound(task, function, matrix, UNBOUNDED_LEVEL)
    proved = largest_proved(task, function, bound, method="given")
    ending = "found" if proved.claim else "no candidate"
    attempt = Attempt(
        task.subject, "quadratic, given V", ending, proved.why or "proved at the largest promising level",
        {"levels": proved.levels},
    )  # fmt: skip
    return (attempt,), proved.claim


def _task(
    case: Case, equilibrium: Equilibrium, over: Scope, goal: Goal, effort: Effort, suffix: str, verify: Verify
) -> Task | Attempt:
    subject = goal.serves[0] if goal.serves else case.name
    try:
        loop = scaled_loop(case, equilibrium, over, goal.region)
    except ArithmeticError as error:
        return Attempt(subject, "quadratic, Gram matrices", "out of reach", str(error))
    if isinstance(loop.field, NotRational):
        return Attempt(subject, "quadratic, Gram matrices", "out of reach", loop.field.reason)
    if loop.spread.names and not (loop.field.constant_terms_vanish and all(b.is_exact for b in equilibrium.state)):
        why = "the equilibrium moves with the parameters"
        return Attempt(subject, "quadratic over tolerances", "out of reach", why)
    return Task(loop, loop.field, equilibrium, over, goal, effort, suffix, verify)


def _covering(task: Task, candidates: list[Candidate]) -> Iterator[tuple[Attempt, tuple[LyapunovClaim, ...]]]:
    """Programs for the whole region, then for parts of it; every P found is left in `candidates`."""
    if not task.goal.region.is_bounded:
        return
    if not task.loop.is_settling:
        why = "a linear part at nominal or at a vertex is not asymptotically stable"
        yield Attempt(task.subject, "quadratic, conic program", "no candidate", why), ()
        return
    found = False
    for objective in _objectives(task):
        pool = Pool(np.zeros((0, task.loop.size)), np.zeros((0, task.loop.size)))
        for share in DECREASE_SHARES:
            wish = Wish(objective, share)
            attempt, candidate = from_program(task.loop, task.goal, wish, task.effort, task.subject, pool)
            if candidate is None:
                yield attempt, ()
                break
            found = True
            candidates.append(candidate)
            yield _prove_cover(task, candidate, attempt)
    if found:
        return
    for scale in REGION_SHARES:
        pool = Pool(np.zeros((0, task.loop.size)), np.zeros((0, task.loop.size)))
        wish = Wish("widest margin", DECREASE_SHARES[0], scale)
        attempt, candidate = from_program(task.loop, task.goal, wish, task.effort, task.subject, pool)
        yield attempt, ()
        if candidate is not None:
            candidates.append(candidate)
            return


def _objectives(task: Task) -> tuple[Objective, ...]:
    bounded = any(s.reach is not None for s in task.goal.slabs)
    return ("tightest bounds", "smallest set", "widest margin") if bounded else ("smallest set", "widest margin")


def _prove_cover(task: Task, candidate: Candidate, attempt: Attempt) -> tuple[Attempt, tuple[LyapunovClaim, ...]]:
    """The region first; where that is proved, as large a set as can be proved."""
    function = _normalised(task, candidate.matrix)
    bound = _promising(task, function, candidate.matrix)
    if bound < 1:
        remark = f"V stops falling or meets a slab at {float(bound):.4g} of the level that covers the region"
        return replace(attempt, ending="no candidate", remark=remark), ()
    tight, why = prove(task, function, Fraction(1), "quadratic", "-tight")
    if tight is None:
        remark = f"no proof at the level that covers the region: {why}"
        return replace(attempt, ending="no candidate", remark=remark, work={**attempt.work, "levels": 1}), ()
    large = largest_proved(task, function, bound, Fraction(1))
    work = {**attempt.work, "levels": 1 + large.levels}
    if large.claim is None:
        return replace(attempt, remark="proved at the level that covers the region", work=work), (
            replace(tight, identifier=_identifier(task)),
        )
    remark = f"proved at a level that covers {float(large.claim.level) ** 0.5:.4g} of the region"
    told = replace(attempt, ending="found", remark=remark, work=work)
    return told, (large.claim, tight) if task.goal.slabs else (large.claim,)


def _told(task: Task, candidate: Candidate, proved: Proved) -> Attempt:
    method = f"quadratic, {candidate.method.removeprefix('quadratic, ')}, largest level"
    work = {"levels": proved.levels}
    if proved.claim is None:
        return Attempt(task.subject, method, "no candidate", f"no level could be proved: {proved.why}", work)
    part = f"covers {_extent(task, proved.claim):.4g} of the region" if task.goal.region.is_bounded else "found"
    return Attempt(task.subject, method, "found", f"the largest proved level {part}", work)


def _extent(task: Task, claim: LyapunovClaim) -> float:
    """Share of the region covered, or the volume (but for a constant) where the region is unbounded."""
    if task.goal.region.is_bounded:
        return float(claim.level) ** 0.5
    matrix = scaled_matrix(claim.function, task.loop.scales) / float(claim.level)
    return float(np.linalg.det(matrix) ** -0.5)


def _normalised(task: Task, matrix: Array) -> Function:
    """V with short coefficients such that {V <= 1} holds the region, barely; largest entry 1 without a region."""
    corners = region_corners(task.loop, task.goal)
    worst = float(np.max((corners @ matrix * corners).sum(1), initial=0.0))
    if worst <= 0:
        return rounded_function(matrix / np.abs(matrix).max(), task.loop.scales)
    function = rounded_function(matrix / worst, task.loop.scales)
    need = max(value_at(function, corner) for corner in task.goal.region.corners())
    if need <= 1:
        return function
    return rounded_function(matrix / worst / (2 * float(need) - 1), task.loop.scales)


def _promising(task: Task, function: Function, matrix: Array) -> Fraction:
    """`_bound` for a normalised V, not far beyond the region."""
    most = Fraction(FARTHEST**2) if task.goal.region.is_bounded else UNBOUNDED_LEVEL
    return _bound(task, function, scaled_matrix(function, task.loop.scales), most)


def _bound(task: Task, function: Function, matrix: Array, most: Fraction) -> Fraction:
    """The largest level worth trying: inside the slabs (exactly) and below the sampled first rise of V."""
    most = min([most, *(level * (1 - KEEP_OFF) for level in slab_levels(function, task.goal))])
    if most <= 0:
        return Fraction(0)
    sampled = Fraction(sampled_level(task.loop, matrix, float(most), task.effort))
    return short_below(most if sampled >= Fraction(float(most)) else min(most, sampled * SAMPLED))


def largest_proved(
    task: Task, function: Function, bound: Fraction, proved: Fraction = Fraction(0), method: str = "quadratic"
) -> Proved:
    """The largest level in (`proved`, `bound`] found provable: a few shares of `bound`, then bisection."""
    best: LyapunovClaim | None = None
    why, tried, refused = "no level is left inside the slabs", 0, bound
    for share in LEVEL_SHARES:
        level = short_below(bound * share)
        if level <= proved or tried >= task.effort.levels:
            break
        best, why = prove(task, function, level, method)
        tried += 1
        if best is not None:
            return Proved(best, tried)
        refused = level
    low = float(proved) or float(bound) * LEAST_SHARE
    while tried < task.effort.levels and float(refused) > CLOSE_ENOUGH * low:
        level = short_below(Fraction((low * float(refused)) ** 0.5))
        claim, reason = prove(task, function, level, method)
        tried += 1
        if claim is None:
            refused, why = level, reason
        else:
            best, low = claim, float(level)
    return Proved(best, tried, why)


def prove(
    task: Task, function: Function, level: Fraction, method: str, mark: str = ""
) -> tuple[LyapunovClaim | None, str]:
    """A verified claim at this level, or why there is none."""
    form = decrease_form(task.field, function)
    sign = denominator_sign(task.field, task.loop.vertices) ** form.denominator_power
    matrix = scaled_matrix(function, task.loop.scales)
    widths = np.sqrt(float(level) * np.diag(np.linalg.inv(matrix)))
    scales = tuple(s * power_of_two_near(float(w)) for s, w in zip(task.loop.scales, widths, strict=True))
    numerator = form.numerator * task.field.ring.constant(Fraction(sign))
    target = Target(numerator, task.field.ring, task.field.balls, task.loop.spread, function, scales)
    witnesses = seek_witnesses(target, level)
    if isinstance(witnesses, NoWitness):
        where = f" at Bernstein index {witnesses.index}" if any(witnesses.index) else ""
        return None, f"{witnesses.reason}{where}"
    kind: Literal["given", "quadratic"] = "given" if method == "given" else "quadratic"
    theorem = "T3" if task.loop.sampled else "T2"
    claim = LyapunovClaim(
        _identifier(task) + mark, model_hash(task.loop.case), task.over, theorem, task.equilibrium.identifier, kind,
        function, level, task.loop.spread, witnesses,
    )  # fmt: skip
    return (claim, "") if task.verify(claim) else (None, "the exact check did not accept the rounded certificate")


def _identifier(task: Task) -> str:
    return f"{task.loop.case.name}.{task.suffix}"
