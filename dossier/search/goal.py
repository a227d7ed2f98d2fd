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
        """How far a set symmetric about the equilibrium may reach; 0 where it lies outside; None where unbounded."""
        below = None if self.lower is None else max(-self.lower, Fraction(0))
        above = None if self.upper is None else max(self.upper, Fraction(0))
        return min((s for s in (below, above) if s is not None), default=None)


@dataclass(frozen=True, slots=True)
class Goal:
    """`region` (offsets) should lie in the set; `slabs` must hold on it; `serves` are the criteria it is for."""

    region: Box
    slabs: tuple[Slab, ...]
    serves: tuple[str, ...] = ()
