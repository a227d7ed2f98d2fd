"""What the checks have established about one operating point, before the criteria are looked at."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from dossier.checks.movement import Movement
from dossier.model.case import NOMINAL, TOLERANCES, Case, Scope
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
    RootsClaim,
)
from dossier.model.equilibrium import Equilibrium
from dossier.model.finding import Enclosure, Finding, Premise
from dossier.model.outcome import LoopMargins


@dataclass(frozen=True, slots=True)
class Knowledge:
    """`findings` are about claims, keyed by nothing: look them up by subject.

    `spectral` holds nominal enclosures ``decay rate`` (1/s), ``damping ratio`` (1) and ``contraction``
    (1) where they were enclosed.  `place` is the premise that the chosen point is an equilibrium.
    """

    case: Case
    equilibria: tuple[Equilibrium, ...]
    complete: bool
    claims: tuple[Claim, ...]
    findings: tuple[Finding, ...]
    place: Premise
    spectral: dict[str, Enclosure]
    margins: tuple[LoopMargins, ...]
    unavailable: dict[str, str]
    """Why a family of quantities could not be measured, by its name (``equilibria``, ``linear part``, loop ids)."""
    movement: Movement | None = None
    """Where the chosen equilibrium lies for other combinations; None without one."""

    @property
    def chosen(self) -> Equilibrium | None:
        """The equilibrium the operating point stands for."""
        return next((e for e in self.equilibria if e.chosen), None)

    @property
    def why_no_equilibrium(self) -> str:
        """Why nothing is known about the operating point itself."""
        return self.unavailable.get("equilibrium", "the operating point has no proved equilibrium")

    def proved(self, identifier: str, scopes: tuple[Scope, ...] = (NOMINAL, TOLERANCES)) -> Finding | None:
        """The rigorous finding that proves claim `identifier` for one of `scopes`, exact before interval."""
        ranked = sorted(self.findings, key=lambda f: f.check)
        return next(
            (
                f
                for f in ranked
                if f.subject == identifier and f.result == "proved" and f.is_rigorous and f.over in scopes
            ),
            None,
        )

    def listing(self) -> Finding | None:
        """The finding that proves the list of equilibria; it is about a list, whatever other claims are called."""
        lists = [c.identifier for c in self.claims if isinstance(c, RootsClaim)]
        return self.proved(lists[0]) if lists else None

    def sets(self, over: Scope) -> Iterator[tuple[LyapunovClaim | CoverClaim, Finding]]:
        """Proved attractive sets that serve `over`; one proved over tolerances also serves the nominal scope.

        What counts is the scope a check has proved, not the one the claim names: the interval witness of a
        claim over tolerances speaks of the nominal combination only.
        """
        scopes = (over, *_wider(over))
        for claim in self.claims:
            if isinstance(claim, LyapunovClaim | CoverClaim) and claim.over in scopes:
                finding = self.proved(claim.identifier, scopes)
                if finding is not None:
                    yield claim, finding

    def rest_of(self, claim: LyapunovClaim | CoverClaim, over: Scope) -> Equilibrium | None:
        """The equilibrium that a set is about: the nominal one, or where it lies over the combinations of `claim`."""
        if over == NOMINAL or not isinstance(claim, LyapunovClaim) or self.movement is None:
            return self.chosen
        return self.movement.on(claim.parameters)

    def candidate(self) -> tuple[CandidateClaim, Finding] | None:
        """The engineer's own V where the set it describes was proved attractive (at the nominal combination)."""
        for claim in self.claims:
            finding = self.proved(claim.identifier) if isinstance(claim, CandidateClaim) else None
            if isinstance(claim, CandidateClaim) and finding is not None:
                return claim, finding
        return None

    def cells(self) -> Iterator[tuple[CellsClaim, Finding]]:
        """Proved attractive sets cell by cell; they serve every scope, as each combination lies in a cell."""
        for claim in self.claims:
            finding = self.proved(claim.identifier, (TOLERANCES,)) if isinstance(claim, CellsClaim) else None
            if isinstance(claim, CellsClaim) and finding is not None:
                yield claim, finding

    def branch(self) -> Finding | None:
        """The finding that proves where the equilibrium lies over the whole box of the spreads."""
        branches = [c.identifier for c in self.claims if isinstance(c, BranchClaim)]
        return self.proved(branches[0], (TOLERANCES,)) if branches else None

    def absences(self) -> Iterator[tuple[AbsenceClaim, Finding]]:
        """Combinations of the spreads at which the search box was proved to hold no equilibrium."""
        for claim in self.claims:
            finding = self.proved(claim.identifier, (TOLERANCES,)) if isinstance(claim, AbsenceClaim) else None
            if isinstance(claim, AbsenceClaim) and finding is not None:
                yield claim, finding

    def ends(self) -> Iterator[tuple[EndClaim, Finding]]:
        """Combinations before which the equilibrium was proved to cease to exist."""
        for claim in self.claims:
            finding = self.proved(claim.identifier, (TOLERANCES,)) if isinstance(claim, EndClaim) else None
            if isinstance(claim, EndClaim) and finding is not None:
                yield claim, finding

    def combinations(self) -> Iterator[tuple[CombinationClaim, Finding]]:
        """Combinations of the spreads at which the eigenvalues were enclosed."""
        for claim in self.claims:
            finding = self.proved(claim.identifier) if isinstance(claim, CombinationClaim) else None
            if isinstance(claim, CombinationClaim) and finding is not None:
                yield claim, finding


def _wider(over: Scope) -> tuple[Scope, ...]:
    return ("tolerances",) if over == NOMINAL else ()
