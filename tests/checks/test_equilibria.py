"""Lists of equilibria: complete only with proof, checked a second time, and damaged lists are refused."""

from dataclasses import replace
from fractions import Fraction

import pytest
from builders import box, make_case
from loop_cases import formula

from dossier.checks.equilibria import (
    Unbounded,
    check_roots,
    cluster_texts,
    enclose_equilibria,
    list_equilibria,
    verify_fixed,
)
from dossier.model.ball import Ball
from dossier.model.claim import RootsClaim
from dossier.model.expression import call, number, symbol
from dossier.model.text import claim_from_data, claim_to_data

BUDGET = 20_000

BISTABLE = make_case({"x": "x - x^3", "y": "x - y"}, search={"x": (-2, 3), "y": (-4, 4)}, near=(1, 1))


def claimed(case, budget=BUDGET):
    claim = enclose_equilibria(case, (), budget)
    assert isinstance(claim, RootsClaim)
    return claim


def states(case, claim=None):
    return [e.state for e in list_equilibria(case, claim or claimed(case))]


def proved(case, claim):
    return check_roots(case, claim, BUDGET).result == "proved"


def test_the_three_equilibria_of_a_bistable_loop_are_listed_exactly():
    claim = claimed(BISTABLE)
    finding = check_roots(BISTABLE, claim, BUDGET)
    assert claim.complete and finding.result == "proved" and finding.strength == "enclosed"
    assert finding.facts["equilibria found"].lower == 3
    assert {p.label: p.result for p in finding.premises} == {"cover": "proved", "unique": "proved"}
    assert states(BISTABLE, claim) == [tuple(Ball(Fraction(v)) for v in (s, s)) for s in (-1, 0, 1)]


def test_seeds_change_the_work_and_not_the_list():
    seeded = enclose_equilibria(BISTABLE, [(1.0, 1.0), (-1.0, -1.0), (float("nan"), 0.0), (0.4, 0.4)], BUDGET)
    assert isinstance(seeded, RootsClaim) and proved(BISTABLE, seeded)
    assert states(BISTABLE, seeded) == states(BISTABLE)


def test_a_claim_survives_being_written_and_read():
    claim = claimed(BISTABLE)
    assert claim_from_data(claim_to_data(claim)) == claim


def test_a_box_without_equilibrium_is_proved_empty():
    case = make_case({"x": "1 + x^2 + y^2", "y": "x - y"}, search={"x": (-9, 9), "y": (-9, 9)}, none_expected=True)
    claim = claimed(case)
    assert claim.solutions == () and claim.complete and proved(case, claim) and states(case, claim) == []


def test_an_unbounded_search_box_is_named():
    case = make_case({"x": "-x", "y": "-y"}, search={"x": (-1, 1), "y": (None, 1)})
    answer = enclose_equilibria(case, (), BUDGET)
    assert answer == Unbounded(("y",)) and "y" in answer.reason


# What cannot be decided.


def test_a_double_equilibrium_leaves_the_list_open():
    case = make_case({"x": "x^2*(x - 1)"}, search={"x": (-3, 3)}, near=(1,))
    claim = claimed(case)
    assert not claim.complete and len(claim.solutions) == 1 and len(claim.undecided) == 1
    assert check_roots(case, claim, BUDGET).result == "undecided"
    assert claim.undecided[0].intervals[0].bounds[0] <= 0 <= claim.undecided[0].intervals[0].bounds[1]
    assert "x in [" in cluster_texts(claim)[0]


def test_a_circle_of_equilibria_is_one_cluster():
    case = make_case({"x": "x*(1 - x^2 - y^2)", "y": "y*(1 - x^2 - y^2)"}, search={"x": (-3, 3), "y": (-3, 3)})
    claim = claimed(case)
    assert len(claim.solutions) == 1 and len(claim.undecided) == 1 and not claim.complete
    for x, y in ((1, 0), (Fraction(3, 5), Fraction(-4, 5))):
        sides = claim.undecided[0].intervals
        assert sides[0].bounds[0] <= x <= sides[0].bounds[1] and sides[1].bounds[0] <= y <= sides[1].bounds[1]


def test_a_root_at_its_own_zero_is_not_decided():
    case = make_case({"x": "-sqrt(x)"}, search={"x": (0, 30)})
    claim = claimed(case)
    assert not claim.complete and not proved(case, claim)


def test_a_tank_with_an_outlet_at_the_border_is_decided():
    # Level where inflow equals sqrt(h): h = 0.36; the derivative is infinite at the border h = 0.
    case = make_case({"h": "0.6 - sqrt(h)"}, search={"h": (0, 30)})
    ((level,),) = states(case)
    assert level.lower <= Fraction(9, 25) <= level.upper and level.radius < Fraction(1, 10**58)
    assert proved(case, claimed(case))


# The border of the closed search box.


@pytest.mark.parametrize(("upper", "count"), [("1", 2), ("0.9999999999999999999999", 1), ("1.1", 2)])
def test_an_equilibrium_on_the_border_counts_inside(upper, count):
    case = make_case({"x": "x*(1 - x)"}, search={"x": ("-0.5", upper)})
    claim = claimed(case)
    assert len(claim.solutions) == count and proved(case, claim)


def test_a_border_equilibrium_with_an_irrational_coordinate_counts_inside():
    case = make_case({"x": "x*(x - 1)", "y": "y^2 - 2"}, search={"x": (0, 1), "y": (0, 2)})
    claim = claimed(case)
    assert [s[0] for s in states(case, claim)] == [Ball(Fraction(0)), Ball(Fraction(1))] and proved(case, claim)


def test_a_border_equilibrium_counts_inside_although_its_other_coordinate_resists_proof():
    # x = 2 exactly, but sin(y) - sin(y) at y = 1 is not folded; y = 1, on the border, is proved by itself.
    case = make_case({"x": "x - 2 + sin(y) - sin(y)", "y": "y - 1"}, search={"x": (0, 3), "y": (0, 1)})
    claim = claimed(case)
    assert states(case, claim)[0][1] == Ball(Fraction(1)) and proved(case, claim)


def test_an_irrational_equilibrium_next_to_the_border_is_placed_by_its_digits():
    below, above = "1.41421356237309504880", "1.41421356237309504881"
    inside = make_case({"x": "x^2 - 2"}, search={"x": (0, above)})
    outside = make_case({"x": "x^2 - 2"}, search={"x": (0, below)})
    assert len(claimed(inside).solutions) == 1 and proved(inside, claimed(inside))
    assert len(claimed(outside).solutions) == 0 and proved(outside, claimed(outside))


# Kinks, maps, parameters.


def test_saturated_equilibria_are_listed():
    # x' = sat(2 x, -1, 1) - x: 0 and both saturated balances.
    saturated = call("sat", formula("2*x"), number(-1), number(1))
    case = make_case({"x": formula_sum(saturated, "-x")}, search={"x": (-3, 3)})
    assert states(case) == [(Ball(Fraction(v)),) for v in (-1, 0, 1)] and proved(case, claimed(case))


def formula_sum(first, text):
    return first.__class__("add", (first, formula(text)))


def test_an_equilibrium_on_a_kink_is_listed_where_the_slope_keeps_its_sign():
    case = make_case({"x": "-3*x - abs(x)"}, search={"x": (-1, 2)})
    assert states(case) == [(Ball(Fraction(0)),)] and proved(case, claimed(case))


def test_fixed_points_of_a_map_are_listed():
    case = make_case({"x": "x^2 - y^2", "y": "2*x*y"}, search={"x": (-2, 2), "y": (-2, 2)}, sampled=True)
    assert states(case) == [tuple(Ball(Fraction(v)) for v in s) for s in ((0, 0), (1, 0))]
    assert proved(case, claimed(case))


def test_a_parameter_known_to_a_ball_is_carried_along():
    case = make_case({"x": "k - x"}, search={"x": (0, 5)}, parameters={"k": Ball(Fraction(2), Fraction(1, 1000))})
    ((state,),) = states(case)
    assert state.lower <= Fraction("1.999") and Fraction("2.001") <= state.upper and proved(case, claimed(case))


# The chosen equilibrium and the domain.


def test_the_equilibrium_nearest_to_the_guess_in_region_units_is_chosen():
    sides = {"x": ("-0.01", "0.01"), "y": (-100, 100)}
    case = make_case(
        {"x": "x*(x - 1)", "y": "y - 50*x"}, search={"x": (-3, 3), "y": (-99, 99)}, region=sides, near=("0.1", 60)
    )
    assert [e.chosen for e in list_equilibria(case, claimed(case))] == [True, False]


def test_a_tie_is_remarked():
    case = replace(BISTABLE, near=(Fraction(1, 2), Fraction(1, 2)))
    chosen = next(e for e in list_equilibria(case, claimed(case)) if e.chosen)
    assert any("within 10 %" in r for r in chosen.remarks)
    clear = next(e for e in list_equilibria(BISTABLE, claimed(BISTABLE)) if e.chosen)
    assert clear.identifier == "point.E3" and clear.remarks == ()


def test_nothing_is_chosen_where_none_is_expected():
    case = replace(BISTABLE, none_expected=True)
    assert not any(e.chosen for e in list_equilibria(case, claimed(case)))


def test_equilibria_outside_the_closed_domain_are_listed_as_such():
    case = make_case({"x": "x*(x - 1)*(x - 2)"}, search={"x": (-3, 3)}, domain={"x": ("0.5", 2)}, near=(1,))
    assert [e.inside_domain for e in list_equilibria(case, claimed(case))] == [False, True, True]


def test_a_stated_point_is_chosen_and_exact():
    case = make_case(
        {"x": "v", "v": "-k*sin(x) - c*v"}, search={"x": (-4, 4), "v": (-1, 1)},
        parameters={"k": 2, "c": 1}, spread={"k": ("1.5", "2.5"), "c": ("0.5", 3)}, fixed=(0, 0),
    )  # fmt: skip
    listed = list_equilibria(case, claimed(case))
    assert [e.chosen for e in listed] == [False, True, False]
    assert listed[1].fixed_for_all and not listed[0].fixed_for_all
    assert listed[0].state[1] == Ball(Fraction(0))


# Points that are equilibria for every combination.


def test_a_fixed_point_is_verified_without_a_search_box():
    case = make_case(
        {"x": "k*(1 - x)/(2 + k)", "y": "x^2 - k^2/k^2 - y"},
        parameters={"k": 1},
        spread={"k": ("0.5", 2)},
        fixed=(1, 0),
    )
    verified = verify_fixed(case)
    assert not isinstance(verified, str) and verified.fixed_for_all and verified.chosen


@pytest.mark.parametrize(
    ("equation", "spread", "fixed"),
    [
        ("k - x", {"k": ("0.5", 2)}, ("1",)),  # moves with k
        ("2 - x", {}, ("1",)),  # no equilibrium at all
        ("x/(k - 1.5)", {"k": ("0.5", 2)}, ("0",)),  # pole inside the tolerance
        ("x*log(k)", {"k": (0, 2)}, ("0",)),  # logarithm not regular over the tolerance
        ("x - sin(k)*x + 1e-30".replace("1e-30", "0.000000000000000000000000000001"), {"k": ("0.5", 2)}, ("0",)),
    ],
)
def test_a_point_that_is_no_equilibrium_for_every_combination_is_refused_with_a_reason(equation, spread, fixed):
    verified = verify_fixed(make_case({"x": equation}, dict.fromkeys(spread, 1), spread=spread, fixed=fixed))
    assert isinstance(verified, str) and verified


def test_a_fixed_point_of_a_map_is_verified():
    assert not isinstance(
        verify_fixed(make_case({"x": "k*x"}, parameters={"k": 1}, spread={"k": (0, 2)}, fixed=(0,), sampled=True)), str
    )
    assert isinstance(
        verify_fixed(make_case({"x": "k + x"}, parameters={"k": 1}, spread={"k": (0, 2)}, fixed=(0,), sampled=True)),
        str,
    )


def test_verifying_needs_a_stated_point():
    with pytest.raises(ValueError, match="no fixed"):
        verify_fixed(BISTABLE)


# Sabotage: a damaged list is never proved.


def with_solution(claim, index, **changes):
    solutions = list(claim.solutions)
    solutions[index] = replace(solutions[index], **changes)
    return replace(claim, solutions=tuple(solutions))


def _moved(claim):
    sides = claim.solutions[1].uniqueness.intervals
    beside = tuple(Ball(s.bounds[0] + s.width / 8, s.width / 1000) for s in sides)
    return with_solution(claim, 1, enclosure=beside)


def _moved_exactly(claim):
    sides = claim.solutions[1].uniqueness.intervals
    return with_solution(claim, 1, enclosure=tuple(Ball(s.bounds[0] + s.width / 8) for s in sides))


def _shaved(claim):
    wrong = box(("x", "y"), {"x": ("0.001", "0.1"), "y": ("-0.1", "0.1")})
    return with_solution(claim, 1, uniqueness=wrong)


SABOTAGE = {
    "a solution left out": lambda c: replace(c, solutions=c.solutions[:-1]),
    "all solutions left out": lambda c: replace(c, solutions=()),
    "a solution twice": lambda c: replace(c, solutions=(*c.solutions, c.solutions[0])),
    "an enclosure beside the solution": _moved,
    "an exact point beside the solution": _moved_exactly,
    "a uniqueness box beside the solution": _shaved,
    "a uniqueness box over two solutions": lambda c: with_solution(c, 1, uniqueness=c.search),
    "an enclosure of the wrong size": lambda c: with_solution(c, 0, enclosure=c.solutions[0].enclosure[:1]),
    "other states": lambda c: with_solution(c, 0, uniqueness=replace(c.solutions[0].uniqueness, names=("x", "z"))),
    "another search box": lambda c: replace(c, search=box(("x", "y"), {"x": (-2, 2), "y": (-4, 4)})),
    "another model": lambda c: replace(c, model_hash="0" * 64),
    "an undecided part": lambda c: replace(c, undecided=(c.search,)),
    "not complete": lambda c: replace(c, complete=False),
    "another scope": lambda c: replace(c, over="tolerances"),
}


@pytest.mark.parametrize("damage", SABOTAGE)
def test_a_damaged_list_is_not_proved(damage):
    finding = check_roots(BISTABLE, SABOTAGE[damage](claimed(BISTABLE)), BUDGET)
    assert finding.result in ("undecided", "not run") and finding.facts == {}


def test_a_list_hidden_by_a_wrong_complete_mark_is_not_proved():
    case = make_case({"x": "x^2*(x - 1)"}, search={"x": (-3, 3)})
    assert not proved(case, replace(claimed(case), undecided=(), complete=True))


def test_an_invented_equilibrium_is_neither_proved_nor_listed():
    claim = claimed(BISTABLE)
    side = {"x": ("1.4", "1.6"), "y": ("1.4", "1.6")}
    invented = replace(
        claim.solutions[0], uniqueness=box(("x", "y"), side), enclosure=(Ball(Fraction(3, 2)), Ball(Fraction(3, 2)))
    )
    damaged = replace(claim, solutions=(*claim.solutions, invented))
    assert not proved(BISTABLE, damaged) and len(states(BISTABLE, damaged)) == 3


def test_an_equilibrium_outside_the_search_box_is_neither_proved_nor_listed():
    smaller = replace(BISTABLE, search=box(("x", "y"), {"x": (-2, "0.5"), "y": (-4, 4)}))
    claim, outside = claimed(smaller), claimed(BISTABLE).solutions[-1]
    damaged = replace(claim, solutions=(*claim.solutions, outside))
    assert len(claim.solutions) == 2 and proved(smaller, claim)
    assert not proved(smaller, damaged) and len(states(smaller, damaged)) == 2


def test_a_cover_without_enough_boxes_is_not_proved():
    case = make_case({"x": "sin(20*x)*sin(17*x)"}, search={"x": (1, 9)})
    assert check_roots(case, claimed(case), 10).result == "undecided"


def test_a_symbol_without_value_is_an_error_not_a_list():
    with pytest.raises(KeyError):
        enclose_equilibria(make_case({"x": "q - x"}, search={"x": (0, 1)}), (), 10)


def test_the_state_symbol_may_be_the_whole_equation():
    case = make_case({"x": symbol("x")}, search={"x": (-1, 2)})
    assert states(case) == [(Ball(Fraction(0)),)]
