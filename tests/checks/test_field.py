"""Formulas over many points: every operation against Python's own mathematics."""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np
import pytest
from loop_cases import formula

from dossier.checks.field import Flow, Formulas
from dossier.model.expression import PI, UNARY_FUNCTIONS, call, power, symbol

X, Y = symbol("x"), symbol("y")
POINTS = np.array([[0.1, 0.4, 0.9], [2.0, -3.0, 0.5]])


@pytest.mark.parametrize("name", UNARY_FUNCTIONS)
def test_elementary_functions_agree_with_the_standard_library(name):
    function = abs if name == "abs" else getattr(math, name)
    assert Formulas([call(name, X)], ["x"])(POINTS[:1])[0] == pytest.approx([function(v) for v in POINTS[0]], rel=1e-15)


def test_arithmetic_follows_the_formula_as_written():
    result = Formulas([formula("3*x*y - x/y + 2 - (x + y)^3"), PI], ["x", "y"])(POINTS)
    expected = [3 * x * y - x / y + 2 - (x + y) ** 3 for x, y in POINTS.T]
    assert result[0] == pytest.approx(expected, rel=1e-14)
    assert result[1].tolist() == [math.pi] * 3


@pytest.mark.parametrize("exponent", ["2", "-3", "1/2", "-5/2", "40"])
def test_powers_agree_with_the_standard_library(exponent):
    value = Fraction(exponent)
    assert Formulas([power(X, value)], ["x"])(POINTS[:1])[0] == pytest.approx(
        [v ** float(value) for v in POINTS[0]], rel=1e-13
    )


def test_saturation_is_the_middle_of_its_three_arguments():
    result = Formulas([formula("sat(y, -1, 1)")], ["x", "y"])(POINTS)
    assert result[0].tolist() == [1.0, -1.0, 0.5]


def test_what_is_undefined_is_not_finite_and_raises_nothing():
    result = Formulas([formula("log(x)"), formula("1/x"), formula("sqrt(x - 1)")], ["x"])(np.array([[0.0]]))
    assert not np.isfinite(result).any()


def test_the_flow_is_centred_on_each_motions_own_equilibrium():
    field = Formulas([formula("p - x")], ["x", "p"])
    flow = Flow(field, np.array([[1.0, 5.0]]), np.array([[1.0, 5.0]]), False)
    assert flow.select(np.array([0, 1]))(np.zeros((1, 2))).tolist() == [[0.0, 0.0]]
    assert flow.select(np.array([1]))(np.array([[2.0]])).tolist() == [[-2.0]]
