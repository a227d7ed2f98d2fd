"""Small closed loops for the tests of the linear part: matrices, polynomials, parameters with a spread."""

from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction

from flint import arb
from loop_cases import equilibrium_at, loop_case

from dossier.model.ball import Ball, from_arb, precision
from dossier.model.case import Case
from dossier.model.equilibrium import Equilibrium
from dossier.model.region import Interval


def matrix_case(rows: Sequence[Sequence], sample_interval: str = "") -> tuple[Case, Equilibrium]:
    """x' = A x (or x+ = A x), entries fractions or formula text; the equilibrium is the origin."""
    states = [f"x{i}" for i in range(len(rows))]
    equations = {
        state: " + ".join(f"({entry})*{other}" for entry, other in zip(row, states, strict=True))
        for state, row in zip(states, rows, strict=True)
    }
    return loop_case(equations, {}, sample_interval=sample_interval), equilibrium_at(*[0] * len(rows))


def companion(coefficients: Sequence) -> list[list[Fraction]]:
    """Companion matrix of a polynomial given highest power first."""
    lead, *rest = (Fraction(c) for c in coefficients)
    size = len(rest)
    rows = [[Fraction(int(j == i + 1)) for j in range(size)] for i in range(size - 1)]
    return [*rows, [-c / lead for c in reversed(rest)]]


def polynomial_case(coefficients: Sequence) -> tuple[Case, Equilibrium]:
    """A continuous loop with the given characteristic polynomial, highest power first."""
    return matrix_case(companion(coefficients))


def with_spread(case: Case, *, varies: bool = False, **ranges: tuple) -> Case:
    """`case` with the named parameters spread over [lower, upper]."""
    parameters = tuple(
        replace(p, spread=Interval(*(Fraction(v) for v in ranges[p.name])), kind="range", varies=varies)
        if p.name in ranges
        else p
        for p in case.model.parameters
    )
    return replace(case, model=replace(case.model, parameters=parameters))


def square_root(value: Fraction) -> Ball:
    """A tight ball around the square root of a rational."""
    with precision(400):
        ball = from_arb(arb(value.numerator).sqrt() / arb(value.denominator).sqrt())
    assert ball is not None
    return ball


def affine(ball: Ball, factor: Fraction = Fraction(1), offset: Fraction = Fraction(0)) -> Ball:
    """offset + factor * ball."""
    return Ball(offset + factor * ball.middle, abs(factor) * ball.radius)
