"""Criteria about equilibria that move, end to end; and what an incomplete or doubled evidence must not show."""

from dataclasses import replace
from fractions import Fraction

import pytest
from builders import box, make_case
from loop_cases import equilibrium_at, formula

from dossier.checks.assess import assess
from dossier.checks.cover import prove_decrease
from dossier.checks.equilibria import enclose_equilibria
from dossier.checks.linear import routh_claim
from dossier.checks.listing import list_equilibria
from dossier.checks.lyapunov import Ellipsoid, check_lyapunov
from dossier.evidence.provenance import Stopwatch
from dossier.judgement.points import judge_point
from dossier.model.case import NOMINAL, TOLERANCES, Case, Criterion, Quantity
from dossier.model.claim import BranchClaim, CombinationClaim, LyapunovClaim
from dossier.model.loop import model_hash
from dossier.pipeline import build_point
from dossier.search.effort import EFFORTS

F = Fraction


def quantity(value) -> Quantity:
    return Quantity(F(value), 0, "1", str(value))


def value(of="x", low=None, high=None, over=TOLERANCES) -> Criterion:
    bounds = {"at_least": None if low is None else quantity(low), "at_most": None if high is None else quantity(high)}
    return Criterion("C1", "equilibrium_value", over, of=formula(of), of_written=of, **bounds)


def asked(claim: str, over=TOLERANCES, **more) -> Criterion:
    return Criterion("C1", claim, over, **more)


def cubic(low="0", high="2", **more) -> Case:
    """x' = p - x - x^3 rests at one x for every p, 0 at p = 0 and 1 at p = 2 (elementary); its slope is at most -1."""
    return make_case(
        {"x": "p - x - x^3"}, {"p": "1"}, {"x": (-3, 3)}, {"x": ("-1/10", "1/10")}, near=["2/3"],
        spread={"p": (low, high)}, **more,
    )  # fmt: skip


def verdict(case: Case, criterion: Criterion) -> str:
    found = build_point(replace(case, criteria=(criterion,)), EFFORTS["quick"], lambda *_: None, Stopwatch())
    return found.outcomes[0].verdict


@pytest.mark.parametrize(
    ("criterion", "expected"),
    [
        (asked("existence"), "proved"),
        (asked("equilibria_listed"), "not established"),
        (value(low="-1/100", high="101/100"), "proved"),
        (value(high="99/100"), "refuted"),
        (value(low="1/100"), "refuted"),
        (value(of="p - x", low="-1/50"), "proved"),
        (value(of="x + x^3 - p", low="-1/1000", high="1/1000"), "proved"),
        (asked("asymptotic_stability"), "proved"),
        (asked("decay_rate", at_least=quantity("9/10")), "proved"),
        (asked("decay_rate", at_least=quantity("11/10")), "refuted"),
        (asked("attraction"), "proved"),
        (asked("excursion", of=formula("x"), of_written="x", at_most=quantity("6/5")), "proved"),
        (asked("excursion", of=formula("x"), of_written="x", at_most=quantity("1/2")), "refuted"),
    ],
    ids=lambda v: v if isinstance(v, str) else v.claim,
)
def test_criteria_about_a_moving_equilibrium(criterion, expected):
    found = verdict(cubic(), criterion)
    assert found == expected or (expected == "refuted" and found == "contradicted")


def test_an_equilibrium_that_ends_refutes_what_is_asked_over_tolerances_and_nothing_else():
    case = make_case(
        {"x": "p - x^2"}, {"p": "1"}, {"x": ("-1/2", 3)}, {"x": ("-1/10", "1/10")}, near=[1], spread={"p": (-1, 2)}
    )  # fmt: skip
    for criterion in (asked("existence"), asked("asymptotic_stability"), asked("attraction"), value(high=3)):
        assert verdict(case, criterion) == "refuted"
        assert verdict(case, replace(criterion, over=NOMINAL)) == "proved"


def test_a_parameter_that_varies_must_not_move_the_equilibrium():
    case = cubic()
    parameters = tuple(replace(p, varies=True, kind="range") for p in case.model.parameters)
    varying = replace(case, model=replace(case.model, parameters=parameters))
    for criterion in (
        asked("asymptotic_stability"),
        asked("attraction"),
        asked("decay_rate", at_least=quantity("1/2")),
    ):
        assert verdict(varying, criterion) not in ("proved", "refuted")


def test_that_no_equilibrium_exists_is_proved_at_nominal_only():
    case = make_case(
        {"x": "x^2 + p"}, {"p": "1"}, {"x": (-3, 3)}, spread={"p": (-1, 2)}, none_expected=True
    )  # fmt: skip
    assert verdict(case, asked("existence", NOMINAL)) == "proved"
    assert verdict(case, asked("existence")) == "not established"


def test_a_fixed_equilibrium_exists_for_every_combination():
    case = make_case({"x": "-p*x"}, {"p": "1"}, {"x": (-3, 3)}, fixed=[0], spread={"p": ("1/2", 2)})
    assert verdict(case, asked("existence")) == "proved"
    assert verdict(case, value(of="x", low="-1/2", high="1/2")) == "proved"


# --- evidence that is incomplete or doubled -----------------------------------------------------------


def bistable(near) -> Case:
    case = make_case({"x": "x - x^3"}, {}, {"x": (-2, 2)}, {"x": ("-1/10", "1/10")}, near=[near])
    criteria = (asked("asymptotic_stability", NOMINAL), replace(asked("attraction", NOMINAL), name="C2"))
    return replace(case, criteria=criteria)


def judged(case: Case, roots, boxes=1000) -> list[str]:
    counts = [routh_claim(case, e) for e in list_equilibria(case, roots)]
    found = assess(case, (roots, *counts), boxes)
    return [o.verdict for o in judge_point(case, found.about_criteria, (), found.missing)]


@pytest.mark.parametrize("near", ["0", "1/100"])
@pytest.mark.parametrize("complete", [True, False])
def test_a_list_that_leaves_the_nearest_equilibrium_out_chooses_no_other(near, complete):
    """x = 0 is unstable; with it left out, x = 1, which is stable, must not be judged in its place."""
    case = bistable(near)
    roots = enclose_equilibria(case, (), 1000)
    assert judged(case, roots)[0] == "refuted"
    upper = tuple(s for s in roots.solutions if s.enclosure[0].middle > F(1, 2))
    assert "proved" not in judged(case, replace(roots, solutions=upper, complete=complete))


def test_an_incomplete_list_serves_where_nothing_nearer_can_be():
    case = bistable("21/20")
    roots = enclose_equilibria(case, (), 1000)
    kept = tuple(s for s in roots.solutions if s.enclosure[0].middle > F(1, 2))
    assert judged(case, replace(roots, solutions=kept, complete=False))[0] == "proved"


def test_a_tie_between_two_equilibria_chooses_none():
    case = bistable("1/2")
    roots = enclose_equilibria(case, (), 1000)
    assert set(judged(case, roots)) == {"not established"}


def test_claims_that_share_an_identifier_are_refused():
    case = cubic()
    forged = BranchClaim("point.B1", model_hash(case), TOLERANCES, "E", "point.E1", ())
    other = CombinationClaim("point.B1", model_hash(case), TOLERANCES, "", "point.E1", {"p": F(1)})
    with pytest.raises(ValueError, match="same identifier"):
        assess(case, (forged, other), 1000)


# --- numbers at the ends of the range -----------------------------------------------------------------


@pytest.mark.parametrize("power", [299, 301, 303])
@pytest.mark.parametrize("level", [2, 4, 100])
def test_rates_near_the_end_of_the_doubles_prove_nothing_wrong(power, level):
    """x' = r (x^3 - x) has the basin |x| < 1, so no level of x^2 above 1 may be proved, whatever r is."""
    case = make_case({"x": "r*(x^3 - x)"}, {"r": str(10**power)}, {"x": (-2, 2)}, fixed=[0])
    one = ((F(1),),)
    shape = Ellipsoid(one, one, F(level), (F(level),))
    assert not prove_decrease(case, equilibrium_at(0), shape, 10_000).proved


def test_badly_scaled_coordinates_end_in_a_reason():
    case = make_case({"x": "-x", "y": "-2*y"}, {}, {"x": (-2, 2), "y": (-2, 2)}, fixed=[0, 0])
    a = F(10) ** 28
    p = ((a, a - F(1, 10)), (a - F(1, 10), a))
    determinant = p[0][0] * p[1][1] - p[0][1] ** 2
    inverse = tuple(tuple(v / determinant for v in row) for row in ((p[1][1], -p[0][1]), (-p[0][1], p[0][0])))
    verdict_ = prove_decrease(case, equilibrium_at(0, 0), Ellipsoid(p, inverse, F(1), (F(9), F(9))), 100)
    assert verdict_.proved or verdict_.reason


@pytest.mark.parametrize("order", [-1, 4, 10**6])
def test_an_order_of_expansion_beyond_all_bounds_is_refused_at_once(order):
    case = make_case({"x": "-sin(x)"}, {}, {"x": (-1, 1)}, fixed=[0])
    claim = LyapunovClaim(
        "point.V2", model_hash(case), NOMINAL, "T2", "x.E1", "quadratic", {(2,): F(1)}, F(1, 4), box((), {}), order, ()
    )  # fmt: skip
    point = equilibrium_at(0)
    assert check_lyapunov(case, point, replace(claim, equilibrium=point.identifier)).result != "proved"
