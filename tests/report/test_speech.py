"""Formulas in words."""

from __future__ import annotations

from fractions import Fraction

import pytest
from sample_evidence import expression_of_every_kind

from dossier.model.expression import Expression, add, call, div, mul, neg, number, power, symbol
from dossier.report.speech import say, say_number

X, Y = symbol("x"), symbol("k1")


@pytest.mark.parametrize(
    ("expression", "words"),
    [
        (add(X, neg(Y)), "x minus k 1"),
        (mul(X, add(X, Y)), "x times the quantity x plus k 1 end of quantity"),
        (div(X, Y), "the fraction x over k 1 end of fraction"),
        (power(X, 2), "x squared"),
        (power(X, Fraction(3, 2)), "x to the power 1.5"),
        (call("sin", X), "sine of x"),
        (call("sat", X, number(-1), number(1)), "x limited to between minus 1 and 1"),
        (neg(X), "minus x"),
    ],
)
def test_a_formula_is_said_in_words(expression: Expression, words: str) -> None:
    assert say(expression) == words


def test_every_operation_has_words_without_signs() -> None:
    words = say(expression_of_every_kind())
    assert all(c.isalnum() or c in " ." for c in words)


def test_numbers_are_said_without_signs() -> None:
    assert say_number(Fraction(-3)) == "minus 3"
    assert say_number(Fraction("-2.5e-7")) == "minus 2.5 times 10 to the power minus 7"
    assert say_number(Fraction(-1, 3)) == "minus 1 over 3"
    assert say_number(Fraction(240000)) == "240000"
