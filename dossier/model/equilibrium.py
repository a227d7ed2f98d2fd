"""An equilibrium of the nominal closed loop, with the class of its linear part."""

from __future__ import annotations

from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Literal

from dossier.model.ball import Ball
from dossier.model.course import Course

StabilityClass = Literal["stable", "unstable", "undecided"]


@dataclass(frozen=True, slots=True)
class Eigenvalue:
    """A disc of the complex plane that holds `multiplicity` eigenvalues; units 1/s, or 1 for sampled models."""

    real: Fraction
    imaginary: Fraction
    radius: Fraction
    multiplicity: int = 1


@dataclass(frozen=True, slots=True)
class Equilibrium:
    """One proved equilibrium: `state` is its enclosure, radius 0 where it is rational and exact.

    `fixed_for_all` says that the same point is an equilibrium for every parameter combination.  With a `course` it
    stands for the equilibria of all combinations in a cell, and `state` encloses every one of them.
    """

    identifier: str
    state: tuple[Ball, ...]
    chosen: bool
    inside_domain: bool
    stability: StabilityClass
    eigenvalues: tuple[Eigenvalue, ...]
    fixed_for_all: bool = False
    remarks: tuple[str, ...] = ()
    course: Course | None = None

    def along(self, course: Course) -> Equilibrium:
        """The same operating point for the combinations of a cell."""
        return replace(self, state=course.hull(), fixed_for_all=False, course=course)
