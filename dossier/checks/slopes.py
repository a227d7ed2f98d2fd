"""Krawczyk's operator in ball arithmetic: the second way to prove that a box holds exactly one solution.

It shares only the expression trees with the interval tapes: values and slopes are folded over the tree in
python-flint's balls, at high precision.  R. Krawczyk, Computing 4 (1969); A. Neumaier, Interval Methods for
Systems of Equations, 1990, theorem 5.1.8.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Final

from flint import arb, arb_mat

from dossier.model.ball import Ball, enclose, evaluate, from_arb, precision, square, to_fmpq
from dossier.model.expression import Expression, fold, rebuild, symbol

SOLUTION_BITS: Final = 384
"""Precision for solutions: well beyond the 200 bits to which they are enclosed."""

Slopes = tuple[arb | None, ...]
"""Enclosures of the generalised gradient, one per variable; None is zero by structure."""


def value_and_slopes(
    expression: Expression, names: Sequence[str], environment: Mapping[str, arb]
) -> tuple[arb, list[arb]]:
    """Enclosures of `expression` and of its generalised gradient over the balls of `environment`.

    At a kink of ``abs`` or ``sat`` inside the balls the slopes hold all one-sided derivatives (F. H. Clarke
    1983).  Where anything is undefined some result is not finite, and only finite results are evidence.
    """

    def visit(node: Expression, pairs: tuple[tuple[arb, Slopes], ...]) -> tuple[arb, Slopes]:
        if node.op == "symbol":
            name = str(node.value)
            return environment[name], tuple(arb(1) if n == name else None for n in names)
        args = tuple(symbol(f"argument {i}") for i in range(len(pairs)))
        value = evaluate(rebuild(node, args), {f"argument {i}": p[0] for i, p in enumerate(pairs)})
        return value, _chain(node, value, pairs, len(names))

    value, slopes = fold(expression, visit)
    return value, [arb(0) if s is None else s for s in slopes]


def _chain(node: Expression, value: arb, pairs: tuple[tuple[arb, Slopes], ...], count: int) -> Slopes:
    if node.op == "add":
        slopes = (None,) * count
        for _, inner in pairs:
            slopes = _plus(slopes, inner)
        return slopes
    if node.op == "mul":
        total, slopes = pairs[0]
        for factor, inner in pairs[1:]:
            slopes = _plus(_times(factor, slopes), _times(total, inner))
            total = total * factor
        return slopes
    if node.op == "sat":
        return _saturation(pairs)
    if node.op == "div":
        (_, du), (w, dw) = pairs
        return tuple(None if s is None else s / w for s in _plus(du, _times(-value, dw)))
    if not pairs or all(s is None for s in pairs[0][1]):
        return (None,) * count
    return _times(_outer_slope(node, pairs[0][0], value), pairs[0][1])


def _plus(a: Slopes, b: Slopes) -> Slopes:
    return tuple(y if x is None else x if y is None else x + y for x, y in zip(a, b, strict=True))


def _times(factor: arb, slopes: Slopes) -> Slopes:
    return tuple(None if s is None else factor * s for s in slopes)


def _step(difference: arb) -> arb:
    """Slope of max(d, 0): 0, 1, or anything between."""
    return arb(1) if difference > 0 else arb(0) if difference < 0 else arb(0).union(arb(1))


def _saturation(pairs: tuple[tuple[arb, Slopes], ...]) -> Slopes:
    """min(max(x, lower), upper): convex combinations of the slopes of the branches that can be active."""
    (x, dx), (lower, dl), (upper, du) = pairs
    above = _step(x - lower)
    inner, slopes = x.max(lower), _plus(_times(above, dx), _times(1 - above, dl))
    below = _step(upper - inner)
    return _plus(_times(below, slopes), _times(1 - below, du))


def _outer_slope(node: Expression, u: arb, value: arb) -> arb:
    """Derivative of an operation with one argument (standard calculus)."""
    op = node.op
    if op == "neg":
        return arb(-1)
    if op == "pow":
        lowered = Expression("pow", (symbol("u"),), node.fraction - 1) if node.fraction != 1 else None
        rate = arb(1) if lowered is None else evaluate(lowered, {"u": u})
        return arb(to_fmpq(node.fraction)) * rate
    if op == "abs":
        return 2 * _step(u) - 1
    simple = {
        "sin": u.cos,
        "cos": lambda: -u.sin(),
        "tan": lambda: 1 + square(value),
        "asin": lambda: 1 / (1 - square(u)).sqrt(),
        "acos": lambda: -1 / (1 - square(u)).sqrt(),
        "atan": lambda: 1 / (1 + square(u)),
        "exp": lambda: value,
        "log": lambda: 1 / u,
        "sqrt": lambda: 1 / (2 * value),
        "tanh": lambda: 1 - square(value),
    }
    return simple[op]()


def krawczyk(
    equations: Sequence[Expression], names: Sequence[str], constants: Mapping[str, Ball], box: Sequence[Ball]
) -> tuple[Ball, ...] | None:
    """The Krawczyk image of `box` where it lies in the box's interior: the box then holds one zero only, in the image.

    K = m - Y f(m) + (I - Y A)(box - m), A the enclosed slopes over the box and Y any matrix (here the inverse of
    A's midpoints).  f is Lipschitz and x - Y f(x) maps the box into K, so Brouwer gives a zero; K inside the
    interior makes |I - Y A| contract in the norm scaled by the radii, so every matrix in A is regular and f is
    injective on the box.  None where this is not shown.
    """
    if any(b.radius == 0 for b in box):
        return None
    with precision(SOLUTION_BITS):
        known = {n: enclose(b) for n, b in constants.items()}
        slopes: list[arb] = []
        for equation in equations:
            value, row = value_and_slopes(
                equation, names, {**known, **{n: enclose(b) for n, b in zip(names, box, strict=True)}}
            )
            slopes.extend(row)
            if not (value.is_finite() and all(s.is_finite() for s in row)):
                return None
        middle = {n: arb(to_fmpq(b.middle)) for n, b in zip(names, box, strict=True)}
        residual = [evaluate(e, {**known, **middle}) for e in equations]
        return _image(residual, slopes, box)


def _image(residual: list[arb], slopes: list[arb], box: Sequence[Ball]) -> tuple[Ball, ...] | None:
    n = len(box)
    a = arb_mat(n, n, slopes)
    inverse = approximate_inverse(a)
    if inverse is None or not all(r.is_finite() for r in residual):
        return None
    step = inverse * arb_mat(n, 1, residual)
    rest = inverse * a
    image: list[Ball] = []
    for i, ball in enumerate(box):
        offset = -step[i, 0]
        for j, other in enumerate(box):
            radius = arb(to_fmpq(other.radius))
            spread = (arb(1 if i == j else 0) - rest[i, j]) * radius
            offset = offset + abs(spread).upper().union(-abs(spread).upper())
        if not abs(offset) < arb(to_fmpq(ball.radius)):
            return None
        moved = from_arb(offset)
        if moved is None:
            return None
        image.append(Ball(ball.middle + moved.middle, moved.radius))
    return tuple(image)


def approximate_inverse(a: arb_mat) -> arb_mat | None:
    """A matrix near the inverse of the midpoints, with exact entries; any matrix is sound as Y."""
    n = a.nrows()
    try:
        inverse = a.mid().inv()
    except ZeroDivisionError:
        return None
    entries = [inverse[i, j].mid() for i in range(n) for j in range(n)]
    return arb_mat(n, n, entries) if all(e.is_finite() for e in entries) else None


def newton_step(
    equations: Sequence[Expression], names: Sequence[str], constants: Mapping[str, Ball], state: Sequence[Fraction]
) -> tuple[Fraction, ...] | None:
    """One Newton step from `state` with the midpoints of all balls; a guess, not evidence.  None where it fails."""
    with precision(SOLUTION_BITS):
        environment = {n: enclose(b).mid() for n, b in constants.items()}
        environment |= {n: arb(to_fmpq(v)).mid() for n, v in zip(names, state, strict=True)}
        pairs = [value_and_slopes(e, names, environment) for e in equations]
        entries = [s.mid() for _, row in pairs for s in row]
        if not all(e.is_finite() for e in (*entries, *(v for v, _ in pairs))):
            return None
        n = len(names)
        try:
            change = arb_mat(n, n, entries).solve(arb_mat(n, 1, [v.mid() for v, _ in pairs]))
        except ZeroDivisionError:
            return None
        moved = [from_arb(environment[name] - change[i, 0]) for i, name in enumerate(names)]
        return tuple(b.middle for b in moved if b is not None) if all(moved) else None
