"""Seek V = y'Py and a level for the interval check, where the equations are no quotients of polynomials.

The same conic programs as for Gram certificates, on the equations as written, at nominal parameters.
Where the loop saturates, the set is kept inside the slabs on which no limit is met, as the interval check
needs second derivatives.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace
from fractions import Fraction
from typing import Final

from dossier.model.attempt import Attempt
from dossier.model.ball import WORKING_BITS, enclose, evaluate, from_arb, precision
from dossier.model.case import NOMINAL, Case
from dossier.model.claim import CoverClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import Expression, differentiate, kinks, names
from dossier.model.loop import model_hash, vector_field
from dossier.search.effort import Effort
from dossier.search.ellipsoid import Candidate, from_lyapunov_equation
from dossier.search.goal import Goal, Slab
from dossier.search.offsets import ScaledLoop, scaled_loop
from dossier.search.programs import (
    Function,
    covering_candidates,
    extent,
    largest_useful,
    normalised,
    promising_level,
)

Verify = Callable[[CoverClaim], bool]

SHARES: Final = tuple(Fraction(s) for s in ("0.95", "0.8", "0.6", "0.35"))
"""Shares of the promising level handed to the interval check, which needs room before V first rises."""
KEEP_OFF: Final = Fraction(1, 10**6)
"""Share by which a set keeps off a saturation limit: the interval check must see that it is not met."""


def seek_cover_candidate(
    case: Case, equilibrium: Equilibrium, goal: Goal, effort: Effort, suffix: str, verify: Verify
) -> tuple[tuple[Attempt, ...], CoverClaim | None]:
    """The verified claim, at nominal parameters, that covers most of the region; None where nothing was verified."""
    goal = replace(goal, slabs=(*goal.slabs, *unsaturated_slabs(case, equilibrium)))
    subject = goal.serves[0] if goal.serves else case.name
    try:
        loop = scaled_loop(case, equilibrium, NOMINAL, goal.region)
    except ArithmeticError as error:
        return (Attempt(subject, "quadratic, interval check", "out of reach", str(error)),), None
    attempts: list[Attempt] = []
    best: CoverClaim | None = None
    for attempt, candidate in _candidates(loop, goal, effort, subject):
        attempts.append(attempt)
        if candidate is None:
            continue
        function = normalised(loop, goal, candidate.matrix)
        least = Fraction(0) if best is None else best.level
        claim, remark = _verified(loop, equilibrium, goal, effort, suffix, verify, function, least)
        attempts[-1] = replace(attempt, ending="found" if claim else "no candidate", remark=remark)
        best = claim or best
        if best is not None and goal.region.is_bounded and best.level >= 1:
            break
    return tuple(attempts), best


def _candidates(
    loop: ScaledLoop, goal: Goal, effort: Effort, subject: str
) -> Iterator[tuple[Attempt, Candidate | None]]:
    yield from covering_candidates(loop, goal, effort, subject)
    for candidate in from_lyapunov_equation(loop):
        yield Attempt(subject, f"quadratic, {candidate.method}", "found", ""), candidate


def _verified(
    loop: ScaledLoop,
    equilibrium: Equilibrium,
    goal: Goal,
    effort: Effort,
    suffix: str,
    verify: Verify,
    function: Function,
    least: Fraction,
) -> tuple[CoverClaim | None, str]:
    """The claim at the first level above `least` that `verify` accepts: the region's own first where it is in reach."""
    bound = promising_level(loop, goal, effort, function, largest_useful(goal))
    covers = goal.region.is_bounded and bound >= 1
    levels = [Fraction(1)] if covers else [bound * share for share in SHARES]
    tried = [level for level in levels if level > least]
    for level in tried:
        claim = CoverClaim(
            f"{loop.case.name}.{suffix}", model_hash(loop.case), NOMINAL, "T3" if loop.sampled else "T2",
            equilibrium.identifier, function, level, effort.boxes,
        )  # fmt: skip
        if verify(claim):
            return claim, f"the interval check closed at {extent(loop, goal, function, level):.4g} of the region"
    if not tried:
        return None, f"V stops falling or meets a slab at {extent(loop, goal, function, bound):.4g} of the region"
    return None, "the interval check did not close at any level tried"


def unsaturated_slabs(case: Case, equilibrium: Equilibrium) -> tuple[Slab, ...]:
    """Where no limit of a saturation, or zero of an absolute value, that is affine in the states is met, at nominal.

    A distance that is zero at the equilibrium, or not affine, gives no slab.
    """
    field = vector_field(case)
    balls = {p.name: p.nominal for p in case.model.parameters}
    balls.update(zip(field.states, equilibrium.state, strict=True))
    slabs: dict[Slab, None] = {}
    for distance in dict.fromkeys(k for equation in field.equations for k in kinks(equation)):
        slopes = [differentiate(distance, name) for name in field.states]
        if any(names(slope) & set(field.states) for slope in slopes):
            continue
        with precision(WORKING_BITS):
            here, *weights = (_middle(e, {n: enclose(b) for n, b in balls.items()}) for e in (distance, *slopes))
        if here is None or here == 0 or any(w is None for w in weights):
            continue
        sign = 1 if here > 0 else -1
        short = tuple(sign * w for w in weights if w is not None)
        if any(short):
            slabs[Slab(short, -abs(here) * (1 - KEEP_OFF), None, "no limit of the command is met")] = None
    return tuple(slabs)


def _middle(expression: Expression, environment: dict) -> Fraction | None:
    ball = from_arb(evaluate(expression, environment))
    return None if ball is None else ball.middle
