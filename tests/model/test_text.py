"""Claims to canonical text and back, and what is refused on the way; short printed figures."""

import json
from dataclasses import replace
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from dossier.model.ball import Ball
from dossier.model.claim import (
    CoverClaim,
    Crossing,
    DecreaseWitness,
    Gram,
    LyapunovClaim,
    MatrixCell,
    MatrixClaim,
    RootsClaim,
    RouthClaim,
    SolutionBox,
    SturmClaim,
)
from dossier.model.figures import figure, span
from dossier.model.region import Box, Interval
from dossier.model.text import MalformedClaimError, canonical, claim_from_data, claim_to_data

F = Fraction
SIDE = Box(("k",), (Interval(F(1, 3), F(2)),))
GRAM = Gram(((1, 0), (0, 1)), ((F(1), F(0)), (F(0), F(7, 5))))
COMMON = ("point.X1", "ab" * 32, "nominal", "T2")
CLAIMS = [
    RootsClaim(*COMMON, SIDE, (SolutionBox(SIDE, (Ball(F(1), F(1, 9)),)),), (SIDE,), False, 17),
    MatrixClaim(*COMMON, "point.E1", "sector", F(1, 2), (MatrixCell(SIDE, ((F(2),),)),)),
    RouthClaim(*COMMON, "point.E1", (Ball(F(1)), Ball(F(-3, 7), F(1, 10**9))), ((1, 2), (3,)), 2, 0, 1),
    LyapunovClaim(
        *COMMON,
        "point.E1",
        "quadratic",
        {(0, 2): F(1), (2, 0): F(1, 3)},
        F(2),
        SIDE,
        1,
        (DecreaseWitness((0,), GRAM, GRAM),),
    ),
    CoverClaim(*COMMON, "point.E1", {(2,): F(5)}, F(1), 12),
    SturmClaim(*COMMON, "point.E1", "u", (Ball(F(1)),), (Ball(F(2)),), (Crossing(F(1), F(2)),), (), ()),
]


@pytest.mark.parametrize("claim", CLAIMS, ids=lambda c: type(c).__name__)
def test_a_claim_survives_its_text(claim):
    text = canonical(claim_to_data(claim))
    assert claim_from_data(json.loads(text)) == claim
    assert canonical(json.loads(text)) == text


@pytest.mark.parametrize("claim", CLAIMS, ids=lambda c: type(c).__name__)
def test_a_missing_or_unknown_field_is_refused(claim):
    data = claim_to_data(claim)
    for name in data:
        with pytest.raises(MalformedClaimError):
            claim_from_data({k: v for k, v in data.items() if k != name})
    with pytest.raises(MalformedClaimError):
        claim_from_data({**data, "extra": 1})


@pytest.mark.parametrize("value", [2.5, 2, "4/2", "0.5", "1/0", "", None, ["1"], "1 / 3", True])
def test_a_level_that_is_no_fraction_in_lowest_terms_is_refused(value):
    data = claim_to_data(CLAIMS[4])
    with pytest.raises(MalformedClaimError):
        claim_from_data({**data, "level": value})


def test_reordered_or_repeated_monomials_are_refused():
    data = claim_to_data(CLAIMS[3])
    first, second = data["function"]
    for function in ([second, first], [first, first], [first]):
        if function == [first]:
            assert claim_from_data({**data, "function": function}) != CLAIMS[3]
            continue
        with pytest.raises(MalformedClaimError):
            claim_from_data({**data, "function": function})


def test_floats_never_reach_a_certificate():
    with pytest.raises(TypeError):
        claim_to_data(replace(CLAIMS[4], level=0.5))


@given(st.fractions(-(10**9), 10**9, max_denominator=10**9), st.fractions(0, 10**6, max_denominator=10**6))
def test_printed_spans_hold_the_interval(lower, width):
    def read(text: str) -> Fraction:
        mantissa, _, power = text.replace("−", "-").partition(" × 10")
        digits = power.translate(str.maketrans("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "-0123456789"))
        return Fraction(mantissa) * Fraction(10) ** int(digits or 0)

    low, high = (read(part) for part in span(lower, lower + width).strip("[]").split(", "))
    assert low <= lower
    assert high >= lower + width


def test_figures_are_exact_where_short_and_marked_where_rounded():
    assert figure(F(1, 8)) == "0.125"
    assert figure(F(-3, 10**5)) == "−3 × 10⁻⁵"
    assert figure(F(1, 3)) == "≈ 0.333333"
    assert figure(F(0)) == "0"
