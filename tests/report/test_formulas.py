"""Expressions as formulas: precedence, signs, numbers, and every operation under the strict typesetter."""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st
from sample_evidence import expression_of_every_kind

from dossier.model.expression import (
    OPERATIONS,
    UNARY_FUNCTIONS,
    Expression,
    add,
    call,
    div,
    mul,
    neg,
    nodes,
    number,
    power,
    symbol,
)
from dossier.report import equations, formulas, speech
from dossier.report.notation import notation

NAMES = notation(("x", "y", "k1", "tau"))
X, Y = symbol("x"), symbol("y")


def latex(expression: Expression) -> str:
    return formulas.latex(expression, NAMES)


def test_every_operation_typesets_strictly() -> None:
    everything = expression_of_every_kind()
    assert {n.op for n in nodes(everything)} | {"mul"} == set(OPERATIONS)
    assert equations.typeset(latex(everything), display=True).drawing.placed
    assert equations.typeset(latex(mul(X, Y, everything)), display=True).drawing.placed


@pytest.mark.parametrize(
    ("expression", "expected"),
    [
        (add(X, neg(Y)), "x - y"),
        (add(X, neg(add(X, Y))), r"x - \left(x + y\right)"),
        (mul(X, add(X, Y)), r"x\,\left(x + y\right)"),
        (neg(mul(X, Y)), r"-x\,y"),
        (mul(neg(X), Y), r"\left(-x\right)\,y"),
        (div(add(X, Y), X), r"\frac{x + y}{x}"),
        (power(add(X, Y), 2), r"\left(x + y\right)^{2}"),
        (power(X, Fraction(1, 2)), r"\sqrt{x}"),
        (power(X, Fraction(3, 2)), "x^{3/2}"),
        (power(call("sin", X), 2), r"\sin^{2}\left(x\right)"),
        (power(div(X, Y), 3), r"\left(\frac{x}{y}\right)^{3}"),
        (Expression("mul", (number(2), number(3))), r"2 \cdot 3"),
        (number("2e12"), r"2 \times 10^{12}"),
        (number("1/3"), r"\frac{1}{3}"),
        (Expression("pow", (number(-2),), Fraction(2)), r"\left(-2\right)^{2}"),
        (Expression("add", (X, mul(number(-3), Y))), r"x - 3\,y"),
        (call("sat", X, number(-1), number(1)), r"\operatorname{sat}\left(x;\, -1,\, 1\right)"),
        (call("abs", X), r"\left|x\right|"),
    ],
)
def test_a_formula_is_bracketed_where_it_must_be(expression: Expression, expected: str) -> None:
    assert latex(expression) == expected


LEAVES = st.one_of(
    st.sampled_from([X, Y, symbol("k1"), Expression("pi")]),
    st.fractions(min_value=-1000, max_value=1000, max_denominator=1000).map(number),
)


def _larger(inner: st.SearchStrategy[Expression]) -> st.SearchStrategy[Expression]:
    pairs = st.tuples(inner, inner)
    return st.one_of(
        pairs.map(lambda p: Expression("add", p)),
        pairs.map(lambda p: Expression("mul", p)),
        pairs.map(lambda p: Expression("div", p)),
        inner.map(lambda e: Expression("neg", (e,))),
        st.tuples(inner, st.sampled_from([Fraction(2), Fraction(-1), Fraction(1, 2), Fraction(2, 3)])).map(
            lambda t: Expression("pow", (t[0],), t[1])
        ),
        st.tuples(st.sampled_from(UNARY_FUNCTIONS), inner).map(lambda t: call(t[0], t[1])),
    )


@given(st.recursive(LEAVES, _larger, max_leaves=12))
def test_any_expression_typesets_and_can_be_spoken(expression: Expression) -> None:
    assert equations.typeset(latex(expression), display=True).drawing.width > 0
    assert speech.say(expression)


@given(st.recursive(LEAVES, _larger, max_leaves=8), st.recursive(LEAVES, _larger, max_leaves=8))
def test_different_formulas_look_different(one: Expression, other: Expression) -> None:
    """Equal pictures only for trees that differ in nothing but the grouping of sums and of products."""
    if latex(one) == latex(other):
        assert _flat(one) == _flat(other)


def _flat(expression: Expression) -> object:
    """A tree up to what a printed formula cannot tell and arithmetic does not either."""
    if expression.op == "number" and not expression.args:
        value = Fraction(expression.value or 0)
        if value < 0:
            return ("neg", _flat(number(-value)))
        return (
            value
            if value.denominator == 1 or formulas.numbers.exactly(value)
            else ("div", value.numerator, value.denominator)
        )
    if expression.op == "neg":
        return ("neg", _flat(expression.args[0]))
    if expression.op == "div" and all(a.op == "number" for a in expression.args):
        parts = [_flat(a) for a in expression.args]
        return ("div", *parts)
    if expression.op == "add":
        return ("add", tuple(t for a in expression.args for t in _terms(a)))
    if expression.op == "pow" and expression.value == Fraction(1, 2):
        return ("sqrt", _flat(expression.args[0]))
    if expression.op == "mul":
        return ("mul", tuple(_flat(a) for a in expression.args))
    return (expression.op, expression.value, tuple(_flat(a) for a in expression.args))


def _terms(expression: Expression) -> tuple[object, ...]:
    flat = _flat(expression)
    if isinstance(flat, tuple) and flat[0] == "add":
        return tuple(flat[1])
    return (flat,)


def test_a_long_sum_is_broken_into_lines_that_fit() -> None:
    terms = [mul(number(k), power(X, k), power(Y, k + 1)) for k in range(2, 30)]
    long_sum = Expression("add", tuple(terms))
    text = formulas.broken(r"\dot{x}", long_sum, NAMES, equations.LINE_WIDTH_EM, equations.width_of)
    assert text.count(r"\\") >= 2
    assert equations.width_of(text) <= equations.LINE_WIDTH_EM + 3


def test_a_long_quotient_keeps_its_denominator() -> None:
    terms = [mul(number(k), power(X, k)) for k in range(2, 40)]
    text = formulas.broken("y", div(Expression("add", tuple(terms)), Y), NAMES, 40, equations.width_of)
    assert text.startswith(r"\begin{aligned}y &= \frac{1}{y}\Bigl( 2")
    assert text.endswith(r"\Bigr)\end{aligned}")
    assert equations.typeset(text, display=True).drawing.placed


def test_a_long_product_is_broken_between_its_factors() -> None:
    factors = tuple(Expression("add", (power(X, k), power(Y, k), number(k))) for k in range(2, 20))
    text = formulas.broken("y", Expression("mul", factors), NAMES, 40, equations.width_of)
    assert text.count(r"\cdot") == len(factors) - 1
    assert text.count(r"\\") >= 2
    assert equations.width_of(text) <= 43


def test_a_long_function_is_fitted_to_the_column() -> None:
    function = {(k, 1): Fraction(10**k + 1, 3) for k in range(formulas.LONG_SUM)}
    formula = equations.fitted(*formulas.function_of_offsets(function, ("x", "y"), NAMES), "V")
    assert equations.width_of(formula.latex) <= equations.LINE_WIDTH_EM + 3
    assert r"&\approx" in formula.latex


def test_equality_is_claimed_only_for_exact_coefficients() -> None:
    exact = formulas.function_of_offsets({(2, 0): Fraction(7, 4), (1, 1): Fraction(-1)}, ("x", "y"), NAMES)
    rounded = formulas.function_of_offsets({(2, 0): Fraction(1, 3)}, ("x", "y"), NAMES)
    assert exact == ("V =", (r"1.75\,(\Delta x)^{2}", r"- \Delta x\,\Delta y"))
    assert rounded == (r"V \approx", (r"0.3333\,(\Delta x)^{2}",))


def test_a_very_long_function_says_that_it_goes_on() -> None:
    function = {(k, 1): Fraction(k + 1) for k in range(formulas.LONG_SUM + 3)}
    _, terms = formulas.function_of_offsets(function, ("x", "y"), NAMES)
    assert len(terms) == formulas.LONG_SUM + 1
    assert terms[-1] == r"+ \cdots"


def test_a_matrix_is_marked_exact_only_where_it_is() -> None:
    assert formulas.rounded_matrix(((Fraction(1), Fraction(1, 4)),))[1]
    text, exact = formulas.rounded_matrix(((Fraction(1, 3),),))
    assert not exact
    assert "0.3333" in text
