"""Formulas: precedence, exactness, faults with their offset, and printing that reads back to the same tree."""

from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from dossier.model.expression import FUNCTIONS, PI, UNARY_FUNCTIONS, Expression, number, symbol, to_text
from dossier.project.formulas import DEEPEST_NESTING, FormulaError, parse


def tree(op: str, *args: Expression, value: Fraction | None = None) -> Expression:
    return Expression(op, args, value)


X, Y, Z = symbol("x"), symbol("y"), symbol("z")


def _neg(a: Expression) -> Expression:
    return tree("neg", a)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("-x^2", _neg(tree("pow", X, value=Fraction(2)))),
        ("-x*y", _neg(tree("mul", X, Y))),
        ("x - y*z", tree("add", X, _neg(tree("mul", Y, Z)))),
        ("x - y + z", tree("add", X, _neg(Y), Z)),
        ("x/y/z", tree("div", tree("div", X, Y), Z)),
        ("x/y*z", tree("mul", tree("div", X, Y), Z)),
        ("x*-y", tree("mul", X, _neg(Y))),
        ("x^2^3", tree("pow", X, value=Fraction(8))),
        ("x^-2", tree("pow", X, value=Fraction(-2))),
        ("x^(1/2)", tree("pow", X, value=Fraction(1, 2))),
        ("x^0.5", tree("pow", X, value=Fraction(1, 2))),
        ("0*x", tree("mul", number(0), X)),
        ("x/x", tree("div", X, X)),
        ("0.1", number(Fraction(1, 10))),
        ("9.0e3", number(9000)),
        ("1.e-3", number(Fraction(1, 1000))),
        ("2*pi", tree("mul", number(2), PI)),
        ("sat(x, -y, y)", tree("sat", X, _neg(Y), Y)),
    ],
)
def test_a_formula_is_kept_as_written(text: str, expected: Expression) -> None:
    assert parse(text).expression == expected


@pytest.mark.parametrize(
    ("text", "offset", "offending", "hint"),
    [
        ("x**2", 2, "*", "write ^ for a power"),
        ("2x", 1, "x", "write * between two factors"),
        ("x + ", 4, "", ""),
        ("(x + y", 0, "(", "add the closing bracket"),
        ("sqr(x)", 0, "sqr", "did you mean sqrt?"),
        ("x^y", 2, "y", "write exp(y*log(x)) for x to the power y"),
        ("x^(1/0)", 2, "(1/0)", "write exp(y*log(x)) for x to the power y"),
        ("1,5*x", 1, ",", "the decimal sign is a point"),
        ("x − y", 2, "−", "write the minus sign as -"),
        ("sin", 0, "sin", ""),
        ("sat(x)", 0, "sat", "write sat(x, lo, hi)"),
        ("1e9999", 0, "1e9999", "between 1e-100 and 1e100, or 0"),
        ("x^1000", 2, "1000", ""),
        ("x;y", 1, ";", ""),
    ],
)
def test_a_fault_is_told_with_its_offset_and_a_hint(text: str, offset: int, offending: str, hint: str) -> None:
    with pytest.raises(FormulaError) as caught:
        parse(text)
    error = caught.value
    assert (error.offset, text[error.offset : error.offset + error.length], error.hint) == (offset, offending, hint)


@pytest.mark.parametrize("opened", ["(", "-", "sin("])
def test_nesting_is_bounded_before_the_interpreter_is(opened: str) -> None:
    with pytest.raises(FormulaError, match=str(DEEPEST_NESTING)):
        parse(opened * 1000 + "x")


def test_size_is_bounded() -> None:
    with pytest.raises(FormulaError):
        parse("+".join(["x"] * 9_999))


def test_the_place_of_every_part_is_known() -> None:
    formula = parse("a + b*sin(c)")
    assert formula.excerpt(tree("sin", symbol("c"))) == (6, "sin(c)")
    assert formula.excerpt(symbol("b")) == (4, "b")


DECIMALS = st.builds(
    lambda digits, places: number(Fraction(digits, 10**places)), st.integers(0, 10**18), st.integers(0, 30)
)
EXPONENTS = st.fractions(-9, 9, max_denominator=7)


def _nodes(parts: st.SearchStrategy[Expression]) -> st.SearchStrategy[Expression]:
    several = st.lists(parts, min_size=2, max_size=4).map(tuple)
    return st.one_of(
        st.builds(Expression, st.sampled_from(("add", "mul")), several),
        st.builds(lambda a, b: tree("div", a, b), parts, parts),
        parts.map(_neg),
        st.builds(lambda a, e: tree("pow", a, value=e), parts, EXPONENTS),
        st.builds(tree, st.sampled_from(UNARY_FUNCTIONS), parts),
        st.builds(lambda a, b, c: tree("sat", a, b, c), parts, parts, parts),
    )


EXPRESSIONS = st.recursive(st.one_of(DECIMALS, st.sampled_from((X, Y, Z, PI))), _nodes, max_leaves=12)


@given(EXPRESSIONS)
def test_printed_expressions_read_back_to_the_same_tree(expression: Expression) -> None:
    assert parse(to_text(expression)).expression == expression


@given(st.text(alphabet="xy01.e+-*/^(), pisnat", max_size=40))
def test_any_text_is_read_or_refused_with_a_place(text: str) -> None:
    try:
        expression = parse(text).expression
    except FormulaError as error:
        assert 0 <= error.offset <= len(text)
    else:
        assert parse(to_text(expression)).expression == expression


def test_functions_are_those_of_the_model() -> None:
    for name in FUNCTIONS:
        arguments = "x, y, z" if name == "sat" else "x"
        assert parse(f"{name}({arguments})").expression.op == name
