"""The interval witness of a decrease: proved below the critical level, never above it, on formulas as written."""

from dataclasses import replace
from fractions import Fraction

import pytest
from loop_cases import loop_case

from dossier.checks.cover import check_cover
from dossier.model.ball import Ball
from dossier.model.case import Case
from dossier.model.claim import CoverClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.loop import model_hash
from dossier.model.region import Box, Interval

F = Fraction
BOXES = 60_000


def at(*state) -> Equilibrium:
    return Equilibrium("point.E1", tuple(Ball(F(v)) for v in state), True, True, "stable", (), True)


def claim(case: Case, function, level) -> CoverClaim:
    theorem = "T3" if case.model.time == "sampled" else "T2"
    return CoverClaim("point.V2", model_hash(case), "nominal", theorem, "point.E1", function, F(level), 0)


def result(case: Case, equilibrium: Equilibrium, function, level, boxes=BOXES) -> str:
    return check_cover(case, equilibrium, claim(case, function, level), boxes).result


VAN_DER_POL = {(2, 0): F(3, 2), (1, 1): F(-1), (0, 2): F(1)}


@pytest.mark.parametrize(("level", "expected"), [("2.25", "proved"), ("2.30", "proved"), ("2.31", "undecided")])
def test_the_reversed_van_der_pol_level_stops_at_its_critical_value(level, expected):
    """B02: 2.304477565 is critical for Khalil's P (Nonlinear Systems, Example 8.9, from memory; computed)."""
    case = loop_case({"x": "-y", "y": "x - y + x^2*y"}, {})
    assert result(case, at(0, 0), VAN_DER_POL, level) == expected


@pytest.mark.parametrize(("level", "expected"), [("1.5395", "proved"), ("1.5397", "undecided")])
def test_hahns_system_stops_at_its_critical_value(level, expected):
    """A01: for V = |x|^2 the critical level is 8/(3 sqrt 3) = 1.5396007 (W. Hahn 1967, from memory; analytic)."""
    case = loop_case({"x": "-x + 2*x^2*y", "y": "-y"}, {})
    assert result(case, at(0, 0), {(2, 0): F(1), (0, 2): F(1)}, level) == expected


def pendulum() -> Case:
    return loop_case({"a": "w", "w": "-sin(a) - w"}, {})


def test_a_pendulum_is_proved_from_its_formula_and_not_beyond_its_upper_rest():
    """P solves A'P + PA = -I at the lower rest; the upper rest at a = pi has V = 3/2 pi^2 (closed form)."""
    function = {(2, 0): F(3, 2), (1, 1): F(1), (0, 2): F(1)}
    assert result(pendulum(), at(0, 0), function, 2) == "proved"
    assert result(pendulum(), at(0, 0), function, 15) == "undecided"


def test_a_sampled_model_is_judged_by_its_step():
    """A06: z -> z^2 on the unit disc, V(next) = V^2 (standard complex dynamics): every level below 1, none above."""
    case = loop_case({"x": "x^2 - y^2", "y": "2*x*y"}, {}, sample_interval="1")
    function = {(2, 0): F(1), (0, 2): F(1)}
    assert result(case, at(0, 0), function, "0.99") == "proved"
    assert result(case, at(0, 0), function, "1.01") == "undecided"


def test_a_shifted_irrational_equilibrium_is_carried_as_a_ball():
    """B12 (constructed): x = 2/sqrt 3, P = [[3,1],[1,3]]/16, critical level 0.24486."""
    case = loop_case({"x": "x - x^3 + y", "y": "x - 3*y"}, {})
    x = Ball(F("1.15470053837925152901829756100391491129520350254"), F(1, 10**40))
    y = Ball(F("0.38490017945975050967276585366797163709840116751"), F(1, 10**40))
    place = replace(at(0, 0), state=(x, y))
    function = {(2, 0): F(3, 16), (1, 1): F(1, 8), (0, 2): F(3, 16)}
    assert result(case, place, function, "0.244") == "proved"
    assert result(case, place, function, "0.246") == "undecided"


def test_nothing_is_proved_at_an_unstable_or_undamped_point():
    for equations in ({"x": "x"}, {"x": "0*x"}, {"x": "x^3"}):
        assert result(loop_case(equations, {}), at(0), {(2,): F(1)}, 1) == "undecided"
    oscillator = loop_case({"x": "v", "v": "-x"}, {})
    assert result(oscillator, at(0, 0), {(2, 0): F(1), (0, 2): F(1)}, 1, 5_000) == "undecided"


def test_a_kink_a_pole_or_the_edge_of_the_domain_inside_the_set_prevents_the_proof():
    kink = loop_case({"x": "-x - abs(x - 1)*x/10"}, {})
    assert result(kink, at(0), {(2,): F(1)}, "0.9") == "proved"
    assert result(kink, at(0), {(2,): F(1)}, "1.1", 5_000) == "undecided"
    pole = loop_case({"x": "-x/(2 - x)"}, {})
    assert result(pole, at(0), {(2,): F(1)}, 3) == "proved"
    assert result(pole, at(0), {(2,): F(1)}, "4.1", 5_000) == "undecided"
    plain = loop_case({"x": "-x"}, {})
    narrow = replace(plain, model=replace(plain.model, domain=Box(("x",), (Interval(F(-1), F(1)),))))
    assert result(narrow, at(0), {(2,): F(1)}, "0.99") == "proved"
    assert result(narrow, at(0), {(2,): F(1)}, 1) == "undecided"


def test_damaged_claims_and_spent_budgets_stay_undecided():
    case = pendulum()
    good = claim(case, {(2, 0): F(3, 2), (1, 1): F(1), (0, 2): F(1)}, 2)
    assert check_cover(case, at(0, 0), good, BOXES).result == "proved"
    assert check_cover(case, at(0, 0), good, 3).result == "undecided"
    for damaged in (
        replace(good, model_hash="0" * 64),
        replace(good, equilibrium="point.E2"),
        replace(good, level=F(0)),
        replace(good, function={(2, 0): F(-1), (0, 2): F(1)}),
        replace(good, function={(2, 0): F(1), (0, 2): F(1), (0, 4): F(1)}),
    ):
        assert check_cover(case, at(0, 0), damaged, BOXES).result == "undecided"
