"""The linear part of a loop opened at one command: exact where it is rational, balls elsewhere.

With x' (or x+) = F(x, w) and the command u(x), the opened loop is A0 = dF/dx, b = dF/dw, k = du/dx at
the equilibrium; the closed loop is A0 + b k.  Kinks are resolved by proof: a saturation or an absolute
value counts as the branch it is proved to be on, and at a kink there is no linear part.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from flint import arb, fmpq

from dossier.model.ball import WORKING_BITS, Ball, enclose, evaluate, precision, to_fmpq
from dossier.model.case import Case
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import (
    SATURATION,
    Condition,
    Expression,
    conditions,
    fold,
    neg,
    number,
    rebuild,
    simplify,
    sub,
    substitute,
    to_text,
)
from dossier.model.loop import LOOP_INPUT, jacobian, open_loop, vector_field
from dossier.model.region import Box

Number = fmpq | arb
"""An exact rational, or a ball that contains the true number."""


@dataclass(frozen=True)
class LinearLoop:
    """A0 (n x n), b (n) and k (n) of a loop opened at `loop`; `remarks` name signals held at a limit.

    `interval` is the sampling interval in s, None for a continuous model.
    """

    loop: str
    interval: Number | None
    matrix: tuple[tuple[Number, ...], ...]
    input: tuple[Number, ...]
    feedback: tuple[Number, ...]
    remarks: tuple[str, ...]

    @property
    def is_exact(self) -> bool:
        """Every entry is a rational number."""
        rows = (*self.matrix, self.input, self.feedback)
        return all(isinstance(v, fmpq) for row in rows for v in row)


@dataclass(frozen=True, slots=True)
class NoLinearPart:
    """Why the loop has no proved linear part at the equilibrium."""

    reason: str


class _RefusalError(Exception):
    """Carries the reason out of a fold; never leaves this module."""


class _Point:
    """Values of all symbols at the equilibrium, exact ones as numbers and the others as balls."""

    def __init__(self, case: Case, equilibrium: Equilibrium, cell: Box | None = None) -> None:
        known = {p.name: p.nominal for p in case.model.parameters}
        if cell is not None:
            known |= {n: Ball.from_bounds(*side.bounds) for n, side in cell.items()}
        known |= dict(zip(case.model.state_names, equilibrium.state, strict=True))
        self.exact: dict[str, Expression] = {n: number(b.middle) for n, b in known.items() if b.is_exact}
        self.balls: dict[str, arb] = {n: enclose(b) for n, b in known.items() if not b.is_exact}

    def value(self, expression: Expression) -> Number:
        """`expression` at the equilibrium.  Its domain conditions must have been proved."""
        folded = simplify(substitute(expression, self.exact))
        if folded.op == "number":
            return to_fmpq(Fraction(folded.value or 0))
        result = evaluate(folded, self.balls)
        if not result.is_finite():
            raise _RefusalError(f"{to_text(expression)} has no finite value at the equilibrium")
        return result

    def sign(self, expression: Expression) -> int | None:
        """Sign at the equilibrium, None where the enclosure does not decide it."""
        return sign_of(self.value(expression))

    def add(self, name: str, value: Number) -> None:
        """Give one more symbol its value."""
        if isinstance(value, fmpq):
            self.exact[name] = number(f"{value.p}/{value.q}")
        else:
            self.balls[name] = value


def sign_of(value: Number) -> int | None:
    """-1, 0 or 1; None for a ball that does not decide."""
    if value > 0:
        return 1
    if value < 0:
        return -1
    return 0 if value == 0 else None


def linear_loop(case: Case, equilibrium: Equilibrium, loop: str) -> LinearLoop | NoLinearPart:
    """Linear part at `equilibrium` (enclosure proved elsewhere) of the loop of `case` opened at signal `loop`.

    Per unit of state and command in SI.  Every domain condition of the equations is proved at the
    equilibrium; each saturation and absolute value is replaced by the branch proved to be active.
    """
    if loop not in {s.name for s in case.model.signals}:
        return NoLinearPart(f"the model has no signal {loop!r}")
    with precision(WORKING_BITS):
        try:
            return _linear_loop(case, equilibrium, loop)
        except _RefusalError as refusal:
            return NoLinearPart(str(refusal))


@dataclass(frozen=True)
class ActiveBranch:
    """The closed loop near its equilibrium, free of kinks; `remarks` name signals held at a limit."""

    equations: tuple[Expression, ...]
    remarks: tuple[str, ...]


def active_branch(case: Case, equilibrium: Equilibrium, cell: Box | None = None) -> ActiveBranch | NoLinearPart:
    """The equations of `case`, each kink replaced by the branch proved active at `equilibrium` and nominal parameters.

    With a `cell`, at the equilibria of all combinations there, which `equilibrium` encloses.
    Every domain condition of the equations is proved there too.
    """
    with precision(WORKING_BITS):
        try:
            return _active_branch(case, _Point(case, equilibrium, cell))
        except _RefusalError as refusal:
            return NoLinearPart(str(refusal))


def _active_branch(case: Case, point: _Point) -> ActiveBranch:
    remarks: dict[str, None] = {}
    equations = tuple(_smooth(e, point, remarks) for e in vector_field(case).equations)
    return ActiveBranch(equations, tuple(remarks))


def closed_matrix(case: Case, equilibrium: Equilibrium) -> tuple[tuple[Number, ...], ...] | NoLinearPart:
    """Linear part A (n x n, SI) of the closed loop at `equilibrium` and the nominal parameters, proved as above."""
    with precision(WORKING_BITS):
        try:
            point = _Point(case, equilibrium)
            equations = _active_branch(case, point).equations
            return tuple(tuple(point.value(e) for e in row) for row in jacobian(equations, case.model.state_names))
        except _RefusalError as refusal:
            return NoLinearPart(str(refusal))


def _linear_loop(case: Case, equilibrium: Equilibrium, loop: str) -> LinearLoop:
    opened = open_loop(case, loop)
    point = _Point(case, equilibrium)
    remarks: dict[str, None] = {}
    command = _smooth(opened.command, point, remarks)
    point.add(LOOP_INPUT, point.value(command))
    equations = tuple(_smooth(e, point, remarks) for e in opened.equations)
    states = case.model.state_names
    matrix = jacobian(equations, (*states, LOOP_INPUT))
    values = [tuple(point.value(e) for e in row) for row in matrix]
    (feedback,) = jacobian((command,), states)
    interval = case.model.sample_interval
    return LinearLoop(
        loop,
        None if interval is None else point.value(interval),
        tuple(row[:-1] for row in values),
        tuple(row[-1] for row in values),
        tuple(point.value(e) for e in feedback),
        tuple(remarks),
    )


def _smooth(expression: Expression, point: _Point, remarks: dict[str, None]) -> Expression:
    """`expression` on its active branch, after all its domain conditions are proved at the point."""
    for condition in conditions(expression):
        if not _holds(condition, point):
            raise _RefusalError(f"not proved differentiable at the equilibrium: {to_text(condition.expression)}")

    def visit(node: Expression, args: tuple[Expression, ...]) -> Expression:
        if node.op == "abs":
            return _branch_of_abs(node, args[0], point)
        if node.op == SATURATION:
            return _branch_of_saturation(node, args, point, remarks)
        return rebuild(node, args)

    return fold(expression, visit)


def _holds(condition: Condition, point: _Point) -> bool:
    expression = condition.expression
    if condition.relation == "nonzero":
        return point.sign(expression) in (-1, 1)
    if condition.relation == "inside_unit":
        one = number(1)
        return point.sign(sub(one, expression)) == 1 and point.sign(sub(expression, neg(one))) == 1
    return point.sign(expression) == 1


def _branch_of_abs(node: Expression, argument: Expression, point: _Point) -> Expression:
    sign = point.sign(argument)
    if sign not in (-1, 1):
        raise _RefusalError(f"{to_text(node)} is at its kink, or not proved off it, at the equilibrium")
    return argument if sign == 1 else neg(argument)


def _branch_of_saturation(
    node: Expression, args: Sequence[Expression], point: _Point, remarks: dict[str, None]
) -> Expression:
    argument, lower, upper = args
    below, above = point.sign(sub(argument, lower)), point.sign(sub(upper, argument))
    if below == above == 1:
        return argument
    if point.sign(sub(upper, lower)) == 1:
        for side, outside, name in ((lower, below, "lower"), (upper, above, "upper")):
            if outside == -1:
                remarks.setdefault(f"{to_text(node)} is saturated at its {name} limit at the equilibrium")
                return side
    raise _RefusalError(f"{to_text(node)} is at its kink, or not proved off it, at the equilibrium")
