"""Conditions proved over a box by ball arithmetic with subdivision: signs, denominators, roots, logarithms."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Final, Literal

from flint import arb

from dossier.model.ball import Ball, enclose, evaluate, precision
from dossier.model.expression import Condition, Expression
from dossier.model.region import Box, Interval

CHECK_BITS: Final = 128
"""Working precision of condition checks; sharpness comes from subdivision, not from digits."""

PIECES: Final = 4_096
"""Most pieces one condition may need; beyond that the condition stays undecided."""

Sign = Literal[-1, 1]


@dataclass(frozen=True, slots=True)
class BoxProof:
    """`holds` is proved, or not shown within the piece budget; `sign` where a sign was asked for."""

    holds: bool
    sign: int
    pieces: int


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


def condition_holds(condition: Condition, box: Box, pieces: int = PIECES) -> BoxProof:
    """Prove a domain condition of an expression over `box` (all symbols of the condition named there)."""
    expression = condition.expression
    if condition.relation == "inside_unit":
        below = constant_sign(lambda env: 1 - evaluate(expression, env), box, pieces)
        above = constant_sign(lambda env: 1 + evaluate(expression, env), box, pieces)
        holds = below.holds and above.holds and below.sign == above.sign == 1
        return BoxProof(holds, 1 if holds else 0, below.pieces + above.pieces)
    proof = constant_sign(lambda env: evaluate(expression, env), box, pieces)
    if condition.relation == "positive":
        return BoxProof(proof.holds and proof.sign == 1, proof.sign, proof.pieces)
    return proof


def range_over(expression: Expression, box: Box, pieces: int = PIECES) -> Ball | None:
    """An enclosure of the range of `expression` over `box`, sharpened by cutting it into `pieces` or fewer.

    None where some part has no finite enclosure.
    """
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
