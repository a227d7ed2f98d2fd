"""Regions of the complex plane by verified inequalities: closed forms, exact covers, damaged certificates."""

from dataclasses import replace
from fractions import Fraction as F
from itertools import product

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from linear_cases import matrix_case, with_spread
from loop_cases import equilibrium_at, loop_case

from dossier.checks.spectral import cell_holds, check_matrix, covers_exactly, tangent_above
from dossier.model.ball import Ball
from dossier.model.claim import MatrixCell, MatrixClaim
from dossier.model.loop import model_hash
from dossier.model.region import Box, Interval
from dossier.model.spectral_form import linear_forms

IDENTITY = ((F(1), F(0)), (F(0), F(1)))


def claim_about(case, region, level, *cells, over="nominal"):
    parts = tuple(MatrixCell(b, m) for b, m in cells)
    return MatrixClaim("point.L9", model_hash(case), over, "T1", "point.E1", region, F(level), parts)


def nominal(case, region, level, matrix=IDENTITY):
    return claim_about(case, region, level, (Box((), ()), matrix))


def box(**sides):
    return Box(tuple(sides), tuple(Interval(F(a), F(b)) for a, b in sides.values()))


def proved(case, equilibrium, claim):
    return check_matrix(case, equilibrium, claim).result == "proved"


def rotation(real, imaginary):
    """A normal matrix with eigenvalues real +- j imaginary, for which P = I is as good as any P."""
    return matrix_case([[real, -imaginary], [imaginary, real]])


def test_the_half_plane_holds_exactly_up_to_the_eigenvalue():
    case, equilibrium = rotation(F(-2), F(5))
    assert proved(case, equilibrium, nominal(case, "half-plane", "1.999999"))
    assert not proved(case, equilibrium, nominal(case, "half-plane", 2))


@pytest.mark.parametrize(
    ("real", "imaginary", "damping"), [(-3, 4, F(3, 5)), (-5, 12, F(5, 13)), (-12, 5, F(12, 13)), (-8, 15, F(8, 17))]
)
def test_the_sector_holds_exactly_up_to_the_damping_ratio(real, imaginary, damping):
    case, equilibrium = rotation(F(real), F(imaginary))
    assert proved(case, equilibrium, nominal(case, "sector", damping - F(1, 10**6)))
    assert not proved(case, equilibrium, nominal(case, "sector", damping))


def test_the_disc_holds_exactly_up_to_the_modulus():
    case, equilibrium = matrix_case([["3/10", "-4/10"], ["4/10", "3/10"]], "1/100")
    assert proved(case, equilibrium, nominal(case, "disc", "0.5000001"))
    assert not proved(case, equilibrium, nominal(case, "disc", "1/2"))


@given(st.integers(-9, 9), st.integers(0, 9), st.integers(0, 9), st.sampled_from(["half-plane", "sector"]))
def test_a_normal_matrix_satisfies_the_inequality_exactly_where_its_eigenvalues_are_inside(
    real, imaginary, tenth, region
):
    case, equilibrium = rotation(F(real), F(imaginary))
    level = F(tenth, 10)
    inside = real < -level if region == "half-plane" else real < 0 and real**2 > level**2 * (real**2 + imaginary**2)
    assert proved(case, equilibrium, nominal(case, region, level)) == inside


def test_the_tangent_is_rounded_to_the_safe_side():
    for sine in (F(0), F(1, 10), F(3, 5), F(99, 100)):
        assert tangent_above(sine) ** 2 >= sine**2 / (1 - sine**2)
    assert tangent_above(F(3, 5)) == F(3, 4)


def test_a_region_that_does_not_fit_the_loop_is_refused():
    continuous, equilibrium = rotation(F(-1), F(0))
    assert not proved(continuous, equilibrium, nominal(continuous, "disc", 2))
    sampled, equilibrium = matrix_case([[0, 0], [0, 0]], "1")
    assert not proved(sampled, equilibrium, nominal(sampled, "half-plane", 0))
    assert proved(sampled, equilibrium, nominal(sampled, "disc", 1))
    assert not proved(sampled, equilibrium, nominal(sampled, "disc", 0))
    assert not proved(continuous, equilibrium, nominal(continuous, "half-plane", -1))
    assert not proved(continuous, equilibrium, nominal(continuous, "sector", 1))


def spring(**ranges):
    """x'' = -k x - c x' with k and c free; V with P = [[2, 1/2], [1/2, 1]]."""
    case = loop_case({"x": "v", "v": "-k*x - c*v"}, {}, {"k": "2", "c": "1"})
    return with_spread(case, **ranges), equilibrium_at(0, 0)


P = ((F(2), F(1, 2)), (F(1, 2), F(1)))


def test_a_common_p_proves_every_combination_of_a_box():
    case, equilibrium = spring(k=("19/10", "21/10"), c=("9/10", "11/10"))
    claim = claim_about(case, "half-plane", 0, (box(k=("19/10", "21/10"), c=("9/10", "11/10")), P), over="tolerances")
    finding = check_matrix(case, equilibrium, claim)
    assert finding.result == "proved"
    assert finding.strength == "exact"
    assert {p.label for p in finding.premises} >= {"vertices", "smooth", "fixed", "spectrum"}


@given(st.fractions(0, 2, max_denominator=20), st.fractions(0, 2, max_denominator=20))
def test_a_box_is_proved_exactly_where_the_inequality_holds_at_its_vertices(k_width, c_width):
    ranges = {"k": (2 - k_width, 2 + k_width + F(1, 100)), "c": (1 - c_width, 1 + c_width + F(1, 100))}
    case, equilibrium = spring(**ranges)
    p = np.array(P, float)
    least = min(
        np.linalg.eigvalsh(-(a.T @ p + p @ a))[0]
        for k, c in product(*ranges.values())
        for a in [np.array([[0.0, 1.0], [-float(k), -float(c)]])]
    )
    found = proved(case, equilibrium, claim_about(case, "half-plane", 0, (box(**ranges), P), over="tolerances"))
    assert found == (least > 0) or abs(least) < 1e-9


def of_cell(**changes):
    """Damage to the first cell."""
    return lambda claim: replace(claim, cells=(replace(claim.cells[0], **changes),))


HALF_OPEN = Box(("k", "c"), (Interval(None, F(9)), Interval(F(0), F(9))))
DAMAGES = {
    "another model": lambda c: replace(c, model_hash="0" * 64),
    "another equilibrium": lambda c: replace(c, equilibrium="point.E2"),
    "a larger level": lambda c: replace(c, level=F(1)),
    "no cell": lambda c: replace(c, cells=()),
    "the nominal scope": lambda c: replace(c, over="nominal"),
    "a cell too small": of_cell(parameters=box(k=("19/10", 2), c=("9/10", "11/10"))),
    "sides in another order": of_cell(parameters=box(c=(0, 3), k=(0, 3))),
    "an unbounded cell": of_cell(parameters=HALF_OPEN),
    "an indefinite P": of_cell(matrix=((F(2), F(3)), (F(3), F(1)))),
    "an asymmetric P": of_cell(matrix=((F(2), F(1)), (F(0), F(1)))),
    "a P of another size": of_cell(matrix=((F(1),),)),
    "a ragged P": of_cell(matrix=((F(2), F(1, 2)), (F(1, 2),))),
    "minus P": of_cell(matrix=((F(-2), F(-1, 2)), (F(-1, 2), F(-1)))),
}


@pytest.mark.parametrize("damage", DAMAGES.values(), ids=DAMAGES.keys())
def test_a_damaged_certificate_is_refused(damage):
    ranges = {"k": ("19/10", "21/10"), "c": ("9/10", "11/10")}
    case, equilibrium = spring(**ranges)
    claim = claim_about(case, "half-plane", 0, (box(**ranges), P), over="tolerances")
    assert proved(case, equilibrium, claim)
    assert not proved(case, equilibrium, damage(claim))


def test_parameters_that_vary_need_one_p_for_all_cells():
    ranges = {"k": ("19/10", "21/10"), "c": ("9/10", "11/10")}
    case, equilibrium = spring(**ranges)
    moving = with_spread(case, varies=True, **ranges)
    halves = [box(k=("19/10", 2), c=("9/10", "11/10")), box(k=(2, "21/10"), c=("9/10", "11/10"))]
    other = ((F(2), F(1, 2)), (F(1, 2), F(101, 100)))
    for subject, matrices, expected in ((case, (P, other), True), (moving, (P, other), False), (moving, (P, P), True)):
        cells = zip(halves, matrices, strict=True)
        claim = claim_about(subject, "half-plane", 0, *cells, over="tolerances")
        assert proved(subject, equilibrium, claim) == expected


def test_a_pole_inside_the_parameter_box_is_refused_though_it_cancels():
    case = loop_case({"x": "-x*(p - 1)/(p - 1)"}, {}, {"p": "2"})
    for low, expected in (("3/2", True), ("1/2", False), ("1", False)):
        spread = with_spread(case, p=(low, 3))
        claim = claim_about(spread, "half-plane", "1/2", (box(p=(low, 3)), ((F(1),),)), over="tolerances")
        assert proved(spread, equilibrium_at(0), claim) == expected


@pytest.mark.parametrize(("equation", "low", "high"), [("x/p", "-2", "-1/2"), ("-x/p", "1/2", "2")])
def test_a_denominator_of_either_sign_is_cleared(equation, low, high):
    case = with_spread(loop_case({"x": equation}, {}, {"p": low}), p=(low, high))
    claim = claim_about(case, "half-plane", "49/100", (box(p=(low, high)), ((F(1),),)), over="tolerances")
    assert proved(case, equilibrium_at(0), claim)
    assert not proved(case, equilibrium_at(0), replace(claim, level=F(1, 2)))


def test_an_equilibrium_that_moves_with_the_parameters_is_refused():
    case = with_spread(loop_case({"x": "p - 1 - x"}, {}, {"p": "1"}), p=("9/10", "11/10"))
    claim = claim_about(case, "half-plane", 0, (box(p=("9/10", "11/10")), ((F(1),),)), over="tolerances")
    finding = check_matrix(case, equilibrium_at(0), claim)
    assert finding.result == "undecided"
    assert [p.result for p in finding.premises if p.label == "fixed"] == ["undecided"]


def test_a_saturation_may_not_change_its_branch_over_the_box():
    # u = -2x + p at x = 0: inside the limit for |p| < 1 only; where saturated, x' = x + ... is unstable
    case = loop_case({"x": "x + sat(p - 3*x, -1, 1) - sat(p, -1, 1)"}, {}, {"p": "0"})
    for reach, expected in (("9/10", True), ("1", False), ("11/10", False)):
        spread = with_spread(case, p=("-" + reach, reach))
        claim = claim_about(spread, "half-plane", 1, (box(p=("-" + reach, reach)), ((F(1),),)), over="tolerances")
        assert proved(spread, equilibrium_at(0), claim) == expected


def test_the_branch_of_the_nominal_point_counts_only_where_that_point_lies_in_the_box():
    # nominally the command is free (stable); for p in [2, 3] it is saturated throughout and x' = x + const
    case = loop_case({"x": "x + sat(p - 3*x, -1, 1) - sat(p, -1, 1)"}, {}, {"p": "0"})
    spread = with_spread(case, p=(2, 3))
    claim = claim_about(spread, "half-plane", 1, (box(p=(2, 3)), ((F(1),),)), over="tolerances")
    assert not proved(spread, equilibrium_at(0), claim)


def test_the_limits_of_a_saturation_may_not_cross_over_the_box():
    # held at its lower limit -x - 2 while that lies below the upper limit p + x; beyond, the upper one counts
    case = loop_case({"x": "sat(0*x - 10, -x - 2, p + x) + 2"}, {}, {"p": "1"})
    for low, expected in (("-1", True), ("-3", False)):
        spread = with_spread(case, p=(low, 2))
        claim = claim_about(spread, "half-plane", "1/2", (box(p=(low, 2)), ((F(1),),)), over="tolerances")
        assert proved(spread, equilibrium_at(0), claim) == expected


@pytest.mark.parametrize(("low", "high"), [(2, 4), (-4, -2)])
def test_a_sampled_loop_is_cleared_of_its_denominator(low, high):
    case = with_spread(loop_case({"x": "x/p"}, {}, {"p": str(low)}, sample_interval="1"), p=(low, high))
    claim = claim_about(case, "disc", "51/100", (box(p=(low, high)), ((F(1),),)), over="tolerances")
    assert proved(case, equilibrium_at(0), claim)
    assert not proved(case, equilibrium_at(0), replace(claim, level=F(1, 2)))


def test_an_absolute_value_may_not_change_its_branch_over_the_box():
    case = loop_case({"x": "-abs(p)*x - abs(p + x) + abs(p)"}, {}, {"p": "1"})
    for low, expected in (("1/2", True), ("-1/2", False), ("0", False)):
        spread = with_spread(case, p=(low, 2))
        claim = claim_about(spread, "half-plane", 1, (box(p=(low, 2)), ((F(1),),)), over="tolerances")
        assert proved(spread, equilibrium_at(0), claim) == expected


def test_functions_of_parameters_are_enclosed_soundly():
    # x' = -exp(p) x over p in [0, 1/10]: the decay rate is exactly 1, so 1 must fail and just below must hold
    case = with_spread(loop_case({"x": "-exp(p)*x"}, {}, {"p": "0"}), p=("0", "1/10"))
    side = box(p=("0", "1/10"))
    held = claim_about(case, "half-plane", "999/1000", (side, ((F(1),),)), over="tolerances")
    assert proved(case, equilibrium_at(0), held)
    assert check_matrix(case, equilibrium_at(0), held).strength == "enclosed"
    assert not proved(case, equilibrium_at(0), replace(held, level=F(1)))


def test_a_nominal_value_that_carries_pi_is_enclosed():
    case = loop_case({"x": "-p*x"}, {}, {"p": Ball(F(314159265358979, 10**14), F(1, 10**14))})
    assert proved(case, equilibrium_at(0), nominal(case, "half-plane", "3.1415926535", ((F(1),),)))
    assert not proved(case, equilibrium_at(0), nominal(case, "half-plane", "3.14159265358979", ((F(1),),)))


def test_states_of_very_different_size_do_not_spoil_the_radii():
    # V = x^2 + (v/10^9)^2 with inexact entries: congruent scaling keeps the enclosure of the small entry from
    # drowning in the row sums of the large one
    rate = Ball(F(1), F(1, 10**6))
    case = loop_case({"x": "-p*x", "v": "-p*v"}, {}, {"p": rate})
    matrix = ((F(1), F(0)), (F(0), F(1, 10**18)))
    assert proved(case, equilibrium_at(0, 0), nominal(case, "half-plane", "9/10", matrix))


def test_a_form_is_valid_on_its_own_box_only():
    case, equilibrium = spring(k=("19/10", "21/10"), c=("9/10", "11/10"))
    part = box(k=("19/10", 2), c=("9/10", "11/10"))
    forms = linear_forms(case, equilibrium, "tolerances", part)
    assert cell_holds(forms, MatrixCell(part, P), "half-plane", F(0))
    whole = box(k=("19/10", "21/10"), c=("9/10", "11/10"))
    assert not cell_holds(forms, MatrixCell(whole, P), "half-plane", F(0))


SIDES = st.tuples(st.integers(0, 4), st.integers(0, 4)).filter(lambda s: s[0] < s[1])


@given(st.lists(st.tuples(SIDES, SIDES), max_size=7))
def test_the_cover_is_decided_as_by_counting_unit_squares(cells):
    whole = box(a=(0, 4), b=(0, 4))
    boxes = [box(a=a, b=b) for a, b in cells]
    squares = product(range(4), repeat=2)
    expected = all(any(a[0] <= x < a[1] and b[0] <= y < b[1] for a, b in cells) for x, y in squares)
    assert covers_exactly(boxes, whole) == expected


def test_a_gap_of_any_width_is_seen():
    tiny = F(1, 10**30)
    assert covers_exactly([box(a=(0, 1)), box(a=(1, 2))], box(a=(0, 2)))
    assert not covers_exactly([box(a=(0, 1)), box(a=(1 + tiny, 2))], box(a=(0, 2)))
    assert not covers_exactly([box(a=(0, 1), b=(0, 1))], box(a=(0, 1)))
