"""Cut the box of the spreads into cells until each has a quadratic certificate of its own.

Only parameters that stay constant during a motion may be cut: there each motion has one V for all time.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import Final

import numpy as np

from dossier.model.affine import spread_box
from dossier.model.attempt import Attempt
from dossier.model.case import TOLERANCES, Case
from dossier.model.claim import CellsClaim, LyapunovClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.loop import model_hash
from dossier.model.region import Box, Interval
from dossier.search.conic import meter
from dossier.search.effort import Effort
from dossier.search.goal import Goal
from dossier.search.offsets import ScaledLoop
from dossier.search.quadratic import Verify, seek_on_cell

UNEVEN: Final = 4
"""Cells may be so many times smaller than the budget's even cells; where those are too large still, it ends there."""

Where = Callable[[Box], Equilibrium | None]
GoalAt = Callable[[Equilibrium, Box | None], Goal]

SMALLEST: Final = Fraction(1, 64)
"""Share of a spread below which a cell is not cut: an answer that needs finer cells is not worth its length."""


def seek_cells(
    case: Case, equilibrium: Equilibrium, where: Where, goal: GoalAt, effort: Effort, suffix: str, verify: Verify
) -> tuple[tuple[Attempt, ...], CellsClaim | None]:
    """A claim whose cells cover the whole box, each with a verified set that covers the region; or None.

    `where` tells where the equilibrium of a cell lies, `goal` what is wanted there.
    """
    wanted = goal(equilibrium, None)
    subject = wanted.serves[0] if wanted.serves else case.name
    method, identifier = "quadratic, cell by cell of the tolerances", f"{case.name}.{suffix}"
    whole = spread_box(case)
    free = [p.name for p in case.model.parameters if p.has_spread and not p.varies]
    if not free or not wanted.region.is_bounded:
        return (), None
    waiting, done, looked, why = [whole], list[LyapunovClaim](), 0, ""
    begun = meter.programs
    while waiting:
        if meter.programs - begun > effort.programs:
            why = "the budget of conic programs is spent"
            break
        box = waiting.pop()
        looked += 1
        place, loop = where(box), None
        if place is None:
            why = "it is not proved where the equilibrium of a cell lies"
        else:
            tried, claim, loop = seek_on_cell(case, place, box, goal(place, box), effort, "cell", verify)
            if claim is not None:
                done.append(claim)
                continue
            why = tried[-1].remark if tried else why
        if _share(box, whole) * effort.cells * UNEVEN < 1:
            why = f"cells of {float(_share(box, whole)):.2g} of the box are still too large; {why}"
            break
        halves = _halves(loop, box, whole, free)
        if halves is None or len(done) + len(waiting) + 2 > effort.cells:
            why = f"the budget of cells is spent; {why}" if halves is not None else why
            break
        waiting.extend(halves)
    else:
        cells = tuple(_numbered(c, f"{identifier}.{k}") for k, c in enumerate(done, 1))
        claim = CellsClaim(identifier, model_hash(case), TOLERANCES, cells[0].theorem, equilibrium.identifier, cells)
        attempt = Attempt(subject, method, "found", f"{len(cells)} cells cover the box", {"cells": looked})
        return (attempt,), claim
    share = float(sum((_share(c.parameters, whole) for c in done), Fraction(0)))
    remark = f"proved on {share:.3g} of the box, then: {why}"
    return (Attempt(subject, method, "no candidate", remark, {"cells": looked}),), None


def _numbered(claim: LyapunovClaim, identifier: str) -> LyapunovClaim:
    return LyapunovClaim(
        identifier, claim.model_hash, claim.over, claim.theorem, claim.equilibrium, claim.method, claim.function,
        claim.level, claim.parameters, claim.expansion, claim.decrease,
    )  # fmt: skip


def _share(cell: Box, whole: Box) -> Fraction:
    share = Fraction(1)
    for part, side in zip(cell.intervals, whole.intervals, strict=True):
        share *= part.width / side.width
    return share


def _halves(loop: ScaledLoop | None, box: Box, whole: Box, free: list[str]) -> tuple[Box, Box] | None:
    """Cut the constant parameter whose two ends change the linear part most; None where all are too narrow.

    Without a loop, the side that is relatively widest.
    """
    effects: dict[int, float] = {}
    for place, (name, side) in enumerate(box.items()):
        if name in free and side.width > SMALLEST * whole[name].width:
            if loop is None:
                effects[place] = float(side.width / whole[name].width)
                continue
            column = loop.vertices[:, place]
            high = column > column.mean()
            if high.any() and not high.all():
                change = loop.linear[high].mean(axis=0) - loop.linear[~high].mean(axis=0)
                effects[place] = float(np.abs(change).max())
    if not effects:
        return None
    cut = max(effects, key=effects.__getitem__)
    side = box.intervals[cut]
    parts = (Interval(side.lower, side.middle), Interval(side.middle, side.upper))
    first, second = (Box(box.names, tuple(p if k == cut else s for k, s in enumerate(box.intervals))) for p in parts)
    return first, second
