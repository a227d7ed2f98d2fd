"""From a proved list of solutions to named equilibria: exact where rational, one chosen, the domain decided."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction
from typing import Final

from dossier.checks.boxes import condition_holds, resolve_kinks
from dossier.checks.solutions import (
    Enclosure,
    RestProblem,
    holds_one,
    holds_solution,
    lies_in,
    misses,
    rest_equations,
    rest_problem,
    tighten,
    vanishes,
)
from dossier.model.ball import Ball
from dossier.model.case import Case
from dossier.model.claim import RootsClaim, SolutionBox
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import Condition, conditions, number, substitute
from dossier.model.loop import vector_field
from dossier.model.region import Box, Interval

TIE: Final = 1.1
"""Two equilibria whose region-scaled distances from the guess differ by less than 10 % are a tie to be reported."""


def list_equilibria(case: Case, claim: RootsClaim) -> tuple[Equilibrium, ...]:
    """The equilibria of `claim` that are confirmed here once more, in ascending order of their states.

    Enclosures are as tight as `dossier.checks.solutions.tighten` proves them; stability is left to the linear part.
    """
    problem = rest_problem(case)
    proved = sorted(_distinct_states(case, problem, claim), key=lambda s: [b.middle for b in s])
    listed = [_equilibrium(case, state, k) for k, state in enumerate(proved, 1)]
    if case.none_expected or not listed:
        return tuple(listed)
    if case.fixed is not None:
        stated = tuple(Ball(v) for v in case.fixed)
        return tuple(replace(e, chosen=e.state == stated) for e in listed)
    return _nearest_chosen(case, listed)


def _distinct_states(case: Case, problem: RestProblem, claim: RootsClaim) -> list[Enclosure]:
    """Every confirmed state once: what lies in a uniqueness box confirmed before is that box's solution again."""
    kept: list[Enclosure] = []
    taken: list[Box] = []
    for solution in claim.solutions:
        state = _state(case, problem, solution)
        if state is not None and not any(lies_in(state, box) for box in taken):
            kept.append(state)
            taken.append(solution.uniqueness)
    return kept


def _state(case: Case, problem: RestProblem, solution: SolutionBox) -> Enclosure | None:
    """The solution's tightest enclosure, or None where it is not confirmed to be one in the search box."""
    box = solution.uniqueness
    if box.names != problem.states or not box.is_bounded or len(solution.enclosure) != len(problem.states):
        return None
    if not holds_one(problem, box):
        return None
    if case.fixed is not None:
        stated = tuple(Ball(v) for v in case.fixed)
        if lies_in(stated, solution.uniqueness) and holds_solution(problem, stated):
            return stated if lies_in(stated, case.search) else None
    start = tuple(b.middle for b in solution.enclosure)
    state = tighten(problem, solution.uniqueness, start, case.search)
    return state if state is not None and lies_in(state, case.search) else None


def _equilibrium(case: Case, state: Enclosure, count: int) -> Equilibrium:
    domain = case.model.domain
    inside = lies_in(state, domain)
    remarks = () if inside or misses(state, domain) else ("on the border of the domain within its enclosure",)
    exact = all(b.is_exact for b in state)
    fixed = exact and reason_against_fixed(case, tuple(b.middle for b in state)) == ""
    return Equilibrium(f"{case.name}.E{count}", state, False, inside, "undecided", (), fixed, remarks)


def _nearest_chosen(case: Case, listed: Sequence[Equilibrium]) -> tuple[Equilibrium, ...]:
    """The equilibrium nearest to the guess, with a remark where the next one is hardly further."""
    if case.near is None or not listed:
        return tuple(listed)
    best, *rivals = nearest(case, listed)
    remarks = best.remarks
    if rivals:
        names = ", ".join(r.identifier for r in rivals)
        remarks = (*remarks, f"{names} is as near to the guess within 10 %")
    return tuple(replace(e, chosen=True, remarks=remarks) if e is best else e for e in listed)


def nearest(case: Case, listed: Sequence[Equilibrium]) -> tuple[Equilibrium, ...]:
    """The equilibrium nearest to the guess of `case`, then all that are as near within `TIE`; none without a guess."""
    if case.near is None:
        return ()
    distances = [region_distance(case, e.state, case.near) for e in listed]
    order = sorted(range(len(listed)), key=distances.__getitem__)
    return tuple(listed[k] for k in order if distances[k] <= TIE * distances[order[0]])


def region_distance(case: Case, state: Enclosure, guess: Sequence[Fraction]) -> float:
    """Distance with each state divided by the region's half width there, else the search box's, else 1."""
    return math.sqrt(
        sum(
            float((ball.middle - value) / scale) ** 2
            for ball, value, scale in zip(state, guess, distance_scales(case), strict=True)
        )
    )


def distance_scales(case: Case) -> tuple[Fraction, ...]:
    """By what each state is divided in a distance: the region's half width, else the search box's, else 1."""
    sides = zip(case.region.intervals, case.search.intervals, strict=True)
    return tuple(_half_width(region) or _half_width(search) or Fraction(1) for region, search in sides)


def _half_width(side: Interval) -> Fraction | None:
    return side.width / 2 if side.is_bounded and not side.is_point else None


def verify_fixed(case: Case) -> Equilibrium | str:
    """The stated point (`case.fixed`) as an equilibrium for every parameter combination, or why not.

    Needs no search box.  Raises ValueError for a case without a stated point.
    """
    if case.fixed is None:
        raise ValueError("the operating point states no fixed equilibrium")
    reason = reason_against_fixed(case, case.fixed)
    if reason:
        return reason
    state = tuple(Ball(v) for v in case.fixed)
    return Equilibrium(
        f"{case.name}.E1", state, True, lies_in(state, case.model.domain), "undecided", (), fixed_for_all=True
    )


def reason_against_fixed(case: Case, state: Sequence[Fraction]) -> str:
    """Why the exact `state` is not proved to be an equilibrium for every combination; empty where it is.

    The equations must vanish identically in the parameters, and every denominator, root and logarithm must be
    regular at the point over the whole parameter box.
    """
    names = case.model.state_names
    place = {n: number(v) for n, v in zip(names, state, strict=True)}
    spread = [p for p in case.model.parameters if p.has_spread]
    place |= {p.name: number(p.nominal.middle) for p in case.model.parameters if _is_constant(p.spread, p.nominal)}
    box = Box(
        tuple(p.name for p in case.model.parameters),
        tuple(p.spread if p in spread else Interval(p.nominal.lower, p.nominal.upper) for p in case.model.parameters),
    )
    for name, equation in zip(names, rest_equations(case), strict=True):
        at_rest = resolve_kinks(substitute(equation, place), box)
        if not vanishes(at_rest):
            return f"the equation of {name} does not vanish at the stated point for every parameter combination"
    for equation in vector_field(case).equations:
        for condition in conditions(equation):
            at_point = Condition(condition.relation, substitute(condition.expression, place))
            if not condition_holds(at_point, box).holds:
                return f"{condition.expression} is not proved regular at the stated point for every combination"
    return ""


def _is_constant(spread: Interval, nominal: Ball) -> bool:
    return spread.is_point and nominal.is_exact
