"""One exact combination of the parameters: what it shows, and what a damaged one does not."""

from dataclasses import replace
from fractions import Fraction

import pytest
from linear_cases import with_spread
from loop_cases import equilibrium_at, loop_case

from dossier.checks.assess import assess
from dossier.checks.combination import BOUNDARY, OUTSIDE, check_combination, count_of
from dossier.judgement.points import judge_point
from dossier.model.case import NOMINAL, TOLERANCES, Case, Criterion, Quantity
from dossier.model.claim import CombinationClaim
from dossier.model.loop import model_hash
from dossier.model.region import Box, Interval

POINT = replace(equilibrium_at(0, 0), fixed_for_all=True)
EDGE, BEYOND, WITHIN = Fraction(2), Fraction(5, 2), Fraction(3, 2)


def oscillator() -> Case:
    """x'' + (2 - a) x' + x = 0: unstable beyond a = 2, on the boundary at a = 2 (Hurwitz 1895)."""
    case = loop_case({"x": "v", "v": "-x - (2 - a)*v"}, {}, {"a": "1"})
    case = replace(case, fixed=(Fraction(0), Fraction(0)))
    return with_spread(case, a=(0, 3))


def claim_at(case: Case, **values) -> CombinationClaim:
    numbers = {n: Fraction(v) for n, v in values.items()}
    return CombinationClaim("point.W-C1", model_hash(case), TOLERANCES, "", POINT.identifier, numbers)


def verdict(case: Case, claim: CombinationClaim, criterion: Criterion) -> str:
    case = replace(case, criteria=(criterion,))
    claim = replace(claim, model_hash=model_hash(case))
    found = assess(case, (claim,), 1000)
    return judge_point(case, found.about_criteria, (), None)[0].verdict


@pytest.mark.parametrize(
    ("value", "outside", "boundary"), [(WITHIN, 0, 0), (EDGE, 0, 2), (BEYOND, 2, 0)], ids=["within", "edge", "beyond"]
)
def test_the_eigenvalues_at_a_combination_are_counted_exactly(value, outside, boundary):
    case = oscillator()
    finding = check_combination(case, POINT, claim_at(case, a=value))
    assert (finding.result, finding.strength) == ("proved", "exact")
    assert (count_of(finding, OUTSIDE), count_of(finding, BOUNDARY)) == (outside, boundary)


@pytest.mark.parametrize(
    "damage",
    [
        lambda case: claim_at(case, a=4),
        claim_at,
        lambda case: claim_at(case, a=1, b=1),
        lambda case: replace(claim_at(case, a=1), model_hash="0" * 64),
        lambda case: replace(claim_at(case, a=1), over=NOMINAL),
        lambda case: replace(claim_at(case, a=1), equilibrium="point.E2"),
    ],
    ids=["outside of the spread", "incomplete", "another parameter", "another loop", "another scope", "another point"],
)
def test_what_is_no_combination_of_this_loop_shows_nothing(damage):
    case = oscillator()
    finding = check_combination(case, POINT, damage(case))
    assert finding.result != "proved" and not finding.facts


def test_a_point_that_moves_is_followed_to_the_combination():
    """x' = p - x - x^3 rests where p = x + x^3: at p = 2 in x = 1 with the slope -(1 + 3 x^2) = -4 (elementary)."""
    case = with_spread(loop_case({"x": "p - x - x^3"}, {}, {"p": "0"}), p=(0, 10))
    case = replace(case, near=(Fraction(0),))
    finding = check_combination(case, equilibrium_at(0), claim_at(case, p=2))
    assert (finding.result, finding.strength) == ("proved", "enclosed")
    rate = finding.facts["decay rate"]
    assert rate.lower <= 4 <= rate.upper and rate.upper - rate.lower < Fraction(1, 10**9)


def test_a_point_that_ceases_to_exist_on_the_way_shows_nothing():
    """x' = p - x^2 rests at -sqrt(p) and sqrt(p) for p >= 0 only (elementary)."""
    case = with_spread(loop_case({"x": "p - x^2"}, {}, {"p": "1"}), p=(-1, 1))
    finding = check_combination(case, equilibrium_at(1), claim_at(case, p=-1))
    assert finding.result != "proved" and not finding.facts


RATE = Quantity(Fraction(1, 10), 0, "1/s", "0.1 1/s")


@pytest.mark.parametrize(
    ("claim", "value", "over", "expected"),
    [
        ("asymptotic_stability", BEYOND, TOLERANCES, "refuted"),
        ("asymptotic_stability", EDGE, TOLERANCES, "refuted"),
        ("exponential_stability", EDGE, TOLERANCES, "refuted"),
        ("exponential_stability", WITHIN, TOLERANCES, "not established"),
        ("asymptotic_stability", BEYOND, NOMINAL, "not established"),
        ("attraction", BEYOND, TOLERANCES, "refuted"),
        ("attraction", BEYOND, NOMINAL, "not established"),
        ("attraction", WITHIN, TOLERANCES, "not established"),
    ],
)
def test_a_combination_refutes_what_it_violates_over_tolerances_and_nothing_else(claim, value, over, expected):
    case = oscillator()
    case = replace(case, region=Box(case.model.state_names, (Interval(Fraction(-1), Fraction(1)),) * 2))
    assert verdict(case, claim_at(case, a=value), Criterion("C1", claim, over)) == expected


@pytest.mark.parametrize(("value", "expected"), [("1.9", "refuted"), ("1.7", "not established")])
def test_a_rate_is_refuted_where_it_is_too_slow(value, expected):
    """The decay rate is (2 - a)/2: 0.05 or 0.15 where 0.1 is asked for."""
    case = oscillator()
    assert verdict(case, claim_at(case, a=value), Criterion("C1", "decay_rate", TOLERANCES, at_least=RATE)) == expected
