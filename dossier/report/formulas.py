"""Set expressions, functions and matrices as LaTeX for the typesetter, from the very trees that were analysed."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from fractions import Fraction
from itertools import pairwise
from typing import Final

from dossier.model.expression import Expression, fold
from dossier.model.polynomial import Exponents
from dossier.report import numbers
from dossier.report.notation import Notation

SUM, SIGNED, PRODUCT, POWER, ATOM = 1, 2, 3, 4, 5
"""How tightly a piece of formula binds."""

_NAMED: Final = {
    "sin": r"\sin", "cos": r"\cos", "tan": r"\tan", "tanh": r"\tanh", "exp": r"\exp", "log": r"\ln",
    "asin": r"\arcsin", "acos": r"\arccos", "atan": r"\arctan", "sat": r"\operatorname{sat}",
}  # fmt: skip
_POWERED: Final = frozenset({"sin", "cos", "tan", "tanh"})
"""Functions whose integer powers are written on the name: sin squared of x."""

APPROXIMATELY: Final = r"\approx"

LONG_SUM: Final = 14
"""Terms of a function of offsets that are printed; the certificate file holds all."""

Piece = tuple[str, int]


def latex(expression: Expression, notation: Notation) -> str:
    """`expression` as LaTeX, term by term as the engineer wrote it."""
    return fold(expression, lambda node, parts: _piece(node, parts, notation))[0]


def _piece(node: Expression, parts: tuple[Piece, ...], notation: Notation) -> Piece:
    op = node.op
    if op == "number":
        return number_piece(Fraction(node.value or 0))
    if op == "symbol":
        return notation.latex(str(node.value)), ATOM
    if op == "pi":
        return r"\pi", ATOM
    if op == "add":
        return _sum(node, parts), SUM
    if op == "neg":
        return f"-{_wrapped(parts[0], PRODUCT)}", SIGNED
    if op == "mul":
        return _product(node, parts)
    if op == "div":
        return rf"\frac{{{parts[0][0]}}}{{{parts[1][0]}}}", PRODUCT
    if op == "pow":
        return _power(node, parts[0])
    return _call(node, parts), ATOM


def _sum(node: Expression, parts: tuple[Piece, ...]) -> str:
    text = _wrapped(parts[0], SUM)
    for part, argument in zip(parts[1:], node.args[1:], strict=True):
        if argument.op == "neg" or part[0].startswith("-"):
            text += f" - {_wrapped((part[0][1:], PRODUCT), PRODUCT)}"
        else:
            text += f" + {_wrapped(part, SIGNED)}"
    return text


def _product(node: Expression, parts: tuple[Piece, ...]) -> Piece:
    """Factors side by side; a negative number in front stands without brackets."""
    leads = node.args[0].op == "number" and parts[0][1] == SIGNED
    text = parts[0][0] if leads else _wrapped(parts[0], PRODUCT)
    for before, part in pairwise(parts):
        both_numbers = before[0][-1:].isdigit() and part[0][:1].isdigit()
        text += (r" \cdot " if both_numbers else r"\,") + _wrapped(part, PRODUCT)
    return text, SIGNED if leads else PRODUCT


def _power(node: Expression, base: Piece) -> Piece:
    exponent = Fraction(node.value or 0)
    inner = node.args[0]
    if exponent == Fraction(1, 2):
        return rf"\sqrt{{{base[0]}}}", ATOM
    if inner.op in _POWERED and exponent > 1 and exponent.denominator == 1:
        name = _NAMED[inner.op]
        return base[0].replace(name, f"{name}^{{{exponent}}}", 1), POWER
    return f"{_wrapped(base, ATOM)}^{{{exponent}}}", POWER


def _call(node: Expression, parts: tuple[Piece, ...]) -> str:
    if node.op == "abs":
        return rf"\left|{parts[0][0]}\right|"
    if node.op == "sqrt":
        return rf"\sqrt{{{parts[0][0]}}}"
    first, *rest = (p[0] for p in parts)
    comma = r",\, "
    arguments = rf"{first};\, {comma.join(rest)}" if rest else first
    return rf"{_NAMED[node.op]}\left({arguments}\right)"


def _wrapped(piece: Piece, least: int) -> str:
    return piece[0] if piece[1] >= least else rf"\left({piece[0]}\right)"


def number_piece(value: Fraction) -> Piece:
    """An exact number: a decimal where that is short, else a fraction; never rounded."""
    decimal = numbers.exactly(value)
    if decimal is None:
        sign = "-" if value < 0 else ""
        return rf"{sign}\frac{{{abs(value.numerator)}}}{{{value.denominator}}}", SIGNED if value < 0 else PRODUCT
    return figure(decimal), SIGNED if value < 0 else PRODUCT if numbers.TIMES in decimal else ATOM


def figure(printed: str) -> str:
    """A number printed by `dossier.report.numbers` as LaTeX."""
    text = printed.replace(numbers.MINUS, "-").replace(numbers.ABOUT + numbers.GROUP, "")
    mantissa, cross, power = text.partition(f"{numbers.GROUP}{numbers.TIMES}{numbers.GROUP}10")
    mantissa = mantissa.replace(numbers.GROUP, r"\,").replace(numbers.ELLIPSIS, r"\ldots")
    if not cross:
        return mantissa
    exponent = power.translate(str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-"))
    return rf"{mantissa} \times 10^{{{exponent}}}"


def offset(name: str, notation: Notation) -> str:
    """The sign of a state's offset from the equilibrium."""
    return rf"\Delta {notation.latex(name)}"


def function_of_offsets(
    function: Mapping[Exponents, Fraction], states: Sequence[str], notation: Notation
) -> tuple[str, tuple[str, ...]]:
    """V of the offsets: its left side with the relation, and its terms with their signs and first digits.

    The relation is an equality only where every printed coefficient is exact.
    """
    ordered = sorted(function.items(), key=lambda t: (sum(t[0]), tuple(-e for e in t[0])))
    shown = ordered[:LONG_SUM]
    exact = all(numbers.exactly(c) is not None for _, c in shown)
    terms = []
    for exponents, coefficient in shown:
        sign = "- " if coefficient < 0 else "+ " if terms else ""
        terms.append(f"{sign}{_term(abs(coefficient), exponents, states, notation)}")
    if len(ordered) > LONG_SUM:
        terms.append(r"+ \cdots")
    return f"V {'=' if exact else APPROXIMATELY}", tuple(terms)


def _term(coefficient: Fraction, exponents: Exponents, states: Sequence[str], notation: Notation) -> str:
    factors = [
        offset(name, notation) if power == 1 else rf"(\Delta {notation.latex(name)})^{{{power}}}"
        for name, power in zip(states, exponents, strict=True)
        if power
    ]
    monomial = r"\,".join(factors)
    if coefficient == 1 and monomial:
        return monomial
    return rf"{figure(numbers.number(coefficient))}\,{monomial}" if monomial else figure(numbers.number(coefficient))


def broken(
    left: str, expression: Expression, notation: Notation, width: float, width_of: Callable[[str], float]
) -> str:
    """``left = expression`` over several lines, broken before the signs of its outermost sum or between factors.

    A quotient with a long numerator becomes one over its denominator times a bracket, which may be broken.
    `width` is the greatest width of a line and `width_of` measures one, in em.
    """
    opening, closing = "", ""
    if expression.op == "div" and expression.args[0].op in ("add", "mul"):
        opening = rf"\frac{{1}}{{{latex(expression.args[1], notation)}}}\Bigl("
        closing = r"\Bigr)"
        expression = expression.args[0]
    return aligned(f"{left} = {opening}", _pieces(expression, notation), closing, width, width_of)


def _pieces(expression: Expression, notation: Notation) -> list[str]:
    """The parts between which `expression` may be broken, each but the first with its sign."""
    if expression.op == "mul":
        factors = [fold(a, lambda node, parts: _piece(node, parts, notation)) for a in expression.args]
        first, *rest = (_wrapped(f, PRODUCT) for f in factors)
        return [first, *(rf"\cdot {f}" for f in rest)]
    terms = [latex(t, notation) for t in (expression.args if expression.op == "add" else (expression,))]
    signed = [f"- {t[1:]}" if t.startswith("-") else f"+ {t}" for t in terms[1:]]
    return [terms[0], *signed]


def aligned(left: str, pieces: Sequence[str], closing: str, width: float, width_of: Callable[[str], float]) -> str:
    """`left` and `pieces` in a row, continued on further lines where a line would be wider than `width`."""
    relation = next(r for r in (r"\approx", "=") if r in left)
    lines, line = [], left
    for index, piece in enumerate(pieces):
        if index and width_of(f"{line} {piece}".replace(r"\Bigl(", "(")) > width:
            lines.append(line)
            line = rf"\qquad {piece}"
        else:
            line = f"{line} {piece}"
    lines.append(line + closing)
    first = lines[0].replace(relation, f"&{relation}", 1)
    rest = "".join(rf" \\ & {line}" for line in lines[1:])
    return rf"\begin{{aligned}}{first}{rest}\end{{aligned}}"


def matrix(rows: Sequence[Sequence[str]]) -> str:
    """A matrix of LaTeX entries in square brackets."""
    return r"\begin{bmatrix}" + r" \\ ".join(" & ".join(row) for row in rows) + r"\end{bmatrix}"


def rounded_matrix(rows: Sequence[Sequence[Fraction]]) -> tuple[str, bool]:
    """A rational matrix with the first digits of its entries, and whether all of them are exact."""
    exact = all(numbers.exactly(v) is not None for row in rows for v in row)
    return matrix([[figure(numbers.number(v)) for v in row] for row in rows]), exact
