"""Conditions proved over a box by ball arithmetic with subdivision: signs, denominators, roots, logarithms."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import reduce
from typing import Final

from flint import arb

from dossier.model.ball import Ball, enclose, evaluate, precision, to_fmpq
from dossier.model.expression import SATURATION, Condition, Expression, fold, names, neg, rebuild, sub
from dossier.model.polynomial import Exponents
from dossier.model.region import Box, Interval

CHECK_BITS: Final = 128
"""Working precision of condition checks; sharpness comes from subdivision, not from digits."""

PIECES: Final = 4_096
"""Most pieces one condition may need; beyond that the condition stays undecided."""

Bounds = tuple[Fraction, Fraction]
"""Lower and upper end."""


@dataclass(frozen=True, slots=True)
class BoxProof:
    """`holds` is proved, or not shown within the piece budget; `sign` where a sign was asked for.

    `exact`: shown by rational interval arithmetic without any rounding.
    """

    holds: bool
    sign: int
    pieces: int
    exact: bool = False


def ball_of(interval: Interval) -> Ball:
    """A bounded interval as a ball.  Raises ValueError where unbounded."""
    if interval.lower is None or interval.upper is None:
        raise ValueError("an unbounded interval is no ball")
    return Ball.from_bounds(interval.lower, interval.upper)


def constant_sign(value: Callable[[Mapping[str, arb]], arb], box: Box, pieces: int = PIECES) -> BoxProof:
    """Prove that `value`, a continuous function of the box's variables, has one sign and no zero on `box`."""
    with precision(CHECK_BITS):
        return _constant_sign(value, box, pieces)


def _constant_sign(value: Callable[[Mapping[str, arb]], arb], box: Box, pieces: int) -> BoxProof:
    open_pieces, done, sign = [box], 0, 0
    while open_pieces:
        piece = open_pieces.pop()
        done += 1
        result = value({n: enclose(ball_of(i)) for n, i in piece.items()})
        found = _sign_of(result)
        if found and sign in (0, found):
            sign = found
            continue
        if found or done + len(open_pieces) >= pieces:
            return BoxProof(False, 0, done)
        halves = split_widest(piece, box)
        if halves is None:
            return BoxProof(False, 0, done)
        open_pieces.extend(halves)
    return BoxProof(True, sign, done)


def _sign_of(value: arb) -> int:
    if not value.is_finite():
        return 0
    return 1 if value > 0 else -1 if value < 0 else 0


def split_widest(piece: Box, whole: Box) -> tuple[Box, Box] | None:
    """Halve `piece` along the side that is widest relative to `whole`; None where all sides are points."""
    shares = [
        Fraction(0) if w.is_point else p.width / w.width for p, w in zip(piece.intervals, whole.intervals, strict=True)
    ]
    widest = max(range(len(shares)), key=shares.__getitem__, default=None)
    if widest is None or shares[widest] == 0:
        return None
    side = piece.intervals[widest]
    halves = (Interval(side.lower, side.middle), Interval(side.middle, side.upper))
    first, second = (
        Box(piece.names, tuple(h if i == widest else s for i, s in enumerate(piece.intervals))) for h in halves
    )
    return first, second


def polynomial_sign(coefficients: Mapping[Exponents, Fraction], box: Box) -> BoxProof:
    """Prove that a polynomial in the box's variables, in their order, has one sign and no zero on `box`.

    Exactly where rational intervals decide at once, else by balls with subdivision.
    """
    plain = _exact_polynomial_range(coefficients, box)
    if plain[0] > 0 or plain[1] < 0:
        return BoxProof(True, 1 if plain[0] > 0 else -1, 1, True)

    def value(environment: Mapping[str, arb]) -> arb:
        total = arb(0)
        for exponents, coefficient in coefficients.items():
            term = arb(to_fmpq(coefficient))
            for name, count in zip(box.names, exponents, strict=True):
                for _ in range(count):
                    term = term * environment[name]
            total = total + term
        return total

    return constant_sign(value, box)


def _exact_polynomial_range(coefficients: Mapping[Exponents, Fraction], box: Box) -> Bounds:
    lower = upper = Fraction(0)
    for exponents, coefficient in coefficients.items():
        term = (coefficient, coefficient)
        for side, count in zip(box.intervals, exponents, strict=True):
            if count:
                term = _times(term, _power_of(side.bounds, count))
        lower, upper = lower + term[0], upper + term[1]
    return lower, upper


def condition_holds(condition: Condition, box: Box, pieces: int = PIECES) -> BoxProof:
    """Prove a domain condition of an expression over `box` (all symbols of the condition named there)."""
    expression = condition.expression
    plain = exact_range(expression, box)
    if plain is not None and condition.relation != "inside_unit":
        lower, upper = plain
        if lower > 0 or (upper < 0 and condition.relation == "nonzero"):
            return BoxProof(True, 1 if lower > 0 else -1, 1, True)
    if condition.relation == "inside_unit":
        below = constant_sign(lambda env: 1 - evaluate(expression, env), box, pieces)
        above = constant_sign(lambda env: 1 + evaluate(expression, env), box, pieces)
        holds = below.holds and above.holds and below.sign == above.sign == 1
        return BoxProof(holds, 1 if holds else 0, below.pieces + above.pieces)
    proof = constant_sign(lambda env: evaluate(expression, env), box, pieces)
    if condition.relation == "positive":
        return BoxProof(proof.holds and proof.sign == 1, proof.sign, proof.pieces)
    return proof


def resolve_kinks(expression: Expression, box: Box) -> Expression:
    """`expression` with every saturation and absolute value replaced by the branch proved active over `box`.

    A branch counts only where it holds strictly on the whole box; the others are left as they are.
    """

    def sign(difference: Expression) -> int:
        proof = condition_holds(Condition("nonzero", difference), box, KINK_PIECES)
        return proof.sign if proof.holds else 0

    def visit(node: Expression, args: tuple[Expression, ...]) -> Expression:
        if node.op == "abs":
            return {1: args[0], -1: neg(args[0])}.get(sign(args[0]), rebuild(node, args))
        if node.op != SATURATION:
            return rebuild(node, args)
        x, lower, upper = args
        above, below = sign(sub(x, lower)), sign(sub(upper, x))
        if above == below == 1:
            return x
        if sign(sub(upper, lower)) == 1 and -1 in (above, below):
            return lower if above == -1 else upper
        return rebuild(node, args)

    return fold(expression, visit)


KINK_PIECES: Final = 256
"""Pieces spent on the sign that decides one branch."""


def exact_range(expression: Expression, box: Box) -> tuple[Fraction, Fraction] | None:
    """Bounds of a rational expression over a bounded box by exact interval arithmetic; None where it has none.

    None too for elementary functions, fractional powers and quotients whose divisor may be zero.
    """
    sides = dict(box.items())

    def visit(node: Expression, args: tuple[tuple[Fraction, Fraction] | None, ...]) -> tuple[Fraction, Fraction] | None:
        known = [a for a in args if a is not None]
        if len(known) < len(args):
            return None
        if node.op == "number":
            return node.fraction, node.fraction
        if node.op == "symbol":
            side = sides[str(node.value)]
            return side.bounds if side.is_bounded else None
        return _EXACT[node.op](node, known) if node.op in _EXACT else None

    return fold(expression, visit)


def _times(a: Bounds, b: Bounds) -> Bounds:
    ends = [x * y for x in a for y in b]
    return min(ends), max(ends)


def _whole_power(node: Expression, args: list[Bounds]) -> Bounds | None:
    count = node.fraction
    return None if count.denominator != 1 or count < 0 else _power_of(args[0], int(count))


def _power_of(bounds: Bounds, k: int) -> Bounds:
    lower, upper = bounds
    ends = (lower**k, upper**k)
    return (Fraction(0) if k % 2 == 0 and lower <= 0 <= upper else min(ends)), max(ends)


def _quotient(_: Expression, args: list[Bounds]) -> Bounds | None:
    lower, upper = args[1]
    return _times(args[0], (1 / upper, 1 / lower)) if lower > 0 or upper < 0 else None


_EXACT: Final[dict[str, Callable[[Expression, list[Bounds]], Bounds | None]]] = {
    "add": lambda _, args: (sum((a[0] for a in args), Fraction(0)), sum((a[1] for a in args), Fraction(0))),
    "neg": lambda _, args: (-args[0][1], -args[0][0]),
    "mul": lambda _, args: reduce(_times, args),
    "div": _quotient,
    "pow": _whole_power,
}


def range_over(expression: Expression, box: Box, pieces: int = PIECES) -> Ball | None:
    """An enclosure of the range of `expression` over `box`, sharpened by cutting it into `pieces` or fewer.

    Only sides whose name occurs are cut.  None where some part has no finite enclosure.
    """
    used = names(expression)
    kept = [(n, side) for n, side in box.items() if n in used]
    box = Box(tuple(n for n, _ in kept), tuple(side for _, side in kept))
    with precision(CHECK_BITS):
        parts = [box]
        while len(parts) * 2 <= pieces:
            halves = [h for part in parts for h in (split_widest(part, box) or (part,))]
            if len(halves) == len(parts):
                break
            parts = halves
        lower: Fraction | None = None
        upper: Fraction | None = None
        for part in parts:
            value = evaluate(expression, {n: enclose(ball_of(i)) for n, i in part.items()})
            if not value.is_finite():
                return None
            low, high = _bounds(value)
            lower = low if lower is None else min(lower, low)
            upper = high if upper is None else max(upper, high)
    return None if lower is None or upper is None else Ball.from_bounds(lower, upper)


def _bounds(value: arb) -> tuple[Fraction, Fraction]:
    """Exact rational end points of a finite ball."""
    mantissa, exponent = value.mid().man_exp()
    middle = Fraction(int(mantissa)) * Fraction(2) ** int(exponent)
    mantissa, exponent = value.rad().man_exp()
    radius = Fraction(int(mantissa)) * Fraction(2) ** int(exponent)
    return middle - radius, middle + radius
