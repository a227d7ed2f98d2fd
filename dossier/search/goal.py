"""What a certificate should achieve: the region to cover and the slabs the proved set must stay in."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from dossier.model.region import Box


@dataclass(frozen=True, slots=True)
class Slab:
    """lower <= weights'y <= upper on the whole set; None: unbounded on that side.  `label` names its origin."""

    weights: tuple[Fraction, ...]
    lower: Fraction | None
    upper: Fraction | None
    label: str

    @property
    def reach(self) -> Fraction | None:
        """How far a set symmetric about the equilibrium may reach; None where unbounded."""
        sides = [abs(s) for s in (self.lower, self.upper) if s is not None]
        return min(sides, default=None)


@dataclass(frozen=True, slots=True)
class Goal:
    """`region` (offsets) should lie in the set; `slabs` must hold on it; `serves` are the criteria it is for."""

    region: Box
    slabs: tuple[Slab, ...]
    serves: tuple[str, ...] = ()
