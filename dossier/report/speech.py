"""Say formulas in words, for readers who listen: the alternative text of every typeset equation."""

from __future__ import annotations

from fractions import Fraction
from typing import Final

from dossier.model.expression import Expression, fold
from dossier.report import numbers
from dossier.report.notation import spoken

_FUNCTIONS: Final = {
    "sin": "sine of", "cos": "cosine of", "tan": "tangent of", "tanh": "hyperbolic tangent of",
    "asin": "arc sine of", "acos": "arc cosine of", "atan": "arc tangent of", "exp": "exponential of",
    "log": "natural logarithm of", "sqrt": "square root of", "abs": "absolute value of",
}  # fmt: skip
_POWERS: Final = {Fraction(2): "squared", Fraction(3): "cubed"}


def say(expression: Expression) -> str:
    """`expression` in words, with groups named where they matter."""
    return fold(expression, _say)[0]


def _say(node: Expression, parts: tuple[tuple[str, bool], ...]) -> tuple[str, bool]:
    """Words for a node, and whether they need to be called a quantity inside a larger one."""
    op = node.op
    if op == "number":
        return say_number(Fraction(node.value or 0)), False
    if op == "symbol":
        return spoken(str(node.value)), False
    if op == "pi":
        return "pi", False
    if op == "add":
        return _say_sum(node, parts), True
    if op == "neg":
        return f"minus {_group(parts[0])}", True
    if op == "mul":
        return " times ".join(_group(p) for p in parts), True
    if op == "div":
        return f"the fraction {parts[0][0]} over {parts[1][0]} end of fraction", False
    if op == "pow":
        exponent = Fraction(node.value or 0)
        return f"{_group(parts[0])} {_POWERS.get(exponent) or f'to the power {say_number(exponent)}'}", False
    if op == "sat":
        return f"{_group(parts[0])} limited to between {parts[1][0]} and {parts[2][0]}", True
    return f"{_FUNCTIONS[op]} {_group(parts[0])}", False


def _say_sum(node: Expression, parts: tuple[tuple[str, bool], ...]) -> str:
    text = parts[0][0]
    for part, argument in zip(parts[1:], node.args[1:], strict=True):
        text += f" minus {part[0].removeprefix('minus ')}" if argument.op == "neg" else f" plus {part[0]}"
    return text


def _group(part: tuple[str, bool]) -> str:
    return f"the quantity {part[0]} end of quantity" if part[1] else part[0]


def say_number(value: Fraction) -> str:
    """A number in words and digits."""
    text = numbers.exactly(value)
    if text is None:
        sign = "minus " if value < 0 else ""
        return f"{sign}{abs(value.numerator)} over {value.denominator}"
    return say_figure(text)


def say_figure(text: str) -> str:
    """A printed number with its signs in words."""
    mantissa, cross, power = text.partition(f"{numbers.GROUP}{numbers.TIMES}{numbers.GROUP}10")
    mantissa = (
        mantissa.replace(numbers.GROUP, "")
        .replace(numbers.ELLIPSIS, " and more digits")
        .replace(numbers.MINUS, "minus ")
        .replace(numbers.ABOUT, "about ")
    )
    if not cross:
        return mantissa
    exponent = power.translate(str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹", "0123456789")).replace("⁻", "minus ")
    return f"{mantissa} times 10 to the power {exponent}"
