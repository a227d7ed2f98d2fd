"""How much work a search may spend: counts, never seconds, so that every machine gives the same answer."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final


@dataclass(frozen=True, slots=True)
class Effort:
    """Budgets of one build.

    `newton_starts`: floating seeds for equilibria; `boxes`: branch-and-bound boxes per proof;
    `rounds`: conic programs with growing pools per quadratic search; `samples`: attack points per
    round; `levels`: level-set refinements; `cells`: parameter cells; `programs`: conic programs after which no
    further cell is begun; `motions`: simulated motions per campaign.
    """

    name: str
    newton_starts: int
    boxes: int
    rounds: int
    samples: int
    levels: int
    cells: int
    programs: int
    motions: int


EFFORTS: Final[dict[str, Effort]] = {
    e.name: e
    for e in (
        Effort("quick", 100, 200_000, 8, 4_000, 8, 16, 6_000, 200),
        Effort("standard", 300, 1_000_000, 20, 20_000, 16, 64, 15_000, 1_000),
        Effort("thorough", 1_000, 5_000_000, 40, 60_000, 24, 256, 100_000, 10_000),
    )
}
