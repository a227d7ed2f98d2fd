"""Lists that are nearly right: each is refused for the one premise that fails."""

from dataclasses import replace
from fractions import Fraction
from math import isqrt

import numpy as np
import pytest
from builders import box, make_case
from loop_cases import formula

from dossier.checks.branch_and_bound import inside_known
from dossier.checks.equilibria import check_roots, enclose_equilibria, list_equilibria
from dossier.checks.intervals import Span
from dossier.checks.newton import System, UniqueBox, newton_step
from dossier.model.ball import Ball
from dossier.model.claim import SolutionBox
from dossier.model.expression import Expression, add, number, power, symbol

BUDGET = 20_000
CUBIC = make_case({"x": "x - x^3"}, search={"x": (-2, 3)})


def unproved(case, claim):
    """Labels and details of the premises that are not proved; the conclusion must not be either."""
    finding = check_roots(case, claim, BUDGET)
    assert finding.result != "proved" and finding.facts == {}
    return {p.label: p.detail for p in finding.premises if p.result != "proved"}


def whole(case):
    claim = enclose_equilibria(case, (), BUDGET)
    assert claim.complete and check_roots(case, claim, BUDGET).result == "proved"
    return claim


def test_a_true_equilibrium_outside_the_search_box_is_not_counted():
    narrow = make_case({"x": "x - x^3"}, search={"x": (-2, "0.5")})
    claim, outer = whole(narrow), whole(CUBIC).solutions[2]
    assert len(claim.solutions) == 2
    longer = replace(claim, solutions=(*claim.solutions, outer))
    assert "solution 3 is not in the search box" in unproved(narrow, longer)["unique"]
    assert len(list_equilibria(narrow, longer)) == 2


def test_an_enclosure_moved_within_its_uniqueness_box_is_refused():
    claim = whole(CUBIC)
    for k, solution in enumerate(claim.solutions):
        moved = tuple(Ball(b.middle + Fraction(1, 10**9), b.radius) for b in solution.enclosure)
        wrong = tuple(replace(s, enclosure=moved) if s is solution else s for s in claim.solutions)
        assert (
            f"enclosure of solution {k + 1} is not confirmed"
            in unproved(CUBIC, replace(claim, solutions=wrong))["unique"]
        )


def test_an_exact_value_that_is_only_close_is_refused():
    case = make_case({"x": "x^2 - 2"}, search={"x": (0, 2)})
    claim = whole(case)
    (solution,) = claim.solutions
    rational = replace(solution, enclosure=(Ball(solution.enclosure[0].middle),))
    assert "is not confirmed" in unproved(case, replace(claim, solutions=(rational,)))["unique"]


def test_swapped_enclosures_are_refused():
    claim = whole(CUBIC)
    first, second, third = claim.solutions
    swapped = (replace(first, enclosure=second.enclosure), replace(second, enclosure=first.enclosure), third)
    assert "leaves its uniqueness box" in unproved(CUBIC, replace(claim, solutions=swapped))["unique"]


def test_one_equilibrium_listed_with_two_enclosures_is_refused():
    case = make_case({"x": "x^2 - 2"}, search={"x": (0, 2)})
    claim = whole(case)
    (solution,) = claim.solutions
    (ball,) = solution.enclosure
    again = replace(solution, enclosure=(Ball(ball.middle, 2 * ball.radius),))
    assert "may be the same" in unproved(case, replace(claim, solutions=(solution, again)))["unique"]


def test_an_equilibrium_that_a_damaged_list_names_twice_is_listed_once():
    claim = whole(CUBIC)
    twice = replace(claim, solutions=(*claim.solutions, *claim.solutions))
    assert "may be the same" in unproved(CUBIC, twice)["unique"]
    assert list_equilibria(CUBIC, twice) == list_equilibria(CUBIC, claim)


def test_a_border_nearer_to_an_irrational_equilibrium_than_its_enclosure_leaves_it_undecided():
    # 70 digits of the root of 2, cut off or rounded up: the equilibrium is outside or inside by less than 1e-70.
    below = Fraction(isqrt(2 * 10**140), 10**70)
    for end in (below, below + Fraction(1, 10**70)):
        case = make_case({"x": "x^2 - 2"}, search={"x": (0, end)})
        claim = enclose_equilibria(case, ((1.4142135623730951,),), BUDGET)
        assert not claim.complete and claim.solutions == () and len(claim.undecided) == 1
        assert "cover" in unproved(case, replace(claim, undecided=(), complete=True))


def test_a_budget_that_ran_out_is_said():
    case = make_case({"x": "sin(20*x)*cos(17*y)", "y": "sin(20*y + x)"}, search={"x": (1, 9), "y": (1, 9)})
    spent = enclose_equilibria(case, (), 64)
    assert not spent.complete and spent.undecided
    pretended = replace(spent, undecided=(), complete=True)
    finding = check_roots(case, pretended, 64)
    assert (
        finding.result == "undecided"
        and "not finished with 64 boxes" in {p.label: p.detail for p in finding.premises}["cover"]
    )


@pytest.mark.parametrize("text", ["x*log(x)", "x*sqrt(x - 1)", "x/x - 1 + x*log(x)"])
def test_a_stated_point_where_the_equation_is_undefined_is_not_listed_though_a_factor_is_zero(text):
    case = make_case({"x": text}, search={"x": ("-0.1", "0.1")}, fixed=(0,))
    honest = enclose_equilibria(case, (), BUDGET)
    forged = SolutionBox(box(("x",), {"x": ("-0.01", "0.01")}), (Ball(Fraction(0)),))
    claim = replace(honest, solutions=(forged,), undecided=(), complete=True)
    assert list_equilibria(case, claim) == ()
    assert "uniqueness box of solution 1 is not confirmed" in unproved(case, claim)["unique"]


# Single steps.


def system(equation: Expression, lower, upper) -> System:
    return System((equation,), ("x",), {}, box(("x",), {"x": (lower, upper)}))


def step(equation: Expression, lower, upper):
    problem = system(equation, lower, upper)
    return newton_step(problem, Span(problem.search.lo[:, None], problem.search.hi[:, None]))


def test_no_solution_is_proved_in_a_box_where_the_equation_is_partly_undefined():
    # x + 1/10 + x^(3/2) has finite slopes near 0 and would vanish near -0.1, where it is not defined.
    equation = add(symbol("x"), number(Fraction(1, 10)), power(symbol("x"), Fraction(3, 2)))
    assert not step(equation, "-0.5", "0.7").unique[0]
    case = make_case({"x": equation}, search={"x": ("-0.5", "0.7")})
    claim = enclose_equilibria(case, ((-0.1,), (0.0,)), BUDGET)
    assert claim.solutions == () and list_equilibria(case, claim) == ()


def test_a_partly_undefined_equation_still_excludes_by_its_values():
    assert step(formula("sqrt(x) + 1"), -1, 1).excluded[0]
    assert not step(formula("sqrt(x) - 1"), -1, 4).excluded[0]


def test_a_pole_between_two_signs_is_no_equilibrium_and_stays_undecided():
    case = make_case({"x": "1/x"}, search={"x": (-1, 2)})
    claim = enclose_equilibria(case, ((1e-9,),), BUDGET)
    assert claim.solutions == () and not claim.complete


@pytest.mark.parametrize(
    ("lower", "upper", "inside"),
    [((0.2, 0.2), (0.8, 0.8), True), ((0.0, 0.0), (1.0, 1.0), True), ((0.2, 0.2), (0.8, 1.5), False),
     ((-0.5, 0.2), (0.8, 0.8), False), ((2.0, 2.0), (3.0, 3.0), False)],
)  # fmt: skip
def test_only_boxes_wholly_inside_a_uniqueness_box_are_dropped(lower, upper, inside):
    unit = Span(np.zeros(2), np.ones(2))
    boxes = Span(np.array(lower)[:, None], np.array(upper)[:, None])
    assert bool(inside_known(boxes, [UniqueBox(unit, unit)])[0]) is inside
