"""The linear part at one exact combination of the parameters: a counter-example over a box, or the other bound.

Everything is derived again for the machine built with exactly these values, by the same exact root counts
and certified discs as at the nominal combination (theorems T1 and T8).
"""

from __future__ import annotations

from fractions import Fraction
from typing import Final

from dossier.checks.linear import routh_claim
from dossier.checks.movement import words_of_values
from dossier.checks.path import place_at
from dossier.checks.spectrum import spectral_values
from dossier.model.case import TOLERANCES, Case, at_combination
from dossier.model.claim import CombinationClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.finding import Enclosure, Finding, Premise, Result, Strength, weakest
from dossier.model.loop import model_hash
from dossier.model.region import Interval

OUTSIDE: Final = "eigenvalues outside"
BOUNDARY: Final = "eigenvalues on the boundary"


def check_combination(case: Case, equilibrium: Equilibrium, claim: CombinationClaim) -> Finding:
    """Whether the combination belongs to the box, the point rests there too, and where its eigenvalues lie.

    Facts: how many eigenvalues lie `OUTSIDE` and on the `BOUNDARY`, and the enclosed decay rate, damping ratio
    and contraction.
    """
    free = {p.name: p.spread for p in case.model.parameters if p.has_spread}
    inside = set(free) == set(claim.values) and all(
        side.contains(Interval.point(claim.values[name])) for name, side in free.items()
    )
    meant = claim.model_hash == model_hash(case) and claim.over == TOLERANCES and not claim.theorem
    known = inside and equilibrium.identifier == claim.equilibrium
    there = place_at(case, equilibrium, claim.values) if known else None
    premises = [
        Premise(
            "model", "the certificate is about this loop and its tolerances", _result(meant), "exact",
            evidence=claim.identifier,
        ),
        Premise(
            "member", "the combination lies within the tolerances and ranges", _result(inside), "exact",
            words_of(case, claim), claim.identifier,
        ),
        Premise(
            "fixed", "the equilibrium is the same for every parameter combination", _result(there is not None), "exact",
            evidence=claim.equilibrium,
        )
        if equilibrium.fixed_for_all
        else Premise(
            "moved", "the equilibrium moves continuously from the nominal combination to this one",
            _result(there is not None), "enclosed", evidence=claim.equilibrium,
        ),
    ]  # fmt: skip
    facts: dict[str, Enclosure] = {}
    if there is not None and all(p.result == "proved" for p in premises):
        spectrum, facts = _spectrum(at_combination(case, claim.values), there, claim)
        premises.append(spectrum)
    result, strength = weakest(tuple(premises))
    return Finding(
        claim.identifier, "interval" if strength == "enclosed" else "exact", result, strength, TOLERANCES,
        "", f"the linear part at {words_of(case, claim)} is enclosed", tuple(premises), facts,
        (claim.identifier,),
    )  # fmt: skip


def count_of(finding: Finding, kind: str) -> int:
    """The number of eigenvalues `OUTSIDE` or on the `BOUNDARY` in a finding of `check_combination`; 0 if unknown."""
    fact = finding.facts.get(kind)
    return 0 if fact is None or fact.lower is None else int(fact.lower)


def words_of(case: Case, claim: CombinationClaim) -> str:
    """The combination in words, SI, in the order of the model's parameters."""
    return words_of_values(case, claim.values)


def _result(shown: bool) -> Result:
    return "proved" if shown else "undecided"


def _spectrum(case: Case, equilibrium: Equilibrium, claim: CombinationClaim) -> tuple[Premise, dict[str, Enclosure]]:
    counts = routh_claim(case, equilibrium)
    if isinstance(counts, str):
        return Premise("spectrum", "where the eigenvalues lie", "undecided", "enclosed", counts, claim.identifier), {}
    strength: Strength = "exact" if all(b.is_exact for b in counts.polynomial) else "enclosed"
    said = f"{counts.inside} inside, {counts.boundary} on and {counts.outside} outside the stability boundary"
    facts = {OUTSIDE: _whole(counts.outside), BOUNDARY: _whole(counts.boundary), **spectral_values(case, equilibrium)}
    return Premise("spectrum", f"eigenvalues there: {said}", "proved", strength, "", claim.identifier), facts


def _whole(number: int) -> Enclosure:
    return Enclosure(Fraction(number), Fraction(number), "1")
