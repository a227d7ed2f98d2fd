"""Stability of the nominal linear part by exact root counts (theorems T1 and T8)."""

from __future__ import annotations

from flint import fmpq

from dossier.checks.inertia import inertia, integer_array
from dossier.model.ball import WORKING_BITS, Ball, from_arb, precision, to_fraction
from dossier.model.case import NOMINAL, Case
from dossier.model.characteristic import bilinear, characteristic
from dossier.model.claim import RouthClaim
from dossier.model.equilibrium import Equilibrium, StabilityClass
from dossier.model.finding import Finding, Premise, Strength
from dossier.model.linear_part import NoLinearPart, Number, closed_matrix
from dossier.model.loop import model_hash


def stability_polynomial(case: Case, equilibrium: Equilibrium) -> list[Number] | NoLinearPart:
    """Polynomial whose roots must lie in the open left half-plane, highest power first."""
    matrix = closed_matrix(case, equilibrium)
    if isinstance(matrix, NoLinearPart):
        return matrix
    with precision(WORKING_BITS):
        polynomial = characteristic(matrix)
        return bilinear(polynomial) if case.model.time == "sampled" else polynomial


def _ball(value: Number) -> Ball | None:
    return Ball(to_fraction(value)) if isinstance(value, fmpq) else from_arb(value)


def routh_claim_id(equilibrium: Equilibrium) -> str:
    """``<point>.E2`` has its root count in ``<point>.L2``."""
    point, _, number = equilibrium.identifier.rpartition(".E")
    return f"{point}.L{number}"


def routh_claim(case: Case, equilibrium: Equilibrium) -> RouthClaim | str:
    """The root count of the linear part at `equilibrium`, or why it is not decided.

    Theorem T8 with an eigenvalue outside, T1 with all inside; none where the boundary decides nothing.
    """
    polynomial = stability_polynomial(case, equilibrium)
    if isinstance(polynomial, NoLinearPart):
        return polynomial.reason
    with precision(WORKING_BITS):
        counts = inertia(polynomial)
        balls = [_ball(c) for c in polynomial]
        if counts is None or any(b is None for b in balls):
            return "the enclosures do not decide on which side of the stability boundary the eigenvalues lie"
        theorem = "T8" if counts.outside else "" if counts.boundary else "T1"
        return RouthClaim(
            routh_claim_id(equilibrium), model_hash(case), NOMINAL, theorem, equilibrium.identifier,
            tuple(b for b in balls if b is not None), integer_array(polynomial),
            counts.inside, counts.boundary, counts.outside,
        )  # fmt: skip


def check_routh(case: Case, equilibrium: Equilibrium, claim: RouthClaim) -> Finding:
    """Derive the polynomial again and count its roots again."""
    own = routh_claim(case, equilibrium)
    strength: Strength = "enclosed"
    shown, detail = False, own if isinstance(own, str) else "the certificate differs from what the model gives"
    if isinstance(own, RouthClaim):
        shown = own == claim
        strength = "exact" if all(b.is_exact for b in own.polynomial) else "enclosed"
        detail = "" if shown else detail
    counts = f"{claim.inside} inside, {claim.boundary} on and {claim.outside} outside the stability boundary"
    premise = Premise(
        "spectrum", f"eigenvalues of the linear part: {counts}", "proved" if shown else "undecided",
        strength, detail, claim.identifier,
    )  # fmt: skip
    smooth = Premise(
        "smooth", "the right-hand side is continuously differentiable at the equilibrium",
        "proved" if shown else "undecided", strength, evidence=claim.identifier,
    )  # fmt: skip
    return Finding(
        claim.identifier, "exact" if strength == "exact" else "interval", premise.result, strength, NOMINAL,
        claim.theorem, f"the linear part at {claim.equilibrium} has {counts}", (smooth, premise),
        evidence=(claim.identifier,),
    )  # fmt: skip


def classify(claim: RouthClaim | str) -> StabilityClass:
    """``unstable`` only with an eigenvalue proved outside; one on the boundary leaves the class undecided."""
    if isinstance(claim, str):
        return "undecided"
    if claim.outside:
        return "unstable"
    return "stable" if not claim.boundary else "undecided"
