"""Vector fields as immutable expression trees over the rationals.

An expression is kept as the engineer wrote it: nothing is cancelled, so the conditions under which
it is defined can be read off the tree (`conditions`).  Numbers are exact fractions; ``pi`` is a
symbol of its own.  Evaluation is done by *folding* the tree over an algebra (`fold`), so that balls,
polynomials, interval tapes and typeset formulas all read the same tree by their own route.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any, Final

UNARY_FUNCTIONS: Final = ("sin", "cos", "tan", "asin", "acos", "atan", "exp", "log", "sqrt", "abs", "tanh")
SATURATION: Final = "sat"
FUNCTIONS: Final = (*UNARY_FUNCTIONS, SATURATION)
ARITHMETIC: Final = ("add", "mul", "div", "neg", "pow")
OPERATIONS: Final = ("number", "symbol", "pi", *ARITHMETIC, *FUNCTIONS)


@dataclass(frozen=True, slots=True, eq=False)
class Expression:
    """One node of an expression tree.

    `op` is one of `OPERATIONS`.  `value` is the fraction of a ``number``, the name of a ``symbol``,
    the rational exponent of a ``pow`` (whose only argument is the base), else None.
    ``add`` and ``mul`` take two or more arguments, ``div`` two, ``sat`` three (x, lo, hi).
    """

    op: str
    args: tuple[Expression, ...] = ()
    value: Fraction | str | None = None
    _hash: int = field(init=False, repr=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "_hash", hash((self.op, self.args, self.value)))

    def __hash__(self) -> int:
        return self._hash

    def __eq__(self, other: object) -> bool:
        if self is other:
            return True
        if not isinstance(other, Expression) or self._hash != other._hash:
            return False
        return (self.op, self.value, self.args) == (other.op, other.value, other.args)

    def __str__(self) -> str:
        return to_text(self)

    @property
    def fraction(self) -> Fraction:
        """The value of a ``number`` or the exponent of a ``pow``; raises TypeError for any other node."""
        if not isinstance(self.value, Fraction):
            raise TypeError(f"{self.op} carries no number")
        return self.value


def number(value: Fraction | int | str) -> Expression:
    """The constant `value`, exactly."""
    return Expression("number", (), Fraction(value))


def symbol(name: str) -> Expression:
    """A state, parameter or signal called `name`."""
    return Expression("symbol", (), name)


PI: Final = Expression("pi")
ZERO: Final = number(0)
ONE: Final = number(1)


def add(*terms: Expression) -> Expression:
    """Sum, with zeros dropped and constants folded; only for expressions the program derives itself."""
    constant = sum((t.fraction for t in terms if t.op == "number"), Fraction(0))
    rest = [t for t in terms if t.op != "number"]
    if constant:
        rest.append(number(constant))
    return rest[0] if len(rest) == 1 else Expression("add", tuple(rest)) if rest else ZERO


def mul(*factors: Expression) -> Expression:
    """Product, with constants folded.  A zero factor gives zero: use only where all factors are defined."""
    constant = Fraction(1)
    rest = []
    for factor in factors:
        if factor.op == "number":
            constant *= factor.fraction
        else:
            rest.append(factor)
    if constant == 0:
        return ZERO
    if constant != 1:
        rest.insert(0, number(constant))
    return rest[0] if len(rest) == 1 else Expression("mul", tuple(rest)) if rest else ONE


def neg(argument: Expression) -> Expression:
    """Minus `argument`."""
    return number(-argument.fraction) if argument.op == "number" else Expression("neg", (argument,))


def sub(left: Expression, right: Expression) -> Expression:
    """`left` minus `right`."""
    return add(left, neg(right))


def div(numerator: Expression, denominator: Expression) -> Expression:
    """Quotient; folded only where the denominator is a non-zero constant."""
    if denominator.op == "number" and denominator.fraction != 0:
        if numerator.op == "number":
            return number(numerator.fraction / denominator.fraction)
        if denominator.fraction == 1:
            return numerator
    return Expression("div", (numerator, denominator))


def power(base: Expression, exponent: Fraction | int) -> Expression:
    """`base` to a rational power."""
    exponent = Fraction(exponent)
    if exponent == 1:
        return base
    if exponent == 0:
        return ONE
    if base.op == "number" and exponent.denominator == 1 and (base.fraction != 0 or exponent > 0):
        return number(base.fraction ** int(exponent))
    return Expression("pow", (base,), exponent)


def call(name: str, *arguments: Expression) -> Expression:
    """One of the elementary functions in `FUNCTIONS`."""
    if name not in FUNCTIONS:
        raise ValueError(f"unknown function {name!r}")
    return Expression(name, arguments)


def nodes(expression: Expression) -> Iterator[Expression]:
    """Every distinct node of the tree, arguments before the node that uses them."""
    seen: set[Expression] = set()
    stack = [(expression, False)]
    while stack:
        node, ready = stack.pop()
        if node in seen:
            continue
        if ready:
            seen.add(node)
            yield node
        else:
            stack.append((node, True))
            stack.extend((a, False) for a in reversed(node.args))


def fold(expression: Expression, visit: Callable[[Expression, tuple[Any, ...]], Any]) -> Any:
    """Value of `expression` where `visit(node, values of its arguments)` gives the value of a node.

    Every distinct sub-expression is visited once.
    """
    done: dict[Expression, Any] = {}
    for node in nodes(expression):
        done[node] = visit(node, tuple(done[a] for a in node.args))
    return done[expression]


def names(expression: Expression) -> frozenset[str]:
    """The names of all symbols in `expression`."""
    return frozenset(str(n.value) for n in nodes(expression) if n.op == "symbol")


def rebuild(node: Expression, arguments: tuple[Expression, ...]) -> Expression:
    """`node` with other arguments, as written (no folding)."""
    return node if arguments == node.args else Expression(node.op, arguments, node.value)


def substitute(expression: Expression, mapping: Mapping[str, Expression]) -> Expression:
    """`expression` with each symbol named in `mapping` replaced, all at once."""

    def visit(node: Expression, arguments: tuple[Expression, ...]) -> Expression:
        if node.op == "symbol":
            return mapping.get(str(node.value), node)
        return rebuild(node, arguments)

    return fold(expression, visit)


def differentiate(expression: Expression, name: str) -> Expression:
    """Partial derivative with respect to the symbol `name`.

    Valid wherever `expression` is differentiable: at a kink of ``abs`` or ``sat`` the value of one
    side is returned, so a caller must prove that the kink is not met (`kinks`).
    """

    def visit(node: Expression, pairs: tuple[tuple[Expression, Expression], ...]) -> tuple[Expression, Expression]:
        return node, _derivative(node, pairs, name)

    return fold(expression, visit)[1]


def _derivative(node: Expression, pairs: tuple[tuple[Expression, Expression], ...], name: str) -> Expression:
    if node.op == "symbol":
        return ONE if node.value == name else ZERO
    if not pairs:
        return ZERO
    (u, du), rest = pairs[0], pairs[1:]
    if all(d == ZERO for _, d in pairs):
        return ZERO
    if node.op == "add":
        return add(*(d for _, d in pairs))
    if node.op == "neg":
        return neg(du)
    if node.op == "mul":
        return add(
            *(mul(d, *(v for j, (v, _) in enumerate(pairs) if j != i)) for i, (_, d) in enumerate(pairs) if d != ZERO)
        )
    if node.op == "div":
        (w, dw) = rest[0]
        if dw == ZERO:
            return div(du, w)
        return div(sub(mul(du, w), mul(u, dw)), power(w, 2))
    if node.op == "pow":
        return mul(number(node.fraction), power(u, node.fraction - 1), du)
    if node.op == SATURATION:
        raise ValueError("the derivative of a saturation depends on its branch: resolve the branch first")
    return mul(_outer_derivative(node.op, u), du)


def _outer_derivative(function: str, u: Expression) -> Expression:
    """Derivative of an elementary function at its argument `u` (standard calculus)."""
    if function == "sin":
        return call("cos", u)
    if function == "cos":
        return neg(call("sin", u))
    if function == "tan":
        return add(ONE, power(call("tan", u), 2))
    if function == "asin":
        return div(ONE, call("sqrt", sub(ONE, power(u, 2))))
    if function == "acos":
        return neg(div(ONE, call("sqrt", sub(ONE, power(u, 2)))))
    if function == "atan":
        return div(ONE, add(ONE, power(u, 2)))
    if function == "exp":
        return call("exp", u)
    if function == "log":
        return div(ONE, u)
    if function == "sqrt":
        return div(ONE, mul(number(2), call("sqrt", u)))
    if function == "tanh":
        return sub(ONE, power(call("tanh", u), 2))
    if function == "abs":
        return div(u, call("abs", u))
    raise ValueError(f"unknown function {function!r}")


@dataclass(frozen=True, slots=True)
class Condition:
    """What must hold for an expression to be defined and smooth: `relation` of `expression`.

    `relation` is ``nonzero``, ``positive`` (roots and logarithms; at zero a root is defined but not
    Lipschitz) or ``inside_unit`` (|argument| < 1, for asin and acos).
    """

    relation: str
    expression: Expression


def conditions(expression: Expression) -> tuple[Condition, ...]:
    """Conditions under which `expression`, as written, is defined and continuously differentiable."""
    found: dict[Condition, None] = {}
    for node in nodes(expression):
        for condition in _conditions_of(node):
            if condition.expression.op != "number" or not _is_met(condition.relation, condition.expression.fraction):
                found.setdefault(condition)
    return tuple(found)


def _is_met(relation: str, value: Fraction) -> bool:
    """A number satisfies the relation; a condition on one that does not is kept, so that it is never proved."""
    return {"nonzero": value != 0, "positive": value > 0, "inside_unit": abs(value) < 1}[relation]


def _conditions_of(node: Expression) -> Iterator[Condition]:
    if node.op == "div":
        yield Condition("nonzero", node.args[1])
    elif node.op == "pow" and node.fraction.denominator != 1:
        yield Condition("positive", node.args[0])
    elif node.op == "pow" and node.fraction < 0:
        yield Condition("nonzero", node.args[0])
    elif node.op in ("log", "sqrt"):
        yield Condition("positive", node.args[0])
    elif node.op == "tan":
        yield Condition("nonzero", call("cos", node.args[0]))
    elif node.op in ("asin", "acos"):
        yield Condition("inside_unit", node.args[0])


def kinks(expression: Expression) -> tuple[Expression, ...]:
    """Expressions whose zeros are kinks: arguments of ``abs``, distances of ``sat`` arguments to its ends."""
    found: dict[Expression, None] = {}
    for node in nodes(expression):
        if node.op == "abs":
            found.setdefault(node.args[0])
        elif node.op == SATURATION:
            x, lower, upper = node.args
            found.setdefault(sub(x, lower))
            found.setdefault(sub(upper, x))
    return tuple(found)


LONGEST_PLAIN: Final = 15
"""Digits up to which a decimal is printed without a power of ten; what a reader still counts at a glance."""


def _decimal_text(value: Fraction) -> str | None:
    """`value` as an exact decimal, None where it is negative or has none."""
    twos = (value.denominator & -value.denominator).bit_length() - 1
    rest, fives = value.denominator >> twos, 0
    while rest % 5 == 0:
        rest, fives = rest // 5, fives + 1
    if value < 0 or rest != 1:
        return None
    places = max(twos, fives)
    digits = str(value.numerator * 10**places // value.denominator)
    if places == 0:
        bare = digits.rstrip("0")
        return digits if len(digits) <= LONGEST_PLAIN else f"{bare}e{len(digits) - len(bare)}"
    if max(places, len(digits)) > LONGEST_PLAIN:
        return f"{digits}e-{places}"
    digits = digits.rjust(places + 1, "0")
    return f"{digits[:-places]}.{digits[-places:]}"


def to_text(expression: Expression) -> str:
    """`expression` in the formula grammar of project files.

    Reading it gives the same tree; only negative numbers and fractions without an exact decimal, which
    the grammar has no sign for, come back as a minus sign or a division.
    """

    def visit(node: Expression, parts: tuple[tuple[str, int], ...]) -> tuple[str, int]:
        def wrap(index: int, least: int) -> str:
            text, binding = parts[index]
            nested = index == 0 and node.op in ("add", "mul") and node.args[0].op == node.op
            return f"({text})" if binding < least or nested else text

        if node.op == "number":
            text = _decimal_text(node.fraction)
            return (text, 5) if text is not None else (f"({node.value})", 5)
        if node.op in ("symbol", "pi"):
            return str(node.value or "pi"), 5
        if node.op == "add":
            text = wrap(0, 2)
            for i, argument in enumerate(node.args[1:], start=1):
                text += f" - {parts[i][0][1:]}" if argument.op == "neg" else f" + {wrap(i, 3)}"
            return text, 1
        if node.op == "neg":
            return f"-{wrap(0, 3)}", 2
        if node.op == "mul":
            return "*".join(wrap(i, 4 if i else 3) for i in range(len(parts))), 3
        if node.op == "div":
            return f"{wrap(0, 3)}/{wrap(1, 4)}", 3
        if node.op == "pow":
            exponent = str(node.value)
            return f"{wrap(0, 5)}^{exponent if exponent.isdigit() else f'({exponent})'}", 4
        return f"{node.op}({', '.join(p[0] for p in parts)})", 5

    return fold(expression, visit)[0]


def to_data(expression: Expression) -> list[Any]:
    """Canonical nested lists for JSON: ``["add", a, b]``, ``["number", "3/2"]``, ``["pow", a, "1/2"]``."""

    def visit(node: Expression, parts: tuple[list[Any], ...]) -> list[Any]:
        return [node.op, *parts] if node.value is None else [node.op, *parts, str(node.value)]

    return fold(expression, visit)


def from_data(data: list[Any]) -> Expression:
    """Inverse of `to_data`.

    Raises ValueError if the data is not a well-formed expression.
    """
    if not isinstance(data, list) or not data or data[0] not in OPERATIONS:
        raise ValueError("not an expression")
    op, *rest = data
    if op == "number":
        return number(Fraction(rest[0]))
    if op == "symbol":
        return symbol(str(rest[0]))
    if op == "pow":
        return Expression("pow", (from_data(rest[0]),), Fraction(rest[1]))
    return Expression(op, tuple(from_data(r) for r in rest))


_EXACT_VALUES: Final[dict[tuple[str, Fraction], Fraction]] = {
    ("sin", Fraction(0)): Fraction(0),
    ("cos", Fraction(0)): Fraction(1),
    ("tan", Fraction(0)): Fraction(0),
    ("asin", Fraction(0)): Fraction(0),
    ("acos", Fraction(1)): Fraction(0),
    ("atan", Fraction(0)): Fraction(0),
    ("exp", Fraction(0)): Fraction(1),
    ("log", Fraction(1)): Fraction(0),
    ("sqrt", Fraction(0)): Fraction(0),
    ("sqrt", Fraction(1)): Fraction(1),
    ("tanh", Fraction(0)): Fraction(0),
}


def simplify(expression: Expression) -> Expression:
    """`expression` with constants folded, exactly, bottom up; equal to it wherever it is defined.

    Zero factors make a product zero and a zero numerator makes a quotient zero, so a caller must have
    proved the domain `conditions` of the original.  No other identity is used.
    """

    def visit(node: Expression, args: tuple[Expression, ...]) -> Expression:
        op = node.op
        if op == "add":
            return add(*(t for a in args for t in (a.args if a.op == "add" else (a,))))
        if op == "mul":
            return mul(*args)
        if op == "neg":
            return args[0].args[0] if args[0].op == "neg" else neg(args[0])
        if op == "div":
            if args[0] == ZERO and args[1] != ZERO:
                return ZERO
            return div(*args)
        if op == "pow":
            return power(args[0], node.fraction)
        if op == SATURATION and all(a.op == "number" for a in args):
            x, lower, upper = (a.fraction for a in args)
            return number(min(max(x, lower), upper))
        if op == "abs" and args[0].op == "number":
            return number(abs(args[0].fraction))
        if len(args) == 1 and args[0].op == "number" and (op, args[0].fraction) in _EXACT_VALUES:
            return number(_EXACT_VALUES[op, args[0].fraction])
        return rebuild(node, args)

    return fold(expression, visit)
