"""Read a formula into an expression tree as written: a small grammar of its own, no evaluation of code.

    sum      = term { ("+" | "-") term }
    term     = "-" term | product
    product  = factor { ("*" | "/") factor }
    factor   = "-" factor | power
    power    = atom [ "^" exponent ]            right associative, exponent a rational constant
    atom     = number | name | "pi" | function "(" sum { "," sum } ")" | "(" sum ")"

A minus sign covers the product it precedes: ``-a*b`` is -(a*b), ``-x^2`` is -(x^2).
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Final, NamedTuple

from dossier.model.expression import FUNCTIONS, PI, SATURATION, Expression
from dossier.project.decimals import NumberError, exact
from dossier.project.faults import suggestion

LONGEST_FORMULA: Final = 20_000
"""Characters of one formula; above every formula a person can review."""
MOST_TOKENS: Final = 6_000
"""Tokens of one formula, for the same reason."""
DEEPEST_NESTING: Final = 40
"""Open brackets and signs; keeps the recursive descent far from the limit of the interpreter."""
TALLEST_TREE: Final = 100
"""Levels of a tree: a long chain of quotients is as high as it is long, and comparing trees recurses."""
LARGEST_EXPONENT: Final = 100
"""Bound on numerator and denominator of a power; higher ones only exhaust memory."""

SATURATION_ARGUMENTS: Final = 3

_TOKEN: Final = re.compile(
    r"\s*(?:(?P<number>(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d+)?)|(?P<name>[A-Za-z_]\w*)|(?P<sign>[-+*/^(),])|(?P<end>$))",
    re.ASCII,
)
_STRANGE: Final = {
    "−": "write the minus sign as -",
    "–": "write the minus sign as -",
    "·": "write * for a product",
    "×": "write * for a product",
    "²": "write x^2",
    "³": "write x^3",
    "√": "write sqrt(x)",
    "π": "write pi",
    "[": "use round brackets",
    "{": "use round brackets",
    "]": "use round brackets",
    "}": "use round brackets",
}


USE_SIGNALS: Final = "use signals for parts"


class FormulaError(ValueError):
    """A formula outside the grammar: `offset` and `length` mark the offending text, counted from 0."""

    def __init__(self, message: str, offset: int, length: int, expected: str = "", hint: str = "") -> None:
        super().__init__(message)
        self.message, self.offset, self.length, self.expected, self.hint = message, offset, length, expected, hint


@dataclass(frozen=True, slots=True)
class Formula:
    """An expression as written, and where each distinct node of it first stands: (start, end) in `text`."""

    text: str
    expression: Expression
    spans: Mapping[Expression, tuple[int, int]]

    def excerpt(self, node: Expression) -> tuple[int, str]:
        """Offset and text of the first occurrence of `node`."""
        start, end = self.spans.get(node, (0, len(self.text)))
        return start, self.text[start:end]


class _Token(NamedTuple):
    kind: str
    text: str
    start: int

    @property
    def end(self) -> int:
        return self.start + len(self.text)


def parse(text: str) -> Formula:
    """The formula in `text`; raises FormulaError where it leaves the grammar or a limit."""
    if len(text) > LONGEST_FORMULA:
        raise FormulaError(
            f"a formula has at most {LONGEST_FORMULA} characters", 0, 1, "a shorter one", "use signals for parts"
        )
    parser = _Parser(text, _tokens(text))
    expression, _ = parser.sum()
    rest = parser.token
    if rest.kind != "end":
        raise parser.unexpected(rest)
    return Formula(text, expression, parser.spans)


def _tokens(text: str) -> list[_Token]:
    tokens: list[_Token] = []
    position = 0
    while True:
        match = _TOKEN.match(text, position)
        if match is None:
            start = position + len(text[position:]) - len(text[position:].lstrip())
            strange = text[start]
            raise FormulaError(
                f"the sign {strange!r} has no meaning in a formula", start, 1,
                "numbers, names, + - * / ^ ( ) and functions", _STRANGE.get(strange, ""),
            )  # fmt: skip
        kind = match.lastgroup or "end"
        tokens.append(_Token(kind, match[kind], match.start(kind)))
        position = match.end()
        if kind == "end":
            return tokens
        if len(tokens) > MOST_TOKENS:
            raise FormulaError(
                f"a formula has at most {MOST_TOKENS} parts", 0, 1, "a shorter one", "use signals for parts"
            )


class _Parser:
    """Recursive descent over the tokens; every rule returns its tree and where it starts."""

    def __init__(self, text: str, tokens: list[_Token]) -> None:
        self.text, self.tokens, self.position, self.depth = text, tokens, 0, 0
        self.spans: dict[Expression, tuple[int, int]] = {}
        self.heights: dict[int, int] = {}
        self.alive: list[Expression] = []

    @property
    def token(self) -> _Token:
        return self.tokens[self.position]

    def next_is(self, signs: str) -> bool:
        return self.token.kind == "sign" and self.token.text in signs

    def take(self) -> _Token:
        token = self.token
        self.position += 1
        return token

    def keep(self, node: Expression, start: int) -> Expression:
        height = 1 + max((self.heights.get(id(a), 0) for a in node.args), default=0)
        if height > TALLEST_TREE:
            raise FormulaError(
                f"a formula has at most {TALLEST_TREE} levels", start, 1, "a flatter one", "use signals for parts"
            )
        self.heights[id(node)] = height
        self.alive.append(node)
        self.spans.setdefault(node, (start, self.tokens[self.position - 1].end))
        return node

    def unexpected(self, token: _Token) -> FormulaError:
        if token.kind == "end":
            return FormulaError("the formula ends too early", len(self.text), 0, "a number, a name or (")
        before = self.tokens[self.position - 1] if self.position else None
        hint = ""
        if token.text == "*" and before is not None and before.text == "*":
            hint = "write ^ for a power"
        elif before is not None and (before.kind in ("number", "name") or before.text == ")"):
            if token.kind in ("number", "name") or token.text == "(":
                hint = "write * between two factors"
            elif token.text == ",":
                hint = "the decimal sign is a point"
        return FormulaError(f"{token.text} is not expected here", token.start, len(token.text), "an operator", hint)

    def enter(self, token: _Token) -> None:
        self.depth += 1
        if self.depth > DEEPEST_NESTING:
            message = f"a formula is nested at most {DEEPEST_NESTING} deep"
            raise FormulaError(message, token.start, len(token.text), "fewer levels", USE_SIGNALS)

    def sum(self) -> tuple[Expression, int]:
        first, start = self.term()
        terms = [first]
        while self.next_is("+-"):
            sign = self.take()
            part, _ = self.term()
            terms.append(part if sign.text == "+" else self.keep(Expression("neg", (part,)), sign.start))
        if len(terms) == 1:
            return first, start
        return self.keep(Expression("add", tuple(terms)), start), start

    def term(self) -> tuple[Expression, int]:
        return self.signed(self.term) if self.next_is("-") else self.product()

    def signed(self, rule: Callable[[], tuple[Expression, int]]) -> tuple[Expression, int]:
        sign = self.take()
        self.enter(sign)
        part, _ = rule()
        self.depth -= 1
        return self.keep(Expression("neg", (part,)), sign.start), sign.start

    def product(self) -> tuple[Expression, int]:
        left, start = self.factor()
        factors = [left]
        while self.next_is("*/"):
            sign = self.take()
            right, _ = self.factor()
            if sign.text == "*":
                factors.append(right)
            else:
                left = factors[0] if len(factors) == 1 else self.product_of(factors, start)
                factors = [self.keep(Expression("div", (left, right)), start)]
        return (factors[0] if len(factors) == 1 else self.product_of(factors, start)), start

    def product_of(self, factors: list[Expression], start: int) -> Expression:
        return self.keep(Expression("mul", tuple(factors)), start)

    def factor(self) -> tuple[Expression, int]:
        return self.signed(self.factor) if self.next_is("-") else self.power()

    def power(self) -> tuple[Expression, int]:
        base, start = self.atom()
        if not self.next_is("^"):
            return base, start
        self.take()
        exponent = self.exponent()
        return self.keep(Expression("pow", (base,), exponent), start), start

    def exponent(self) -> Fraction:
        start = self.token
        tree, _ = self.factor()
        written = self.text[start.start : self.tokens[self.position - 1].end]
        try:
            value = constant(tree)
        except ZeroDivisionError:
            value = None
        if value is None:
            raise FormulaError(
                "the exponent is not a number", start.start, len(written),
                "a rational number, as in x^2, x^-2 or x^(1/2)", "write exp(y*log(x)) for x to the power y",
            )  # fmt: skip
        if max(abs(value.numerator), value.denominator) > LARGEST_EXPONENT:
            message = f"exponents have numerator and denominator of at most {LARGEST_EXPONENT}"
            raise FormulaError(message, start.start, len(written), "a smaller exponent")
        return value

    def atom(self) -> tuple[Expression, int]:
        if self.token.kind == "end":
            raise self.unexpected(self.token)
        token = self.take()
        if token.kind == "number":
            try:
                return self.keep(Expression("number", (), exact(token.text)), token.start), token.start
            except NumberError as error:
                raise FormulaError(str(error), token.start, len(token.text), "a number", error.hint) from None
        if token.kind == "name":
            return self.named(token), token.start
        if token.text == "(":
            self.enter(token)
            inner, _ = self.sum()
            self.close(token)
            return inner, token.start
        self.position -= 1
        error = self.unexpected(token)
        error.expected = "a number, a name or ("
        raise error

    def close(self, opened: _Token) -> None:
        if self.token.kind == "end":
            raise FormulaError(
                "the bracket is not closed", opened.start, len(opened.text), ")", "add the closing bracket"
            )
        if not self.next_is(")"):
            raise self.unexpected(self.token)
        self.take()
        self.depth -= 1

    def named(self, token: _Token) -> Expression:
        if self.next_is("("):
            return self.function(token)
        if token.text == "pi":
            return self.keep(PI, token.start)
        if token.text in FUNCTIONS:
            message = f"{token.text} is a function and needs its argument"
            raise FormulaError(message, token.start, len(token.text), f"{token.text}(x)")
        return self.keep(Expression("symbol", (), token.text), token.start)

    def function(self, token: _Token) -> Expression:
        if token.text not in FUNCTIONS:
            raise FormulaError(
                f"{token.text} is not a function", token.start, len(token.text),
                "one of " + ", ".join(FUNCTIONS), suggestion(token.text, FUNCTIONS, "write * between two factors"),
            )  # fmt: skip
        opened = self.take()
        self.enter(opened)
        arguments = [self.sum()[0]]
        while self.next_is(","):
            self.take()
            arguments.append(self.sum()[0])
        self.close(opened)
        count = SATURATION_ARGUMENTS if token.text == SATURATION else 1
        if len(arguments) != count:
            usage = "sat(x, lo, hi)" if token.text == SATURATION else f"{token.text}(x)"
            message = f"{token.text} takes {count} argument{'s' if count > 1 else ''}, not {len(arguments)}"
            raise FormulaError(message, token.start, len(token.text), usage, f"write {usage}")
        return self.keep(Expression(token.text, tuple(arguments)), token.start)


def constant(tree: Expression) -> Fraction | None:
    """The value of a tree of numbers and arithmetic, None where it holds anything else or grows too large.

    Raises ZeroDivisionError for a division by zero.
    """
    if tree.op == "number":
        return tree.fraction
    if tree.op not in ("add", "mul", "neg", "div", "pow"):
        return None
    values = [constant(a) for a in tree.args]
    if any(v is None for v in values):
        return None
    numbers = [v for v in values if v is not None]
    if tree.op == "neg":
        return -numbers[0]
    if tree.op == "div":
        return numbers[0] / numbers[1]
    if tree.op == "pow":
        usable = tree.fraction.denominator == 1 and max(numbers[0].numerator.bit_length(), 1) <= LARGEST_EXPONENT
        return numbers[0] ** int(tree.fraction) if usable else None
    total = numbers[0]
    for value in numbers[1:]:
        total = total + value if tree.op == "add" else total * value
    return total
