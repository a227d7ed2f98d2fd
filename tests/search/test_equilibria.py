"""Guesses of equilibria: near the true ones, repeatable, and never more than guesses."""

import numpy as np
import pytest
from builders import make_case
from loop_cases import formula

from dossier.model.expression import Expression, call, differentiate, number
from dossier.search.effort import EFFORTS
from dossier.search.equilibria import seed_equilibria
from dossier.search.numeric import NumericFunction, rest_function, slopes_by_differences

QUICK = EFFORTS["quick"]


def test_the_equilibria_of_a_cubic_are_guessed():
    case = make_case({"x": "x - x^3", "y": "x - y"}, search={"x": (-2, 3), "y": (-4, 4)})
    guesses = sorted(seed_equilibria(case, QUICK))
    assert np.allclose(guesses, [(-1, -1), (0, 0), (1, 1)], atol=1e-6)


def test_guesses_are_the_same_every_time():
    case = make_case({"x": "sin(3*x)"}, search={"x": (-4, 4)})
    assert seed_equilibria(case, QUICK) == seed_equilibria(case, QUICK)


def test_the_guess_of_the_engineer_comes_first():
    case = make_case({"x": "sin(x)"}, search={"x": (-40, 40)}, near=("9.3",))
    assert abs(seed_equilibria(case, QUICK)[0][0] - 3 * np.pi) < 1e-6


def test_units_that_differ_by_nine_decades_do_no_harm():
    case = make_case(
        {"x": "v", "v": "(F - 1000000000*x - 2000*v)/50", "F": "(500000 - F)/0.01"},
        search={"x": ("-0.01", "0.01"), "v": (-1, 1), "F": (-2000000, 2000000)},
    )
    ((x, v, force),) = seed_equilibria(case, QUICK)
    assert np.isclose(x, 5e-4) and abs(v) < 1e-6 and np.isclose(force, 5e5)


def test_nothing_is_guessed_on_a_saturated_plateau():
    saturated = call("sat", formula("x"), number(-1), number(1))
    case = make_case({"x": Expression("add", (saturated, number(2)))}, search={"x": (-5, 5)})
    assert seed_equilibria(case, QUICK) == ()


def test_fixed_points_of_a_map_are_guessed():
    case = make_case({"x": "x^2"}, search={"x": (-2, 2)}, sampled=True)
    assert np.allclose(sorted(seed_equilibria(case, QUICK)), [(0,), (1,)], atol=1e-6)


def test_an_unbounded_search_box_is_filled_around_the_guess():
    case = make_case({"x": "x - 7"}, near=(5,), region={"x": (-1, 1)})
    assert seed_equilibria(case, QUICK) == ()
    case = make_case({"x": "x - 7"}, near=(5,), region={"x": (-3, 3)})
    assert np.allclose(seed_equilibria(case, QUICK), [(7,)])


@pytest.mark.parametrize(
    "text",
    ["x^3 - y/2", "sin(x)*cos(y) + tan(x)", "exp(x)/(1 + y^2)", "log(3 + x) + sqrt(4 + y) + pi", "abs(x)*tanh(y)"],
)
def test_numeric_functions_agree_with_numpy(text):
    points = np.random.default_rng(1).uniform(-1, 1, (2, 20))
    names = {"x": points[0], "y": points[1], "sin": np.sin, "cos": np.cos, "tan": np.tan, "exp": np.exp, "log": np.log}
    names |= {"sqrt": np.sqrt, "abs": np.abs, "tanh": np.tanh, "pi": np.pi}
    expected = eval(text.replace("^", "**"), names)
    assert np.allclose(NumericFunction([formula(text)], ("x", "y"), {})(points)[0], expected)


def test_undefined_values_come_back_and_do_not_raise():
    values = NumericFunction([formula("log(x)"), formula("1/x")], ("x",), {})(np.array([[0.0, -1.0]]))
    assert not np.isfinite(values[0]).any() and not np.isfinite(values[1, 0])


def test_constants_are_filled_in_and_missing_ones_named():
    assert NumericFunction([formula("k*x")], ("x",), {"k": 3.0})(np.array([[2.0]]))[0, 0] == 6
    with pytest.raises(KeyError):
        NumericFunction([formula("k*x")], ("x",), {})


def test_differences_approach_the_derivative():
    expression = formula("sin(x)*exp(x)")
    points = np.linspace(-1, 1, 9)[None, :]
    case = make_case({"x": expression})
    slopes = slopes_by_differences(rest_function(case), points, np.ones(1))[0, 0]
    exact = NumericFunction([differentiate(expression, "x")], ("x",), {})(points)[0]
    assert np.allclose(slopes, exact, atol=1e-8)
