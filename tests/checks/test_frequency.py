"""Checks of a loop's margins: closed forms, loops that have none, and damaged claims."""

from dataclasses import replace
from fractions import Fraction
from math import asin, log10, pi, sqrt

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from loop_cases import equilibrium_at, loop_case, transfer_loop

from dossier.checks.delays import MOST_SAMPLES
from dossier.checks.frequency import check_margins, outward
from dossier.model.ball import Ball
from dossier.model.claim import Crossing
from dossier.model.text import claim_from_data, claim_to_data
from dossier.search.frequency import seek_crossings

CUBE = transfer_loop([3], [1, 3, 3, 1])
ORIGIN = equilibrium_at(0, 0, 0)
RATE = st.fractions(Fraction(1, 4), 6, max_denominator=8)


def exact(*coefficients):
    return tuple(Ball(Fraction(v)) for v in coefficients)


def measure(case, equilibrium):
    attempts, claim = seek_crossings(case, equilibrium, "u")
    assert claim is not None, attempts
    return check_margins(case, equilibrium, claim)


def cube_claim():
    return seek_crossings(CUBE, ORIGIN, "u")[1]


def test_the_certificate_survives_writing_and_reading():
    claim = cube_claim()
    assert check_margins(CUBE, ORIGIN, claim_from_data(claim_to_data(claim)))[0].result == "proved"


def test_a_proved_finding_names_its_theorem_premises_and_quantities():
    finding, margins = check_margins(CUBE, ORIGIN, cube_claim())
    assert (finding.theorem, finding.result, finding.check, finding.strength) == ("T11", "proved", "exact", "enclosed")
    assert [p.label for p in finding.premises] == ["stable", "crossings", "crossings", "crossings", "crossings"]
    assert set(finding.facts) == {
        "gain up", "gain down", "phase", "phase lag", "phase lead", "delay", "peak sensitivity"
    }  # fmt: skip
    assert margins.evidence == finding.subject == "point.M-u"


@pytest.mark.parametrize("field", ["gain_crossings", "phase_crossings", "peak_candidates"])
def test_a_claim_that_leaves_out_a_crossing_proves_nothing_about_what_depends_on_it(field):
    finding, margins = check_margins(CUBE, ORIGIN, replace(cube_claim(), **{field: ()}))
    assert finding.result == "undecided"
    missing = {
        "gain_crossings": (margins.gain_up, margins.gain_down),
        "phase_crossings": (margins.phase, margins.delay),
        "peak_candidates": (margins.peak_sensitivity,),
    }
    for name, values in missing.items():
        assert all((v is None) == (name == field) for v in values)


@pytest.mark.parametrize(
    "damage",
    [
        {"model_hash": "0" * 64},
        {"equilibrium": "point.E2"},
        {"over": "tolerances"},
        {"theorem": "T1"},
        {"open_loop": exact(1, 3, 3, 2)},
        {"closed_loop": exact(1, 3, 3, 5)},
        {"closed_loop": exact(3, 3, 4)},
    ],
)
def test_a_claim_about_something_else_is_not_used(damage):
    finding, margins = check_margins(CUBE, ORIGIN, replace(cube_claim(), **damage))
    assert finding.result == "undecided"
    assert margins is None


@pytest.mark.parametrize("field", ["gain_crossings", "phase_crossings", "peak_candidates"])
@pytest.mark.parametrize("move", ["beside", "twice", "wide from zero"])
def test_a_crossing_that_is_moved_or_repeated_is_refused(field, move):
    claim = cube_claim()
    (crossing,) = getattr(claim, field)
    damaged = {
        "beside": (Crossing(crossing.upper, crossing.upper * 2),),
        "twice": (crossing, crossing),
        "wide from zero": (Crossing(Fraction(0), crossing.upper),),
    }[move]
    finding, _ = check_margins(CUBE, ORIGIN, replace(claim, **{field: damaged}))
    assert finding.result == "undecided"


def test_a_loop_on_the_stability_boundary_has_no_margins():
    # (s+1)^3 + 8 has the roots +-j sqrt 3
    finding, margins = measure(transfer_loop([8], [1, 3, 3, 1]), ORIGIN)
    assert finding.result == "refuted"
    assert margins is None


def test_a_pole_on_the_boundary_that_the_loop_cancels_is_a_closed_loop_pole():
    # c = a factor s^2 + 1 common with a: the closed loop keeps it
    finding, margins = measure(transfer_loop([1, 0, 1], [1, 2, 2, 2, 1]), equilibrium_at(0, 0, 0, 0))
    assert finding.result == "refuted"
    assert margins is None


def test_a_saturated_command_leaves_the_loop_open_and_the_finding_says_so():
    case = loop_case({"x": "-x + u"}, {"u": "sat(4 - 2*x, -1, 1)"})
    finding, margins = measure(case, equilibrium_at(1))
    assert finding.result == "proved"
    assert any("saturated at its upper limit" in p.detail for p in finding.premises)
    assert margins.gain_up.upper is margins.gain_down.lower is margins.phase.upper is margins.delay.upper is None
    assert margins.peak_sensitivity.lower == margins.peak_sensitivity.upper == 1


def test_a_claim_about_a_loop_without_a_linear_part_is_undecided():
    case = loop_case({"x": "-x + u"}, {"u": "-abs(x)"})
    claim = replace(cube_claim(), loop="u")
    finding, margins = check_margins(case, equilibrium_at(0), claim)
    assert finding.result == "undecided"
    assert "kink" in finding.premises[0].detail
    assert margins is None


def test_a_zero_of_the_loop_on_the_boundary_is_no_gain_crossing():
    # c = (s^2 + 1)/5: L(j) = 0 gives a root of Im(c conj a) without a crossing
    finding, margins = measure(transfer_loop([Fraction(1, 5), 0, Fraction(1, 5)], [1, 3, 3, 1]), ORIGIN)
    assert finding.result == "proved"
    assert reference_gain_up([0.2, 0, 0.2], [1, 3, 3, 1]) == pytest.approx(
        float("inf") if margins.gain_up.lower is None else 10 ** (float(margins.gain_up.lower) / 20), rel=1e-6
    )


def test_an_undamped_pole_of_the_open_loop_is_no_gain_crossing():
    # a = (s^2 + 1)(s + 1), c = s: stable for every k > 0, since a + k c = (s^2 + 1)(s + 1) + k s
    finding, margins = measure(transfer_loop([1, 0], [1, 1, 1, 1]), ORIGIN)
    assert finding.result == "proved"
    assert margins.gain_up.lower is margins.gain_down.upper is None


def reference_gain_up(numerator, denominator):
    """Least k > 1 with an eigenvalue on the imaginary axis, by bisection on numpy's roots."""

    def stable(k):
        return np.roots(np.polyadd(denominator, k * np.array(numerator))).real.max() < 0

    grid = np.geomspace(1, 1e6, 4000)
    first = next((i for i, k in enumerate(grid) if not stable(k)), None)
    if first is None:
        return float("inf")
    low, high = grid[first - 1], grid[first]
    for _ in range(60):
        middle = (low + high) / 2
        low, high = (middle, high) if stable(middle) else (low, middle)
    return low


@settings(max_examples=40)
@given(st.lists(RATE, min_size=2, max_size=4), RATE, RATE)
def test_the_loop_is_stable_inside_its_gain_margins_and_not_beyond(rates, gain, zero):
    opened = np.array([Fraction(1)])
    for rate in rates:
        opened = np.convolve(opened, [Fraction(1), rate])
    opened[-1] -= opened[-1] / 2 * 3  # makes the last coefficient negative: an unstable pole
    numerator = [gain * 4, gain * 4 * zero]
    case, place = transfer_loop(numerator, list(opened)), equilibrium_at(*[0] * len(rates))
    finding, margins = measure(case, place)
    assume(finding.result == "proved")
    a, c = np.array(opened, dtype=float), np.array(numerator, dtype=float)
    ends = [None if e is None else 10 ** (float(e) / 20) for e in (margins.gain_down.upper, margins.gain_up.lower)]
    low, high = ends[0] or 0.0, ends[1] or 1e3
    for k in np.linspace(low, high, 9)[1:-1]:
        assert np.roots(np.polyadd(a, k * c)).real.max() < 1e-9
    for end, beyond in ((ends[0], 0.99), (ends[1], 1.01)):
        if end is not None:
            assert np.roots(np.polyadd(a, end * beyond * c)).real.max() > 0


@settings(max_examples=40)
@given(st.lists(RATE, min_size=2, max_size=4), RATE, RATE)
def test_margins_meet_the_bounds_that_follow_from_the_peak_sensitivity(rates, gain, zero):
    # GM >= Ms/(Ms - 1), 1/GM_down <= Ms/(Ms + 1), PM >= 2 asin(1/(2 Ms)) (Skogestad and Postlethwaite, from memory)
    opened = np.array([Fraction(1)])
    for rate in rates:
        opened = np.convolve(opened, [Fraction(1), rate])
    finding, margins = measure(
        transfer_loop([gain * 5, gain * 5 * zero], list(opened)), equilibrium_at(*[0] * len(rates))
    )
    assume(finding.result == "proved")
    ms = float(margins.peak_sensitivity.upper)
    if margins.gain_up.upper is not None:
        assert float(margins.gain_up.upper) >= 20 * log10(ms / (ms - 1)) - 1e-9
    if margins.gain_down.lower is not None:
        assert float(margins.gain_down.lower) <= 20 * log10(ms / (ms + 1)) + 1e-9
    if margins.phase.upper is not None:
        assert float(margins.phase.upper) >= 2 * asin(1 / (2 * ms)) - 1e-12


@settings(max_examples=40)
@given(st.lists(RATE, min_size=2, max_size=4), RATE)
def test_at_the_delay_margin_a_root_lies_on_the_imaginary_axis(rates, gain):
    opened = np.array([Fraction(1)])
    for rate in rates:
        opened = np.convolve(opened, [Fraction(1), rate])
    numerator = [gain * opened[-1]]
    finding, margins = measure(transfer_loop(numerator, list(opened)), equilibrium_at(*[0] * len(rates)))
    assume(finding.result == "proved" and margins.delay.upper is not None)
    w, delay = float(margins.delay_at.lower), float(margins.delay.lower)
    value = np.polyval([float(v) for v in opened], 1j * w) + float(numerator[0]) * np.exp(-1j * w * delay)
    assert abs(value) < 1e-6 * float(numerator[0])


def test_outward_rounding_never_loses_a_bound_and_keeps_numbers_short():
    value = Fraction(2, 3)
    for lower, upper in ((value, value), (-value, -value), (value / 10**9, value * 10**9), (Fraction(0), Fraction(0))):
        rounded = outward(lower, upper, "1")
        assert rounded.lower <= lower <= upper <= rounded.upper
        assert max(len(str(rounded.lower)), len(str(rounded.upper))) < 60
    assert outward(None, value, "1").lower is None


def test_a_sampled_integrator_tolerates_the_whole_samples_of_the_closed_form():
    # z^m (z - 1) + k is stable for 0 < k < 2 sin(pi/(2(2 m + 1))) (S. A. Levin and R. M. May 1976, from memory)
    assert 2 * np.sin(pi / (2 * 9)) > 0.3 > 2 * np.sin(pi / (2 * 11))
    case = loop_case({"x": "x + u"}, {"u": "-3*x/10"}, sample_interval="1/50")
    finding, margins = measure(case, equilibrium_at(0))
    assert finding.result == "proved"
    assert margins.delay.lower == margins.delay.upper == Fraction(4, 50)
    assert margins.delay_at is None
    assert float(margins.gain_up.lower) == pytest.approx(20 * log10(2 / 0.3))
    assert float(margins.gain_up_at.lower) == pytest.approx(50 * pi)


def test_frequencies_are_those_of_the_crossing():
    _, margins = check_margins(CUBE, ORIGIN, cube_claim())
    assert float(margins.gain_up_at.lower) == pytest.approx(sqrt(3), abs=1e-12)
    assert margins.gain_down_at is None


def test_a_sampled_loop_of_gain_below_one_has_no_finite_delay_margin():
    case = loop_case({"x": "x/2 + u"}, {"u": "-x/4"}, sample_interval="1/50")
    finding, margins = measure(case, equilibrium_at(0))
    assert finding.result == "proved"
    assert margins.delay.lower is margins.delay.upper is None


def test_a_sampled_loop_that_tolerates_all_delays_tried_is_bounded_on_one_side():
    # the integrator above with k = 0.01: m = (pi/(2 asin(k/2)) - 1)/2 = 156 whole samples
    case = loop_case({"x": "x + u"}, {"u": "-x/100"}, sample_interval="1/50")
    _, margins = measure(case, equilibrium_at(0))
    assert margins.delay.lower == Fraction(MOST_SAMPLES, 50)
    assert margins.delay.upper is None


def test_an_equilibrium_enclosed_too_widely_leaves_stability_undecided():
    case = loop_case({"x": "-x^3 + u"}, {"u": "x^2"})
    place = equilibrium_at(Ball(Fraction(1), Fraction(1, 2)))
    _, claim = seek_crossings(case, place, "u")
    finding, margins = check_margins(case, place, claim)
    assert finding.result == "undecided"
    assert margins is None
