"""Verify a certificate that cuts the box of the spreads into cells, each with a Lyapunov function of its own.

Parameters that do not vary stay where they are during a motion, so every motion lives in one cell and T2 (T3)
with T7 holds there; the cells leave no combination out.
"""

from __future__ import annotations

from collections.abc import Iterator

from dossier.checks.lyapunov import Where, set_premises
from dossier.checks.spectral import covers_exactly
from dossier.model.affine import spread_box
from dossier.model.case import TOLERANCES, Case
from dossier.model.claim import CellsClaim, LyapunovClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.finding import Finding, Premise, Result, weakest
from dossier.model.loop import model_hash


def check_cells(case: Case, equilibrium: Equilibrium, claim: CellsClaim, where: Where | None = None) -> Finding:
    """Verify that the cells cover the box and that the set of every cell attracts, for every combination in it.

    `where` as for `dossier.checks.lyapunov.check_lyapunov`.
    """
    theorem = "T3" if case.model.time == "sampled" else "T2"
    premises = tuple(_premises(case, equilibrium, claim, where))
    result, strength = weakest(premises)
    count = len(claim.cells)
    statement = (
        f"V of its cell is positive and falls in the cell's set around {claim.equilibrium}, for every parameter "
        f"combination ({count} cell{'' if count == 1 else 's'})"
    )
    return Finding(
        claim.identifier, "interval" if strength == "enclosed" else "exact", result, strength, TOLERANCES, theorem,
        statement, premises, evidence=(claim.identifier,),
    )  # fmt: skip


def _premises(case: Case, equilibrium: Equilibrium, claim: CellsClaim, where: Where | None) -> Iterator[Premise]:
    ident, whole = claim.identifier, spread_box(case)
    meant = (
        claim.model_hash == model_hash(case)
        and claim.equilibrium == equilibrium.identifier
        and claim.over == TOLERANCES
        and all(_belongs(cell, claim, place) for place, cell in enumerate(claim.cells, 1))
    )
    yield _premise("model", "every cell is about this closed loop, equilibrium and scope", meant, ident)
    if not meant:
        return
    boxes = [cell.parameters for cell in claim.cells]
    complete = bool(whole.names) and covers_exactly(boxes, whole)
    yield _premise("cells", "the cells leave no combination out", complete, ident, f"{len(boxes)} cells")
    varying = [p.name for p in case.model.parameters if p.varies and p.has_spread]
    kept = complete and all(box[name] == whole[name] for box in boxes for name in varying)
    yield _premise("kept", "no parameter that varies during a motion is cut", kept, ident)
    if kept:
        found = [tuple(set_premises(case, equilibrium, cell, where, of_cell=True)) for cell in claim.cells]
        yield from merged(found, ident)


def _belongs(cell: LyapunovClaim, claim: CellsClaim, place: int) -> bool:
    return cell.identifier == f"{claim.identifier}.{place}" and (cell.model_hash, cell.equilibrium, cell.over) == (
        claim.model_hash,
        claim.equilibrium,
        claim.over,
    )


def _premise(label: str, statement: str, shown: bool, evidence: str, detail: str = "") -> Premise:
    result: Result = "proved" if shown else "undecided"
    return Premise(label, statement, result, "exact", detail, evidence)


def merged(found: list[tuple[Premise, ...]], evidence: str) -> Iterator[Premise]:
    """One premise per label, which holds only if it was shown on every cell; a label some cell lacks is not shown."""
    labels = dict.fromkeys(p.label for premises in found for p in premises)
    for label in labels:
        same = [next((p for p in premises if p.label == label), None) for premises in found]
        there = tuple(p for p in same if p is not None)
        result, strength = weakest(there)
        if len(there) < len(found) and result == "proved" and label != "remainders":
            result = "undecided"
        worst = next((p for p in there if p.result != "proved"), there[0])
        detail = f"on each of {len(found)} cells" if result == "proved" else f"not on every cell: {worst.detail}"
        yield Premise(label, worst.statement, result, strength, detail, evidence)
