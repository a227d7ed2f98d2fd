"""Quadratic certificates found by search and accepted by the exact check."""

from dataclasses import replace
from fractions import Fraction

import pytest
from loop_cases import equilibrium_at, loop_case
from quadratic_cases import bounded_case, box, direct_current_bus, goal_of, press_slide, side_slabs

from dossier.checks.cover import check_cover
from dossier.checks.lyapunov import check_lyapunov, ellipsoid
from dossier.checks.sets import covers
from dossier.model.case import NOMINAL, TOLERANCES
from dossier.model.text import canonical, claim_to_data
from dossier.search.cover import seek_cover_candidate, unsaturated_slabs
from dossier.search.effort import EFFORTS
from dossier.search.goal import Goal, Slab
from dossier.search.level import slab_levels
from dossier.search.multipliers import bases, blocks
from dossier.search.quadratic import largest_level, seek_quadratic

F = Fraction
QUICK = EFFORTS["quick"]
DISC = {(2, 0): F(1), (0, 2): F(1)}


def origin(case):
    return equilibrium_at(*[0] * len(case.model.states))


def accepts(case, place):
    return lambda claim: check_lyapunov(case, place, claim).result == "proved"


def seek(case, place, over=NOMINAL, goal=None):
    return seek_quadratic(case, place, over, goal or goal_of(case, place), QUICK, "V2", accepts(case, place))


def level_of(case, function, goal=None, over=NOMINAL):
    place = origin(case)
    goal = goal or Goal(case.region, ())
    return largest_level(case, place, over, function, goal, QUICK, accepts(case, place))


def shape_of(case, claim):
    return ellipsoid(claim, len(case.model.states))


KNOWN_LEVELS = [
    # x1' = -x1 + 2 x1^2 x2, x2' = -x2: 8/(3 sqrt 3) (check value A01, Hahn 1967; level computed in closed form)
    ("hahn", {"x": "-x + 2*x^2*y", "y": "-y"}, DISC, F("1.539"), F("1.539600717839"), ""),
    # x' = -x + x^3: basin (-1, 1) (check value A02; elementary)
    ("cubic", {"x": "-x + x^3"}, {(2,): F(1)}, F("0.9999"), F(1), ""),
    # V' = 2V(V - 2) (check value A04; Slotine and Li, sec. 3.4, from memory)
    ("disc", {"x": "x*(x^2 + y^2 - 2) - 4*x*y^2", "y": "4*x^2*y + y*(x^2 + y^2 - 2)"}, DISC, F("1.9999"), F(2), ""),
    # z+ = z^2: basin is the unit disc (check value A06; standard complex dynamics)
    ("square", {"x": "x^2 - y^2", "y": "2*x*y"}, DISC, F("0.9999"), F(1), "1"),
    # x+ = x/2 + x^3: |x| < 1/sqrt 2 (check value A07 M1; fixed points on the boundary)
    ("map", {"x": "x/2 + x^3"}, {(2,): F(1)}, F("0.4999"), F(1, 2), "1"),
    # x+ = x - x^3: |x| < sqrt 2, multiplier exactly 1 (check value A07 M2; 2-cycle on the boundary)
    ("critical map", {"x": "x - x^3"}, {(2,): F(1)}, F("1.9999"), F(2), "1"),
]


@pytest.mark.parametrize(
    ("equations", "function", "least", "most", "interval"),
    [k[1:] for k in KNOWN_LEVELS],
    ids=[k[0] for k in KNOWN_LEVELS],
)
def test_the_largest_provable_level_of_a_given_function_meets_its_closed_form(
    equations, function, least, most, interval
):
    case = loop_case(equations, {}, sample_interval=interval)
    attempts, claim = level_of(case, function)
    assert claim is not None, attempts
    assert claim.method == "given"
    assert claim.theorem == ("T3" if interval else "T2")
    assert least <= claim.level < most
    assert check_lyapunov(case, origin(case), claim).result == "proved"


def test_the_textbook_function_of_the_reversed_van_der_pol_loop_reaches_its_textbook_level():
    """Check value B02: Khalil, Nonlinear Systems, 3rd ed., Example 8.9 (from memory): 2.25; 2.304477565 computed."""
    case = loop_case({"x": "-y", "y": "x - y + x^2*y"}, {})
    _, claim = level_of(case, {(2, 0): F(3, 2), (1, 1): F(-1), (0, 2): F(1)})
    assert claim is not None
    assert F("2.25") <= claim.level <= F("2.304477565015")


def test_the_given_function_is_left_as_it_is_and_slabs_bound_its_level():
    """x^2 + y^2 <= c within 3x + 4y <= 1/2 needs c <= (1/10)^2 (closed form)."""
    case = loop_case({"x": "-x", "y": "-y"}, {})
    slab = Slab((F(3), F(4)), None, F(1, 2), "3x + 4y")
    assert slab_levels(DISC, Goal(case.region, (slab,))) == (F(1, 100),)
    _, claim = level_of(case, DISC, Goal(case.region, (slab,)))
    assert claim is not None
    assert claim.function == DISC
    assert F("0.0099999") < claim.level < F(1, 100)


@pytest.mark.parametrize("function", [{(2, 0): F(1), (0, 2): F(-1)}, {(2, 0): F(1)}])
def test_a_given_function_that_is_not_positive_definite_is_no_candidate(function):
    attempts, claim = level_of(loop_case({"x": "-x", "y": "-y"}, {}), function)
    assert claim is None
    assert attempts[0].ending == "no candidate"


def test_a_function_that_rises_at_the_origin_has_no_level():
    """A = [[-1, 10], [0, -1]] is stable, but x^2 + y^2 rises along (1, 1): V' = 16."""
    attempts, claim = level_of(loop_case({"x": "-x + 10*y", "y": "-y"}, {}), DISC)
    assert claim is None
    assert attempts[0].ending == "no candidate"


def test_the_press_slide_is_proved_over_all_tolerances_within_its_limit():
    """The region with every parameter combination, e within 1.6 mm (invented scenario; sampled motions: 1.14 mm)."""
    case, place = press_slide()
    attempts, claims = seek(case, place, TOLERANCES)
    assert claims, attempts
    for claim in claims:
        finding = check_lyapunov(case, place, claim)
        assert finding.result == "proved"
        assert covers(shape_of(case, claim), case.region)
        assert F("0.00114") < shape_of(case, claim).half_widths[0] < F("0.0016")
    large, tight = claims
    assert tight.level == 1
    assert large.level > 1
    assert large.function == tight.function
    assert (large.identifier, tight.identifier) == ("point.V2", "point.V2-tight")
    assert len(large.decrease) == 32


@pytest.mark.parametrize(("power", "capacitance"), [("15000", "0.00047"), ("45000", "0.0022")])
def test_the_bus_is_proved_around_its_irrational_equilibrium(power, capacitance):
    case, place = direct_current_bus(power, capacitance)
    _, claims = seek(case, place)
    assert claims
    assert all(covers(shape_of(case, claim), case.region) for claim in claims)
    assert check_lyapunov(case, place, claims[0]).strength == "enclosed"


def test_an_unstable_point_gets_no_certificate_and_a_reason():
    """Full power on the small capacitor: the linear part has trace (P/v^2 - 1/Rb)/C - Rs/Ls > 0."""
    case, place = direct_current_bus("45000", "0.00047")
    attempts, claims = seek(case, place)
    assert not claims
    assert "not asymptotically stable" in attempts[0].remark


def test_a_rational_loop_is_proved_over_tolerances():
    """x' = -x/(1 + a x), a in [0, 0.6]: attraction for x > -1/a; the region keeps 1 + a x positive (closed form)."""
    case = bounded_case({"x": "-x/(1 + a*x)"}, {"x": ("-1", "1")}, {"a": ("0.3", "1")}, domain={"x": ("-1.6", "3")})
    _, claims = seek(case, origin(case), TOLERANCES)
    assert claims
    assert covers(shape_of(case, claims[0]), case.region)
    assert claims[0].over == TOLERANCES


def test_a_linear_loop_needs_no_multiplier():
    case = bounded_case({"x": "y", "y": "-2*x - 3*y"}, {"x": ("-1", "1"), "y": ("-1", "1")})
    _, claims = seek(case, origin(case))
    assert covers(shape_of(case, claims[0]), case.region)
    assert claims[0].decrease[0].multiplier.basis == ()


def test_a_region_beyond_the_basin_is_covered_in_part():
    """x' = -x + x^2: basin x < 1, so {V <= c} is within |x| < 1 and a third of [-3, 0.5] at most fits."""
    case = bounded_case({"x": "-x + x^2"}, {"x": ("-3", "0.5")})
    attempts, claims = seek(case, origin(case))
    (claim,) = claims
    assert F("0.999") < shape_of(case, claim).half_widths[0] < 1
    assert any(a.ending == "infeasible" for a in attempts)


@pytest.mark.parametrize(
    ("equations", "region"),
    [({"x": "-x^3"}, {"x": ("-1", "1")}), ({"x": "-x^3", "y": "-y + x^2"}, {"x": ("-1", "1"), "y": ("-1", "1")})],
)
def test_a_critical_linear_part_is_left_to_the_higher_terms(equations, region):
    """V = x^2 + y^2: V' = -2(x^4 - x^2 y + y^2) < 0 for all x, y but 0 (closed form; check value G01 for the first)."""
    case = bounded_case(equations, region)
    _, claims = seek(case, origin(case))
    assert claims
    assert check_lyapunov(case, origin(case), claims[0]).result == "proved"


def test_a_moving_equilibrium_is_out_of_reach_over_tolerances():
    case = bounded_case({"x": "k - x"}, {"x": ("-1", "1")}, {"k": ("1", "0.5")})
    attempts, claims = seek(case, equilibrium_at(1), TOLERANCES)
    assert not claims
    assert attempts[0].ending == "out of reach"


def test_a_limit_that_the_equilibrium_breaks_gets_no_certificate():
    case = bounded_case({"x": "-x"}, {"x": ("-1", "1")})
    slab = Slab((F(1),), F(1, 2), None, "x at least 0.5")
    attempts, claims = seek(case, origin(case), goal=Goal(case.region, (slab,)))
    assert not claims
    assert "x at least 0.5" in attempts[0].remark


def test_what_the_check_refuses_is_never_returned():
    case = bounded_case({"x": "-x + x^3"}, {"x": ("-0.5", "0.5")})
    place, short = origin(case), replace(QUICK, rounds=1, levels=2)
    _, claims = seek_quadratic(case, place, NOMINAL, goal_of(case, place), short, "V2", lambda claim: False)
    assert claims == ()


def test_a_linear_bound_of_an_excursion_is_kept():
    """x'' + 2x' + 5x = 0 from |x| <= 1, |x'| <= 1: |2x + x'| <= 4 must hold on the whole set."""
    case = bounded_case({"x": "y", "y": "-5*x - 2*y"}, {"x": ("-1", "1"), "y": ("-1", "1")})
    slab = Slab((F(2), F(1)), F(-4), F(4), "2x + y")
    _, claims = seek(case, origin(case), goal=Goal(case.region, (slab,)))
    assert claims
    for claim in claims:
        assert covers(shape_of(case, claim), case.region)
        assert min(slab_levels(claim.function, Goal(case.region, (slab,)))) > claim.level


def test_the_same_search_gives_the_same_bytes():
    case, place = direct_current_bus("15000", "0.00047")
    first, second = (seek(case, place)[1] for _ in range(2))
    assert [canonical(claim_to_data(c)) for c in first] == [canonical(claim_to_data(c)) for c in second]


def test_a_claim_about_one_loop_is_refused_for_another():
    case, place = press_slide()
    claim = seek(case, place)[1][0]
    parameters = tuple(
        replace(p, nominal=replace(p.nominal, middle=p.nominal.middle * 2)) if p.name == "k3" else p
        for p in case.model.parameters
    )
    other = replace(case, model=replace(case.model, parameters=parameters))
    assert check_lyapunov(other, place, claim).result == "undecided"


def test_bases_drop_monomials_that_nothing_can_balance():
    """x' = -x^3, V = x^2: 2 x^4 has no x^2, so x must go from both Grams."""
    main, multiplier = bases({(4,)}, {(2,)}, 1)
    assert main == ((2,),)
    assert multiplier == ()
    main, multiplier = bases({(2,), (4,)}, {(2,)}, 1)
    assert main == ((1,), (2,))
    assert multiplier == ((1,),)


def test_sign_symmetries_split_the_bases():
    """-V' of an odd field is even: linear and quadratic monomials do not couple; an even term couples them."""
    basis = ((1, 0), (0, 1), (2, 0), (1, 1), (0, 2))
    assert blocks(basis, {(2, 0), (1, 1), (4, 0)}, {(2, 0), (0, 2)}) == [[0, 1], [2, 3, 4]]
    assert blocks(basis, {(2, 0), (3, 0)}, {(2, 0), (0, 2)}) == [[0, 2, 4], [1, 3]]
    assert blocks(basis, {(2, 1), (1, 0)}, {(2, 0), (1, 1)}) == [[0, 1, 2, 3, 4]]


def seek_cover(case):
    place = origin(case)
    goal = Goal(case.region, side_slabs(case, case.limits))
    return seek_cover_candidate(
        case, place, goal, QUICK, "V2", lambda claim: check_cover(case, place, claim, QUICK.boxes).result == "proved"
    )


def test_a_pendulum_is_proved_by_gram_matrices_with_remainders_and_covered_by_boxes():
    case = bounded_case({"th": "w", "w": "-sin(th) - 0.5*w"}, {"th": ("-1", "1"), "w": ("-1", "1")})
    _, claims = seek(case, origin(case))
    assert claims and claims[0].expansion > 0
    assert covers(shape_of(case, claims[0]), case.region)
    assert shape_of(case, claims[0]).half_widths[0] < F("3.1416")
    attempts, claim = seek_cover(case)
    assert claim is not None, attempts
    assert covers(shape_of(case, claim), case.region)
    assert shape_of(case, claim).half_widths[0] < F("3.1416")  # the saddles lie at th = +-pi (closed form)


def test_a_saturating_loop_is_kept_where_no_limit_is_met():
    """sat(2x + y, -1, 1) stays free while |2x + y| < 1."""
    case = bounded_case(
        {"x": "-x + 0.3*sat(2*x + y, -1, 1)", "y": "-y - 0.5*sat(2*x + y, -1, 1)"},
        {"x": ("-0.2", "0.2"), "y": ("-0.2", "0.2")},
    )
    slabs = unsaturated_slabs(case, origin(case))
    assert {tuple(abs(w) for w in s.weights) for s in slabs} == {(F(2), F(1))}
    assert all(F("0.99999") < s.reach < 1 for s in slabs)
    _, claim = seek_cover(case)
    assert claim is not None
    assert covers(shape_of(case, claim), case.region)
    assert all(level > claim.level for level in slab_levels(claim.function, Goal(case.region, slabs)))


def test_an_unstable_loop_gets_no_cover():
    case = bounded_case({"th": "w", "w": "sin(th) - 0.5*w"}, {"th": ("-0.5", "0.5"), "w": ("-1", "1")})
    attempts, claim = seek_cover(case)
    assert claim is None
    assert all(a.ending != "found" for a in attempts)


def test_a_sampled_loop_is_sought_by_its_step():
    """z+ = z^2 on |x|, |y| <= 0.7: the corner has |z|^2 = 0.98 < 1 (check value A06)."""
    sides = {"x": ("-0.7", "0.7"), "y": ("-0.7", "0.7")}
    case = bounded_case({"x": "x^2 - y^2", "y": "2*x*y"}, sides, sample_interval="1")
    _, claims = seek(case, origin(case))
    assert covers(shape_of(case, claims[0]), box(("x", "y"), sides))
    assert claims[0].theorem == "T3"
