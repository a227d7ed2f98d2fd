"""Branch and bound: every zero found once or more, none invented, and what is not decided is said."""

from fractions import Fraction

import numpy as np
import pytest
from builders import box
from hypothesis import given, settings
from hypothesis import strategies as st
from loop_cases import formula

from dossier.checks.branch_and_bound import clusters, cover
from dossier.checks.intervals import Span
from dossier.checks.newton import System, approximate_inverses, box_around, newton_step
from dossier.model.expression import add, mul, number, power, symbol


def system(texts, sides):
    names = tuple(sides)
    return System([formula(t) for t in texts], names, {}, box(names, sides))


def zeros(found, problem):
    return [tuple((i.bounds[0], i.bounds[1]) for i in problem.rational(z.zero).intervals) for z in found.zeros]


@given(st.lists(st.integers(-20, 20), min_size=1, max_size=5, unique=True))
@settings(max_examples=40)
def test_every_root_of_a_product_is_boxed_in(roots):
    factors = [add(symbol("x"), number(-r)) for r in roots]
    problem = System([mul(*factors)], ("x",), {}, box(("x",), {"x": ("-20.5", "20.25")}))
    found = cover(problem, (), 10_000)
    enclosed = {r for r in roots for ((lower, upper),) in zeros(found, problem) if lower <= r <= upper}
    assert found.undecided == [] and enclosed == set(roots)


def test_a_box_without_zero_is_excluded_at_once():
    found = cover(system(["x^2 + y^2 + 1", "x - y"], {"x": (-5, 5), "y": (-5, 5)}), (), 100)
    assert (found.zeros, found.undecided, found.boxes) == ([], [], 1)


@pytest.mark.parametrize(("lower", "upper"), [("-1e-3", "1e-3"), ("-1e6", "1e6"), ("1e5", "1.00001e5")])
def test_units_do_not_matter(lower, upper):
    middle = (Fraction(lower) + Fraction(upper)) / 2
    problem = System(
        [formula(f"1e9*(x - ({middle}))".replace("1e9", "1000000000"))], ("x",), {}, box(("x",), {"x": (lower, upper)})
    )
    found = cover(problem, (), 100)
    assert len(found.zeros) == 1 and found.undecided == [] and found.boxes <= 3


def test_a_double_zero_is_left_undecided_in_a_small_cluster():
    found = cover(system(["(x - 0.3)^2"], {"x": (-1, 2)}), (), 10_000)
    assert found.zeros == [] and len(found.undecided) == 1
    (cluster,) = found.undecided
    assert cluster.hi[0] - cluster.lo[0] < 1e-6


def test_a_spent_budget_is_said_and_leaves_the_rest_undecided():
    problem = system(["x*(x^2 + y^2 - 1)", "y*(x^2 + y^2 - 1)"], {"x": (-2, 2), "y": (-2, 2)})
    found = cover(problem, (), 5_000)
    assert not found.within_budget and found.undecided
    angles = np.linspace(0, 6, 50)
    for point in np.array([np.cos(angles), np.sin(angles)]).T / problem.scale:
        assert any((u.lo <= point + 1e-9).all() and (point - 1e-9 <= u.hi).all() for u in found.undecided)


def test_a_zero_on_the_border_of_the_search_box_is_boxed_in():
    found = cover(system(["x - 1"], {"x": (0, 1)}), (), 1_000)
    assert found.zeros and found.undecided == []


def test_a_root_of_the_square_root_at_the_border_stays_undecided():
    found = cover(system(["0 - sqrt(x)"], {"x": (0, 1)}), (), 10_000)
    assert found.zeros == [] and len(found.undecided) == 1 and found.undecided[0].lo[0] == 0


def test_a_part_outside_the_domain_of_the_formula_holds_no_zero():
    found = cover(system(["sqrt(x) - 1"], {"x": (-4, 4)}), (), 10_000)
    assert len(found.zeros) >= 1 and found.undecided == []


def test_a_zero_that_exists_only_in_the_formal_continuation_is_not_found():
    # x^(3/2) + x + 1/2 is positive wherever it is defined; with slopes in [1, 5/2] Krawczyk would accept [-1, 1].
    expression = add(power(symbol("x"), Fraction(3, 2)), symbol("x"), number("1/2"))
    problem = System([expression], ("x",), {}, box(("x",), {"x": (-1, 1)}))
    assert not newton_step(problem, Span(np.full((1, 1), -1.0), np.ones((1, 1)))).unique[0]
    found = cover(problem, (), 1_000)
    assert found.zeros == [] and found.undecided == []


def test_scaled_boxes_are_rounded_inward_and_scale_back_exactly():
    problem = system(["x"], {"x": ("-0.003", "0.003")})
    side = {"x": (Fraction(1, 3000), Fraction(2, 3000))}
    (inner,) = problem.rational(problem.scaled(box(("x",), side))).intervals
    assert Fraction(1, 3000) < inner.bounds[0] < inner.bounds[1] < Fraction(2, 3000)
    assert inner.width > Fraction(999, 3_000_000)


def test_a_pole_is_not_taken_for_a_zero_nor_hidden():
    found = cover(system(["1/x"], {"x": (-1, 2)}), (), 10_000)
    assert found.zeros == []


def test_known_boxes_remove_what_lies_inside():
    problem = system(["x^2 - 1"], {"x": (-3, 3)})
    known = [box_around(problem, np.array([s]) / problem.scale) for s in (-1.0, 1.0)]
    assert all(k is not None for k in known)
    again = cover(problem, [k for k in known if k is not None], 1_000)
    assert len(again.zeros) == 2 and again.undecided == []


def test_no_uniqueness_box_holds_two_zeros():
    problem = system(["(x - 1)*(x + 1)*(x - 1.001)"], {"x": (-3, 3)})
    for start in (-1.0, 1.0, 1.001, 1.0005):
        around = box_around(problem, np.array([start]) / problem.scale)
        if around is not None:
            (side,) = problem.rational(around.box).intervals
            inside = [
                r for r in (Fraction(1), Fraction(-1), Fraction("1.001")) if side.bounds[0] <= r <= side.bounds[1]
            ]
            assert len(inside) == 1


@given(st.integers(0, 10_000))
@settings(max_examples=50)
def test_contraction_never_loses_a_zero(seed):
    generator = np.random.default_rng(seed)
    root = generator.uniform(-1, 1, 2)
    x, y = (Fraction(float(r)) for r in root)
    texts = [f"(x - ({x}))*(3 + y) + (y - ({y}))*x", f"(y - ({y}))*(2 + x*x) - (x - ({x}))*y*5"]
    problem = system(texts, {"x": (-2, 2), "y": (-2, 2)})
    lower = root[:, None] - generator.uniform(0, 2, (2, 40))
    upper = root[:, None] + generator.uniform(0, 2, (2, 40))
    scale = problem.scale[:, None]
    step = newton_step(problem, Span(lower / scale, upper / scale))
    assert not step.excluded.any()
    for b in range(40):
        sides = problem.rational(Span(step.boxes.lo[:, b], step.boxes.hi[:, b])).intervals
        assert all(s.bounds[0] <= r <= s.bounds[1] for s, r in zip(sides, (x, y), strict=True))


def test_one_singular_matrix_spoils_only_itself():
    matrices = np.stack([np.eye(2), np.ones((2, 2)), 2 * np.eye(2), np.zeros((2, 2))], axis=2)
    inverses, usable = approximate_inverses(matrices)
    assert list(usable) == [True, False, True, False]
    assert np.allclose(inverses[:, :, 2], np.eye(2) / 2)


def test_clusters_join_touching_boxes_only():
    lower = np.array([[0.0, 1.0, 5.0], [0.0, 0.0, 0.0]])
    found = clusters(Span(lower, lower + 1))
    assert [(c.lo[0], c.hi[0]) for c in found] == [(0, 2), (5, 6)]


def test_many_undecided_boxes_are_gathered_without_losing_any():
    grid = np.linspace(0, 1, 5_000)
    (hull,) = clusters(Span(grid[None, :], grid[None, :] + 1e-3))
    assert hull.lo[0] == 0 and hull.hi[0] == 1 + 1e-3
