"""How the equilibrium of an operating point moves with the parameters, on a part of the box of the spreads."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from dossier.model.ball import Ball
from dossier.model.region import Box


@dataclass(frozen=True, slots=True)
class Course:
    """Where the equilibrium lies for the combinations in `parameters`.

    x*(p) = `centre` + `slopes` (p - middle of `parameters`) + r(p) with |r_i(p)| <= `rest`_i for every p there.
    """

    parameters: Box
    centre: tuple[Fraction, ...]
    slopes: tuple[tuple[Fraction, ...], ...]
    rest: tuple[Fraction, ...]

    def hull(self) -> tuple[Ball, ...]:
        """Enclosures of the states of x*(p) over all p."""
        widths = [i.width / 2 for i in self.parameters.intervals]
        return tuple(
            Ball(middle, sum((abs(s) * w for s, w in zip(row, widths, strict=True)), rest))
            for middle, row, rest in zip(self.centre, self.slopes, self.rest, strict=True)
        )

    def at(self, values: tuple[Fraction, ...]) -> tuple[Fraction, ...]:
        """centre + slopes (p - middle) for one combination `values` of the parameters."""
        steps = [v - i.middle for v, i in zip(values, self.parameters.intervals, strict=True)]
        return tuple(
            c + sum((s * d for s, d in zip(row, steps, strict=True)), Fraction(0))
            for c, row in zip(self.centre, self.slopes, strict=True)
        )


def shift_of(state: str) -> str:
    """Name of the symbol for how far the equilibrium lies from its stated place; no project name has a space."""
    return f"shift of {state}"
