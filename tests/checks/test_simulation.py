"""Campaigns that try to refute: models whose motions are known in closed form."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from math import exp, log, pi, sqrt

import numpy as np
import pytest
from loop_cases import equilibrium_at, formula, loop_case, transfer_loop

from dossier.checks.branch import moved_equilibria, newton
from dossier.checks.campaign import confidence_of
from dossier.checks.field import compile_field
from dossier.checks.portrait import figure_data
from dossier.checks.simulation import run_campaign
from dossier.checks.starts import boundary_points, polynomial_values
from dossier.checks.trial import STEPS
from dossier.model.case import Criterion, Quantity
from dossier.model.claim import LyapunovClaim
from dossier.model.loop import model_hash
from dossier.model.region import Box, Interval

SEED = 20_140


def quantity(value) -> Quantity:
    return Quantity(Fraction(str(value)), 0, "1", str(value))


def stated(case, region=None, limits=None, domain=None, criteria=(), spreads=None, signal_limits=None):
    """`case` with boxes given as name -> half width or (lower, upper)."""
    names = case.model.state_names
    parameters = tuple(
        replace(p, spread=interval(spreads[p.name]), kind="range") if p.name in (spreads or {}) else p
        for p in case.model.parameters
    )
    signals = tuple(
        replace(s, limits=interval(signal_limits[s.name])) if s.name in (signal_limits or {}) else s
        for s in case.model.signals
    )
    model = replace(case.model, domain=box(names, domain), parameters=parameters, signals=signals)
    return replace(case, model=model, region=box(names, region), limits=box(names, limits), criteria=tuple(criteria))


def interval(ends) -> Interval:
    lower, upper = ends if isinstance(ends, tuple) else (-ends, ends)
    return Interval(Fraction(str(lower)), Fraction(str(upper)))


def box(names, sides) -> Box:
    return Box.from_mapping(names, {n: interval(v) for n, v in (sides or {}).items()})


ATTRACTION = Criterion("C1", "attraction", "nominal")
KEPT = Criterion("C2", "limits_kept", "nominal")


def excursion(of, lower, upper, over="nominal"):
    return Criterion(
        "C3", "excursion", over, of=formula(of), of_written=of, between=(quantity(lower), quantity(upper))
    )  # fmt: skip


def only_finding(case, equilibrium, motions=40, claims=()):
    campaign, findings = run_campaign(case, equilibrium, claims, motions, SEED)
    (finding,) = findings
    return campaign, finding


ZETA = 0.3
OSCILLATOR = loop_case({"x": "v", "v": "-x - 2*(3/10)*v"}, {})
UNDERSHOOT = exp(-ZETA * pi / sqrt(1 - ZETA**2))
"""Of the damped oscillator released at 1: the largest swing to the other side (closed form)."""


def test_a_stable_linear_loop_survives_and_is_only_sampled():
    case = stated(OSCILLATOR, {"x": 1, "v": 1}, criteria=[ATTRACTION])
    campaign, finding = only_finding(case, equilibrium_at(0, 0))
    assert (finding.result, finding.strength, finding.check) == ("undecided", "sampled", "simulation")
    assert finding.facts["motions without violation"].lower == 44
    assert (campaign.motions, campaign.violations, campaign.inconclusive) == (44, 0, 0)
    assert "95 %" in campaign.confidence


def test_leaving_the_domain_contradicts_attraction_at_the_time_of_the_closed_form():
    case = stated(loop_case({"x": "x"}, {}), {"x": 1}, domain={"x": 10}, criteria=[ATTRACTION])
    campaign, finding = only_finding(case, equilibrium_at(0))
    assert (finding.result, finding.strength) == ("refuted", "floating")
    assert "motions without violation" not in finding.facts
    assert "leaves the domain" in finding.counter_example["event"]
    assert campaign.violations == campaign.motions
    assert float(finding.counter_example["time"].removesuffix(" s")) >= log(10) * 0.999


@pytest.mark.parametrize(("share", "result"), [(0.99, "refuted"), (1.001, "undecided")])
def test_an_undershoot_is_found_exactly_when_it_passes_the_bound(share, result):
    of_x = excursion("x", -UNDERSHOOT * share, 1.01)
    case = stated(OSCILLATOR, {"x": (0, 1), "v": (0, 0)}, criteria=[of_x])
    _, finding = only_finding(case, equilibrium_at(0, 0))
    assert finding.result == result
    assert float(finding.facts["range seen"].lower) == pytest.approx(-UNDERSHOOT, rel=2e-3)
    assert finding.facts["range seen"].upper == 1


def test_a_closed_bound_that_is_met_but_not_passed_is_kept():
    case = stated(loop_case({"x": "-x"}, {}), {"x": 1}, {"x": 1}, {"x": 1}, [KEPT])
    _, finding = only_finding(case, equilibrium_at(0))
    assert finding.result == "undecided"
    assert finding.facts["motions without violation"].lower == 42


def test_a_start_outside_the_limits_counts_at_time_zero():
    case = stated(loop_case({"x": "-x"}, {}), {"x": 2}, {"x": 1}, criteria=[KEPT])
    _, finding = only_finding(case, equilibrium_at(0))
    assert finding.result == "refuted"
    assert finding.counter_example["time"] == "0 s"


def test_a_signal_beyond_its_limits_contradicts_that_limits_are_kept():
    servo = loop_case({"x": "v", "v": "u"}, {"u": "-4*x - 2*v"})
    case = stated(servo, {"x": 1, "v": (0, 0)}, signal_limits={"u": 3}, criteria=[KEPT])
    _, finding = only_finding(case, equilibrium_at(0, 0))
    assert finding.result == "refuted"
    assert finding.counter_example["event"].startswith("u is ")


def test_coming_to_rest_at_another_equilibrium_contradicts_attraction():
    bistable = loop_case({"x": "x - x^3"}, {})
    case = stated(bistable, {"x": (-1.5, 0.5)}, criteria=[ATTRACTION])
    _, finding = only_finding(case, equilibrium_at(1))
    assert finding.result == "refuted"
    assert "x = -2" in finding.counter_example["event"]


def test_finite_escape_without_a_domain_contradicts_attraction():
    case = stated(loop_case({"x": "x^3 - x"}, {}), {"x": 2}, criteria=[ATTRACTION])
    _, finding = only_finding(case, equilibrium_at(0))
    assert finding.result == "refuted"
    assert "escapes" in finding.counter_example["event"]


def test_a_motion_that_is_carried_far_away_but_comes_back_contradicts_nothing():
    """Globally attractive, yet starts at (50, 50) are carried to 1e21: A. A. Ahmadi, M. Krstic, P. A. Parrilo, 2011."""
    case = stated(loop_case({"x": "x*y - x", "y": "-y"}, {}), {"x": 50, "y": 50}, criteria=[ATTRACTION])
    _, finding = only_finding(case, equilibrium_at(0, 0))
    assert finding.result == "undecided"
    assert not finding.counter_example


def test_exponential_growth_is_no_escape():
    """x' = x y - x with y' = 0: growth without end, but a simulation cannot tell it from one that ends."""
    case = stated(loop_case({"x": "x*y - x", "y": "-y/1000"}, {}), {"x": 1, "y": 3}, criteria=[ATTRACTION])
    _, finding = only_finding(case, equilibrium_at(0, 0))
    assert finding.result == "undecided"


def test_motions_on_a_limit_cycle_are_inconclusive_and_support_nothing():
    van_der_pol = loop_case({"x": "y", "y": "(1 - x^2)*y - x"}, {})
    case = stated(van_der_pol, {"x": 1, "y": 1}, criteria=[ATTRACTION])
    campaign, finding = only_finding(case, equilibrium_at(0, 0), motions=5)
    assert finding.result == "undecided"
    assert "motions without violation" not in finding.facts
    assert (campaign.violations, campaign.inconclusive, campaign.confidence) == (0, campaign.motions, "")


def test_regions_follow_the_equilibrium_of_each_combination():
    follower = loop_case({"x": "p - x"}, {}, {"p": "1"})
    kept = excursion("x", 0.4, 2.6, "tolerances")
    case = stated(follower, {"x": 0.5}, spreads={"p": (1, 2)}, criteria=[kept])
    _, finding = only_finding(case, equilibrium_at(1), motions=100)
    assert finding.result == "undecided"
    assert [float(v) for v in (finding.facts["range seen"].lower, finding.facts["range seen"].upper)] == [0.5, 2.5]
    broken = stated(follower, {"x": 0.5}, spreads={"p": (1, 2)}, criteria=[excursion("x", 0.4, 2.4, "tolerances")])
    _, finding = only_finding(broken, equilibrium_at(1), motions=100)
    assert finding.result == "refuted"
    assert finding.counter_example["combination"] == "p = 2"


def test_combinations_without_an_equilibrium_are_left_out_and_forbid_any_support():
    fold = loop_case({"x": "p - x^2"}, {}, {"p": "1"})
    case = stated(fold, {"x": 0.1}, spreads={"p": ("-1", 1)}, criteria=[replace(ATTRACTION, over="tolerances")])
    campaign, finding = only_finding(case, equilibrium_at(1), motions=100)
    assert "no equilibrium was found" in finding.statement
    assert "motions without violation" not in finding.facts
    assert (campaign.violations, campaign.confidence) == (0, "")


def test_a_nominal_criterion_never_sees_other_parameters():
    growing = loop_case({"x": "(p - 2)*x"}, {}, {"p": "1"})
    case = stated(growing, {"x": 1}, domain={"x": 4}, spreads={"p": (1, 3)}, criteria=[ATTRACTION])
    fixed = replace(equilibrium_at(0), fixed_for_all=True)
    assert only_finding(case, fixed)[1].result == "undecided"
    over = replace(case, criteria=(replace(ATTRACTION, over="tolerances"),))
    finding = only_finding(over, fixed)[1]
    assert finding.result == "refuted"
    assert finding.counter_example["combination"] == "p = 3"


def test_sampled_loops_are_iterated_and_speak_of_samples():
    doubling = stated(
        loop_case({"x": "2*x"}, {}, {"T": "1/10"}, "T"), {"x": 1}, domain={"x": 100}, criteria=[ATTRACTION]
    )
    finding = only_finding(doubling, equilibrium_at(0))[1]
    assert finding.result == "refuted"
    assert finding.counter_example["time"] == "sample 7"
    halving = stated(loop_case({"x": "x/2"}, {}, {"T": "1/10"}, "T"), {"x": 1}, domain={"x": 1}, criteria=[ATTRACTION])
    assert only_finding(halving, equilibrium_at(0))[1].facts["motions without violation"].lower == 42


def test_the_same_seed_gives_the_same_campaign_and_another_seed_another_one():
    case = stated(loop_case({"x": "-x"}, {}), {"x": (0.5, 1)}, criteria=[excursion("(x - 77/100)^2", -9, 9)])
    first, again = (run_campaign(case, equilibrium_at(0), (), 20, 3) for _ in range(2))
    assert first == again
    assert run_campaign(case, equilibrium_at(0), (), 20, 4)[1][0].facts != first[1][0].facts


def quadratic_claim(case, level, function):
    return LyapunovClaim(
        "point.V2", model_hash(case), "nominal", "T2", "point.E1", "quadratic",
        {k: Fraction(v) for k, v in function.items()}, Fraction(level), Box((), ()), 0, (),
    )  # fmt: skip


def test_v_falls_along_motions_from_the_boundary_of_a_true_set():
    case = loop_case({"x": "-x", "y": "-2*y"}, {})
    claim = quadratic_claim(case, 1, {(2, 0): 1, (0, 2): 3})
    _, finding = only_finding(case, equilibrium_at(0, 0), claims=[claim])
    assert (finding.subject, finding.result, finding.strength) == ("point.V2", "undecided", "sampled")


def test_a_function_that_rises_along_a_stable_motion_is_caught():
    case = loop_case({"x": "-x + 10*y", "y": "-y"}, {})
    claim = quadratic_claim(case, 1, {(2, 0): 1, (0, 2): 1})
    _, finding = only_finding(case, equilibrium_at(0, 0), claims=[claim])
    assert (finding.result, finding.strength) == ("refuted", "floating")
    assert finding.counter_example["event"].startswith("V rises")


def test_boundary_points_lie_on_the_level_set_even_of_a_quartic():
    function = {(2, 0): Fraction(1), (0, 2): Fraction(2), (4, 0): Fraction(1, 3), (2, 2): Fraction(1)}
    points = boundary_points(function, 1.5, np.array([1.0, 1e-3]), 50, np.random.default_rng(0))
    assert points.shape == (2, 50)
    assert polynomial_values(function, points) == pytest.approx(np.full(50, 1.5), rel=1e-12)


def test_a_stiff_loop_costs_bounded_work_and_stays_inconclusive():
    case = stated(loop_case({"x": "-10000000*x", "y": "-y"}, {}), {"x": 1, "y": 1}, criteria=[ATTRACTION])
    campaign, finding = only_finding(case, equilibrium_at(0, 0), motions=2)
    assert campaign.inconclusive == campaign.motions
    assert finding.result == "undecided"
    assert STEPS <= 10_000


def test_criteria_under_disturbances_and_unbounded_regions_are_not_simulated():
    disturbed = replace(ATTRACTION, under="disturbances")
    case = stated(OSCILLATOR, {"x": 1, "v": 1}, criteria=[disturbed])
    assert run_campaign(case, equilibrium_at(0, 0), (), 10, SEED) == (None, ())
    unbounded = stated(OSCILLATOR, {"x": 1}, criteria=[ATTRACTION])
    assert run_campaign(unbounded, equilibrium_at(0, 0), (), 10, SEED) == (None, ())


@pytest.mark.parametrize(("draws", "percent"), [(100, "2.96"), (480, "0.63"), (1000, "0.3"), (10_000, "0.03")])
def test_confidence_follows_the_binomial_bound_rounded_up(draws, percent):
    # 1 - 0.05^(1/N): 2.951 %, 0.6222 %, 0.2991 %, 0.02995 % (closed form), rounded up to two decimals
    assert f"fewer than {percent} %" in confidence_of(draws)


def test_newton_follows_an_equilibrium_around_its_branch():
    case = loop_case({"x": "p - x^3 - x"}, {}, {"p": "2"})
    targets = np.array([[2.0, 10.0, 30.0]])
    states, found = moved_equilibria(
        compile_field(case), np.ones((1, 3)), np.array([2.0]), targets, np.ones(1), sampled=False
    )
    assert found.all()
    assert states[0] == pytest.approx([1.0, 2.0, 3.0], rel=1e-12)


def test_newton_says_when_there_is_no_equilibrium():
    case = loop_case({"x": "x^2 + 1"}, {})
    _, found = newton(compile_field(case), np.array([[0.7]]), np.zeros((0, 1)), np.ones(1), sampled=False)
    assert not found[0]


CHAIN = stated(
    loop_case({"a": "-a + 5*c", "b": "-b + a", "c": "-c"}, {"u": "-c"}), {"a": 1, "b": 1, "c": 1}, {"a": 2},
    criteria=[ATTRACTION],
)  # fmt: skip


def test_the_plane_shown_pairs_the_limited_state_with_the_one_that_drives_it():
    data = figure_data(CHAIN, equilibrium_at(0, 0, 0), ())
    assert data.plane == ("a", "c")


def test_figure_motions_start_where_they_should_and_end_near_rest():
    claim = quadratic_claim(OSCILLATOR, 1, {(2, 0): 1, (1, 1): Fraction(3, 10), (0, 2): 1})
    case = stated(OSCILLATOR, {"x": 0.5, "v": 0.5}, criteria=[ATTRACTION])
    data = figure_data(case, equilibrium_at(0, 0), [claim])
    starts = np.array([t.offsets[0] for t in data.trajectories])
    assert {tuple(abs(s)) for s in starts[:4]} == {(0.5, 0.5)}
    assert polynomial_values(claim.function, starts[4:].T) == pytest.approx(np.ones(8), rel=1e-9)
    assert all(max(abs(v) for v in t.offsets[-1]) < 1e-3 for t in data.trajectories)
    x, y, dx, dy = np.array(data.flow).T
    assert dx == pytest.approx(y) and dy == pytest.approx(-x - 0.6 * y)


def test_a_frequency_response_is_that_of_the_transfer_function():
    case = transfer_loop([3], [1, 3, 3, 1])
    case = replace(case, criteria=(Criterion("C1", "gain_margin", "nominal", loop="u", at_least=quantity(6)),))
    ((loop, samples),) = figure_data(case, equilibrium_at(0, 0, 0), ()).responses
    assert loop == "u"
    for omega, real, imaginary in samples:
        assert complex(real, imaginary) == pytest.approx(3 / (1j * omega + 1) ** 3, rel=1e-9, abs=1e-12)


def test_a_single_state_has_no_plane():
    assert figure_data(loop_case({"x": "-x"}, {}), equilibrium_at(0), ()) is None


def test_two_states_are_shown_as_they_come():
    data = figure_data(stated(OSCILLATOR, {"x": 1, "v": 1}), equilibrium_at(0, 0), ())
    assert data.plane == ("x", "v")


@pytest.mark.parametrize(("reach", "result"), [(0.7, "sampled"), (0.71, "floating")])
def test_a_loop_whose_multipliers_are_zero_is_followed_for_some_samples(reach, result):
    """z+ = z^2 attracts exactly the unit disc; the corners of the square lie at 0.99 or 1.004."""
    equations = {"x": "x^2 - y^2", "y": "2*x*y"}
    case = stated(loop_case(equations, {}, sample_interval="1"), {"x": reach, "y": reach}, criteria=[ATTRACTION])
    _, finding = only_finding(case, equilibrium_at(0, 0))
    assert finding.strength == result
