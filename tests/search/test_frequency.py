"""Guesses of crossings: complete, isolating and short; responses for figures against a direct computation."""

from fractions import Fraction
from itertools import pairwise
from math import pi

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from loop_cases import equilibrium_at, loop_case, transfer_loop

from dossier.checks.frequency import check_margins
from dossier.search.frequency import isolate, response, seek_crossings

ORIGIN = equilibrium_at(0, 0, 0)


def expanded(roots):
    result = np.array([Fraction(1)])
    for root in roots:
        result = np.convolve(result, [Fraction(1), -root])
    return [Fraction(v) for v in result[::-1]]


@given(st.lists(st.fractions(-4, 9, max_denominator=30), max_size=6))
def test_every_positive_root_lies_in_an_interval_of_its_own(roots):
    distinct = sorted({r for r in roots if r > 0})
    found = isolate(expanded(set(roots)))
    assert len(found) == len(distinct)
    for interval, root in zip(found, distinct, strict=True):
        assert 0 < interval.lower < root < interval.upper
    for left, right in pairwise(found):
        assert left.upper < right.lower


def test_roots_far_apart_in_size_are_isolated_by_short_numbers():
    roots = [Fraction(1, 10**9), Fraction(3), Fraction(10**9)]
    for interval, root in zip(isolate(expanded(roots)), roots, strict=True):
        assert interval.lower < root < interval.upper
        assert len(str(interval.lower)) + len(str(interval.upper)) < 40


def test_a_double_root_is_listed_once():
    assert len(isolate(expanded([Fraction(2), Fraction(2)]))) == 1


def test_the_guess_of_a_loop_says_what_was_tried():
    attempts, claim = seek_crossings(transfer_loop([3], [1, 3, 3, 1]), ORIGIN, "u")
    assert attempts[0].ending == "found"
    assert attempts[0].work == {"states": 3, "roots": 3}
    assert claim.identifier == "point.M-u"


def test_guesses_of_a_long_chain_are_complete():
    lags = expanded([Fraction(-k, 3) for k in range(1, 15)])[::-1]
    case, place = transfer_loop([lags[-1] / 2], lags), equilibrium_at(*[0] * 14)
    _, claim = seek_crossings(case, place, "u")
    assert check_margins(case, place, claim)[0].result == "proved"


def test_the_response_is_that_of_the_transfer_function():
    samples = response(transfer_loop([3], [1, 3, 3, 1]), ORIGIN, "u", 50)
    s = 1j * np.array(samples.frequency)
    assert np.allclose(np.array(samples.real) + 1j * np.array(samples.imaginary), 3 / (s + 1) ** 3, rtol=1e-9)
    assert len(samples.frequency) == 50
    assert samples.frequency[0] < 0.1 < 10 < samples.frequency[-1]


def test_the_response_of_a_sampled_loop_stays_below_half_the_sampling_frequency():
    case = loop_case({"x": "x/2 + u"}, {"u": "-x/4"}, sample_interval="1/100")
    samples = response(case, equilibrium_at(0), "u", 40)
    assert max(samples.frequency) < 100 * pi
    z = np.exp(1j * np.array(samples.frequency) / 100)
    assert np.allclose(np.array(samples.real) + 1j * np.array(samples.imaginary), 0.25 / (z - 0.5), rtol=1e-9)


@pytest.mark.parametrize("command", ["-abs(x)", "sat(1 - x, 1, 2)"])
def test_a_loop_at_a_kink_has_no_crossings_and_no_response(command):
    case = loop_case({"x": "-x + u"}, {"u": command})
    attempts, claim = seek_crossings(case, equilibrium_at(0), "u")
    assert claim is None
    assert attempts[0].ending == "out of reach"
    assert "kink" in attempts[0].remark
    assert response(case, equilibrium_at(0), "u", 10) is None
