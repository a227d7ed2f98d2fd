"""List all equilibria of a case in its search box, with proof; and prove such a list a second time.

Theorem E (`dossier.model.theorem`).  `enclose_equilibria` runs the branch and bound from floating seeds;
`check_roots` believes neither seeds nor list: every uniqueness box is verified in ball arithmetic, and the search
box is covered anew from these boxes alone.  Statements hold at the nominal parameter combination.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import combinations
from typing import Final

import numpy as np

from dossier.checks.branch_and_bound import Cover, cover, inside_known
from dossier.checks.intervals import Span
from dossier.checks.listing import TIE, distance_scales, list_equilibria, region_distance, verify_fixed
from dossier.checks.newton import System, UniqueBox, box_around
from dossier.checks.solutions import (
    Enclosure,
    RestProblem,
    holds_one,
    holds_solution,
    lies_in,
    place_of,
    rest_problem,
    tighten,
)
from dossier.model.ball import Ball
from dossier.model.case import NOMINAL, Case
from dossier.model.claim import RootsClaim, SolutionBox
from dossier.model.equilibrium import Equilibrium
from dossier.model.finding import Enclosure as Fact
from dossier.model.finding import Finding, Premise, weakest
from dossier.model.loop import model_hash
from dossier.model.region import Box, Interval

__all__ = [
    "Unbounded", "check_roots", "cluster_texts", "enclose_equilibria", "list_equilibria", "verify_fixed",
]  # fmt: skip

HALVINGS: Final = 40
"""A uniqueness box of the tapes is halved up to so often until ball arithmetic, which is coarser on wide boxes,
confirms it: from the whole search box down to rounding level."""


@dataclass(frozen=True, slots=True)
class Unbounded:
    """No list can be made: the search box has no bound on the sides of `states`."""

    states: tuple[str, ...]

    @property
    def reason(self) -> str:
        """One sentence for the report."""
        return f"the search box is not bounded in {', '.join(self.states)}"


def system_of(case: Case) -> System:
    """The nominal equations of rest over the search box, for interval Newton steps."""
    problem = rest_problem(case)
    return System(problem.equations, problem.states, problem.constants, case.search)


def enclose_equilibria(case: Case, seeds: Iterable[Sequence[float]], boxes: int) -> RootsClaim | Unbounded:
    """All equilibria in the search box, from floating `seeds` (states in SI) and at most `boxes` boxes.

    The claim is complete only where nothing is left undecided.
    """
    unbounded = tuple(n for n, side in case.search.items() if not side.is_bounded)
    if unbounded:
        return Unbounded(unbounded)
    system, problem = system_of(case), rest_problem(case)
    found = cover(system, _seeded(system, seeds), boxes)
    solutions, undecided = _settle(case, system, problem, found)
    return RootsClaim(
        f"{case.name}.R1", model_hash(case), NOMINAL, "E", case.search, tuple(solutions), tuple(undecided),
        not undecided, found.boxes,
    )  # fmt: skip


def _seeded(system: System, seeds: Iterable[Sequence[float]]) -> list[UniqueBox]:
    """Uniqueness boxes around seeds, each seed used only where no box holds it yet."""
    known: list[UniqueBox] = []
    for seed in seeds:
        state = np.asarray(seed, float) / system.scale
        if not np.isfinite(state).all() or inside_known(Span(state[:, None], state[:, None]), known).any():
            continue
        found = box_around(system, state)
        if found is not None:
            known.append(found)
    return known


def _settle(case: Case, system: System, problem: RestProblem, found: Cover) -> tuple[list[SolutionBox], list[Box]]:
    """Confirm, tighten, merge and place every zero; what resists joins the undecided boxes."""
    undecided = [system.rational(u) for u in found.undecided]
    solutions: list[SolutionBox] = []
    for zero in found.zeros:
        solution = _confirmed(system, problem, zero, case.search)
        if solution is None:
            undecided.append(system.rational(zero.box))
            continue
        if any(_is_same(solution, other) for other in solutions):
            continue
        place = place_of(solution.enclosure, case.search)
        if place == "undecided":
            undecided.append(_box_of(case.model.state_names, solution.enclosure))
        elif place == "inside":
            solutions.append(solution)
    return sorted(solutions, key=lambda s: tuple(b.middle for b in s.enclosure)), undecided


def _box_of(names: tuple[str, ...], enclosure: Enclosure) -> Box:
    return Box(names, tuple(Interval(b.lower, b.upper) for b in enclosure))


def _is_same(a: SolutionBox, b: SolutionBox) -> bool:
    """The solution of one lies in the uniqueness box of the other, so it is the other's."""
    return lies_in(a.enclosure, b.uniqueness) or lies_in(b.enclosure, a.uniqueness)


def _confirmed(system: System, problem: RestProblem, zero: UniqueBox, search: Box) -> SolutionBox | None:
    """The zero with a uniqueness box that ball arithmetic confirms as well, around the same enclosure."""
    whole = system.rational(zero.box)
    start = tuple(s.middle for s in system.rational(zero.zero).intervals)
    enclosure = tighten(problem, whole, start, search)
    if enclosure is None:
        return None
    centre = [b.middle for b in enclosure]
    for k in range(HALVINGS):
        candidate = _smaller(whole, centre, k)
        if lies_in(enclosure, candidate) and holds_one(problem, candidate):
            return SolutionBox(candidate, enclosure)
    return None


def _smaller(box: Box, centre: Sequence[Fraction], halvings: int) -> Box:
    """`box` itself, or shrunk 2^k times towards `centre`, on dyadic ends."""
    share = Fraction(1, 2**halvings)
    sides = []
    for side, c in zip(box.intervals, centre, strict=True):
        lower, upper = side.bounds
        near = c if not halvings else _dyadic(c, (upper - lower) * share)
        sides.append(Interval(near + (lower - near) * share, near + (upper - near) * share))
    return Box(box.names, tuple(sides))


def _dyadic(value: Fraction, width: Fraction) -> Fraction:
    """A short dyadic number within a thousandth of `width` of `value`."""
    grid = Fraction(2) ** (width.numerator.bit_length() - width.denominator.bit_length() - 12)
    return round(value / grid) * grid


def cluster_texts(claim: RootsClaim) -> tuple[str, ...]:
    """One sentence per undecided part of the search box; it never says that nothing is there."""
    return tuple(
        "not decided: "
        + ", ".join(f"{n} in [{float(i.bounds[0]):.9g}, {float(i.bounds[1]):.9g}]" for n, i in box.items())
        for box in claim.undecided
    )


def check_roots(case: Case, claim: RootsClaim, boxes: int) -> Finding:
    """Prove a list of equilibria again: every solution in ball arithmetic, the cover from the list alone.

    The facts name the number of equilibria.  Undecided, never proved, where anything is missing.
    """
    premises = tuple(_premises(case, claim, boxes))
    result, strength = weakest(premises)
    count = Fraction(len(claim.solutions))
    noun = "equilibrium" if count == 1 else "equilibria"
    statement = f"the search box holds exactly {count} {noun}, each in a proved enclosure"
    if not count:
        statement = "the search box holds no equilibrium"
    facts = {"equilibria found": Fact(count, count, "1")} if result == "proved" else {}
    return Finding(
        claim.identifier, "interval", result, strength, NOMINAL, "E", statement, premises, facts, (claim.identifier,)
    )


def _premises(case: Case, claim: RootsClaim, boxes: int) -> list[Premise]:
    ident = claim.identifier
    if claim.model_hash != model_hash(case) or claim.search != case.search or claim.over != NOMINAL:
        text = "the list is about this closed loop and search box"
        return [Premise("model", text, "undecided", "exact", "another model or box was meant", ident)]
    doubts = [*_doubts_about_solutions(case, claim)]
    unique = Premise(
        "unique", "the Krawczyk operator maps each uniqueness box into its own interior",
        "undecided" if doubts else "proved", "enclosed", "; ".join(doubts), ident,
    )  # fmt: skip
    if doubts:
        open_cover = "not tried with uniqueness boxes that are not confirmed"
        return [Premise("cover", _COVER, "not run", "enclosed", open_cover, ident), unique]
    gap = _gap_in_cover(case, claim, boxes)
    return [Premise("cover", _COVER, "undecided" if gap else "proved", "enclosed", gap, ident), unique]


_COVER: Final = "every part of the search box is excluded or lies in a uniqueness box"


def _doubts_about_solutions(case: Case, claim: RootsClaim) -> Iterable[str]:
    problem = rest_problem(case)
    for number, solution in enumerate(claim.solutions, 1):
        if solution.uniqueness.names != problem.states or not solution.uniqueness.is_bounded:
            yield f"solution {number} is not over the states"
        elif len(solution.enclosure) != len(problem.states):
            yield f"solution {number} has no enclosure of every state"
        elif not lies_in(solution.enclosure, solution.uniqueness):
            yield f"the enclosure of solution {number} leaves its uniqueness box"
        elif not lies_in(solution.enclosure, case.search):
            yield f"solution {number} is not in the search box"
        elif not holds_one(problem, solution.uniqueness):
            yield f"the uniqueness box of solution {number} is not confirmed"
        elif not holds_solution(problem, solution.enclosure):
            yield f"the enclosure of solution {number} is not confirmed"
    for (i, a), (j, b) in combinations(enumerate(claim.solutions, 1), 2):
        if not _is_apart(a.enclosure, b.enclosure):
            yield f"solutions {i} and {j} may be the same"


def is_alone_near_guess(case: Case, claim: RootsClaim, chosen: Equilibrium, boxes: int) -> bool:
    """No other equilibrium of the search box is about as near to the guess of `case` as `chosen`.

    The box that holds all points up to `TIE` times as far away is covered anew; distances as in
    `dossier.checks.listing.region_distance`.
    """
    if case.near is None:
        return False
    if chosen.state == tuple(Ball(v) for v in case.near):
        return True
    reach = Fraction(TIE * region_distance(case, chosen.state, case.near) * (1 + ROUNDING))
    sides = []
    for value, scale, side in zip(case.near, distance_scales(case), case.search.intervals, strict=True):
        lower, upper = side.bounds
        low, high = max(lower, value - reach * scale), min(upper, value + reach * scale)
        if low > high:
            return False
        sides.append(Interval(low, high))
    around = replace(case, search=Box(case.search.names, tuple(sides)))
    if any(s.is_point for s in sides):
        return False
    system, problem = system_of(around), rest_problem(case)
    mine = [s for s in claim.solutions if lies_in(chosen.state, s.uniqueness) and holds_one(problem, s.uniqueness)]
    known = [UniqueBox(system.scaled(s.uniqueness), system.scaled(s.uniqueness)) for s in mine]
    found = cover(system, known, boxes)
    if not found.within_budget or found.undecided:
        return False
    for zero in found.zeros[len(known) :]:
        solution = _confirmed(system, problem, zero, around.search)
        if solution is None:
            return False
        if not lies_in(chosen.state, solution.uniqueness) and place_of(solution.enclosure, around.search) != "outside":
            return False
    return True


ROUNDING: Final = 1e-9
"""Relative widening of a distance computed in floating point."""


def _is_apart(a: Enclosure, b: Enclosure) -> bool:
    return any(x.upper < y.lower or y.upper < x.lower for x, y in zip(a, b, strict=True))


def _gap_in_cover(case: Case, claim: RootsClaim, boxes: int) -> str:
    """What the new cover leaves open beyond the list; empty where it confirms the list."""
    if claim.undecided or not claim.complete:
        return "; ".join(cluster_texts(claim)) or "the list does not claim to be complete"
    system, problem = system_of(case), rest_problem(case)
    known = [UniqueBox(system.scaled(s.uniqueness), system.scaled(s.uniqueness)) for s in claim.solutions]
    again = cover(system, known, boxes)
    if not again.within_budget:
        return f"not finished with {boxes} boxes"
    if again.undecided:
        return f"{len(again.undecided)} parts of the search box stay undecided"
    for zero in again.zeros[len(known) :]:
        solution = _confirmed(system, problem, zero, case.search)
        if solution is None:
            return "a further zero of the cover is not confirmed"
        if any(lies_in(solution.enclosure, s.uniqueness) for s in claim.solutions):
            continue
        if place_of(solution.enclosure, case.search) != "outside":
            return "the cover holds an equilibrium that is not listed"
    return ""
