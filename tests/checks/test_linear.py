"""Root counts of the nominal linear part as claims, and what is refused."""

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from linear_cases import matrix_case, polynomial_case
from loop_cases import equilibrium_at, loop_case

from dossier.checks.linear import check_routh, classify, routh_claim, routh_claim_id
from dossier.model.ball import Ball
from dossier.model.claim import RouthClaim
from dossier.model.theorem import THEOREMS


def counts(case, equilibrium):
    claim = routh_claim(case, equilibrium)
    assert isinstance(claim, RouthClaim), claim
    finding = check_routh(case, equilibrium, claim)
    assert finding.result == "proved"
    return claim.inside, claim.boundary, claim.outside


def test_a_defective_matrix_is_decided_exactly():
    jordan = [[-1, 1, 0], [0, -1, 1], [0, 0, -1]]
    assert counts(*matrix_case(jordan)) == (3, 0, 0)
    nilpotent = [[0, 1], [0, 0]]
    assert counts(*matrix_case(nilpotent)) == (0, 2, 0)


def test_the_boundary_is_never_called_stable():
    for rows in ([[0, 1], [-1, 0]], [[0, 1], [0, -1]], [[-1, 0], [0, 0]]):
        claim = routh_claim(*matrix_case(rows))
        assert classify(claim) == "undecided"
        assert claim.theorem not in THEOREMS


def test_an_eigenvalue_outside_makes_a_point_unstable_even_with_others_on_the_boundary():
    case, equilibrium = matrix_case([[0, 1, 0], [-1, 0, 0], [0, 0, 1]])
    claim = routh_claim(case, equilibrium)
    assert (claim.inside, claim.boundary, claim.outside) == (0, 2, 1)
    assert classify(claim) == "unstable"
    assert claim.theorem == "T8"


def test_a_sampled_loop_counts_moduli():
    assert counts(*matrix_case([["1/2", 0], [0, -2]], "1/100")) == (1, 0, 1)
    assert counts(*matrix_case([[0, -1], [1, 0]], "1")) == (0, 2, 0)
    assert counts(*matrix_case([[-1, 0], [0, "1/3"]], "1")) == (1, 1, 0)
    assert counts(*matrix_case([[0, 1], [0, 0]], "1")) == (2, 0, 0)


def test_a_strongly_non_normal_shift_is_decided_on_the_right_side_of_the_axis():
    # Grcar's matrix (1989; also Trefethen and Embree 2005, sec. 7): ones on the diagonal and three upper
    # diagonals, -1 below.  Shifted left by just more, or just less, than its largest real part 2.2617...
    size = 12
    grcar = [[1 if 0 <= j - i <= 3 else -1 if j == i - 1 else 0 for j in range(size)] for i in range(size)]
    edge = max(np.linalg.eigvals(np.array(grcar, float)).real)
    for shift, outside in ((Fraction(round(edge * 1000) + 1, 1000), 0), (Fraction(round(edge * 1000) - 1, 1000), 2)):
        rows = [[v - (shift if i == j else 0) for j, v in enumerate(row)] for i, row in enumerate(grcar)]
        assert counts(*matrix_case(rows)) == (size - outside, 0, outside)


def test_the_array_of_the_claim_is_the_one_computed_by_hand():
    # s^3 + 6 s^2 + 11 s + 6: rows 1 11, 6 6 (divided by 6), 10, 6 (divided by their own value)
    claim = routh_claim(*polynomial_case([1, 6, 11, 6]))
    assert claim.array == ((1, 11), (1, 1), (1,), (1,))
    assert claim.polynomial == tuple(Ball(Fraction(v)) for v in (1, 6, 11, 6))


def test_claims_are_named_after_their_equilibrium():
    assert routh_claim_id(replace(equilibrium_at(0), identifier="bottom.E2")) == "bottom.L2"


@pytest.mark.parametrize(
    "damage",
    [
        {"inside": 1, "outside": 1},
        {"inside": 3},
        {"boundary": 1},
        {"model_hash": "0" * 64},
        {"equilibrium": "point.E7"},
        {"array": ()},
        {"over": "tolerances"},
        {"polynomial": (Ball(Fraction(1)), Ball(Fraction(2)), Ball(Fraction(1)))},
        {"theorem": "T8"},
    ],
)
def test_a_damaged_root_count_is_refused(damage):
    case, equilibrium = polynomial_case([1, 3, 1])
    claim = routh_claim(case, equilibrium)
    assert check_routh(case, equilibrium, claim).result == "proved"
    assert check_routh(case, equilibrium, replace(claim, **damage)).result == "undecided"


def test_a_claim_about_another_loop_is_refused():
    case, equilibrium = polynomial_case([1, 3, 1])
    other, _ = polynomial_case([1, 3, 2])
    assert check_routh(other, equilibrium, routh_claim(case, equilibrium)).result == "undecided"


def test_an_enclosure_too_wide_to_decide_gives_a_reason():
    case = loop_case({"x": "x^2 - x"}, {})
    claim = routh_claim(case, equilibrium_at(Ball(Fraction(1, 2), Fraction(1, 10))))
    assert isinstance(claim, str)
    assert classify(claim) == "undecided"


def test_a_saturated_command_does_not_feed_back():
    # beyond its limit the command is constant, so the open loop x' = x + const counts: unstable
    case = loop_case({"x": "x + u - 9/10"}, {"u": "sat(-2*x, -1/10, 1/10)"})
    assert counts(case, equilibrium_at(1)) == (0, 0, 1)
    inside = loop_case({"x": "x + u"}, {"u": "sat(-2*x, -1, 1)"})
    assert counts(inside, equilibrium_at(0)) == (1, 0, 0)


@pytest.mark.parametrize("equation", ["-abs(x)", "sat(-x, 0, 1)", "-x/(x*x)", "-sqrt(x)", "log(x)"])
def test_a_kink_or_a_pole_at_the_equilibrium_leaves_no_linear_part(equation):
    case = loop_case({"x": equation}, {})
    assert isinstance(routh_claim(case, equilibrium_at(0)), str)
