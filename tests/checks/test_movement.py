"""Equilibria that move with the parameters: enclosed on cells, followed along lines, and where they end."""

from dataclasses import replace
from fractions import Fraction
from itertools import pairwise

import pytest
from builders import box, make_case
from loop_cases import equilibrium_at, formula

from dossier.checks.along import range_along, value_at
from dossier.checks.courses import alone_on, common, rest_family, same_on
from dossier.checks.movement import Movement, check_absence, check_branch, check_end
from dossier.checks.path import follow, place_at
from dossier.model.ball import Ball
from dossier.model.case import TOLERANCES, at_combination
from dossier.model.claim import AbsenceClaim, BranchCell, BranchClaim, EndClaim
from dossier.model.loop import model_hash
from dossier.model.region import Box, Interval

F = Fraction


def root_case(low="1", high="4", near="3/2", **more):
    """x' = p - x^2, y' = x - y: rests at x = y = sqrt(p) (elementary); ends at the fold p = 0."""
    return make_case(
        {"x": "p - x^2", "y": "x - y"}, {"p": "9/4"}, {"x": (-3, 3), "y": (-3, 3)}, {"x": (-1, 1), "y": (-1, 1)},
        near=[near, near], spread={"p": (low, high)}, **more,
    )  # fmt: skip


def cell(low, high, name="p"):
    return Box((name,), (Interval(F(low), F(high)),))


def branch(case, *cells, **changes):
    claim = BranchClaim(
        "point.B1", model_hash(case), TOLERANCES, "E", POINT.identifier,
        tuple(BranchCell(c, (F(m), F(m))) for c, m in cells),
    )  # fmt: skip
    return replace(claim, **changes)


POINT = equilibrium_at(F(3, 2), F(3, 2))
HALVES = ((cell(1, 2), "1.2"), (cell(2, 4), "1.7"))


@pytest.mark.parametrize(("low", "high"), [(1, 2), (2, 4), (1, 4), (F(9, 4), F(9, 4))])
def test_the_course_of_a_square_root_is_enclosed(low, high):
    case = root_case()
    found = alone_on(rest_family(case), cell(low, high), (F(3, 2), F(3, 2)))
    assert found is not None
    for k in range(9):
        p = F(low) + (F(high) - F(low)) * k / 8
        for ball in found.state_at((p,)):
            assert max(ball.lower, F(0)) ** 2 <= p <= ball.upper**2
    if low == high:
        assert max(found.course.rest) < F(1, 10**14)


def test_the_enclosure_shrinks_with_the_square_of_the_cell():
    """Second order: a cell half as wide leaves about a quarter of the rest."""
    family = rest_family(root_case())
    rests = [alone_on(family, cell(2, 2 + F(1, 2**k)), (F(3, 2), F(3, 2))) for k in range(4)]
    sizes = [found.course.rest[0] for found in rests if found is not None]
    assert len(sizes) == 4
    assert all(b < a / 3 for a, b in pairwise(sizes))


@pytest.mark.parametrize("low", ["0", "-1", "1/1000000000"])
def test_a_cell_with_a_fold_in_it_or_next_to_it_proves_nothing(low):
    """At p = 0 the two equilibria meet; a wide cell next to it holds both in any box about the plane."""
    assert alone_on(rest_family(root_case(low=low)), cell(low, 4), (F(3, 2), F(3, 2))) is None


def test_coordinates_that_do_not_move_are_exact():
    case = make_case(
        {"x": "v", "v": "p - x - x^3 - v"}, {"p": "1"}, {"x": (-3, 3), "v": (-1, 1)}, spread={"p": (0, 2)}
    )  # fmt: skip
    found = alone_on(rest_family(case), cell(F(1, 2), F(3, 2)), (F(2, 3), F(0)))
    assert found is not None
    assert (found.course.centre[1], found.course.slopes[1], found.course.rest[1]) == (0, (0,), 0)
    assert found.course.rest[0] > 0


def test_cells_that_touch_are_joined_only_on_one_branch():
    family = rest_family(root_case())
    upper, lower = (alone_on(family, cell(1, 2), (F(s), F(s))) for s in ("1.2", "-1.2"))
    beyond, apart = alone_on(family, cell(2, 3), (F("1.6"),) * 2), alone_on(family, cell(3, 4), (F("1.9"),) * 2)
    assert upper and lower and beyond and apart
    assert same_on(upper, beyond) is True
    assert same_on(lower, beyond) is False
    assert same_on(upper, apart) is None
    assert common(cell(1, 2), cell(3, 4)) is None


def test_a_branch_is_proved_and_tells_where_the_equilibrium_lies():
    case = root_case()
    finding, movement = check_branch(case, POINT, branch(case, *HALVES))
    assert (finding.result, finding.over) == ("proved", TOLERANCES)
    fact = finding.facts["x at rest"]
    assert F("0.9") < fact.lower <= 1 and 2 <= fact.upper < F("2.1")
    assert movement is not None
    place = movement.on(cell(F(3, 2), F(5, 2)))
    assert place is not None and place.course is not None
    assert all(b.lower**2 <= F(3, 2) and b.upper**2 >= F(5, 2) for b in place.state)
    assert movement.on(cell(F(1, 2), 2)) is None
    assert movement.on(cell(1, 2, "q")) is None


@pytest.mark.parametrize(
    ("cells", "changes"),
    [
        (HALVES[:1], {}),
        ((), {}),
        ((*HALVES[:1], (cell(2, 4), "-1.7")), {}),
        (((cell(1, 2), "-1.2"), (cell(2, 4), "-1.7")), {}),
        (((cell(0, 4), "1.5"),), {}),
        (HALVES, {"over": "nominal"}),
        (HALVES, {"model_hash": "0" * 64}),
        (HALVES, {"equilibrium": "x.E9"}),
        (((cell(1, 2, "q"), "1.2"), (cell(2, 4, "q"), "1.7")), {}),
    ],
    ids=[
        "a gap", "no cells", "two branches", "another branch", "beyond the box", "another scope", "another loop",
        "another point", "another parameter",
    ],
)  # fmt: skip
def test_a_damaged_branch_proves_nothing(cells, changes):
    case = root_case()
    finding, movement = check_branch(case, POINT, branch(case, *cells, **changes))
    assert finding.result != "proved" and movement is None and not finding.facts


def test_without_a_branch_only_a_fixed_equilibrium_is_known_elsewhere():
    assert Movement(POINT).on(cell(1, 2)) is None
    assert Movement(POINT).on(Box((), ())) is POINT
    fixed = replace(POINT, fixed_for_all=True)
    assert Movement(fixed).on(cell(1, 2)) is fixed


def test_the_way_to_a_combination_is_followed_as_far_as_the_branch_goes():
    """From p = 9/4 towards p = -9/4 the fold p = 0 is half of the way."""
    case = root_case(low="-9/4")
    way = follow(case, POINT, {"p": F(-9, 4)})
    assert F(45, 100) < way.reached < F(1, 2)
    there = place_at(case, POINT, {"p": F(1, 4)})
    assert there is not None
    assert all(abs(b.middle - F(1, 2)) <= b.radius < F(1, 10**14) for b in there.state)
    assert place_at(case, POINT, {"p": F(-9, 4)}) is None


@pytest.mark.parametrize(
    ("values", "expected"), [({"p": "-1/100"}, "proved"), ({"p": "1/100"}, "undecided"), ({"p": "-3"}, "undecided"),
                             ({}, "undecided"), ({"p": "-1/100", "q": "1"}, "undecided")],
)  # fmt: skip
def test_that_no_equilibrium_exists_is_proved_for_a_member_of_the_box(values, expected):
    case = root_case(low="-1")
    numbers = {n: F(v) for n, v in values.items()}
    claim = AbsenceClaim("point.N1", model_hash(case), TOLERANCES, "E", case.search, numbers, 0)
    assert check_absence(case, claim, 10_000).result == expected
    assert check_absence(case, replace(claim, search=box(("x", "y"), {"x": (0, 1), "y": (0, 1)})), 9).result != "proved"


def end(case, **changes):
    around = box(("x", "y"), {"x": ("-1/2", "1/2"), "y": ("-1/2", "1/2")})
    claim = EndClaim(
        "point.N2", model_hash(case), TOLERANCES, "E", POINT.identifier, {"p": F(-1, 20)}, F(95, 100), around
    )  # fmt: skip
    return replace(claim, **changes)


def test_the_end_of_a_branch_at_a_fold_is_proved():
    case = root_case(low="-1")
    assert check_end(case, POINT, end(case), 10_000).result == "proved"


@pytest.mark.parametrize(
    "changes",
    [
        {"values": {"p": F(1, 20)}},
        {"values": {"p": F(-2)}},
        {"share": F(1, 2)},
        {"share": F(999, 1000)},
        {"around": box(("x", "y"), {"x": ("1/20", "1/2"), "y": ("1/20", "1/2")})},
        {"around": box(("x", "y"), {"x": (2, 3), "y": (2, 3)})},
        {"around": box(("y", "x"), {"x": ("-1/2", "1/2"), "y": ("-1/2", "1/2")})},
        {"equilibrium": "x.E9"},
        {"over": "nominal"},
    ],
    ids=["before the fold", "outside the box", "too early", "too late", "left by the branch", "elsewhere",
         "other order", "another point", "another scope"],
)  # fmt: skip
def test_a_damaged_end_proves_nothing(changes):
    case = root_case(low="-1")
    assert check_end(case, POINT, end(case, **changes), 10_000).result != "proved"


def test_a_branch_that_leaves_through_a_face_has_not_ended():
    """x' = p - x crosses any box: nothing ends, whatever box is chosen on the way."""
    case = make_case({"x": "p - x"}, {"p": "0"}, {"x": (-9, 9)}, near=[0], spread={"p": (-5, 5)})
    around = box(("x",), {"x": (-1, 2)})
    claim = EndClaim("point.N2", model_hash(case), TOLERANCES, "E", POINT.identifier, {"p": F(4)}, F(1, 4), around)
    finding = check_end(case, equilibrium_at(0), claim, 10_000)
    assert {p.label: p.result for p in finding.premises}["faces"] == "undecided"
    assert finding.result != "proved"


def test_a_kink_that_ends_a_branch_is_an_end():
    """x' = |x| - p rests at x = p and x = -p for p >= 0 only: the branch ends at a kink, not at a smooth fold."""
    case = make_case({"x": "abs(x) - p"}, {"p": "1"}, {"x": (-3, 3)}, {"x": (-1, 1)}, near=[-1], spread={"p": (-1, 2)})
    around = box(("x",), {"x": ("-1/2", "1/2")})
    claim = EndClaim(
        "point.N2", model_hash(case), TOLERANCES, "E", POINT.identifier, {"p": F(-1, 20)}, F(9, 10), around
    )
    assert check_end(case, equilibrium_at(-1), claim, 10_000).result == "proved"


@pytest.mark.parametrize("quantity", ["x", "x*y", "x - y", "p*y", "1/(x + 1)"])
def test_a_quantity_at_a_moving_equilibrium_is_enclosed(quantity):
    case = root_case()
    found = alone_on(rest_family(case), cell(2, F(11, 5)), (F(3, 2), F(3, 2)))
    assert found is not None
    ball = range_along(case, POINT.along(found.course), formula(quantity))
    assert ball is not None
    exact = {"x": 0.5, "x*y": 1, "x - y": 0, "p*y": 1.5, "1/(x + 1)": None}[quantity]
    ends = [float(p) ** exact if exact else 0.0 for p in (2, 2.2)] if exact is not None else [
        1 / (float(p) ** 0.5 + 1) for p in (2, 2.2)
    ]  # fmt: skip
    assert float(ball.lower) <= min(ends) + 1e-12 and float(ball.upper) >= max(ends) - 1e-12
    assert float(ball.upper - ball.lower) < max(ends) - min(ends) + 0.03


def test_a_value_at_one_combination_is_sharp():
    case = root_case()
    there = place_at(case, POINT, {"p": F(4)})
    assert there is not None
    ball = value_at(at_combination(case, {"p": F(4)}), there, formula("x + p"))
    assert ball is not None and abs(ball.middle - 6) <= ball.radius < F(1, 10**13)
    assert isinstance(ball, Ball)
