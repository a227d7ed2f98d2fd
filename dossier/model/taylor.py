"""Elementary functions of parameters as Taylor polynomials with an enclosed remainder, over a parameter box.

f(u) = f(c) + f'(c)(u - c) + f''(c)(u - c)^2/2 + f'''(xi)(u - c)^3/6 with xi between c and u (Lagrange).
The remainder, and every coefficient that is not rational, becomes an uncertain constant with a ball, so
that the result is a quotient of polynomials and holds for every parameter value of the box.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from math import factorial
from typing import Final

from flint import arb

from dossier.model.ball import WORKING_BITS, Ball, enclose, evaluate, from_arb, precision
from dossier.model.expression import (
    ARITHMETIC,
    Expression,
    add,
    differentiate,
    fold,
    mul,
    number,
    power,
    rebuild,
    simplify,
    sub,
    substitute,
    symbol,
    to_text,
)
from dossier.model.region import Box

ORDER: Final = 2
"""Degree of the polynomials: the remainder falls with the cube of the box, and cells can be halved."""

NEAR_ZERO: Final = Fraction(1, 4)
"""Arguments within this distance of zero are expanded there: coefficients are rational and cancel exactly."""

CENTRE_BITS: Final = 24
"""Binary digits kept of another centre; any centre is valid, a short one keeps coefficients short."""

ARGUMENT: Final = "argument"


@dataclass
class _Expansion:
    """What was introduced so far; parameters and known constants as balls to evaluate with."""

    environment: dict[str, arb]
    balls: dict[str, Ball] = field(default_factory=dict)
    known: dict[Expression, Expression] = field(default_factory=dict)

    def constant(self, value: arb, what: str) -> Expression:
        ball = from_arb(value)
        if ball is None:
            raise ArithmeticError(f"{what} has no finite enclosure over the parameter box")
        if ball.is_exact:
            return number(ball.middle)
        name = f"taylor {len(self.balls)}"
        self.balls[name] = ball
        return symbol(name)


def expand_functions(
    expressions: tuple[Expression, ...], box: Box, constants: Mapping[str, Ball]
) -> tuple[tuple[Expression, ...], dict[str, Ball]]:
    """`expressions` in the parameters of `box` and in `constants`, without elementary functions, and the new balls.

    Raises ArithmeticError where a function is not proved three times differentiable over the box.
    """
    with precision(WORKING_BITS):
        balls = {n: Ball.from_bounds(*i.bounds) for n, i in box.items()} | dict(constants)
        expansion = _Expansion({n: enclose(b) for n, b in balls.items()})
        return tuple(_expanded(e, expansion) for e in expressions), expansion.balls


def _expanded(expression: Expression, expansion: _Expansion) -> Expression:
    def visit(node: Expression, pairs: tuple[tuple[Expression, Expression], ...]) -> tuple[Expression, Expression]:
        rational = rebuild(node, tuple(p for _, p in pairs))
        if node.op in ("number", "symbol") or (node.op in ARITHMETIC and not _is_root(node)):
            return node, rational
        if len(pairs) != 1:
            raise ArithmeticError(f"{to_text(node)} has no Taylor polynomial")
        if node not in expansion.known:
            expansion.known[node] = _taylor(node, pairs[0][1], expansion)
        return node, expansion.known[node]

    return fold(expression, visit)[1]


def _is_root(node: Expression) -> bool:
    return node.op == "pow" and node.fraction.denominator != 1


def _taylor(node: Expression, rational: Expression, expansion: _Expansion) -> Expression:
    """The polynomial of one function whose argument, in polynomial form, is `rational`."""
    text = to_text(node)
    reach = evaluate(node.args[0], expansion.environment)
    ball = from_arb(reach)
    if ball is None:
        raise ArithmeticError(f"the argument of {text} has no finite enclosure over the parameter box")
    centre = _centre(ball)
    slopes = _derivatives(Expression(node.op, (symbol(ARGUMENT),), node.value))
    shift = sub(rational, number(centre))
    terms = [
        mul(number(Fraction(1, factorial(k))), _value(slopes[k], centre, expansion, text), power(shift, k))
        for k in range(ORDER + 1)
    ]
    middle = enclose(Ball(centre))
    distance = reach - middle
    beyond = evaluate(slopes[ORDER + 1], {ARGUMENT: reach.union(middle)})
    for _ in range(ORDER + 1):
        beyond = beyond * distance
    return add(*terms, expansion.constant(beyond / factorial(ORDER + 1), f"the remainder of {text}"))


def _centre(argument: Ball) -> Fraction:
    if max(abs(argument.lower), abs(argument.upper)) <= NEAR_ZERO:
        return Fraction(0)
    size = abs(argument.middle) or argument.radius
    unit = Fraction(2) ** (size.numerator.bit_length() - size.denominator.bit_length() - CENTRE_BITS)
    return round(argument.middle / unit) * unit if argument.radius else argument.middle


def _derivatives(function: Expression) -> list[Expression]:
    slopes = [function]
    for _ in range(ORDER + 1):
        slopes.append(simplify(differentiate(slopes[-1], ARGUMENT)))
    return slopes


def _value(slope: Expression, centre: Fraction, expansion: _Expansion, text: str) -> Expression:
    exact = simplify(substitute(slope, {ARGUMENT: number(centre)}))
    if exact.op == "number":
        return exact
    return expansion.constant(evaluate(exact, {}), f"a coefficient of {text}")
