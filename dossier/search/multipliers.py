"""Gram matrices that show the decrease of a given V on {V <= c}: one small conic program per Bernstein coefficient.

-g = z'Qz + (w'Sw)(c - V) with Q, S >= t I and t as large as possible (the S-procedure with a polynomial
multiplier: P. A. Parrilo, thesis, Caltech 2000; W. Tan and A. Packard, IEEE Trans. Autom. Control 53,
2008).  Interior solutions round well, so t is what is maximised.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations_with_replacement
from math import ceil, log2, prod
from typing import Final

import cvxpy
import numpy as np
from flint import fmpq_mpoly
from numpy.typing import NDArray
from scipy.sparse import csr_array

from dossier.model.ball import Ball
from dossier.model.claim import DecreaseWitness, Gram
from dossier.model.decrease import bernstein_coefficients, bernstein_count
from dossier.model.polynomial import Exponents, Ring, collapse
from dossier.model.region import Box
from dossier.search.conic import solve
from dossier.search.rounding import power_of_two_near, rescale, to_matrix

Array = NDArray[np.float64]

LEAST_BITS: Final = 20
MOST_BITS: Final = 60
"""Gram entries of order one are rounded between these; finer where the margin is thin."""
GUARD_BITS: Final = 8
"""Bits beyond the margin, so that rounding takes a small part of it."""
LEAST_MARGIN: Final = 1e-9
"""Margin t below which the residual of the solver would eat it: no witness."""
LARGEST_BASIS: Final = 130
"""Largest Gram basis tried; beyond it one program takes minutes."""
LARGEST_BASIS_OF_MANY: Final = 60
"""The same where there are more than a few programs of the kind, each of seconds."""
FEW: Final = 4
MOST_WITNESSES: Final = 4_096
"""Bernstein coefficients looked at; more belong to a smaller parameter box."""
TRACE_WEIGHT: Final = 1e-5
"""Penalty on the traces when a program is repeated: it keeps the iterates bounded."""


@dataclass(frozen=True, slots=True)
class NoWitness:
    """Why there is none; `index` names the Bernstein coefficient that failed, empty where none did."""

    reason: str
    index: Exponents = ()

    @property
    def text(self) -> str:
        """The reason with its place in the parameter box."""
        return f"{self.reason} at Bernstein index {self.index}" if any(self.index) else self.reason


@dataclass(frozen=True)
class Target:
    """Everything the programs of one V share: sign * g over `parameters`, V and the scales of the offsets."""

    numerator: fmpq_mpoly
    ring: Ring
    balls: Mapping[str, Ball]
    parameters: Box
    function: Mapping[Exponents, Fraction]
    scales: tuple[Fraction, ...]


def monomials(variables: int, least: int, most: int) -> tuple[Exponents, ...]:
    """All exponents of total degree `least` to `most`, degree by degree."""
    result = []
    for degree in range(least, most + 1):
        for places in combinations_with_replacement(range(variables), degree):
            result.append(tuple(places.count(i) for i in range(variables)))
    return tuple(result)


def _product(*factors: Exponents) -> Exponents:
    return tuple(map(sum, zip(*factors, strict=True)))


def bases(
    support: Collection[Exponents], function: Collection[Exponents], variables: int
) -> tuple[tuple[Exponents, ...], tuple[Exponents, ...]]:
    """Monomials of the main and of the multiplier Gram for targets with monomials in `support`.

    A monomial whose square neither the target nor a cross product can balance has a zero on the
    diagonal, hence a zero row: it is dropped, repeatedly (facial reduction along coordinates, as in
    J. Löfberg, IEEE Trans. Autom. Control 54, 2009, section III).
    """
    half = (max(sum(e) for e in support) + 1) // 2
    main, multiplier = list(monomials(variables, 1, half)), list(monomials(variables, 1, half - 1))
    while True:
        reached = set(support)
        reached.update(_product(a, b) for a in main for b in main if a != b)
        reached.update(_product(a, b, v) for a in multiplier for b in multiplier for v in function)
        kept = [m for m in main if _product(m, m) in reached]
        if len(kept) == len(main):
            return tuple(main), tuple(multiplier)
        main, multiplier = kept, [m for m in multiplier if m in kept]


def blocks(
    basis: tuple[Exponents, ...], support: Collection[Exponents], function: Collection[Exponents]
) -> list[list[int]]:
    """Positions of `basis` that must be coupled, one list per block.

    If target and V keep their values under some sign changes of the offsets, so does an averaged
    solution; then monomials couple only where their product has a parity that occurs (K. Gatermann and
    P. A. Parrilo, J. Pure Appl. Algebra 192, 2004, for sign symmetries).
    """
    span: set[Exponents] = {tuple(0 for _ in basis[0])} if basis else set()
    for exponents in (*support, *function):
        parity = tuple(k % 2 for k in exponents)
        if parity not in span:
            span |= {tuple((a + b) % 2 for a, b in zip(parity, s, strict=True)) for s in span}
    groups: list[list[int]] = []
    for place, exponents in enumerate(basis):
        for group in groups:
            if tuple(k % 2 for k in _product(exponents, basis[group[0]])) in span:
                group.append(place)
                break
        else:
            groups.append([place])
    return groups


class _GramVariable:
    """z'Qz over `basis`: one matrix variable per block."""

    def __init__(self, basis: tuple[Exponents, ...], groups: list[list[int]]) -> None:
        self.basis, self.groups = basis, groups
        self.parts = [cvxpy.Variable((len(g), len(g)), symmetric=True) for g in groups]

    def above(self, margin: cvxpy.Variable) -> list[cvxpy.Constraint]:
        return [part >> margin * np.eye(part.shape[0]) for part in self.parts]

    def coefficients(self, rows: Mapping[Exponents, int], factor: Mapping[Exponents, float]) -> cvxpy.Expression:
        """Coefficients of z'Qz times the fixed polynomial `factor`, in the order of `rows`."""
        total: cvxpy.Expression = cvxpy.Constant(np.zeros(len(rows)))
        for group, part in zip(self.groups, self.parts, strict=True):
            entries = [
                (coefficient, rows[_product(self.basis[a], self.basis[b], exponents)], i * len(group) + j)
                for i, a in enumerate(group)
                for j, b in enumerate(group)
                for exponents, coefficient in factor.items()
            ]
            values, places, columns = zip(*entries, strict=True)
            table = csr_array((values, (places, columns)), shape=(len(rows), len(group) ** 2))
            total = total + table @ cvxpy.vec(part, order="C")
        return total

    @property
    def trace(self) -> cvxpy.Expression:
        total: cvxpy.Expression = cvxpy.Constant(0.0)
        for part in self.parts:
            total = total + cvxpy.trace(part)
        return total

    @property
    def value(self) -> Array:
        whole = np.zeros((len(self.basis), len(self.basis)))
        for group, part in zip(self.groups, self.parts, strict=True):
            whole[np.ix_(group, group)] = part.value
        return whole


class MultiplierProgram:
    """The program of one V and level, compiled once and solved for every right-hand side, in scaled offsets."""

    def __init__(
        self,
        main: _GramVariable,
        multiplier: _GramVariable,
        function: Mapping[Exponents, float],
        level: float,
    ) -> None:
        size = len(main.basis[0])
        gap = {e: -c for e, c in function.items()}
        gap[(0,) * size] = level
        reached = [_product(a, b) for a in main.basis for b in main.basis]
        reached += [_product(a, b, e) for a in multiplier.basis for b in multiplier.basis for e in gap]
        self.rows = {e: i for i, e in enumerate(dict.fromkeys(reached))}
        self.main, self.multiplier = main, multiplier
        self.target = cvxpy.Parameter(len(self.rows))
        self.margin = cvxpy.Variable()
        total = main.coefficients(self.rows, {(0,) * size: 1.0}) + multiplier.coefficients(self.rows, gap)
        constraints = [*main.above(self.margin), *multiplier.above(self.margin), self.margin <= 1.0]
        constraints.append(total == self.target)
        self.problem = cvxpy.Problem(cvxpy.Maximize(self.margin), constraints)
        penalty = TRACE_WEIGHT * (main.trace + multiplier.trace)
        self.bounded = cvxpy.Problem(cvxpy.Maximize(self.margin - penalty), constraints)

    def solve_for(self, values: Mapping[Exponents, float]) -> float | str:
        """The margin reached, or why there is none; the Grams are left in the variables."""
        if not values.keys() <= self.rows.keys():
            return "a monomial of the derivative is out of the basis's reach"
        self.target.value = np.array([values.get(e, 0.0) for e in self.rows])
        remark = ""
        for problem in (self.problem, self.bounded):
            solved = solve(problem)
            remark = solved.remark
            margin = self.margin.value
            if solved.has_values and margin is not None and float(margin) > LEAST_MARGIN:
                return float(margin)
            if solved.status == "optimal":
                break
        return f"no positive definite Gram matrices ({remark})"


def seek_witnesses(target: Target, level: Fraction, hardest: Exponents = ()) -> tuple[DecreaseWitness, ...] | NoWitness:
    """One witness per Bernstein coefficient of the target at this level, in order, or why there is none.

    The coefficient `hardest`, if any, is tried first: where it failed at another level it may fail again.
    """
    if bernstein_count(target.numerator, target.ring, target.parameters) > MOST_WITNESSES:
        return NoWitness("the parameter box has too many vertices")
    size = len(target.scales)
    pairs = [
        (index, {e: b.middle * _scale_of(e, target.scales) for e, b in balls.items()})
        for index, coefficient in bernstein_coefficients(target.numerator, target.ring, target.parameters)
        for balls in [collapse(-coefficient, target.ring, size, target.balls)]
    ]
    support = {e for _, polynomial in pairs for e, c in polynomial.items() if c}
    if not support:
        return NoWitness("the derivative of V vanishes identically")
    main, multiplier = bases(support, target.function.keys(), size)
    pure = {i for e in main for i, k in enumerate(e) if k and sum(e) == k}
    largest = LARGEST_BASIS if len(pairs) <= FEW else LARGEST_BASIS_OF_MANY
    if len(pure) < size or len(main) > largest:
        return NoWitness("the decrease is zero along a line" if len(pure) < size else "the Gram basis is too large")
    function = {e: float(c * _scale_of(e, target.scales)) for e, c in target.function.items()}
    program = MultiplierProgram(
        _GramVariable(main, blocks(main, support, function)),
        _GramVariable(multiplier, blocks(multiplier, support, function)),
        function, float(level),
    )  # fmt: skip
    grams: dict[Exponents, _RoughGrams] = {}
    for index, polynomial in sorted(pairs, key=lambda pair: pair[0] != hardest):
        rough = _rough_grams(program, polynomial)
        if isinstance(rough, str):
            return NoWitness(rough, index)
        grams[index] = rough
    return tuple(_witness(index, grams[index], main, multiplier, target.scales) for index, _ in pairs)


@dataclass(frozen=True, slots=True)
class _RoughGrams:
    """Floating Gram matrices of (main, multiplier), to be rounded to `bits` and multiplied by `unit`."""

    main: Array
    multiplier: Array
    bits: int
    unit: Fraction


def _scale_of(exponents: Exponents, scales: tuple[Fraction, ...]) -> Fraction:
    return prod((s**k for s, k in zip(scales, exponents, strict=True)), start=Fraction(1))


def _rough_grams(program: MultiplierProgram, polynomial: Mapping[Exponents, Fraction]) -> _RoughGrams | str:
    unit = power_of_two_near(max((abs(float(c)) for c in polynomial.values()), default=1.0))
    margin = program.solve_for({e: float(c / unit) for e, c in polynomial.items() if c})
    if isinstance(margin, str):
        return margin
    size = len(program.main.basis) + len(program.multiplier.basis)
    bits = min(MOST_BITS, max(LEAST_BITS, ceil(log2(size / margin)) + GUARD_BITS))
    return _RoughGrams(program.main.value, program.multiplier.value, bits, unit)


def _witness(
    index: Exponents,
    rough: _RoughGrams,
    main: tuple[Exponents, ...],
    multiplier: tuple[Exponents, ...],
    scales: tuple[Fraction, ...],
) -> DecreaseWitness:
    return DecreaseWitness(
        index, _gram(main, rough.main, rough, scales), _gram(multiplier, rough.multiplier, rough, scales)
    )


def _gram(basis: tuple[Exponents, ...], values: Array, rough: _RoughGrams, scales: tuple[Fraction, ...]) -> Gram:
    """Rounded, and back to unscaled offsets exactly: z^a = y^a / S^a."""
    rounded = to_matrix(values, rough.bits)
    back = rescale(rounded, tuple(1 / _scale_of(e, scales) for e in basis))
    return Gram(basis, tuple(tuple(rough.unit * v for v in row) for row in back))
