"""Claims: what is asserted about a case, and the witness that would show it.

A claim is found by a search and believed by nobody until a check has verified it.  It is data only:
exact rationals, no floating point.  `dossier.model.text` reads and writes it.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Literal

from dossier.model.ball import Ball
from dossier.model.case import Scope
from dossier.model.polynomial import Exponents
from dossier.model.region import Box

Matrix = tuple[tuple[Fraction, ...], ...]


@dataclass(frozen=True, slots=True)
class Claim:
    """Common part: `identifier` is ``<operating point>.<suffix>``; `model_hash` ties it to the analysed loop."""

    identifier: str
    model_hash: str
    over: Scope
    theorem: str


@dataclass(frozen=True, slots=True)
class SolutionBox:
    """A box proved to hold exactly one equilibrium, and a tight enclosure of it."""

    uniqueness: Box
    enclosure: tuple[Ball, ...]


@dataclass(frozen=True, slots=True)
class RootsClaim(Claim):
    """Kind ``roots``: all equilibria in `search` at the nominal combination.

    Complete only when `undecided` is empty; `boxes` counts the boxes the cover needed.
    """

    search: Box
    solutions: tuple[SolutionBox, ...]
    undecided: tuple[Box, ...]
    complete: bool
    boxes: int


SpectralRegion = Literal["half-plane", "disc", "sector"]


@dataclass(frozen=True, slots=True)
class MatrixCell:
    """A part of the parameter box and the rational symmetric P that serves it.

    P is `matrix`, or with `slopes` (one symmetric matrix per parameter) `matrix` plus the sum of slope times (parameter
    - middle of its side), so that every combination has its own.
    """

    parameters: Box
    matrix: Matrix
    slopes: tuple[Matrix, ...] = ()

    def at(self, values: tuple[Fraction, ...]) -> Matrix:
        """P at one combination of the cell."""
        steps = [v - i.middle for v, i in zip(values, self.parameters.intervals, strict=True)]
        return tuple(
            tuple(
                v + sum((m[i][j] * d for m, d in zip(self.slopes, steps, strict=False)), Fraction(0))
                for j, v in enumerate(row)
            )
            for i, row in enumerate(self.matrix)
        )


@dataclass(frozen=True, slots=True)
class MatrixClaim(Claim):
    """Kind ``matrix``: all eigenvalues of the linear part lie in a region of the complex plane.

    ``half-plane``: Re(lambda) < -level; ``disc``: |lambda| < level; ``sector``: damping ratio > level.
    Shown by P > 0 and the Lyapunov inequality of that region on every cell; the cells cover the scope's box.
    """

    equilibrium: str
    region: SpectralRegion
    level: Fraction
    cells: tuple[MatrixCell, ...]


@dataclass(frozen=True, slots=True)
class RouthClaim(Claim):
    """Kind ``routh``: how many eigenvalues of the nominal linear part lie inside, on and outside the boundary.

    `polynomial` are the coefficients, highest first, of the characteristic polynomial (after the
    bilinear map for sampled models) as balls; `array` is the integer Routh array where it is regular.
    """

    equilibrium: str
    polynomial: tuple[Ball, ...]
    array: tuple[tuple[int, ...], ...]
    inside: int
    boundary: int
    outside: int


@dataclass(frozen=True, slots=True)
class CombinationClaim(Claim):
    """Kind ``combination``: the linear part at one exact combination of the parameters' spreads.

    The worst one a search could find: it bounds from the other side what is proved over the whole box, or
    refutes it.  `values` names every parameter with a spread, in SI.
    """

    equilibrium: str
    values: Mapping[str, Fraction]


@dataclass(frozen=True, slots=True)
class BranchCell:
    """A part of the box of the spreads, and a rational point near the equilibrium of its middle combination."""

    parameters: Box
    middle: tuple[Fraction, ...]


@dataclass(frozen=True, slots=True)
class BranchClaim(Claim):
    """Kind ``branch``: the equilibrium moves continuously over the whole box of the spreads, from its nominal place.

    On every cell one equilibrium is alone near a plane through it; in cells that touch it is the same one.
    """

    equilibrium: str
    cells: tuple[BranchCell, ...]


@dataclass(frozen=True, slots=True)
class AbsenceClaim(Claim):
    """Kind ``absence``: at one exact combination of the spreads the search box holds no equilibrium.

    `values` names every parameter with a spread, in SI; `boxes` counts the boxes the cover needed.
    """

    search: Box
    values: Mapping[str, Fraction]
    boxes: int


@dataclass(frozen=True, slots=True)
class EndClaim(Claim):
    """Kind ``end``: on the straight way from the nominal combination to `values` the equilibrium ceases to exist.

    After the `share` of the way it lies in the box `around` (absolute); from there on no equilibrium crosses the faces
    of that box, and at `values` the box holds none.
    """

    equilibrium: str
    values: Mapping[str, Fraction]
    share: Fraction
    around: Box


@dataclass(frozen=True, slots=True)
class Gram:
    """The polynomial z' `matrix` z over the monomials `basis` of the offsets."""

    basis: tuple[Exponents, ...]
    matrix: Matrix


@dataclass(frozen=True, slots=True)
class DecreaseWitness:
    """At one Bernstein index of the parameter box: -g = main + multiplier * (level - V).

    g is the numerator of the derivative (difference) of V; both Grams must be positive definite
    after the coefficient residual and its balls are absorbed into `main`.
    """

    index: Exponents
    main: Gram
    multiplier: Gram


@dataclass(frozen=True, slots=True)
class LyapunovClaim(Claim):
    """Kind ``gram``: {V <= level} is compact, inside the domain, invariant and attracted to the equilibrium.

    `function` is V over the offsets; `method` is ``quadratic``, ``sum of squares`` or ``given``.  `parameters` is
    the part of the box of spreads that it is about.  `expansion` is the order to which elementary functions of the
    states are expanded (`dossier.model.remainders`); 0 where there are none.
    """

    equilibrium: str
    method: Literal["quadratic", "sum of squares", "given"]
    function: Mapping[Exponents, Fraction]
    level: Fraction
    parameters: Box
    expansion: int
    decrease: tuple[DecreaseWitness, ...]


@dataclass(frozen=True, slots=True)
class CellsClaim(Claim):
    """Kind ``cells``: the box of the spreads is cut into cells, each with a V and a set of its own.

    A motion keeps its parameters, so it keeps its cell and its V.  Cells are numbered from 1 behind the identifier.
    """

    equilibrium: str
    cells: tuple[LyapunovClaim, ...]


@dataclass(frozen=True, slots=True)
class CoverClaim(Claim):
    """Kind ``cover``: the decrease of V on {0 < V <= level}, closed by interval branch and bound."""

    equilibrium: str
    function: Mapping[Exponents, Fraction]
    level: Fraction
    boxes: int


@dataclass(frozen=True, slots=True)
class CandidateClaim(Claim):
    """Kind ``candidate``: the engineer's own V, as the project file states it, at its own level, at nominal.

    Either the part of {V <= level} in the box `around` (offsets) attracts and V exceeds the level on the faces of that
    box; or `against` is an offset, joined to the equilibrium inside the set, at which V does not do what it should.
    """

    equilibrium: str
    level: Fraction
    around: Box | None
    against: tuple[Fraction, ...]


@dataclass(frozen=True, slots=True)
class Crossing:
    """One real root W = w^2 (or one boundary point) with an isolating interval and the loop value there."""

    lower: Fraction
    upper: Fraction


@dataclass(frozen=True, slots=True)
class SturmClaim(Claim):
    """Kind ``sturm``: margins of the loop broken at `loop`, from all real roots in W = w^2.

    1 + L = (a + c)/a with `open_loop` = a and `closed_loop` = a + c, highest power first, as balls.
    The three lists isolate every positive root of Im(c conj a), |a|^2 - |c|^2 and d|S|^2/dW.
    Sampled models: after the bilinear map, so that w is the tangent of half the angle per sample.
    """

    equilibrium: str
    loop: str
    open_loop: tuple[Ball, ...]
    closed_loop: tuple[Ball, ...]
    gain_crossings: tuple[Crossing, ...]
    phase_crossings: tuple[Crossing, ...]
    peak_candidates: tuple[Crossing, ...]


KINDS: Mapping[str, type[Claim]] = {
    "roots": RootsClaim,
    "matrix": MatrixClaim,
    "routh": RouthClaim,
    "combination": CombinationClaim,
    "branch": BranchClaim,
    "absence": AbsenceClaim,
    "end": EndClaim,
    "gram": LyapunovClaim,
    "cells": CellsClaim,
    "cover": CoverClaim,
    "candidate": CandidateClaim,
    "sturm": SturmClaim,
}


def kind_of(claim: Claim) -> str:
    """The certificate kind of `claim`, as named in the evidence format."""
    return next(k for k, t in KINDS.items() if type(claim) is t)
