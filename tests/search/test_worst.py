"""The worst combination is found at a corner, in the interior, and where eigenvalues meet."""

from dataclasses import replace
from fractions import Fraction

import pytest
from linear_cases import with_spread
from loop_cases import equilibrium_at, loop_case

from dossier.search.effort import EFFORTS
from dossier.search.worst import seek_worst

QUICK = EFFORTS["quick"]
GRID_SHARE = Fraction(1, 1000)
"""How near, as a share of the side's width, the worst value of a smooth function must be hit."""


def worst(equations, region="half-plane", parameters=None, **ranges):
    case = with_spread(loop_case(equations, {}, parameters or dict.fromkeys(ranges, "0")), **ranges)
    point = replace(equilibrium_at(*[0] * len(equations)), fixed_for_all=True)
    _, claim = seek_worst(case, point, region, QUICK, "W-C1")
    assert claim is not None
    return claim.values


def test_a_corner_is_hit_exactly():
    """x'' + c x' + k x: the real part of a complex pair is -c/2, largest at the least c."""
    values = worst({"x": "v", "v": "-k*x - c*v"}, parameters={"k": "100", "c": "1"}, c=("0.7", "1.3"), k=(80, 120))
    assert values["c"] == Fraction(7, 10)


def test_an_unstable_island_inside_a_box_whose_corners_are_all_stable_is_found():
    """Damping (p - 3/10)^2 + (q + 1/5)^2 - 1/100 is negative only in a disc of radius 1/10 (constructed)."""
    damping = "((p - 0.3)*(p - 0.3) + (q + 0.2)*(q + 0.2) - 0.01)"
    values = worst({"x": "v", "v": f"-x - {damping}*v"}, p=(-1, 1), q=(-1, 1))
    assert abs(values["p"] - Fraction(3, 10)) < 2 * GRID_SHARE
    assert abs(values["q"] + Fraction(1, 5)) < 2 * GRID_SHARE


def test_a_function_with_a_crease_is_followed_to_its_worst_corner():
    """diag(-1 - p + q, -1 + p - q) has abscissa -1 + |p - q|: two worst corners, with a valley between them."""
    values = worst({"x": "-(1 + p - q)*x", "y": "-(1 - p + q)*y"}, p=(-1, 1), q=(-1, 1))
    assert abs(values["p"] - values["q"]) == 2


@pytest.mark.parametrize(("region", "expected"), [("half-plane", 1), ("sector", -1)])
def test_each_region_has_its_own_worst_combination(region, expected):
    """Poles -(3 + p) +- 10j and -2 + p/2: the pair is least damped at p = -1, the lone pole slowest at p = 1."""
    equations = {"x": "-(3 + p)*x + 10*y", "y": "-10*x - (3 + p)*y", "z": "(-2 + p/2)*z"}
    assert worst(equations, region, p=(-1, 1))["p"] == expected
