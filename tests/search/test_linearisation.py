"""What the search for P finds is verified here as in a build; what cannot exist is not found."""

from dataclasses import replace
from fractions import Fraction as F

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from linear_cases import matrix_case, polynomial_case, with_spread
from loop_cases import equilibrium_at, loop_case

from dossier.checks.spectral import cell_holds, check_matrix
from dossier.search.balancing import balance, shortened, to_short
from dossier.search.effort import EFFORTS
from dossier.search.inequality import common_matrix, decay_matrix, is_inside, normal_shapes
from dossier.search.linearisation import seek_matrix
from dossier.search.lyapunov_equation import solve_exactly

QUICK = EFFORTS["quick"]


def seek(case, equilibrium, region, level, over="nominal", effort=QUICK):
    (attempt,), claim = seek_matrix(case, equilibrium, over, region, F(level), effort, "L1", cell_holds)
    assert (attempt.ending == "found") == (claim is not None)
    if claim is not None:
        assert check_matrix(case, equilibrium, claim).result == "proved"
    return attempt, claim


def found(*args, **kwargs):
    return seek(*args, **kwargs)[1] is not None


def test_a_decay_rate_is_proved_up_to_the_last_digits():
    case, equilibrium = polynomial_case([1, 3, 2])
    assert found(case, equilibrium, "half-plane", "0.9999")
    assert not found(case, equilibrium, "half-plane", 1)
    assert not found(case, equilibrium, "half-plane", "1.0001")


def test_a_damping_ratio_is_proved_up_to_the_last_digits():
    case, equilibrium = polynomial_case([1, "6/5", 1])
    assert found(case, equilibrium, "sector", "0.5999")
    assert not found(case, equilibrium, "sector", "0.6")


def test_a_contraction_is_proved_up_to_the_last_digits():
    case, equilibrium = matrix_case([[0, 1], ["-1/4", "0"]], "1")
    assert found(case, equilibrium, "disc", "0.5001")
    assert not found(case, equilibrium, "disc", "1/2")


def jordan(size, value):
    return [[value if i == j else int(j == i + 1) for j in range(size)] for i in range(size)]


@pytest.mark.parametrize("size", [2, 4, 7])
def test_a_defective_matrix_has_its_inequality_for_every_region(size):
    case, equilibrium = matrix_case(jordan(size, -1))
    assert found(case, equilibrium, "half-plane", 0)
    assert found(case, equilibrium, "half-plane", "1/2")
    assert found(case, equilibrium, "sector", "1/2")
    sampled, equilibrium = matrix_case(jordan(size, "1/2"), "1")
    assert found(sampled, equilibrium, "disc", 1)


def test_a_dead_beat_loop_contracts_at_any_rate():
    assert found(*matrix_case(jordan(4, 0), "1"), "disc", "1/100")


def test_a_matrix_far_from_normal_needs_many_digits_and_gets_them():
    # -Frank(12) (W. L. Frank 1958): least eigenvalue 0.031028060644 in size, condition of the eigenvectors 1e7
    frank = [[-(12 - max(i, j)) if j >= i - 1 else 0 for j in range(12)] for i in range(12)]
    case, equilibrium = matrix_case(frank)
    assert found(case, equilibrium, "half-plane", 0)
    assert found(case, equilibrium, "half-plane", "0.031")
    assert not found(case, equilibrium, "half-plane", "0.0311")


def test_grcars_matrix_shifted_across_the_axis_is_proved_only_on_the_stable_side():
    # Trefethen and Embree, Spectra and Pseudospectra, 2005, sec. 7
    size = 12
    grcar = [[1 if 0 <= j - i <= 3 else -1 if j == i - 1 else 0 for j in range(size)] for i in range(size)]
    edge = max(np.linalg.eigvals(np.array(grcar, float)).real)
    for shift, expected in ((F(round(edge * 1000) + 1, 1000), True), (F(round(edge * 1000) - 1, 1000), False)):
        rows = [[v - (shift if i == j else 0) for j, v in enumerate(row)] for i, row in enumerate(grcar)]
        assert found(*matrix_case(rows), "half-plane", 0) == expected


def test_units_of_very_different_size_do_no_harm():
    # a position in metres, a force in newtons: entries from 1e-3 to 1e10
    rows = [[0, 1, 0], ["-4e3", "-2", "1e-3"], ["-1.07e10", "-1.6e8", "-667"]]
    assert found(*matrix_case(rows), "half-plane", 0)


def test_stiff_loops_are_proved_at_their_slow_rate():
    rows = [["-1e6", "3e5", 0], [0, "-1e2", "7"], [0, 0, "-1e-2"]]
    assert found(*matrix_case(rows), "half-plane", "0.0099")


def test_more_states_than_the_exact_equation_takes_are_served_in_floating_point():
    size = 18
    chain = [[-2 if i == j else 1 if abs(i - j) == 1 else 0 for j in range(size)] for i in range(size)]
    assert found(*matrix_case(chain), "half-plane", "1/100")


@settings(max_examples=25)
@given(st.lists(st.integers(-9, 9), min_size=9, max_size=9), st.sampled_from(["half-plane", "sector"]))
def test_a_random_matrix_has_p_where_its_eigenvalues_are_clearly_inside(entries, region):
    rows = [entries[0:3], entries[3:6], entries[6:9]]
    values = np.linalg.eigvals(np.array(rows, float))
    margin = min(-values.real if region == "half-plane" else -values.real - 0.1 * np.abs(values))
    level = F(0) if region == "half-plane" else F(1, 10)
    if margin > 1e-2:
        assert found(*matrix_case(rows), region, level)
    if margin < -1e-2:
        assert not found(*matrix_case(rows), region, level)


def spring(damping="1", **ranges):
    case = loop_case({"x": "v", "v": "-k/m*x - c/m*v"}, {}, {"k": "2", "c": damping, "m": "1"})
    return with_spread(case, **ranges)


BOX = {"k": ("3/2", "5/2"), "c": ("9/10", "11/10"), "m": ("4/5", "6/5")}


def test_one_p_serves_a_moderate_box():
    attempt, claim = seek(spring(**BOX), equilibrium_at(0, 0), "half-plane", "1/10", "tolerances")
    assert len(claim.cells) == 1
    assert claim.cells[0].parameters.names == ("k", "c", "m")
    assert attempt.work == {"cells": 1}


def test_a_wide_box_is_cut_into_cells_with_their_own_p():
    # no common P: a spring that may switch between 1/10 and 20 can be pumped (parametric resonance)
    case = spring("3/20", k=("1/10", "20"), c=("1/10", "2/10"))
    _, claim = seek(case, equilibrium_at(0, 0), "half-plane", 0, "tolerances", EFFORTS["standard"])
    assert len({c.matrix for c in claim.cells}) > 1


def test_parameters_that_vary_get_one_p_or_nothing():
    ranges = {"k": ("1/10", "20"), "c": ("1/10", "2/10")}
    pumped = with_spread(spring("3/20", **ranges), varies=True, **ranges)
    attempt, claim = seek(pumped, equilibrium_at(0, 0), "half-plane", 0, "tolerances", EFFORTS["standard"])
    assert claim is None
    assert "single P" in attempt.remark
    moderate = with_spread(spring(**BOX), varies=True, **BOX)
    assert found(moderate, equilibrium_at(0, 0), "half-plane", "1/10", "tolerances")


def test_an_unstable_combination_is_named_instead_of_cutting_cells():
    case = spring(k=("3/2", "5/2"), c=("-1/10", "11/10"))
    attempt, claim = seek(case, equilibrium_at(0, 0), "half-plane", 0, "tolerances")
    assert claim is None
    assert "c = -0.1" in attempt.remark
    assert attempt.work == {"cells": 0}


def test_functions_of_parameters_are_expanded_on_each_cell():
    # a first-order lag sampled every T: x+ = e^-(aT) x - (1 - e^-(aT)) x/2
    case = loop_case({"x": "exp(-a*T)*x - (1 - exp(-a*T))*x/2"}, {}, {"a": "2", "T": "1/2"}, sample_interval="T")
    spread = with_spread(case, a=("1", "3"), T=("2/5", "3/5"))
    # largest modulus over the box: (3 e^-(2/5) - 1)/2 = 0.50548
    assert found(spread, equilibrium_at(0), "disc", "0.506", "tolerances", effort=EFFORTS["standard"])
    assert not found(spread, equilibrium_at(0), "disc", "0.505", "tolerances")


def test_a_moving_equilibrium_is_out_of_reach_and_says_so():
    case = with_spread(loop_case({"x": "p - 1 - x"}, {}, {"p": "1"}), p=("9/10", "11/10"))
    attempt, _ = seek(case, equilibrium_at(0), "half-plane", 0, "tolerances")
    assert attempt.ending == "out of reach"
    assert "moves" in attempt.remark


def test_no_linear_part_is_out_of_reach_and_says_why():
    attempt, _ = seek(loop_case({"x": "-x - abs(x)"}, {}), equilibrium_at(0), "half-plane", 0)
    assert attempt.ending == "out of reach"
    assert "kink" in attempt.remark


def test_the_budget_of_cells_is_kept():
    case = spring("3/20", k=("1/10", "20"), c=("1/10", "2/10"))
    attempt, claim = seek(case, equilibrium_at(0, 0), "half-plane", 0, "tolerances", replace(QUICK, cells=2))
    assert claim is None
    assert "budget" in attempt.remark


def test_the_same_input_gives_the_same_claim():
    results = [seek(spring(**BOX), equilibrium_at(0, 0), "sector", "1/10", "tolerances")[1] for _ in range(2)]
    assert results[0] == results[1]


def test_the_exact_equation_of_a_map_is_satisfied_exactly():
    a = [[F(1, 2), F(1, 3)], [F(-1, 5), F(1, 4)]]
    p = solve_exactly(a, "disc", F(1))
    for i in range(2):
        for j in range(2):
            image = sum(a[k][i] * p[k][m] * a[m][j] for k in range(2) for m in range(2))
            assert image - p[i][j] == (-1 if i == j else 0)
    assert solve_exactly([[F(1)]], "disc", F(1)) is None


def test_balancing_is_by_powers_of_two_and_evens_rows_and_columns():
    scales = balance(np.array([[1.0, 1e6], [1e-4, 1.0]]))
    assert all(s.numerator & (s.numerator - 1) == 0 and s.denominator & (s.denominator - 1) == 0 for s in scales)
    s = np.array([float(v) for v in scales])
    scaled = np.array([[1.0, 1e6], [1e-4, 1.0]]) * s[None, :] / s[:, None]
    assert 1 / 4 < scaled[0, 1] / scaled[1, 0] < 4


def test_rounding_is_relative_to_the_diagonal():
    p = np.array([[1e12, 0.3], [0.3, 1e-12]])
    rounded = to_short(p, 20)
    for i in range(2):
        for j in range(2):
            assert abs(float(rounded[i][j]) - p[i, j]) <= 4 * 2.0**-20 * np.sqrt(p[i, i] * p[j, j])
    with pytest.raises(ValueError, match="diagonal"):
        shortened(((F(0),),), 10)


def test_the_shapes_make_a_matrix_nearly_normal():
    a = np.array(jordan(4, -1.0))
    skewness = []
    for shape in normal_shapes(a):
        factor = np.linalg.cholesky(shape).T
        turned = factor @ a @ np.linalg.inv(factor)
        skewness.append(np.abs(turned @ turned.T - turned.T @ turned).max())
    assert skewness[-1] < 1e-3 < skewness[0]


def test_a_common_matrix_serves_all_vertices_or_there_is_none():
    vertices = np.array([[[0.0, 1.0], [-k, -1.0]] for k in (1.5, 2.5)])
    p = common_matrix(vertices, vertices.mean(axis=0), "half-plane", 0.0)
    assert all(np.linalg.eigvalsh(decay_matrix(a, p, "half-plane", 0.0))[0] > 0 for a in vertices)
    opposed = np.array([[[-1.0, 10.0], [0.0, -1.0]], [[-1.0, 0.0], [10.0, -1.0]]])
    assert common_matrix(opposed, np.diag([-1.0, -1.0]), "half-plane", 0.0) is None


def test_inside_and_outside_are_told_apart_with_room_for_doubt():
    assert is_inside(np.array([-1.0 + 2j, -1 - 2j]), "half-plane", 0.9)
    assert not is_inside(np.array([-1.0 + 2j, -1 - 2j]), "half-plane", 1.1)
    assert is_inside(np.array([-3.0 + 4j]), "sector", 0.59) and not is_inside(np.array([-3.0 + 4j]), "sector", 0.61)
    assert is_inside(np.array([0.3 + 0.4j]), "disc", 0.5) and not is_inside(np.array([0.3 + 0.4j]), "disc", 0.49)
