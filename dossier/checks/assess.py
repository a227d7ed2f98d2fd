"""From a case and unbelieved claims to findings: verify every claim, then every criterion.

Used alike by the build and by the separate recheck; it needs no search and no solver.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Final

from dossier.checks.candidate import check_candidate
from dossier.checks.cells import check_cells
from dossier.checks.combination import check_combination
from dossier.checks.cover import check_cover
from dossier.checks.criteria.existence import establish_existence
from dossier.checks.criteria.linear import establish_linear
from dossier.checks.criteria.margins import establish_margins
from dossier.checks.criteria.region import establish_region
from dossier.checks.equilibria import (
    check_roots,
    cluster_texts,
    is_alone_near_guess,
    list_equilibria,
    verify_fixed,
)
from dossier.checks.frequency import check_margins
from dossier.checks.knowledge import Knowledge
from dossier.checks.linear import check_routh, classify, routh_claim
from dossier.checks.listing import nearest
from dossier.checks.lyapunov import check_lyapunov
from dossier.checks.movement import Movement, check_absence, check_branch, check_end
from dossier.checks.spectral import check_matrix
from dossier.checks.spectrum import eigenvalue_discs, spectral_values
from dossier.model.case import Case, Criterion
from dossier.model.claim import (
    AbsenceClaim,
    BranchClaim,
    CandidateClaim,
    CellsClaim,
    Claim,
    CombinationClaim,
    CoverClaim,
    EndClaim,
    LyapunovClaim,
    MatrixClaim,
    RootsClaim,
    RouthClaim,
    SturmClaim,
)
from dossier.model.equilibrium import Equilibrium
from dossier.model.finding import Finding, Premise
from dossier.model.outcome import LoopMargins

SECOND_WITNESS_BOXES: Final = 100_000
"""Boxes for the interval witness beside an exact certificate; near the critical level it may end undecided."""

FAMILIES: Final[Mapping[str, Callable[[Knowledge, Criterion], tuple[Finding, ...]]]] = {
    "existence": establish_existence,
    "equilibria_listed": establish_existence,
    "equilibrium_value": establish_existence,
    "asymptotic_stability": establish_linear,
    "exponential_stability": establish_linear,
    "decay_rate": establish_linear,
    "damping_ratio": establish_linear,
    "contraction": establish_linear,
    "attraction": establish_region,
    "limits_kept": establish_region,
    "excursion": establish_region,
    "gain_margin": establish_margins,
    "phase_margin": establish_margins,
    "delay_margin": establish_margins,
    "peak_sensitivity": establish_margins,
}
"""Which module decides each claim; the others are judged not attempted."""


@dataclass(frozen=True, slots=True)
class Assessment:
    """`missing` is set when the search box is proved to hold no equilibrium though one is needed."""

    knowledge: Knowledge
    about_claims: tuple[Finding, ...]
    about_criteria: tuple[Finding, ...]
    missing: Finding | None
    clusters: tuple[str, ...]
    proved_sets: tuple[LyapunovClaim | CoverClaim, ...]


def assess(case: Case, claims: tuple[Claim, ...], boxes: int) -> Assessment:
    """Verify `claims`, gather what is known, and establish every criterion; `boxes` bounds each cover.

    Raises ValueError for claims that share an identifier: a finding about one would serve the other.
    """
    if len({c.identifier for c in claims}) < len(claims):
        raise ValueError("two certificates have the same identifier")
    roots = next((c for c in claims if isinstance(c, RootsClaim)), None)
    about_roots = () if roots is None else (check_roots(case, roots, boxes),)
    complete = any(f.result == "proved" for f in about_roots)
    equilibria, place, why = locate(case, roots, complete, boxes)
    equilibria = tuple(_with_spectrum(case, e) for e in equilibria)
    chosen = next((e for e in equilibria if e.chosen), None)
    moved, movement = _movement(case, claims, chosen, boxes)
    verified, margins = _verify(case, claims, equilibria, chosen, movement, boxes)
    findings = (*about_roots, *moved, *verified)
    knowledge = Knowledge(
        case, equilibria, complete, claims, findings, place,
        {} if chosen is None else spectral_values(case, chosen), margins, why,
        movement,
    )  # fmt: skip
    about_criteria = tuple(f for c in case.criteria if c.claim in FAMILIES for f in FAMILIES[c.claim](knowledge, c))
    missing = next(iter(about_roots), None) if complete and not equilibria and not case.none_expected else None
    sets = [c for c in claims if isinstance(c, LyapunovClaim | CoverClaim) and knowledge.proved(c.identifier)]
    return Assessment(
        knowledge, findings, about_criteria, missing, () if roots is None else cluster_texts(roots), tuple(sets)
    )


def locate(
    case: Case, roots: RootsClaim | None, complete: bool, boxes: int
) -> tuple[tuple[Equilibrium, ...], Premise, dict[str, str]]:
    """The proved equilibria, the premise that the chosen point is one, and what could not be had.

    A point stated with ``at`` is verified for every combination by itself, whatever the list says.  One that a guess
    chooses is chosen only if none can be as near: either the list is proved `complete`, or what is that near is.
    """
    unavailable: dict[str, str] = {}
    listed = () if roots is None else list_equilibria(case, roots)
    if roots is None:
        unavailable["equilibria"] = "the equilibria were not listed: the search box is not bounded on every side"
    if case.fixed is not None:
        verified = verify_fixed(case)
        if isinstance(verified, str):
            premise = Premise("equilibrium", "the stated point is an equilibrium", "undecided", "exact", verified)
            return tuple(replace(e, chosen=False) for e in listed), premise, unavailable
        listed = merge_fixed(listed, verified)
    chosen = next((e for e in listed if e.chosen), None)
    if chosen is None:
        return listed, Premise("equilibrium", "an equilibrium is proved", "undecided", "enclosed"), unavailable
    if case.fixed is None and roots is not None:
        rivals = len(nearest(case, listed)) > 1
        if rivals or not (complete or is_alone_near_guess(case, roots, chosen, boxes)):
            why = "several equilibria are about as near to the guess" if rivals else (
                "the list of equilibria is not proved complete near the guess, so another one may be meant"
            )  # fmt: skip
            text = "the equilibrium nearest to the guess is proved"
            premise = Premise("equilibrium", text, "undecided", "enclosed", why)
            return tuple(replace(e, chosen=False) for e in listed), premise, unavailable | {"equilibrium": why}
    exact = all(b.is_exact for b in chosen.state)
    text = f"{chosen.identifier} is an equilibrium" + (" for every combination" if chosen.fixed_for_all else "")
    evidence = chosen.identifier if roots is None else roots.identifier
    return listed, Premise("equilibrium", text, "proved", "exact" if exact else "enclosed", "", evidence), unavailable


def merge_fixed(listed: tuple[Equilibrium, ...], verified: Equilibrium) -> tuple[Equilibrium, ...]:
    """The list with the stated point as the chosen one, under the id it has there."""
    same = [e for e in listed if _holds(e, verified)]
    if not same:
        return (
            (verified, *(replace(e, chosen=False) for e in listed))
            if not listed
            else (
                *(replace(e, chosen=False) for e in listed),
                replace(verified, identifier=f"{verified.identifier.rpartition('.')[0]}.E{len(listed) + 1}"),
            )
        )
    return tuple(
        replace(verified, identifier=e.identifier) if e is same[0] else replace(e, chosen=False) for e in listed
    )


def _holds(candidate: Equilibrium, point: Equilibrium) -> bool:
    return all(b.lower <= p.middle <= b.upper for b, p in zip(candidate.state, point.state, strict=True))


def _with_spectrum(case: Case, equilibrium: Equilibrium) -> Equilibrium:
    claim = routh_claim(case, equilibrium)
    return replace(
        equilibrium, stability=classify(claim), eigenvalues=eigenvalue_discs(case, equilibrium),
        remarks=(*equilibrium.remarks, *((claim,) if isinstance(claim, str) else ())),
    )  # fmt: skip


def _movement(
    case: Case, claims: tuple[Claim, ...], chosen: Equilibrium | None, boxes: int
) -> tuple[list[Finding], Movement | None]:
    """What is proved of the equilibrium's movement over the spreads; every other claim about them may rest on it."""
    findings: list[Finding] = []
    movement = None if chosen is None else Movement(chosen)
    for claim in claims:
        if isinstance(claim, AbsenceClaim):
            findings.append(check_absence(case, claim, boxes))
        elif isinstance(claim, EndClaim) and chosen is not None:
            findings.append(check_end(case, chosen, claim, boxes))
        elif isinstance(claim, BranchClaim) and chosen is not None:
            finding, found = check_branch(case, chosen, claim)
            findings.append(finding)
            movement = found or movement
    return findings, movement


def _verify(
    case: Case,
    claims: tuple[Claim, ...],
    equilibria: tuple[Equilibrium, ...],
    chosen: Equilibrium | None,
    movement: Movement | None,
    boxes: int,
) -> tuple[list[Finding], tuple[LoopMargins, ...]]:
    findings: list[Finding] = []
    margins: list[LoopMargins] = []
    by_id = {e.identifier: e for e in equilibria}
    for claim in claims:
        if isinstance(claim, RouthClaim) and claim.equilibrium in by_id:
            findings.append(check_routh(case, by_id[claim.equilibrium], claim))
        if chosen is None or movement is None:
            continue
        if isinstance(claim, MatrixClaim):
            findings.append(check_matrix(case, chosen, claim, movement.on))
        elif isinstance(claim, CombinationClaim):
            findings.append(check_combination(case, chosen, claim))
        elif isinstance(claim, CellsClaim):
            findings.append(check_cells(case, chosen, claim, movement.on))
        elif isinstance(claim, LyapunovClaim):
            findings.append(check_lyapunov(case, chosen, claim, movement.on))
            findings.append(check_cover(case, chosen, claim, min(boxes, SECOND_WITNESS_BOXES)))
        elif isinstance(claim, CandidateClaim):
            findings.append(check_candidate(case, chosen, claim, boxes))
        elif isinstance(claim, CoverClaim):
            findings.append(check_cover(case, chosen, claim, boxes))
        elif isinstance(claim, SturmClaim):
            finding, measured = check_margins(case, chosen, claim)
            findings.append(finding)
            margins += [] if measured is None else [measured]
    return findings, tuple(margins)
