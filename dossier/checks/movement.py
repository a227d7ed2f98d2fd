"""Verify that the equilibrium of the operating point moves continuously over the box of the spreads, and where it is.

The proved branch then tells where the equilibrium of any smaller cell lies (`Movement.on`).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from fractions import Fraction

from dossier.checks.branch_and_bound import cover
from dossier.checks.courses import Alone, RestFamily, alone_on, rest_family, same_on
from dossier.checks.equilibria import system_of
from dossier.checks.newton import System
from dossier.checks.path import SHARE, follow
from dossier.checks.spectral import covers_exactly
from dossier.model.affine import spread_box
from dossier.model.ball import Ball
from dossier.model.case import TOLERANCES, Case, at_combination
from dossier.model.claim import AbsenceClaim, BranchClaim, EndClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import number, substitute
from dossier.model.figures import figure
from dossier.model.finding import Enclosure, Finding, Premise, Result, Strength, weakest
from dossier.model.loop import model_hash
from dossier.model.region import Box, Interval


@dataclass
class Movement:
    """Where the equilibrium of the operating point is, for the combinations of any part of the box of the spreads.

    A fixed equilibrium is the same everywhere (`cells` is None); a moving one is known from the cells of a verified
    branch.  Answers are kept, as several certificates ask for the same cells.
    """

    equilibrium: Equilibrium
    family: RestFamily | None = None
    cells: tuple[Alone, ...] | None = None
    known: dict[Box, Equilibrium | None] = field(default_factory=dict)

    def on(self, cell: Box) -> Equilibrium | None:
        """The equilibrium of the combinations in `cell`; None where it is not proved."""
        if not cell.names or self.equilibrium.fixed_for_all:
            return self.equilibrium
        if self.cells is None or self.family is None or cell.names != self.family.whole.names:
            return None
        if cell not in self.known:
            self.known[cell] = self._on(self.family, self.cells, cell)
        return self.known[cell]

    def _on(self, family: RestFamily, cells: tuple[Alone, ...], cell: Box) -> Equilibrium | None:
        exactly = next((c for c in cells if c.course.parameters == cell), None)
        if exactly is not None:
            return self.equilibrium.along(exactly.course)
        values = tuple(i.middle for i in cell.intervals)
        point = Box(cell.names, tuple(Interval.point(v) for v in values))
        near = next((c for c in cells if c.course.parameters.contains(point)), None)
        if near is None or not family.whole.contains(cell):
            return None
        found = alone_on(family, cell, near.course.at(values))
        # The same equilibrium at the middle of the cell, hence on all of it (as in `same_on`).
        if found is None or not (
            found.holds(values, near.state_at(values)) or near.holds(values, found.state_at(values))
        ):
            return None
        return self.equilibrium.along(found.course)


def check_branch(case: Case, equilibrium: Equilibrium, claim: BranchClaim) -> tuple[Finding, Movement | None]:
    """Verify `claim`; where it holds, the movement it proves.  Facts: bounds of every state, `x at rest`."""
    found: list[Alone] = []
    premises = tuple(_premises(case, equilibrium, claim, found))
    result, strength = weakest(premises)
    facts = {}
    if result == "proved":
        for i, name in enumerate(case.model.state_names):
            balls = [a.course.hull()[i] for a in found]
            facts[f"{name} at rest"] = Enclosure(min(b.lower for b in balls), max(b.upper for b in balls), "SI")
    count = len(claim.cells)
    statement = (
        f"the equilibrium moves continuously over the tolerances and stays isolated, for every parameter "
        f"combination ({count} cell{'' if count == 1 else 's'})"
    )
    finding = Finding(
        claim.identifier, "interval", result, strength, TOLERANCES, "E", statement, premises, facts,
        (claim.identifier,),
    )  # fmt: skip
    return finding, Movement(equilibrium, rest_family(case), tuple(found)) if result == "proved" else None


def _premises(case: Case, equilibrium: Equilibrium, claim: BranchClaim, found: list[Alone]) -> Iterator[Premise]:
    """The premises; proved cells are added to `found`."""
    ident, whole = claim.identifier, spread_box(case)
    size = len(case.model.states)
    meant = (
        claim.model_hash == model_hash(case)
        and claim.equilibrium == equilibrium.identifier
        and claim.over == TOLERANCES
        and all(len(c.middle) == size and c.parameters.names == whole.names for c in claim.cells)
    )
    yield _premise("model", "the certificate is about this loop and its tolerances", meant, ident, "exact")
    if not meant:
        return
    boxes = [c.parameters for c in claim.cells]
    complete = bool(whole.names) and all(whole.contains(b) for b in boxes) and covers_exactly(boxes, whole)
    yield _premise("cover", "the cells leave no combination out", complete, ident, "exact", f"{len(boxes)} cells")
    if not complete:
        return
    family = rest_family(case)
    for cell in claim.cells:
        alone = alone_on(family, cell.parameters, cell.middle)
        if alone is None:
            break
        found.append(alone)
    every = len(found) == len(boxes)
    yield _premise(
        "unique", "for every combination of a cell exactly one equilibrium lies near the cell's plane (Krawczyk)",
        every, ident, "enclosed", f"{len(found)} of {len(boxes)} cells",
    )  # fmt: skip
    if not every:
        return
    joined = all(same_on(a, b) is not False for i, a in enumerate(found) for b in found[:i])
    yield _premise("joined", "cells that touch follow the same equilibrium", joined, ident, "enclosed")
    begins = any(_begins(case, equilibrium, a) for a in found)
    yield _premise(
        "nominal", f"at the nominal combination it is {equilibrium.identifier}", begins, ident, "enclosed"
    )  # fmt: skip


def _begins(case: Case, equilibrium: Equilibrium, alone: Alone) -> bool:
    """The nominal combination lies in the cell, and the nominal equilibrium within its radii."""
    nominal = {p.name: p.nominal for p in case.model.parameters}
    balls = [nominal[n] for n in alone.course.parameters.names]
    if not all(
        side.contains(Interval(b.lower, b.upper))
        for b, side in zip(balls, alone.course.parameters.intervals, strict=True)
    ):
        return False
    slack = [
        sum((abs(s) * b.radius for s, b in zip(row, balls, strict=True)), Fraction(0)) for row in alone.course.slopes
    ]
    widened = [Ball(b.middle, b.radius + s) for b, s in zip(equilibrium.state, slack, strict=True)]
    return alone.holds(tuple(b.middle for b in balls), widened)


def _premise(label: str, statement: str, shown: bool, evidence: str, strength: Strength, detail: str = "") -> Premise:
    result: Result = "proved" if shown else "undecided"
    return Premise(label, statement, result, strength, detail, evidence)


def check_absence(case: Case, claim: AbsenceClaim, boxes: int) -> Finding:
    """Verify that at the combination of `claim` no equilibrium lies in the search box, by covering it anew."""
    inside = _is_member(case, claim.values)
    meant = claim.model_hash == model_hash(case) and claim.over == TOLERANCES and claim.search == case.search
    ident, where = claim.identifier, combination_text(case, claim)
    premises = [
        _premise("model", "the certificate is about this loop and search box", meant, ident, "exact"),
        _premise("member", "the combination lies within the tolerances and ranges", inside, ident, "exact", where),
    ]
    if meant and inside and case.search.is_bounded:
        system = system_of(at_combination(case, claim.values))
        again = cover(system, [], boxes)
        empty = again.within_budget and not again.undecided and not again.zeros
        text = "every part of the search box is excluded"
        premises.append(_premise("cover", text, empty, ident, "enclosed", f"{again.boxes} boxes"))
    elif not case.search.is_bounded:
        premises.append(_premise("cover", "the search box is bounded", False, ident, "exact"))
    result, strength = weakest(tuple(premises))
    return Finding(
        ident, "interval", result, strength, TOLERANCES, "E", f"the search box holds no equilibrium at {where}",
        tuple(premises), {}, (ident,),
    )  # fmt: skip


def check_end(case: Case, equilibrium: Equilibrium, claim: EndClaim, boxes: int) -> Finding:
    """Verify that the branch ends before the combination of `claim`: inside a box that it cannot leave.

    The branch is continuous as long as it exists, so it would have to cross a face of the box, or be in it at the end.
    """
    premises = tuple(_end_premises(case, equilibrium, claim, boxes))
    result, strength = weakest(premises)
    where = words_of_values(case, claim.values)
    statement = f"the equilibrium ceases to exist on the straight way from the nominal combination to {where}"
    return Finding(
        claim.identifier, "interval", result, strength, TOLERANCES, "E", statement, premises, {}, (claim.identifier,)
    )


def _end_premises(case: Case, equilibrium: Equilibrium, claim: EndClaim, boxes: int) -> Iterator[Premise]:
    ident, states = claim.identifier, case.model.state_names
    inside = _is_member(case, claim.values)
    sides = claim.around.intervals
    meant = (
        claim.model_hash == model_hash(case)
        and claim.equilibrium == equilibrium.identifier
        and claim.over == TOLERANCES
        and claim.around.names == states
        and all(i.is_bounded and not i.is_point for i in sides)
        and 0 < claim.share < 1
    )
    yield _premise("model", "the certificate is about this loop and equilibrium", meant, ident, "exact")
    text = "the combination lies within the tolerances and ranges"
    yield _premise("member", text, inside, ident, "exact", words_of_values(case, claim.values))
    if not (meant and inside):
        return
    way = follow(case, equilibrium, claim.values, claim.share)
    followed = way.reached == claim.share and bool(way.pieces)
    yield _premise("followed", "the branch is proved up to the stated share of the way", followed, ident, "enclosed")
    if not followed:
        return
    there = way.pieces[-1].state_at((claim.share,))
    within = all(i.contains(Interval(b.lower, b.upper), strictly=True) for b, i in zip(there, sides, strict=True))
    yield _premise("within", "it lies in the box there", within, ident, "enclosed")
    rest = Interval(claim.share, Fraction(1))
    crossed = [
        (name, bound) for name, side in claim.around.items() for bound in side.bounds
        if not _is_empty(_face(way.family, claim.around, name, bound, rest), boxes)
    ]  # fmt: skip
    yield _premise("faces", "no equilibrium crosses a face of the box on the rest of the way", not crossed, ident,
                   "enclosed")  # fmt: skip
    at_end = tuple(substitute(e, {SHARE: number(1)}) for e in way.family.equations)
    empty = _is_empty(System(at_end, states, way.family.constants, claim.around), boxes)
    yield _premise("cover", "the box holds no equilibrium at the combination", empty, ident, "enclosed")


def _face(family: RestFamily, around: Box, name: str, bound: Fraction, rest: Interval) -> System:
    """The equations on one face of the box, with the share in place of the state that is fixed there."""
    equations = tuple(substitute(e, {name: number(bound)}) for e in family.equations)
    kept = [(n, i) for n, i in around.items() if n != name]
    unknowns = (*(n for n, _ in kept), SHARE)
    return System(equations, unknowns, family.constants, Box(unknowns, (*(i for _, i in kept), rest)))


def _is_empty(system: System, boxes: int) -> bool:
    """Every part of the system's box is excluded."""
    found = cover(system, [], boxes)
    return found.within_budget and not found.undecided and not found.zeros


def _is_member(case: Case, values: Mapping[str, Fraction]) -> bool:
    """`values` names every parameter with a spread, within it."""
    free = {p.name: p.spread for p in case.model.parameters if p.has_spread}
    return set(free) == set(values) and all(s.contains(Interval.point(values[n])) for n, s in free.items())


def combination_text(case: Case, claim: AbsenceClaim) -> str:
    """The combination in words, SI, in the order of the model's parameters."""
    return words_of_values(case, claim.values)


def words_of_values(case: Case, values: Mapping[str, Fraction]) -> str:
    """The same for the values themselves."""
    known = [p.name for p in case.model.parameters if p.name in values]
    return ", ".join(f"{name} = {figure(values[name])}" for name in known)
