"""Small loops for the tests: formulas as text, and transfer functions in companion form."""

import ast
from collections.abc import Mapping, Sequence
from fractions import Fraction
from itertools import pairwise

from dossier.model.ball import Ball, enclose, to_fmpq
from dossier.model.case import Case, Model, Parameter, Quantity, Signal, State
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import PI, Expression, add, call, div, mul, neg, number, power, sub, symbol
from dossier.model.region import UNBOUNDED, Box, Interval

ONE = Quantity(Fraction(1), 0, "1", "1")
OPERATORS = {ast.Add: add, ast.Sub: sub, ast.Mult: mul, ast.Div: div}


def formula(text: str) -> Expression:
    """An expression from arithmetic text; ``^`` is a power, decimals are exact."""
    source = text.replace("^", "**")
    return _convert(ast.parse(source, mode="eval").body, source)


def _convert(node: ast.expr, source: str) -> Expression:
    if isinstance(node, ast.Constant):
        return number(Fraction(ast.get_source_segment(source, node)))
    if isinstance(node, ast.Name):
        return PI if node.id == "pi" else symbol(node.id)
    if isinstance(node, ast.UnaryOp):
        return neg(_convert(node.operand, source))
    if isinstance(node, ast.Call):
        return call(node.func.id, *(_convert(a, source) for a in node.args))
    left, right = _convert(node.left, source), _convert(node.right, source)
    if isinstance(node.op, ast.Pow):
        return power(left, right.value)
    return OPERATORS[type(node.op)](left, right)


def loop_case(
    equations: Mapping[str, str],
    signals: Mapping[str, str],
    parameters: Mapping[str, str | Ball] | None = None,
    sample_interval: str = "",
) -> Case:
    """A case named ``point`` with one equation per state; the domain and all regions are unbounded."""
    names = tuple(equations)
    model = Model(
        "loop", "", "", "sampled" if sample_interval else "continuous",
        formula(sample_interval) if sample_interval else None,
        tuple(State(n, "1", ONE, "") for n in names),
        tuple(_parameter(n, v) for n, v in (parameters or {}).items()),
        tuple(Signal(n, "1", ONE, formula(t), "command", UNBOUNDED, "") for n, t in signals.items()),
        (),
        tuple(formula(t) for t in equations.values()),
        Box.from_mapping(names, {}),
    )  # fmt: skip
    free = Box.from_mapping(names, {})
    return Case("point", "", model, (Fraction(0),) * len(names), None, False, free, free, free, (), ())


def _parameter(name: str, value: str | Ball) -> Parameter:
    nominal = value if isinstance(value, Ball) else Ball(Fraction(value))
    spread = Interval(nominal.lower, nominal.upper)
    return Parameter(name, "1", ONE, nominal, spread, "exact", False, "", "", str(value), "")


def equilibrium_at(*values: Fraction | int | Ball) -> Equilibrium:
    """The chosen equilibrium ``point.E1`` at the given state."""
    state = tuple(v if isinstance(v, Ball) else Ball(Fraction(v)) for v in values)
    return Equilibrium("point.E1", state, True, True, "stable", ())


def transfer_loop(numerator: Sequence, denominator: Sequence) -> Case:
    """Unity feedback around c/a in companion form, highest power first, a monic: x_i' = x_(i+1), L = c/a."""
    order = len(denominator) - 1
    padded = [Fraction(0)] * (order - len(numerator)) + [Fraction(v) for v in numerator]
    states = [f"x{i}" for i in range(order)]

    def combined(values: Sequence) -> str:
        return " + ".join(f"({Fraction(v)})*{s}" for v, s in zip(reversed(values), states, strict=True))

    equations = dict(pairwise(states))
    equations[states[-1]] = f"u - ({combined(list(denominator)[1:])})"
    return loop_case(equations, {"u": f"-({combined(padded)})"})


def polynomial(roots, pairs=()):
    """Product of (x - r) and (x^2 - 2 p x + p^2 + q^2), lowest power first."""
    result = [Fraction(1)]
    for factor in [[-r, 1] for r in roots] + [[p * p + q * q, -2 * p, 1] for p, q in pairs]:
        longer = [Fraction(0)] * (len(result) + len(factor) - 1)
        for i, u in enumerate(result):
            for j, v in enumerate(factor):
                longer[i + j] += u * v
        result = longer
    return [to_fmpq(Fraction(v)) for v in result]


def blurred(coefficients, radius=Fraction(1, 10**30)):
    return [enclose(Ball(Fraction(int(c.p), int(c.q)), radius)) for c in coefficients]
