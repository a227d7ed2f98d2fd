"""The engineer's own V: proved or refuted as given, by intervals."""

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from builders import box, make_case
from loop_cases import equilibrium_at, formula

from dossier.checks.assess import assess
from dossier.checks.candidate import check_candidate, holds_region
from dossier.judgement.points import judge_point
from dossier.model.case import NOMINAL, TOLERANCES, Candidate, Case, Criterion, Quantity
from dossier.model.claim import CandidateClaim
from dossier.model.loop import model_hash
from dossier.search.candidate import quadratic_terms, seek_given

F = Fraction
ORIGIN = replace(equilibrium_at(0, 0), fixed_for_all=True)

PENDULUM = {"x": "y", "y": "-sin(x) - y"}
ENERGY = "1 - cos(x) + y^2/2 + x*y/4 + x^2/8"
"""V' = -3/4 y^2 - x sin(x)/4 along the damped pendulum (elementary): negative for |x| < pi."""


def given(equations=PENDULUM, function=ENERGY, level="1/2", domain=None, sampled=False) -> Case:
    names = tuple(equations)
    case = make_case(
        equations, {}, dict.fromkeys(names, (-2, 2)), dict.fromkeys(names, ("-1/4", "1/4")), fixed=[0] * len(names),
        domain=domain, sampled=sampled,
    )  # fmt: skip
    return replace(case, candidate=Candidate(formula(function), F(level), function))


def claim(case: Case, around=((-2, 2), (-2, 2)), against=(), **changes) -> CandidateClaim:
    names = case.model.state_names
    room = None if around is None else box(names, dict(zip(names, around, strict=True)))
    made = CandidateClaim(
        f"{case.name}.V-given", model_hash(case), NOMINAL, "T2", ORIGIN.identifier, case.candidate.level, room,
        tuple(map(F, against)),
    )  # fmt: skip
    return replace(made, **changes)


def result(case: Case, made: CandidateClaim) -> str:
    return check_candidate(case, ORIGIN, made, 200_000).result


@pytest.mark.parametrize(
    ("equations", "function", "level"),
    [
        (PENDULUM, ENERGY, "1/2"),
        ({"x": "-x + x^3", "y": "-y"}, "x^2 + y^4 + y^2", "9/10"),
        ({"x": "-x", "y": "-y"}, "exp(x^2 + y^2) - 1", "2"),
        ({"x": "-x + x*y", "y": "-y"}, "log(1 + x^2) + y^2", "1/2"),
    ],
    ids=["pendulum", "quartic", "exponential", "logarithm"],
)
def test_a_function_of_any_form_is_proved(equations, function, level):
    """The last: V' = -2 x^2 (1 - y)/(1 + x^2) - 2 y^2, negative for y < 1 (A. A. Ahmadi et al. 2011, its system)."""
    case = given(equations, function, level)
    assert result(case, claim(case)) == "proved"


@pytest.mark.parametrize(
    ("equations", "function", "level", "around", "failing"),
    [
        (PENDULUM, ENERGY, "1/2", ((-1, 1), (-1, 1)), "wall"),
        (PENDULUM, ENERGY, "1/2", ((1, 2), (-2, 2)), "box"),
        (PENDULUM, ENERGY, "5", ((-9, 9), (-9, 9)), "e"),
        (PENDULUM, "x^2 + y^2", "1/2", ((-2, 2), (-2, 2)), "e"),
        (PENDULUM, ENERGY + " + x/100", "1/2", ((-2, 2), (-2, 2)), "zero"),
        ({"x": "-x + x^3", "y": "-y"}, "x^2 + y^2", "101/100", ((-2, 2), (-2, 2)), "e"),
        ({"x": "x", "y": "-y"}, "x^2 + y^2", "1", ((-2, 2), (-2, 2)), "e"),
        ({"x": "-x", "y": "-y"}, "x^2 - y^2", "1", ((-2, 2), (-2, 2)), "e"),
        ({"x": "-sqrt(x + 1/2) + sqrt(1/2)", "y": "-y"}, "x^2 + y^2", "1", ((-2, 2), (-2, 2)), "e"),
    ],
    ids=["the box cuts the set", "the box leaves the point out", "beyond pi", "not falling", "not zero at rest",
         "beyond the basin", "unstable", "indefinite", "undefined in the set"],
)  # fmt: skip
def test_what_is_not_shown_is_not_proved(equations, function, level, around, failing):
    case = given(equations, function, level)
    finding = check_candidate(case, ORIGIN, claim(case, around), 200_000)
    assert finding.result == "undecided"
    assert failing in {p.label for p in finding.premises if p.result != "proved"}


@pytest.mark.parametrize(
    "changes",
    [
        {"model_hash": "0" * 64}, {"over": TOLERANCES}, {"equilibrium": "point.E9"}, {"level": F(1, 3)},
        {"around": None}, {"against": (F(1), F(0))},
    ],
    ids=["another loop", "another scope", "another point", "another level", "nothing", "both"],
)  # fmt: skip
def test_a_damaged_claim_shows_nothing(changes):
    case = given()
    assert result(case, replace(claim(case), **changes)) == "undecided"


def test_a_set_that_leaves_the_domain_is_not_proved():
    case = given(domain={"x": (-1, 1)})
    assert result(case, claim(case)) == "undecided"


def test_a_step_of_a_sampled_model_could_leave_the_box():
    case = given({"x": "x/2", "y": "y/2"}, "x^2 + y^2 + y^4", "1/2", sampled=True)
    assert result(case, claim(case, theorem="T3")) == "undecided"


@pytest.mark.parametrize(
    ("equations", "function", "level", "point", "expected"),
    [
        (PENDULUM, "x^2 + y^2", "1", ("1/2", "1/100"), "refuted"),
        ({"x": "-x + x^3", "y": "-y"}, "x^2 + y^2", "101/100", (1, 0), "refuted"),
        ({"x": "-x + x^3", "y": "-y"}, "x^2 + y^2", "99/100", (1, 0), "undecided"),
        ({"x": "-x + x^3", "y": "-y"}, "x^2 + y^2", "1", ("1/2", 0), "undecided"),
        ({"x": "-x", "y": "-y"}, "x^2 - y^2", "1", (0, "1/2"), "refuted"),
        ({"x": "-x", "y": "-y"}, "x^2 + y^2", "1", (0, 0), "undecided"),
        ({"x": "-x", "y": "-y"}, "x^2*(1 - x)^2 + y^2", "1/100", (1, 0), "undecided"),
        (PENDULUM, "1 - cos(x) + y^2/2", "1/2", ("1/10", 0), "refuted"),
    ],
    ids=["V rises", "V rests at the edge", "outside of the set", "V falls there", "V negative", "the equilibrium",
         "in another part of the set", "V rests where nothing moves"],
)  # fmt: skip
def test_a_counter_example_is_verified(equations, function, level, point, expected):
    case = given(equations, function, level)
    assert result(case, claim(case, None, point)) == expected


def test_a_point_outside_the_domain_refutes():
    case = given({"x": "-x", "y": "-y"}, "x^2 + y^2", "1", domain={"x": ("-1/2", "1/2")})
    assert result(case, claim(case, None, ("3/4", 0))) == "refuted"
    assert result(case, claim(case, None, ("1/4", 0))) == "undecided"


def test_a_region_lies_in_the_set_only_if_all_of_it_does():
    case = given({"x": "-x", "y": "-y"}, "x^2 + y^2", "1")
    around = claim(case).around
    for size, expected in (("7/10", True), ("71/100", False)):
        region = box(("x", "y"), {"x": (f"-{size}", size), "y": (f"-{size}", size)})
        assert holds_region(case, case.candidate, around, region) is expected
    far = box(("x", "y"), {"x": (-3, 3), "y": (0, 0)})
    assert not holds_region(case, case.candidate, around, far)


@pytest.mark.parametrize(
    ("criterion", "expected"),
    [
        (Criterion("C1", "attraction", NOMINAL), "proved"),
        (Criterion("C1", "asymptotic_stability", NOMINAL), "proved"),
        (Criterion("C1", "excursion", NOMINAL, of=formula("x"), of_written="x", at_most=Quantity(F(3), 0, "1", "3")),
         "proved"),
        (Criterion("C1", "excursion", NOMINAL, of=formula("x"), of_written="x", at_most=Quantity(F(1), 0, "1", "1")),
         "not established"),
        (Criterion("C1", "attraction", NOMINAL, region=box(("x", "y"), {"x": (-1, 1), "y": (-1, 1)})),
         "not established"),
    ],
    ids=["attraction", "stability", "excursion", "narrow excursion", "wide region"],
)  # fmt: skip
def test_criteria_rest_on_a_proved_candidate(criterion, expected):
    case = replace(given(), criteria=(criterion,))
    found = assess(case, (claim(case),), 200_000)
    assert judge_point(case, found.about_criteria, (), None)[0].verdict == expected


@pytest.mark.parametrize(
    ("function", "expected"),
    [("x^2 + x*y/2 + y^2", {(2, 0): F(1), (1, 1): F(1, 2), (0, 2): F(1)}), ("x^2 + y", None), ("x^4", None),
     ("1 - cos(x)", None), ("0*x^2", None)],
)  # fmt: skip
def test_quadratic_forms_are_told_from_other_functions(function, expected):
    assert quadratic_terms(given(function=function)) == expected


@pytest.mark.parametrize(("level", "expected"), [("1/2", "proved"), ("6", "refuted"), ("30", "refuted")])
def test_the_search_finds_what_can_be_said(level, expected):
    """At V = 6 the set reaches beyond x = pi, where another equilibrium rests: V does not fall there."""
    case = given(level=level)
    verified = lambda made: check_candidate(case, ORIGIN, made, 200_000).result != "undecided"  # noqa: E731
    _, found = seek_given(case, ORIGIN, (1.0, 1.0), verified)
    assert found is not None and result(case, found) == expected


def test_the_check_agrees_with_a_grid():
    """Random V and cubic loops: whatever is proved falls on a grid of the set (sampled in floating point)."""
    random = np.random.default_rng(5)
    proved = 0
    for _ in range(30):
        a, b, c, d = (F(int(v), 4) for v in random.integers(-8, 9, 4))
        case = given({"x": f"-x + ({a})*x^2*y", "y": f"-y + ({b})*x^3"}, f"x^2 + y^2 + ({c})*x^4 + ({d})*x*y^3", "1/2")
        if result(case, claim(case, ((-1, 1), (-1, 1)))) != "proved":
            continue
        proved += 1
        x, y = np.meshgrid(*[np.linspace(-1, 1, 81)] * 2)
        a, b, c, d = map(float, (a, b, c, d))
        v = x**2 + y**2 + c * x**4 + d * x * y**3
        w = (2 * x + 4 * c * x**3 + d * y**3) * (-x + a * x**2 * y) + (2 * y + 3 * d * x * y**2) * (-y + b * x**3)
        inside = (v <= 0.5) & ((x != 0) | (y != 0))
        assert (w[inside] < 0).all() and (v[inside] > 0).all()
    assert proved >= 3
