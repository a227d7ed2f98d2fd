"""Prove or refute the engineer's own V at its own level, at the nominal combination (theorems T2 and T3).

V may be any formula, so the set is the part of {V <= level} in a stated box B: V > level on the whole boundary of B
makes it compact and keeps motions in (of continuous models; a sampled one may jump).  Interval branch and bound in
coordinates y = T z, in which the quadratic parts of V and of its change W (W = grad V . f, or V(next) - V) are nearly
diagonal: every piece of B is outside the set, or has V > 0 > W, or touches the equilibrium, where V and W vanish with
their gradients and definite Hessians over the hull of the piece and the equilibrium decide.
(R. E. Moore, R. B. Kearfott, M. J. Cloud 2009; forms derived here.)
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from fractions import Fraction
from typing import Final

import numpy as np

from dossier.checks.boxes import split_widest
from dossier.checks.slopes import value_and_slopes
from dossier.checks.sublevel import Sublevel, change_of
from dossier.model.ball import WORKING_BITS, Ball, enclose, evaluate, precision, to_fmpq
from dossier.model.case import NOMINAL, Candidate, Case
from dossier.model.claim import CandidateClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import Expression, number, simplify, substitute
from dossier.model.figures import figure, span
from dossier.model.finding import Finding, Premise, Result, weakest
from dossier.model.loop import model_hash
from dossier.model.region import Box, Interval

RAY_PIECES: Final = 256
"""Pieces of the ray along which a counter-example is joined to the equilibrium."""
Vector = tuple[Fraction, ...]


def check_candidate(case: Case, equilibrium: Equilibrium, claim: CandidateClaim, boxes: int) -> Finding:
    """Verify the proof or the counter-example of `claim` with at most `boxes` boxes."""
    theorem = "T3" if case.model.time == "sampled" else "T2"
    candidate = case.candidate
    meant = (
        candidate is not None
        and claim.model_hash == model_hash(case)
        and claim.equilibrium == equilibrium.identifier
        and claim.over == NOMINAL
        and claim.level == candidate.level
        and (claim.around is None) != (not claim.against)
    )
    premises = [_premise("model", "the certificate is about this loop and the V of the project file", meant, claim)]
    statement = f"V of the project file is positive and falls everywhere in its set V ≤ {figure(claim.level)}"
    if meant and candidate is not None and claim.against:
        premises += _refuted(case, equilibrium, candidate, claim)
        statement = f"V of the project file is not positive and falling everywhere in its set V ≤ {figure(claim.level)}"
    elif meant and candidate is not None and claim.around is not None:
        premises += _proved(case, equilibrium, candidate, claim, claim.around, boxes)
    result, strength = weakest(tuple(premises))
    return Finding(
        claim.identifier, "interval", result, strength, NOMINAL, theorem, statement, tuple(premises), {},
        (claim.identifier,),
    )  # fmt: skip


def _premise(
    label: str, statement: str, shown: bool, claim: CandidateClaim, detail: str = "", *, exact: bool = True
) -> Premise:
    result: Result = "proved" if shown else "undecided"
    return Premise(label, statement, result, "exact" if exact else "enclosed", detail, claim.identifier)


def holds_region(case: Case, candidate: Candidate, around: Box, region: Box) -> bool:
    """Every start of the bounded `region` (offsets) lies in the set: it is in the box, and V <= level on all of it.

    The region holds the equilibrium and is connected.  A region that touches the level is not proved to lie inside.
    """
    if not around.contains(region):
        return False
    names = case.model.state_names
    waiting, looked = [region], 0
    with precision(WORKING_BITS):
        while waiting:
            part = waiting.pop()
            looked += 1
            balls = {n: enclose(Ball.from_bounds(*i.bounds)) for n, i in part.items()}
            value, slopes = value_and_slopes(candidate.function, names, balls)
            centre = {n: enclose(Ball(i.middle)) for n, i in part.items()}
            sharp = evaluate(candidate.function, centre)
            for name, slope in zip(names, slopes, strict=True):
                sharp = sharp + slope * (balls[name] - centre[name])
            level = to_fmpq(candidate.level)
            if value <= level or sharp <= level:
                continue
            halves = split_widest(part, region)
            if halves is None or looked + len(waiting) > REGION_PIECES:
                return False
            waiting.extend(halves)
    return True


REGION_PIECES: Final = 4_096
"""Pieces of a region on which V is enclosed."""


# --- the counter-example ------------------------------------------------------------------------------


def _refuted(case: Case, equilibrium: Equilibrium, candidate: Candidate, claim: CandidateClaim) -> Iterator[Premise]:
    """The point belongs to the set, and V or its change has the wrong sign there, or it lies outside the domain."""
    names, point = case.model.state_names, claim.against
    where = ", ".join(f"{n} = {figure(v)}" for n, v in zip(names, point, strict=False))
    usable = len(point) == len(names) and any(point)
    yield _premise("point", "the counter-example is an offset other than zero", usable, claim, where)
    if not usable:
        return
    joined = _ray_is_inside(candidate, names, point)
    yield _premise("joined", "it is joined to the equilibrium inside the set", joined, claim, exact=False)
    if not joined:
        return
    change, balls = change_of(case, equilibrium, candidate.function)
    at = {n: Ball(v) for n, v in zip(names, point, strict=True)}
    value, rate = _sign(candidate.function, at), _sign(change, {**balls, **at})
    outside = any(
        (side.lower is not None and b.upper + v <= side.lower) or (side.upper is not None and b.lower + v >= side.upper)
        for b, v, side in zip(equilibrium.state, point, case.model.domain.intervals, strict=True)
    )
    faults = {
        "V is not positive": value is not None and value <= 0,
        "V does not fall": rate is not None and rate >= 0,
        "the point lies outside the domain": outside,
    }
    found = [name for name, true in faults.items() if true]
    result: Result = "refuted" if found else "undecided"
    text = "V is positive and falls everywhere in the set but at the equilibrium, inside the domain"
    yield Premise("e", text, result, "enclosed", f"at the offset {where}: {', '.join(found)}", claim.identifier)


def _sign(expression: Expression, values: dict[str, Ball]) -> int | None:
    """-1, 0 (exactly) or 1; None where the enclosure does not decide."""
    exact = simplify(substitute(expression, {n: number(b.middle) for n, b in values.items() if b.is_exact}))
    if exact.op == "number":
        return (exact.fraction > 0) - (exact.fraction < 0)
    with precision(WORKING_BITS):
        value = evaluate(exact, {n: enclose(b) for n, b in values.items()})
    return 1 if value > 0 else -1 if value < 0 else None


def _ray_is_inside(candidate: Candidate, names: Sequence[str], point: Vector) -> bool:
    """V <= level on the whole ray from the equilibrium to `point`."""
    with precision(WORKING_BITS):
        for k in range(RAY_PIECES):
            low, high = Fraction(k, RAY_PIECES), Fraction(k + 1, RAY_PIECES)
            part = {n: enclose(Ball.from_bounds(*sorted((low * v, high * v)))) for n, v in
                    zip(names, point, strict=True)}  # fmt: skip
            if not evaluate(candidate.function, part) <= to_fmpq(candidate.level):
                return False
    return True


# --- the proof ---------------------------------------------------------------------------------------


def _proved(
    case: Case, equilibrium: Equilibrium, candidate: Candidate, claim: CandidateClaim, around: Box, boxes: int
) -> Iterator[Premise]:
    names = case.model.state_names
    sides = around.intervals
    fits = around.names == names and all(
        i.lower is not None and i.upper is not None and i.lower < 0 < i.upper for i in sides
    )
    yield _premise("box", "the box holds the equilibrium in its interior", fits, claim)
    steady = case.model.time == "continuous"
    if not steady:
        yield _premise("step", "no step of a sampled model leaves the box", False, claim, "not shown by this method")
    if not (fits and steady):
        return
    place = Box(
        names,
        tuple(
            Interval(b.lower + i.bounds[0], b.upper + i.bounds[1])
            for b, i in zip(equilibrium.state, sides, strict=True)
        ),
    )  # fmt: skip
    inside = case.model.domain.contains(place, strictly=True)
    extent = ", ".join(f"{n} in {span(*i.bounds)}" for n, i in place.items())
    yield _premise("b", "the box of the set lies in the interior of the domain", inside, claim, extent)
    try:
        problem = Sublevel(case, equilibrium, candidate, around)
    except (ArithmeticError, ValueError, np.linalg.LinAlgError) as error:
        yield _premise("e", "V falls everywhere in the set but at the equilibrium", False, claim, str(error))
        return
    with np.errstate(all="ignore"):
        gradient = problem.gradient_vanishes()
        walls = problem.walls_are_higher()
        closed, looked, why = problem.run(boxes)
    yield _premise("zero", "V and its gradient are zero at the equilibrium", gradient, claim)
    yield _premise(
        "wall", "V exceeds the level on every face of the box, so that the set is compact and nothing leaves it",
        walls, claim, exact=False,
    )  # fmt: skip
    yield _premise(
        "c", "the right-hand side is twice continuously differentiable on every piece used", closed, claim, exact=False
    )
    yield _premise(
        "e", "V is positive and falls everywhere in the set but at the equilibrium", closed, claim,
        why or f"{looked} boxes", exact=False,
    )  # fmt: skip
