"""Promising levels: exact against slabs, sampled against closed forms."""

from fractions import Fraction

import numpy as np
import pytest
from loop_cases import equilibrium_at
from quadratic_cases import bounded_case

from dossier.model.case import NOMINAL, TOLERANCES
from dossier.search.effort import EFFORTS
from dossier.search.goal import Goal, Slab
from dossier.search.level import first_rises, sampled_level, slab_levels
from dossier.search.offsets import scaled_loop

QUICK = EFFORTS["quick"]
PLANE = {"x": ("-1", "1"), "y": ("-1", "1")}


def loop_of(equations, region, over=NOMINAL, parameters=None):
    case = bounded_case(equations, region, parameters)
    return scaled_loop(case, equilibrium_at(*[0] * len(equations)), over, case.region)


def test_the_least_level_of_a_rise_is_found_between_the_first_rays():
    """Hahn's system: V = x^2 + y^2 first stops falling at 8/(3 sqrt 3) (check value A01, closed form)."""
    loop = loop_of({"x": "-x + 2*x^2*y", "y": "-y"}, PLANE)
    assert sampled_level(loop, np.eye(2), 100.0, QUICK) == pytest.approx(8 / (3 * 3**0.5), rel=1e-6)


def test_a_band_of_rise_before_a_far_fall_is_not_stepped_over():
    """x' = -x (x^2 - 1)(x^2 - 4) ... falls up to 1, rises between 1 and 2, falls beyond (closed form)."""
    loop = loop_of({"x": "-x*(x^2 - 1)*(x^2 - 4)"}, {"x": ("-1", "1")})
    assert sampled_level(loop, np.eye(1), 1e4, QUICK) == pytest.approx(1.0, rel=1e-6)


def test_nothing_rises_in_a_globally_attractive_loop():
    loop = loop_of({"x": "-x - x^3"}, {"x": ("-1", "1")})
    assert sampled_level(loop, np.eye(1), 400.0, QUICK) == 400.0


def test_an_unstable_loop_rises_at_once():
    loop = loop_of({"x": "x"}, {"x": ("-1", "1")})
    assert sampled_level(loop, np.eye(1), 1.0, QUICK) == 0.0


def test_the_worst_parameter_bounds_the_level():
    """x' = -x + a x^3 with a in [1, 3]: 1/3 (closed form)."""
    loop = loop_of({"x": "-x + a*x^3"}, {"x": ("-1", "1")}, TOLERANCES, {"a": ("2", "0.5")})
    assert sampled_level(loop, np.eye(1), 100.0, QUICK) == pytest.approx(1 / 3, rel=1e-6)


def test_a_ray_reports_where_it_first_rises():
    loop = loop_of({"x": "-x + x^3"}, {"x": ("-1", "1")})
    radii = first_rises(loop, np.eye(1), np.array([[1.0], [-1.0]]), np.zeros((2, 0)), 10.0)
    assert radii == pytest.approx([1.0, 1.0])
    assert np.isinf(first_rises(loop, np.eye(1), np.array([[1.0]]), np.zeros((1, 0)), 0.9)).all()


def test_slabs_bound_the_level_by_the_support_function():
    """V = x^2 + 4 y^2: |y| <= 1/2 from level 1 on, x + 2y <= 2 from level 2 on (closed forms)."""
    function = {(2, 0): Fraction(1), (0, 2): Fraction(4)}
    region = bounded_case({"x": "-x", "y": "-y"}, PLANE).region
    narrow = Slab((Fraction(0), Fraction(1)), Fraction(-1), Fraction(1, 2), "y")
    oblique = Slab((Fraction(1), Fraction(2)), None, Fraction(2), "x + 2y")
    free = Slab((Fraction(1), Fraction(0)), None, None, "nothing")
    assert slab_levels(function, Goal(region, (narrow, oblique, free))) == (1, 2)
    outside = Slab((Fraction(1), Fraction(0)), Fraction(1), None, "x at least 1")
    assert slab_levels(function, Goal(region, (outside,))) == (0,)
    assert slab_levels({(2, 0): Fraction(1)}, Goal(region, (narrow,))) == (0,)
