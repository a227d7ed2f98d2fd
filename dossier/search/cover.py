"""Seek V = y'Py and a level for the interval check, where the equations are no quotients of polynomials.

The same conic programs as for Gram certificates, on the equations as written, at nominal parameters.
Where the loop saturates, the set is kept inside the slabs on which no limit is met, as the interval check
needs second derivatives.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
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
from dossier.search.rounding import short_below

Verify = Callable[[CoverClaim], bool]

SHARES: Final = tuple(Fraction(s) for s in ("0.95", "0.8", "0.6", "0.35"))
"""Shares of the promising level handed to the interval check, which needs room before V first rises."""
MOST_REFUSALS: Final = 5
"""Refusals by the interval check, each of which may cost the whole box budget, before a search gives up."""
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
    search = _CoverSearch(loop, equilibrium, goal, effort, suffix, verify)
    attempts: list[Attempt] = []
    rest: list[tuple[Fraction, Function, str]] = []
    for attempt, candidate in _candidates(loop, goal, effort, subject):
        attempts.append(attempt)
        if candidate is None:
            continue
        function = normalised(loop, goal, candidate.matrix)
        bound = promising_level(loop, goal, effort, function, largest_useful(goal))
        if goal.region.is_bounded and bound >= 1:
            claim = search.verified(function, Fraction(1))
            attempts[-1] = search.told(attempt, claim, "no proof by boxes at the level that covers the region")
            if claim is not None:
                return tuple(attempts), claim
            bound = Fraction(1)
        else:
            where = f"V stops falling or meets a slab at {float(bound):.4g} of the level that covers the region"
            attempts[-1] = search.told(attempt, None, where)
        rest.append((bound, function, attempt.method))
    best: CoverClaim | None = None
    for bound, function, method in sorted(rest, key=lambda r: -extent(loop, goal, r[1], r[0])):
        if best is not None and extent(loop, goal, function, bound) <= extent(loop, goal, best.function, best.level):
            break
        claim = search.largest(function, bound, best)
        told = Attempt(subject, f"{method}, largest level", "no candidate", "")
        attempts.append(search.told(told, claim, "no larger set was proved by boxes"))
        best = claim or best
    return tuple(attempts), best


def _candidates(
    loop: ScaledLoop, goal: Goal, effort: Effort, subject: str
) -> Iterator[tuple[Attempt, Candidate | None]]:
    yield from covering_candidates(loop, goal, effort, subject)
    for candidate in from_lyapunov_equation(loop):
        yield Attempt(subject, f"quadratic, {candidate.method}", "found", ""), candidate


@dataclass
class _CoverSearch:
    """What every claim of one search has in common, and how often the check has refused."""

    loop: ScaledLoop
    equilibrium: Equilibrium
    goal: Goal
    effort: Effort
    suffix: str
    verify: Verify
    refusals: int = 0

    def verified(self, function: Function, level: Fraction) -> CoverClaim | None:
        """The claim at this level if `verify` accepts it."""
        if level <= 0 or self.refusals >= MOST_REFUSALS:
            return None
        claim = CoverClaim(
            f"{self.loop.case.name}.{self.suffix}", model_hash(self.loop.case), NOMINAL,
            "T3" if self.loop.sampled else "T2", self.equilibrium.identifier, function, level, 0,
        )  # fmt: skip
        if self.verify(claim):
            return claim
        self.refusals += 1
        return None

    def largest(self, function: Function, bound: Fraction, best: CoverClaim | None) -> CoverClaim | None:
        """The first accepted claim among shares of `bound` whose set is larger than that of `best`."""
        for share in SHARES:
            level = short_below(bound * share)
            if best is not None and self._extent(function, level) <= self._extent(best.function, best.level):
                return None
            claim = self.verified(function, level)
            if claim is not None:
                return claim
        return None

    def told(self, attempt: Attempt, claim: CoverClaim | None, otherwise: str) -> Attempt:
        """`attempt` with its ending."""
        if claim is None:
            return replace(attempt, ending="no candidate", remark=otherwise)
        covered = self._extent(claim.function, claim.level)
        size = f"{covered:.4g} of the region" if self.goal.region.is_bounded else f"V ≤ {float(claim.level):.6g}"
        return replace(attempt, ending="found", remark=f"the interval check closed at {size}")

    def _extent(self, function: Function, level: Fraction) -> float:
        return extent(self.loop, self.goal, function, level)


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
