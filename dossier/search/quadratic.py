"""Seek a quadratic Lyapunov certificate: candidate P, promising level, Gram witnesses, short rationals.

Nothing found here is believed; the caller passes `verify`, which is asked before a claim is returned, so
that a candidate lost to rounding is replaced by a more modest one instead of failing later.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Final, Literal

import numpy as np

from dossier.model.attempt import Attempt
from dossier.model.case import TOLERANCES, Case, Scope
from dossier.model.claim import LyapunovClaim
from dossier.model.decrease import decrease_form
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import ZERO, names, nodes
from dossier.model.loop import model_hash, vector_field
from dossier.model.polynomial import Exponents, NotRational, OffsetField
from dossier.model.region import Box, Interval
from dossier.model.remainders import HIGHEST_ORDER, is_function
from dossier.search.effort import Effort
from dossier.search.ellipsoid import Candidate, from_lyapunov_equation
from dossier.search.goal import Goal, Slab
from dossier.search.multipliers import NoWitness, Target, seek_witnesses
from dossier.search.offsets import ScaledLoop, denominator_sign, field_of, scaled_loop
from dossier.search.programs import (
    UNBOUNDED_LEVEL,
    Function,
    covering_candidates,
    extent,
    largest_useful,
    normalised,
    promising_level,
)
from dossier.search.rounding import power_of_two_near, scaled_matrix, short_below

Verify = Callable[[LyapunovClaim], bool]

LEVEL_SHARES: Final = tuple(Fraction(s) for s in ("1", "0.9998", "0.999", "0.99"))
"""Shares of the promising level tried before bisection: mostly the first or second is proved."""
LEAST_SHARE: Final = 1e-5
"""Share of the promising level at which bisection begins where nothing is proved yet."""
ROOMS: Final = (Fraction(5, 2), Fraction(5))
"""Sizes of the box on which elementary functions are expanded, in half widths of the region; the tighter first."""
BEYOND: Final = Fraction(1, 10**9)
"""Share by which the box of an expansion is taken wider than computed in floating point."""
CLOSE_ENOUGH: Final = 1.01
"""Ratio of a refused to a proved level at which bisection ends."""


@dataclass(frozen=True)
class Task:
    """One search: the loop, what is wanted of it, and who is asked before a claim is returned."""

    loop: ScaledLoop
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
class Prospect:
    """A normalised V, where it came from, and the level up to which it looks promising."""

    method: str
    function: Function
    bound: Fraction


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
    attempts: list[Attempt] = []
    found: tuple[LyapunovClaim, ...] = ()
    for room in ROOMS:
        task = _task(case, equilibrium, over, goal, effort, suffix, verify, room=room)
        if isinstance(task, Attempt):
            return (*attempts, task), found
        tried, claims = _seek(task)
        attempts += tried
        if not found or (claims and claims[0].level > found[0].level):
            found = claims
        covers = bool(found) and goal.region.is_bounded and found[0].level >= 1
        if covers or not task.loop.is_expanded:
            break
    return tuple(attempts), found


def _seek(task: Task) -> tuple[tuple[Attempt, ...], tuple[LyapunovClaim, ...]]:
    attempts: list[Attempt] = []
    prospects: list[Prospect] = []
    for attempt, candidate in covering_candidates(task.loop, task.goal, task.effort, task.subject):
        attempts.append(attempt)
        if candidate is None:
            continue
        attempts[-1], prospect, claims = _prove_cover(task, _prospect(task, candidate), attempt)
        if claims:
            return tuple(attempts), claims
        prospects.append(prospect)
    prospects += [_prospect(task, candidate) for candidate in from_lyapunov_equation(task.loop)]
    more, best = _largest_of(task, prospects)
    return (*attempts, *more), () if best is None else (best,)


def seek_on_cell(
    case: Case, equilibrium: Equilibrium, cell: Box, goal: Goal, effort: Effort, suffix: str, verify: Verify
) -> tuple[tuple[Attempt, ...], LyapunovClaim | None, ScaledLoop | None]:
    """For the combinations in `cell`: a set that just covers the whole region inside all slabs, or None.

    The loop is handed back too, so that a cell without an answer can be cut where it matters.
    """
    task = _task(case, equilibrium, TOLERANCES, goal, effort, suffix, verify, cell)
    if isinstance(task, Attempt):
        return (task,), None, None
    attempts: list[Attempt] = []
    for attempt, candidate in covering_candidates(task.loop, task.goal, effort, task.subject, partial=False):
        attempts.append(attempt)
        prospect = None if candidate is None else _prospect(task, candidate)
        if prospect is not None and prospect.bound >= 1:
            claim = prove(task, prospect.function, Fraction(1), "quadratic")
            if isinstance(claim, LyapunovClaim):
                return tuple(attempts), claim, task.loop
            attempts[-1] = replace(attempt, ending="no candidate", remark=claim.text)
    return tuple(attempts), None, task.loop


def _largest_of(task: Task, prospects: list[Prospect]) -> tuple[list[Attempt], LyapunovClaim | None]:
    """The largest set provable with any of the prospects, the most promising first."""
    attempts: list[Attempt] = []
    best: LyapunovClaim | None = None
    for prospect in sorted(prospects, key=lambda p: -_extent(task, p.function, p.bound)):
        hoped = _extent(task, prospect.function, prospect.bound)
        if best is not None and hoped <= CLOSE_ENOUGH * _extent(task, best.function, best.level):
            break
        proved = largest_proved(task, prospect.function, prospect.bound)
        attempts.append(_told(task, prospect, proved))
        claim = proved.claim
        if claim is not None and (
            best is None or _extent(task, claim.function, claim.level) > _extent(task, best.function, best.level)
        ):
            best = claim
    return attempts, best


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
    bound = promising_level(task.loop, goal, effort, function, UNBOUNDED_LEVEL)
    proved = largest_proved(task, function, bound, method="given")
    ending = "found" if proved.claim else "no candidate"
    attempt = Attempt(
        task.subject, "quadratic, given V", ending, proved.why or "proved at the largest promising level",
        {"levels": proved.levels},
    )  # fmt: skip
    return (attempt,), proved.claim


def prove_given(
    case: Case, equilibrium: Equilibrium, over: Scope, function: Function, level: Fraction, effort: Effort,
    suffix: str, verify: Verify,
) -> tuple[Attempt, LyapunovClaim | None]:  # fmt: skip
    """The engineer's own quadratic V at exactly its level, by Gram matrices."""
    task = _task(case, equilibrium, over, Goal(case.region, ()), effort, suffix, verify)
    method = f"the engineer's own V and level, Gram matrices, {over}"
    if isinstance(task, Attempt):
        return replace(task, subject=case.name, method=method), None
    if np.linalg.eigvalsh(scaled_matrix(function, task.loop.scales))[0] <= 0:
        return Attempt(case.name, method, "no candidate", "V is not positive definite"), None
    claim = prove(task, function, level, "given")
    if isinstance(claim, NoWitness):
        return Attempt(case.name, method, "no candidate", claim.text), None
    return Attempt(case.name, method, "found", "proved as given"), claim


def _task(
    case: Case, equilibrium: Equilibrium, over: Scope, goal: Goal, effort: Effort, suffix: str, verify: Verify,
    cell: Box | None = None, room: Fraction = ROOMS[0],
) -> Task | Attempt:  # fmt: skip
    subject = goal.serves[0] if goal.serves else case.name
    try:
        loop = scaled_loop(case, equilibrium, over, goal.region, cell=cell)
        goal, loop = _expanded(case, equilibrium, over, goal, loop, cell, room)
    except ArithmeticError as error:
        return Attempt(subject, "quadratic, Gram matrices", "out of reach", str(error))
    field = loop.field
    if isinstance(field, NotRational):
        return Attempt(subject, "quadratic, Gram matrices", "out of reach", field.reason)
    rests = field.constant_terms_vanish and all(b.is_exact for b in equilibrium.state)
    if loop.parameters.names and not rests and equilibrium.course is None:
        why = "the equilibrium moves with the parameters"
        return Attempt(subject, "quadratic over tolerances", "out of reach", why)
    return Task(loop, equilibrium, over, goal, effort, suffix, verify)


def _expanded(
    case: Case,
    equilibrium: Equilibrium,
    over: Scope,
    goal: Goal,
    loop: ScaledLoop,
    cell: Box | None,
    room: Fraction,
) -> tuple[Goal, ScaledLoop]:
    """Elementary functions expanded as coarsely as a stable linear part allows, on a box that joins the goal."""
    if not (isinstance(loop.field, NotRational) and goal.region.is_bounded):
        return goal, loop
    states = case.model.state_names
    met = _states_in_functions(case)
    widths: list[Fraction] = []
    for place, side in enumerate(goal.region.intervals):
        wanted = room * max(abs(b) for b in side.bounds)
        reaches = [s.reach for s in goal.slabs if s.reach is not None and s.reach > 0 and _is_along(s, place)]
        known: list[Fraction] = [*([wanted] if wanted else []), *reaches]
        widths.append(min(known) if known else Fraction(1))
    sides = tuple(Interval(b.lower - w, b.upper + w) for b, w in zip(equilibrium.state, widths, strict=True))
    slabs = tuple(
        Slab(tuple(Fraction(int(i == j)) for j in range(len(states))), -w, w, f"the box of expansion in {n}")
        for i, (w, n) in enumerate(zip(widths, states, strict=True))
        if n in met
    )
    best: ScaledLoop | None = None
    for order in range(HIGHEST_ORDER + 1):
        found = scaled_loop(case, equilibrium, over, goal.region, (Box(states, sides), order), cell)
        if isinstance(found.field, NotRational):
            loop = found if best is None else loop
            continue
        best = best or found
        if found.is_settling:
            best = found
            break
    return (goal, loop) if best is None else (replace(goal, slabs=(*goal.slabs, *slabs)), best)


def _states_in_functions(case: Case) -> frozenset[str]:
    """The states that elementary functions, saturations and absolute values depend on."""
    functions = {n for e in vector_field(case).equations for n in nodes(e) if is_function(n)}
    return frozenset(name for n in functions for name in names(n)) & set(case.model.state_names)


def _is_along(slab: Slab, place: int) -> bool:
    """It bounds one state, the one at `place`, directly."""
    return all((w == 1) if i == place else (w == 0) for i, w in enumerate(slab.weights))


def _fields(task: Task, widths: tuple[float, ...]) -> Iterator[tuple[int, OffsetField | NotRational]]:
    """The field and its order of expansion on a set with these half widths; the coarsest expansion first."""
    if not task.loop.is_expanded and not isinstance(task.loop.field, NotRational):
        yield 0, task.loop.field
        return
    case = task.loop.case
    reach = [Fraction(w) * (1 + BEYOND) for w in widths]
    sides = tuple(Interval(b.lower - w, b.upper + w) for b, w in zip(task.equilibrium.state, reach, strict=True))
    around = Box(case.model.state_names, sides)
    for order in range(HIGHEST_ORDER + 1):
        try:
            yield order, field_of(case, task.equilibrium, task.loop.parameters, (around, order))
        except ArithmeticError as error:
            yield order, NotRational(str(error), ZERO)


def _prospect(task: Task, candidate: Candidate) -> Prospect:
    function = normalised(task.loop, task.goal, candidate.matrix)
    bound = promising_level(task.loop, task.goal, task.effort, function, largest_useful(task.goal))
    return Prospect(candidate.method, function, bound)


def _prove_cover(
    task: Task, prospect: Prospect, attempt: Attempt
) -> tuple[Attempt, Prospect, tuple[LyapunovClaim, ...]]:
    """The region first; where that is proved, as large a set as can be proved.  A refusal lowers the bound."""
    if prospect.bound < 1:
        remark = f"V stops falling or meets a slab at {float(prospect.bound):.4g} of the level that covers the region"
        return replace(attempt, ending="no candidate", remark=remark), prospect, ()
    tight = prove(task, prospect.function, Fraction(1), "quadratic", "-tight")
    if isinstance(tight, NoWitness):
        remark = f"no proof at the level that covers the region: {tight.text}"
        told = replace(attempt, ending="no candidate", remark=remark, work={**attempt.work, "levels": 1})
        return told, replace(prospect, bound=LEVEL_SHARES[-1]), ()
    large = largest_proved(task, prospect.function, prospect.bound, Fraction(1))
    if large.claim is None:
        claims = (replace(tight, identifier=_identifier(task)),)
    else:
        claims = (large.claim, tight) if task.goal.slabs else (large.claim,)
    covered = _extent(task, prospect.function, claims[0].level)
    remark = f"proved at a level that covers {covered:.4g} of the region"
    work = {**attempt.work, "levels": 1 + large.levels}
    return replace(attempt, ending="found", remark=remark, work=work), prospect, claims


def _told(task: Task, prospect: Prospect, proved: Proved) -> Attempt:
    method = f"quadratic, {prospect.method.removeprefix('quadratic, ')}, largest level"
    work = {"levels": proved.levels}
    if proved.claim is None:
        return Attempt(task.subject, method, "no candidate", f"no level could be proved: {proved.why}", work)
    remark = f"proved at V ≤ {float(proved.claim.level):.6g}"
    if task.goal.region.is_bounded:
        covered = _extent(task, proved.claim.function, proved.claim.level)
        remark += f", which covers {covered:.4g} of the region"
    return Attempt(task.subject, method, "found", remark, work)


def _extent(task: Task, function: Function, level: Fraction) -> float:
    return extent(task.loop, task.goal, function, level)


def largest_proved(
    task: Task, function: Function, bound: Fraction, proved: Fraction = Fraction(0), method: str = "quadratic"
) -> Proved:
    """The largest level in (`proved`, `bound`] found provable: a few shares of `bound`, then bisection."""
    best: LyapunovClaim | None = None
    refusal, tried, refused = NoWitness("V rises at once, or the slabs leave no room"), 0, bound
    for share in LEVEL_SHARES:
        level = short_below(bound * share)
        if level <= proved or tried >= task.effort.levels:
            break
        result = prove(task, function, level, method, hardest=refusal.index)
        tried += 1
        if isinstance(result, LyapunovClaim):
            return Proved(result, tried)
        refusal, refused = result, level
    low = float(proved) or float(bound) * LEAST_SHARE
    while tried < task.effort.levels and float(refused) > CLOSE_ENOUGH * low:
        level = short_below(Fraction((low * float(refused)) ** 0.5))
        result = prove(task, function, level, method, hardest=refusal.index)
        tried += 1
        if isinstance(result, LyapunovClaim):
            best, low = result, float(level)
        else:
            refusal, refused = result, level
    return Proved(best, tried, refusal.text)


def prove(
    task: Task, function: Function, level: Fraction, method: str, mark: str = "", hardest: Exponents = ()
) -> LyapunovClaim | NoWitness:
    """A verified claim at this level, or why there is none."""
    matrix = scaled_matrix(function, task.loop.scales)
    widths = np.sqrt(float(level) * np.diag(np.linalg.inv(matrix)))
    scales = tuple(s * power_of_two_near(float(w)) for s, w in zip(task.loop.scales, widths, strict=True))
    half_widths = tuple(float(w) * float(s) for w, s in zip(widths, task.loop.scales, strict=True))
    refusal = NoWitness("no expansion")
    for order, field in _fields(task, half_widths):
        if isinstance(field, NotRational):
            refusal = NoWitness(field.reason)
            continue
        witnesses = seek_witnesses(_target(task, field, function, scales), level, hardest)
        if isinstance(witnesses, NoWitness):
            refusal = witnesses
            continue
        kind: Literal["given", "quadratic"] = "given" if method == "given" else "quadratic"
        theorem = "T3" if task.loop.sampled else "T2"
        claim = LyapunovClaim(
            _identifier(task) + mark, model_hash(task.loop.case), task.over, theorem, task.equilibrium.identifier,
            kind, function, level, task.loop.parameters, order, witnesses,
        )  # fmt: skip
        if task.verify(claim):
            return claim
        refusal = NoWitness("the exact check did not accept the rounded certificate")
    return refusal


def _target(task: Task, field: OffsetField, function: Function, scales: tuple[Fraction, ...]) -> Target:
    form = decrease_form(field, function)
    parameters, factors = task.loop.parameters, field.factors
    sign = denominator_sign(field, task.loop.vertices) ** form.denominator_power
    box = Box((*parameters.names, *factors.names), (*parameters.intervals, *factors.intervals))
    return Target(form.numerator * field.ring.constant(Fraction(sign)), field.ring, field.balls, box, function, scales)


def _identifier(task: Task) -> str:
    return f"{task.loop.case.name}.{task.suffix}"
