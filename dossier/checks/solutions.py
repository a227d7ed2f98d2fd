"""The equations of rest of a case, and one solution of them: enclosed tightly, made exact where it is rational.

All steps here are rigorous and in ball or rational arithmetic, apart from Newton's guesses.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Final, Literal

from dossier.checks.slopes import krawczyk, newton_step
from dossier.model.ball import Ball
from dossier.model.case import Case
from dossier.model.expression import ZERO, Expression, names, number, simplify, sub, substitute, symbol
from dossier.model.loop import vector_field
from dossier.model.region import Box, Interval
from dossier.model.spectral_form import vanishes_identically

TIGHT_BITS: Final = 200
"""Solutions are enclosed to 2^-200, about 6e-61, of the larger of their size and the radius of their box."""
LOOSER: Final = 2**8
LOOSENINGS: Final = 26
"""Where that is out of reach (an inexact parameter, a nearly singular Jacobian), wider by steps of 2^8."""
NEWTON_STEPS: Final = 14
"""Doubling digits from 16 to over 100 takes 3 steps; the rest serves slow starts."""
SIMPLE_BITS: Final = 100
"""A rational of at most this many bits inside an enclosure of 200 bits is hardly there by chance: worth a proof."""

Enclosure = tuple[Ball, ...]


@dataclass(frozen=True)
class RestProblem:
    """f = 0 (continuous) or f - x = 0 (sampled) at the nominal combination; `constants` are its inexact parameters."""

    states: tuple[str, ...]
    equations: tuple[Expression, ...]
    constants: Mapping[str, Ball]


def rest_equations(case: Case) -> tuple[Expression, ...]:
    """Expressions over states and parameters that vanish exactly at the equilibria."""
    field = vector_field(case)
    if field.sampled:
        return tuple(sub(e, symbol(s)) for e, s in zip(field.equations, field.states, strict=True))
    return field.equations


def rest_problem(case: Case) -> RestProblem:
    """The nominal problem: exact parameters become numbers, the others stay balls."""
    nominal = {p.name: p.nominal for p in case.model.parameters}
    exact = {n: number(b.middle) for n, b in nominal.items() if b.is_exact}
    return RestProblem(
        case.model.state_names,
        tuple(substitute(e, exact) for e in rest_equations(case)),
        {n: b for n, b in nominal.items() if not b.is_exact},
    )


def holds_one(problem: RestProblem, box: Box) -> bool:
    """The bounded box is proved, in ball arithmetic, to hold exactly one solution."""
    balls = [Ball.from_bounds(*side.bounds) for side in box.intervals]
    return krawczyk(problem.equations, problem.states, problem.constants, balls) is not None


def holds_solution(problem: RestProblem, enclosure: Enclosure) -> bool:
    """`enclosure` is proved to hold a solution whose exact coordinates are those of radius zero.

    Exact coordinates are put in; equations that then vanish identically drop out, and the rest must be as many
    as the free coordinates and have one solution in their balls.  The caller must know that all equations are
    defined on the enclosure (`holds_one` of a box around it shows that), since zero factors are simplified away.
    """
    fixed = {s: number(b.middle) for s, b in zip(problem.states, enclosure, strict=True) if b.is_exact}
    free = [(s, b) for s, b in zip(problem.states, enclosure, strict=True) if not b.is_exact]
    if not fixed:
        return krawczyk(problem.equations, problem.states, problem.constants, enclosure) is not None
    reduced = [simplify(substitute(e, fixed)) for e in problem.equations]
    left = [e for e in reduced if not vanishes(e)]
    if len(left) != len(free):
        return False
    if not free:
        return True
    return krawczyk(left, [s for s, _ in free], problem.constants, [b for _, b in free]) is not None


def vanishes(expression: Expression) -> bool:
    """`expression` is identically zero wherever it is defined; equal functions of equal arguments cancel."""
    folded = simplify(expression)
    return folded == ZERO or (bool(names(folded) or folded.args) and vanishes_identically(folded, {}))


def lies_in(enclosure: Enclosure, box: Box) -> bool:
    """Every point of the enclosure lies in the closed box."""
    return all(
        (i.lower is None or i.lower <= b.lower) and (i.upper is None or b.upper <= i.upper)
        for b, i in zip(enclosure, box.intervals, strict=True)
    )


def misses(enclosure: Enclosure, box: Box) -> bool:
    """No point of the enclosure lies in the closed box."""
    return any(
        (i.lower is not None and b.upper < i.lower) or (i.upper is not None and b.lower > i.upper)
        for b, i in zip(enclosure, box.intervals, strict=True)
    )


Place = Literal["inside", "outside", "undecided"]


def place_of(enclosure: Enclosure, box: Box) -> Place:
    """Where the enclosed point lies with respect to the closed box."""
    return "inside" if lies_in(enclosure, box) else "outside" if misses(enclosure, box) else "undecided"


def tighten(problem: RestProblem, uniqueness: Box, start: tuple[Fraction, ...], hints: Box) -> Enclosure | None:
    """A tight enclosure of the one solution in `uniqueness`, exact in the coordinates proved rational.

    Newton from `start` guesses, Krawczyk proves.  End points of `hints` are tried as exact coordinates where
    the enclosure touches them.  None where no enclosure inside `uniqueness` is proved.
    """
    guess = start
    for _ in range(NEWTON_STEPS):
        step = newton_step(problem.equations, problem.states, problem.constants, guess)
        if step is None:
            return None
        moved = max(abs(a - b) / side.width for a, b, side in zip(step, guess, uniqueness.intervals, strict=True))
        guess = step
        if moved * 2**TIGHT_BITS < 1:
            break
    sizes = [max(abs(g), side.width / 2) for g, side in zip(guess, uniqueness.intervals, strict=True)]
    for k in range(LOOSENINGS + 1):
        enclosure = tuple(_rounded(g, s * LOOSER**k / 2**TIGHT_BITS) for g, s in zip(guess, sizes, strict=True))
        if not lies_in(enclosure, uniqueness):
            return None
        if krawczyk(problem.equations, problem.states, problem.constants, enclosure) is not None:
            return with_exact_coordinates(problem, enclosure, hints)
    return None


def _rounded(middle: Fraction, radius: Fraction) -> Ball:
    """A ball of about `radius` around a short dyadic number near `middle`."""
    exponent = math.floor(math.log2(radius.numerator) - math.log2(radius.denominator))
    grid = Fraction(2) ** (exponent - 2)
    return Ball(Fraction(round(middle / grid)) * grid, Fraction(2) ** exponent)


def with_exact_coordinates(problem: RestProblem, enclosure: Enclosure, hints: Box) -> Enclosure:
    """`enclosure` with every coordinate of radius zero that is proved to be a simple rational number.

    Tried in turn: all coordinates that may be simple, those at end points of `hints`, those that may be zero.
    """
    ends = [_touched_end(b, side) for b, side in zip(enclosure, hints.intervals, strict=True)]
    simple = [_simple_value(b) if end is None else end for b, end in zip(enclosure, ends, strict=True)]
    zeros = [v if v == 0 else None for v in simple]
    for candidates in (simple, ends, zeros):
        if any(v is not None for v in candidates):
            exact = tuple(b if v is None else Ball(v) for b, v in zip(enclosure, candidates, strict=True))
            if holds_solution(problem, exact):
                return exact
    return enclosure


def _touched_end(ball: Ball, side: Interval) -> Fraction | None:
    """The end point of `side` that lies in `ball`, if any."""
    return next((e for e in (side.lower, side.upper) if e is not None and ball.lower <= e <= ball.upper), None)


def _simple_value(ball: Ball) -> Fraction | None:
    value = simplest_between(ball.lower, ball.upper)
    bits = value.numerator.bit_length() + value.denominator.bit_length()
    return value if bits <= SIMPLE_BITS else None


def simplest_between(lower: Fraction, upper: Fraction) -> Fraction:
    """The rational of least denominator in [lower, upper], by continued fractions (Stern-Brocot)."""
    if lower <= 0 <= upper:
        return Fraction(0)
    if upper < 0:
        return -simplest_between(-upper, -lower)
    whole = lower.numerator // lower.denominator
    if lower == whole:
        return Fraction(whole)
    if whole + 1 <= upper:
        return Fraction(whole + 1)
    return whole + 1 / simplest_between(1 / (upper - whole), 1 / (lower - whole))
