"""Elementary functions of the states as polynomials of the offsets, with an enclosed factor in the last term.

With u* = u at the equilibrium and d = u - u*,
  f(u) = sum_{k<K} f^(k)(u*)/k! d^k + r d^K,   r = f^(K)(xi)/K! for some xi between u* and u (Lagrange).
On a box of states and parameters r lies in an interval; it may differ from point to point, so it is kept as a
variable of its own, a *factor*.  Where K > 0, d makes the last term zero at the equilibrium, so it stays one.
The interval is valid on that box only.  Saturation and absolute value are replaced by the branch proved active
on the whole box.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from math import factorial
from typing import Final

from flint import arb

from dossier.model.ball import WORKING_BITS, Ball, enclose, evaluate, from_arb, precision
from dossier.model.expression import (
    ARITHMETIC,
    SATURATION,
    Expression,
    differentiate,
    nodes,
    number,
    simplify,
    sub,
    substitute,
    symbol,
    to_text,
)
from dossier.model.region import Box, Interval

HIGHEST_ORDER: Final = 3
"""Largest order of expansion: beyond, the bases of Gram matrices outgrow what one program can do."""

FACTOR_BITS: Final = 24
"""Binary digits of the ends of a factor's interval, rounded outward: short, and far below any margin."""

PIECES: Final = 16
"""Pieces of the reach over which a remainder is enclosed."""

ARGUMENT: Final = "argument"


@dataclass(frozen=True, slots=True)
class Expansion:
    """f(u) near u*: `coefficients` f^(k)(u*)/k! for k < K, and where the factor of d^K lies.

    `branch` is set instead for a kink: +1 and -1 stand for plus and minus its first argument.
    """

    coefficients: tuple[Ball, ...]
    factor: Interval
    branch: int = 0


@dataclass(frozen=True, slots=True)
class Refusal:
    """Why a function has no expansion on the box."""

    reason: str


def expansions(
    equations: Iterable[Expression], states: Mapping[str, Ball], place: Mapping[str, Ball], order: int
) -> dict[Expression, Expansion] | Refusal:
    """An expansion for every node of `equations` that is no arithmetic.

    `states` is the equilibrium; `place` encloses every symbol: the states over the whole box (which must hold the
    equilibrium), parameters and constants.  The last term has degree `order`, or one more where the derivative of
    that order vanishes at the equilibrium exactly.
    """
    plans: dict[Expression, Expansion] = {}
    with precision(WORKING_BITS):
        everywhere = {n: enclose(b) for n, b in place.items()}
        at_rest = everywhere | {n: enclose(b) for n, b in states.items()}
        exact = {n: number(b.middle) for n, b in states.items() if b.is_exact}
        for equation in equations:
            for node in nodes(equation):
                if is_function(node) and node not in plans:
                    plan = _branch(node, everywhere) or _expansion(node, everywhere, at_rest, exact, order)
                    if isinstance(plan, Refusal):
                        return plan
                    plans[node] = plan
    return plans


def is_function(node: Expression) -> bool:
    """Neither a number, a symbol nor rational arithmetic."""
    root = node.op == "pow" and node.fraction.denominator != 1
    return node.op not in ("number", "symbol", "pi") and (node.op not in ARITHMETIC or root)


def _branch(node: Expression, everywhere: Mapping[str, arb]) -> Expansion | Refusal | None:
    """The smooth branch of a kink; None for other functions.  Only an argument within its limits is followed."""
    if node.op == "abs":
        value = evaluate(node.args[0], everywhere)
        if value > 0 or value < 0:
            return Expansion((), Interval(None, None), 1 if value > 0 else -1)
        return Refusal(f"{to_text(node)} is not proved to keep its sign")
    if node.op == SATURATION:
        argument, lower, upper = node.args
        if all(evaluate(e, everywhere) > 0 for e in (sub(argument, lower), sub(upper, argument))):
            return Expansion((), Interval(None, None), 1)
        return Refusal(f"{to_text(node)} is not proved to stay within its limits")
    return None


def _expansion(
    node: Expression, everywhere: Mapping[str, arb], at_rest: Mapping[str, arb], exact: Mapping[str, Expression],
    order: int,
) -> Expansion | Refusal:  # fmt: skip
    argument = node.args[0]
    here = evaluate(argument, at_rest)
    reach = evaluate(argument, everywhere).union(here)
    place = simplify(substitute(argument, exact))
    slope = Expression(node.op, (symbol(ARGUMENT),), node.value)
    coefficients: list[Ball] = []
    while True:
        value = simplify(substitute(slope, {ARGUMENT: place})) if place.op == "number" else place
        count = len(coefficients)
        vanishes = value.op == "number" and place.op == "number" and value.fraction == 0
        if count > order or (count == order and not vanishes):
            break
        ball = Ball(value.fraction / factorial(count)) if value.op == "number" and place.op == "number" else None
        ball = ball or from_arb(evaluate(slope, {ARGUMENT: here}) / factorial(count))
        if ball is None:
            return Refusal(f"{to_text(node)} is not proved differentiable at the equilibrium")
        coefficients.append(ball)
        slope = simplify(differentiate(slope, ARGUMENT))
    rest = _enclosed(slope, reach, factorial(len(coefficients)))
    if rest is None:
        return Refusal(f"{to_text(node)} has no finite remainder over the set")
    return Expansion(tuple(coefficients), _outward(rest))


def _enclosed(slope: Expression, reach: arb, divisor: int) -> Ball | None:
    """slope/divisor over `reach`, piece by piece, which balls need to be sharp; None where a piece is not finite."""
    whole = from_arb(reach)
    if whole is None:
        return None
    width = 2 * whole.radius / PIECES
    found = []
    for place in range(PIECES if width else 1):
        piece = Ball.from_bounds(whole.lower + place * width, whole.lower + (place + 1) * width)
        found.append(from_arb(evaluate(slope, {ARGUMENT: enclose(piece)}) / divisor))
    known = [b for b in found if b is not None]
    if len(known) < len(found):
        return None
    return Ball.from_bounds(min(b.lower for b in known), max(b.upper for b in known))


def _outward(ball: Ball) -> Interval:
    size = max(abs(ball.lower), abs(ball.upper)) or Fraction(1)
    unit = Fraction(2) ** (size.numerator.bit_length() - size.denominator.bit_length() - FACTOR_BITS)
    return Interval(ball.lower // unit * unit, -(-ball.upper // unit) * unit)


def valid_box(names: Iterable[str], box: Box) -> dict[str, Ball]:
    """The sides of a bounded `box` as balls."""
    return {n: Ball.from_bounds(*box[n].bounds) for n in names}
