"""Write expressions and their derivatives as one list of shared operations: the tape before it runs."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, Final

from flint import arb

from dossier.checks.elementary import constant
from dossier.checks.intervals import Span, span_of
from dossier.model.ball import Ball, enclose, precision
from dossier.model.ball import evaluate as evaluate_ball
from dossier.model.expression import Expression, fold, number, symbol

CONSTANT_BITS: Final = 160
"""Precision of parts that hold no variable: three times that of a double, so that only the final rounding counts."""


@dataclass(frozen=True, slots=True)
class Node:
    """One operation on earlier nodes; `data` is a constant's interval, a variable's row or an exponent."""

    op: str
    args: tuple[int, ...]
    data: Any = None


_UNARY: Final = ("sin", "cos", "tan", "asin", "acos", "atan", "exp", "log", "sqrt", "abs", "tanh")


class Builder:
    """Collects nodes; equal operations on equal nodes are written once, constants are folded in ball arithmetic."""

    def __init__(self, variables: tuple[str, ...], constants: Mapping[str, Ball]) -> None:
        self.nodes: list[Node] = []
        self._known: dict[tuple[Any, ...], int] = {}
        self._constants: dict[int, arb] = {}
        self._derivatives: dict[tuple[int, int], int | None] = {}
        self._rows = {name: self._emit("variable", (), i) for i, name in enumerate(variables)}
        self._balls = dict(constants)

    def _emit(self, op: str, args: tuple[int, ...], data: Any = None) -> int:
        key = (op, args, data)
        if key not in self._known:
            self.nodes.append(Node(op, args, data))
            self._known[key] = len(self.nodes) - 1
        return self._known[key]

    def _constant(self, key: tuple[Any, ...], value: arb, span: Span | None = None) -> int:
        """A node without variables.

        `key` names its derivation, never its value: two parameters with the same enclosure are different
        numbers, and sharing them would turn their product into a square.
        """
        key = ("constant", *key)
        if key not in self._known:
            self.nodes.append(Node("constant", (), constant(value) if span is None else span))
            self._known[key] = len(self.nodes) - 1
            self._constants[len(self.nodes) - 1] = value
        return self._known[key]

    def _number(self, value: Fraction | int) -> int:
        with precision(CONSTANT_BITS):
            return self._constant(("number", Fraction(value)), evaluate_ball(number(value), {}))

    def _symbol(self, name: str) -> int:
        if name in self._rows:
            return self._rows[name]
        ball = self._balls[name]
        return self._constant(("symbol", name), enclose(ball), span_of(ball))

    def expression(self, expression: Expression) -> int:
        """Node of `expression`.  Raises KeyError for an unknown name."""
        with precision(CONSTANT_BITS):
            return fold(expression, self._visit)

    def _visit(self, node: Expression, args: tuple[int, ...]) -> int:
        if node.op == "symbol":
            return self._symbol(str(node.value))
        if node.op == "number":
            return self._number(node.fraction)
        if node.op == "pi":
            return self._constant(("pi",), evaluate_ball(node, {}))
        if all(a in self._constants for a in args):
            return self._folded(node, args)
        if node.op == "add":
            return self._sum(node, args)
        if node.op == "mul":
            total = args[0]
            for factor in args[1:]:
                total = self._product_as_written(total, factor)
            return total
        if node.op == "sat":
            x, lower, upper = args
            return self._emit("min", (self._emit("max", (x, lower)), upper))
        if node.op == "pow":
            return self._power(args[0], node.fraction)
        if node.op == "div" and args[1] in self._constants and not self._constants[args[1]].contains(0):
            inverse = self._constant(("inverse", args[1]), 1 / self._constants[args[1]])
            return self._product_as_written(args[0], inverse)
        if node.op in ("neg", "div", *_UNARY):
            return self._emit(node.op, args)
        raise ValueError(f"unknown operation {node.op!r}")

    def _folded(self, node: Expression, args: tuple[int, ...]) -> int:
        """An operation on constants only, in ball arithmetic."""
        names = [f"argument {i}" for i in range(len(args))]
        shallow = Expression(node.op, tuple(symbol(n) for n in names), node.value)
        values = {n: self._constants[a] for n, a in zip(names, args, strict=True)}
        return self._constant((node.op, args, node.value), evaluate_ball(shallow, values))

    def _sum(self, node: Expression, args: tuple[int, ...]) -> int:
        """Terms in order, all constants first and together."""
        fixed = [a for a in args if a in self._constants]
        total: int | None = None
        if fixed:
            value = self._constants[fixed[0]]
            for other in fixed[1:]:
                value = value + self._constants[other]
            total = None if value.is_zero() else self._constant(("sum", *fixed), value)
        for term in args:
            if term not in self._constants:
                total = term if total is None else self._add(total, term)
        return self._number(0) if total is None else total

    def _add(self, a: int, b: int) -> int:
        if self.nodes[b].op == "neg":
            return self._emit("sub", (a, self.nodes[b].args[0]))
        return self._emit("add", (a, b))

    def _product_as_written(self, a: int, b: int) -> int:
        """Product of two values; a zero factor does not remove the other one, which must stay defined."""
        a, b = min(a, b), max(a, b)
        known = [self._constants.get(i) for i in (a, b)]
        if known[0] is not None and known[1] is not None:
            return self._constant(("mul", a, b), known[0] * known[1])
        if a == b:
            return self._emit("square", (a,))
        for value, other in zip(known, (b, a), strict=True):
            if value is not None and value.is_exact() and value == 1:
                return other
            if value is not None and value.is_exact() and value == -1:
                return self._emit("neg", (other,))
        return self._emit("mul", (a, b))

    def _power(self, base: int, exponent: Fraction) -> int:
        if exponent.denominator != 1:
            if exponent == Fraction(1, 2):
                return self._emit("sqrt", (base,))
            return self._emit("rational power", (base,), exponent)
        count = int(exponent)
        if count < 0:
            return self._emit("div", (self._number(1), self._power(base, Fraction(-count))))
        if count == 0:
            return self._number(1)
        if count == 1:
            return base
        return self._emit("square", (base,)) if count == 2 else self._emit("power", (base,), count)  # noqa: PLR2004

    # Derivatives.  None is zero by structure.

    def derivative(self, target: int | None, row: int) -> int | None:
        """Node of the derivative of node `target` with respect to the variable in `row`."""
        if target is None:
            return None
        with precision(CONSTANT_BITS):
            for index in self._below(target, row):
                key = (index, row)
                if key not in self._derivatives:
                    self._derivatives[key] = self._rule(index, row)
        return self._derivatives[target, row]

    def _below(self, target: int, row: int) -> Iterable[int]:
        """`target` and everything it uses without known derivative, arguments first."""
        found: set[int] = set()
        stack = [target]
        while stack:
            index = stack.pop()
            if index not in found and (index, row) not in self._derivatives:
                found.add(index)
                stack.extend(self.nodes[index].args)
        return sorted(found)

    def _rule(self, index: int, row: int) -> int | None:
        """The derivative of one operation from those of its arguments (standard calculus)."""
        node = self.nodes[index]
        if node.op == "variable":
            return self._number(1) if node.data == row else None
        inner = [self._derivatives[a, row] for a in node.args]
        if all(d is None for d in inner):
            return None
        if len(node.args) == 1:
            return self._times(self._slope(index, node), inner[0])
        (a, b), (da, db) = node.args, inner
        if node.op == "add":
            return self._plus(da, db)
        if node.op == "sub":
            return self._minus(da, db)
        if node.op == "mul":
            return self._plus(self._times(b, da), self._times(a, db))
        if node.op == "div":
            top = self._minus(da, self._times(index, db))
            return None if top is None else self._emit("div", (top, b))
        # max(a, b) = b + max(a - b, 0) and min(a, b) = b - max(b - a, 0)
        if node.op == "max":
            switch = self._emit("step", (self._emit("sub", (a, b)),))
            return self._plus(db, self._times(switch, self._minus(da, db)))
        switch = self._emit("step", (self._emit("sub", (b, a)),))
        return self._minus(db, self._times(switch, self._minus(db, da)))

    def _slope(self, index: int, node: Node) -> int | None:
        """Outer derivative of an operation with one argument, at that argument; None for zero."""
        a = node.args[0]
        one = self._number(1)
        if node.op == "neg":
            return self._number(-1)
        if node.op == "square":
            return self._times(self._number(2), a)
        if node.op == "power":
            return self._times(self._number(node.data), self._power(a, Fraction(node.data - 1)))
        if node.op == "rational power":
            return self._times(self._number(node.data), self._power(a, node.data - 1))
        if node.op == "sqrt":
            return self._emit("div", (self._number(Fraction(1, 2)), index))
        if node.op == "sin":
            return self._emit("cos", (a,))
        if node.op == "cos":
            return self._emit("neg", (self._emit("sin", (a,)),))
        if node.op == "exp":
            return index
        if node.op == "log":
            return self._emit("div", (one, a))
        if node.op == "abs":
            return self._emit("sign", (a,))
        if node.op in ("sign", "step"):
            return self._emit("no kink", (a,))
        if node.op == "no kink":
            return None
        return self._slope_of_inverse(index, node, one)

    def _slope_of_inverse(self, index: int, node: Node, one: int) -> int:
        """tan, tanh and the inverse functions, whose derivatives come from 1 + v^2 or 1 - v^2."""
        if node.op == "tan":
            return self._emit("add", (one, self._emit("square", (index,))))
        if node.op == "tanh":
            return self._emit("sub", (one, self._emit("square", (index,))))
        squared = self._emit("square", (node.args[0],))
        if node.op == "atan":
            return self._emit("div", (one, self._emit("add", (one, squared))))
        root = self._emit("sqrt", (self._emit("sub", (one, squared)),))
        quotient = self._emit("div", (one, root))
        return quotient if node.op == "asin" else self._emit("neg", (quotient,))

    def _is_zero(self, a: int | None) -> bool:
        return a is None or (a in self._constants and self._constants[a].is_zero())

    def _times(self, a: int | None, b: int | None) -> int | None:
        """Product in a derivative, where a zero factor may remove the other: both occur in the value itself."""
        if a is None or b is None or self._is_zero(a) or self._is_zero(b):
            return None
        return self._product_as_written(a, b)

    def _plus(self, a: int | None, b: int | None) -> int | None:
        if a is None or b is None:
            return b if a is None else a
        if a in self._constants and b in self._constants:
            return self._constant(("add", a, b), self._constants[a] + self._constants[b])
        return self._add(a, b)

    def _minus(self, a: int | None, b: int | None) -> int | None:
        if b is None:
            return a
        if a is None:
            return self._times(self._number(-1), b)
        if a in self._constants and b in self._constants:
            return self._constant(("sub", a, b), self._constants[a] - self._constants[b])
        return self._emit("sub", (a, b))
