"""Saturated loops: certified where the set keeps off the limits, for every combination, and not beyond."""

from dataclasses import replace
from fractions import Fraction

import pytest
from loop_cases import equilibrium_at
from quadratic_cases import bounded_case

from dossier.checks.lyapunov import check_lyapunov
from dossier.evidence.provenance import Stopwatch
from dossier.model.case import NOMINAL, TOLERANCES, Criterion
from dossier.model.claim import LyapunovClaim
from dossier.model.expression import nodes
from dossier.model.loop import model_hash, vector_field
from dossier.pipeline import build_point
from dossier.search.effort import EFFORTS
from dossier.search.kinks import without_kinks

F = Fraction
ORIGIN = replace(equilibrium_at(0, 0), fixed_for_all=True)
LAW = {"x": "v", "v": "sat(-4*x - 4*v, -U, U)"}


def limited(limit=("1", "1/10"), region="1/10", equations=None):
    sides = dict.fromkeys(("x", "v"), (f"-{region}", region))
    case = bounded_case(equations or LAW, sides, {"U": limit})
    return replace(case, fixed=(F(0), F(0)), criteria=(Criterion("C1", "attraction", TOLERANCES),))


def built(case):
    return build_point(case, EFFORTS["quick"], lambda *_: None, Stopwatch())


def test_a_limited_law_is_proved_over_the_tolerance_of_its_limit():
    """|u| <= 4 (0.1 + 0.1) = 0.8 at the starts, below the least limit 0.9."""
    point = built(limited())
    assert [o.verdict for o in point.outcomes] == ["proved"]
    claim = next(c for c in point.claims if isinstance(c, LyapunovClaim))
    assert claim.over == TOLERANCES and claim.model_hash == model_hash(point.case)


def test_starts_at_which_the_limit_is_met_are_not_proved_by_that():
    point = built(limited(region="1/2"))
    assert [o.verdict for o in point.outcomes] != ["proved"]


def test_an_absolute_value_off_its_kink_is_certified():
    equations = {"x": "v", "v": "-4*x - v*abs(2 + v)"}
    point = built(limited(equations={**equations, "v": equations["v"] + " + 0*U"}))
    assert [o.verdict for o in point.outcomes] == ["proved"]


@pytest.mark.parametrize("level", [F(1), F(4)])
def test_the_check_asks_whether_the_limit_is_met_on_the_set_itself(level):
    """V with max |u| = 0.8 on V <= 1 by the support function; on V <= 4 it is 1.6, beyond the limit 0.9."""
    point = built(limited())
    claim = next(c for c in point.claims if isinstance(c, LyapunovClaim))
    larger = replace(claim, level=claim.level * level)
    finding = check_lyapunov(point.case, ORIGIN, larger)
    assert (finding.result == "proved") is (level == 1)


def test_loops_without_kinks_or_at_a_kink_are_left_alone():
    assert without_kinks(limited(equations={"x": "v", "v": "-x - v + 0*U"}), ORIGIN) is None
    assert without_kinks(limited(equations={"x": "v", "v": "-abs(x) - v + 0*U"}), ORIGIN) is None
    found = without_kinks(limited(), ORIGIN)
    assert found is not None
    smooth, distances = found
    assert len(distances) == 2
    assert not any(n.op == "sat" for e in vector_field(smooth).equations for n in nodes(e))
    assert NOMINAL != TOLERANCES
