"""The loop without its saturations and absolute values, and the slabs on which that is the same loop.

Each is replaced by the branch that is active at the equilibrium; certificates are then sought inside the slabs, and the
check proves on the set itself that no kink is met.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace
from fractions import Fraction
from typing import Final

import numpy as np

from dossier.model.affine import affine_parts, offset_forms
from dossier.model.case import Case, Scope
from dossier.model.claim import CellsClaim, LyapunovClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import SATURATION, Expression, fold, neg, nodes, rebuild, sub
from dossier.model.loop import model_hash, vector_field
from dossier.model.region import Box
from dossier.search.goal import Slab
from dossier.search.numeric import NumericFunction, nominal_floats

KEEP_OFF: Final = Fraction(1, 10**6)
"""Share by which a set keeps off a kink, so that the check can see it."""


def without_kinks(case: Case, equilibrium: Equilibrium) -> tuple[Case, tuple[Expression, ...]] | None:
    """The smooth loop and the distances that must stay positive; None without kinks, or at one."""
    loop = vector_field(case)
    if not any(n.op in ("abs", SATURATION) for e in loop.equations for n in nodes(e)):
        return None
    place = np.array([[float(b.middle)] for b in equilibrium.state])
    distances: dict[Expression, None] = {}
    floats = nominal_floats(case)

    def at_rest(expression: Expression) -> float:
        return float(NumericFunction((expression,), loop.states, floats)(place)[0][0])

    def visit(node: Expression, args: tuple[Expression, ...]) -> Expression:
        if node.op == "abs":
            branch = args[0] if at_rest(args[0]) > 0 else neg(args[0])
            distances.setdefault(branch)
            return branch
        if node.op == SATURATION:
            argument, lower, upper = args
            for distance in (sub(argument, lower), sub(upper, argument)):
                distances.setdefault(distance)
            return argument
        return rebuild(node, args)

    smooth = tuple(fold(e, visit) for e in loop.equations)
    if not all(at_rest(d) > 0 for d in distances):
        return None
    return replace(case, model=replace(case.model, equations=smooth)), tuple(distances)


def kink_slabs(
    case: Case, equilibrium: Equilibrium, distances: tuple[Expression, ...], over: Scope, cell: Box | None
) -> Iterator[Slab]:
    """Where every distance that is affine in the offsets stays positive, for the combinations of a cell."""
    for distance in distances:
        for form in offset_forms(case, equilibrium, distance, over, cell) or ():
            parts = affine_parts(form, len(case.model.states))
            if parts is None:
                break
            constant, weights = parts
            if any(w.middle for w in weights):
                lower = -constant.lower * (1 - KEEP_OFF)
                yield Slab(tuple(w.middle for w in weights), lower, None, "no limit of the command is met")


def of_case(case: Case, claim: LyapunovClaim) -> LyapunovClaim:
    """A claim about the smooth loop as one about `case`, with which it agrees on the set."""
    return replace(claim, model_hash=model_hash(case))


def cells_of_case(case: Case, claim: CellsClaim) -> CellsClaim:
    """The same for a claim in cells."""
    return replace(claim, model_hash=model_hash(case), cells=tuple(of_case(case, c) for c in claim.cells))


def verified_for(case: Case, verify: Callable[[LyapunovClaim], bool]) -> Callable[[LyapunovClaim], bool]:
    """`verify` asked about `case` where a search speaks of its smooth loop."""
    return lambda claim: verify(of_case(case, claim))
