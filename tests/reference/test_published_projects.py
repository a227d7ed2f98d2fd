"""Whole project files of published systems: verdicts and printed values against their sources.

The sources stand at each model of ``projects/*.yaml`` and beside the expectations here.
"""

import math
from fractions import Fraction
from functools import lru_cache
from pathlib import Path

import pytest

from dossier.evidence.provenance import Stopwatch
from dossier.model.dossier import PointEvidence
from dossier.pipeline import build_point
from dossier.project.reader import Project, read_project
from dossier.search.effort import EFFORTS

FOLDER = Path(__file__).parent / "projects"

SHORT = {
    "p": "proved", "r": "refuted", "c": "contradicted", "s": "supported", "n": "not established",
    "a": "not attempted", "x": "not applicable",
}  # fmt: skip


@lru_cache
def project(name: str) -> Project:
    found = read_project(FOLDER / f"{name}.yaml")
    assert isinstance(found, Project), found
    return found


@lru_cache
def point(file: str, name: str) -> PointEvidence:
    case = next(c for c in project(file).cases if c.name == name)
    return build_point(case, EFFORTS["quick"], lambda *_: None, Stopwatch())


def verdicts(file: str, name: str) -> dict[str, str]:
    return {o.identifier.rpartition(".")[2]: o.verdict for o in point(file, name).outcomes}


def value(file: str, name: str, criterion: str) -> tuple[Fraction, Fraction]:
    outcome = next(o for o in point(file, name).outcomes if o.identifier == f"{name}.{criterion}")
    assert outcome.value is not None and outcome.value.lower is not None and outcome.value.upper is not None
    return outcome.value.lower, outcome.value.upper


def slow(*values):
    return pytest.param(*values, marks=pytest.mark.slow)


EXPECTED = {
    "one_state": [
        # A02: the basin of x' = -x + x^3 is (-1, 1), so 0.99 is inside, 1 is an equilibrium, 1.01 escapes.
        ("cubic_well_inside", "ppp", "u s u"),
        ("cubic_well_border", "prp", "u s u"),
        ("cubic_well_beyond", "pcp", "s"),
        ("cubic_well_rim", "rrp", "u s u"),
        # G01: x' = -x^3 is asymptotically stable, x' = x^3 and x' = x^2 are not; the linear part decides none.
        ("cube_falls", "ppn", "?"),
        ("cube_rises", "nnn", "?"),
        ("half_stable", "ncn", "?"),
        ("half_stable_one_side", "nnn", "?"),
        # x+ = x/2 + x^3 attracts |x| < 0.70711, its multiplier is 1/2; x+ = x - x^3 attracts |x| < 1.41421.
        ("map_one_inside", "pppp", "u s u"),
        ("map_one_beyond", "pcpp", "s"),
        slow("map_two_inside", "ppnr", "?"),
        slow("map_two_beyond", "pcnr", "?"),
    ],
    "planar": [
        # A01: x y < 1 is the basin; the corners at 0.8 lie inside, at 1.05 outside.
        ("hahn_inside", "ppp", "s"),
        ("hahn_beyond", "pcp", "s"),
        # A04: the open disc of radius sqrt 2 is the basin; its circle holds four equilibria.
        ("disc_inside", "ppp", "u u s u u"),
        ("disc_beyond", "pcp", "u u s u u"),
        # B02: reversed Van der Pol; the limit cycle passes within 2.1 of the origin.  Decay and damping are exactly
        # 1/2, so that a proof of "at least 1/2" by a strict inequality cannot be had.
        ("van_der_pol", "pppnnp", "s"),
        ("van_der_pol_beyond", "pcp", "s"),
        ("chesi", "ppp", "s u"),
        slow("chesi_saddle", "rrp", "s u"),
        slow("chesi_beyond", "prp", "s u"),
        ("node", "ppp", "s u s"),
        ("node_saddle", "rrp", "s u s"),
        ("node_far", "ppp", "s u s"),
        ("node_beyond", "prp", "s u s"),
        ("bistable", "ppp", "s u s"),
        ("bistable_middle", "rrp", "s u s"),
        ("bistable_beyond", "prp", "s u s"),
        ("sines", "ppp", "s u s u s"),
        ("sines_beyond", "prpa", "s u s u s"),
        # D01: attracts everything, but motions go far away first and no polynomial shows it.
        ("no_polynomial_near", "pppa", "s"),
        ("no_polynomial_far", "pnp", "s"),
        ("parrilo", "ppp", "s"),
        # Stable, but no quadratic function shows it; nothing may be refuted either.
        ("quartic", "nnn", "?"),
        ("centre_manifold", "nnn", "?"),
        ("focus_falls", "ppn", "?"),
        ("focus_rises", "nnn", "?"),
        slow("transition_smooth_5", "pcp", "s"),
        slow("transition_abs_5", "ncn", "?"),
    ],
    "three_states": [
        ("weak_lorenz", "ppp", "s"),
        # C. Sparrow 1982 (from memory): C+ and C- are stable below rho = 470/19 = 24.7368421.
        ("lorenz_below", "pp", "s u s"),
        ("lorenz_above", "rp", "u u u"),
        ("lorenz_chaos", "rrp", "u u u"),
        ("flight", "ppp", "s"),
        slow("flight_beyond", "pcp", "s"),
        slow("chain", "pppp", "s"),
        slow("chain_beyond", "pcp", "s"),
    ],
    "linear": [
        ("khalil", "pnrp", "s"),
        # E02 to E04: 14/9, 1386 and 7.5 are on the boundary exactly.
        ("ogata_below", "p", "s"),
        ("ogata_above", "r", "u"),
        ("ogata_zero", "r", "?"),
        ("nise_below", "p", "s"),
        ("nise_limit", "r", "?"),
        ("nise_above", "r", "u"),
        ("franklin_above", "p", "s"),
        ("franklin_limit", "r", "?"),
        ("franklin_below", "r", "u"),
        ("nise_range", "p", "s"),
        ("nise_range_beyond", "r", "s"),
        # E17: 0.1 * 3 = 0.3 in decimals, so two roots are on the axis; binary doubles put them inside.
        ("marginal", "rrn", "?"),
        # E16 and E12: twenty and twelve ill-conditioned eigenvalues, all proved on their side.
        ("wilkinson", "p", "s"),
        ("frank", "ppr", "s"),
        ("frank_unstable", "r", "u"),
        ("kundur_none", "rr", "?"),
        ("kundur_damped", "pp", "s"),
        ("kundur_undamped", "rr", "u"),
        # E05 and E07: bounds one printed digit on either side of the exact margins.
        ("three_lags", "pprprprnrp", "s"),
        ("type_one", "pprpr", "s"),
        ("type_one_high", "rxxxx", "u"),
    ],
    "equilibria": [
        # F01: cold and hot states stable, the middle one a saddle.
        ("reactor_cold", "ppp", "s u s"),
        ("reactor_middle", "rrp", "s u s"),
        ("reactor_hot", "ppp", "s u s"),
        # F03: 26.388 and 146.838 degrees.
        ("swing", "ppp", "s u"),
        ("swing_after", "rpp", "s u"),
        # F04: four minima, four saddles, one maximum.  F05: six minima, seven saddles, two maxima.
        ("himmelblau", "ppp", "s u s u u u s u s"),
        ("camel", "ppp", "s u s u u u s u s u u u s u s"),
        ("camel_hill", "rrp", "s u s u u u s u s u u u s u s"),
    ],
    "sampled": [
        ("square_inside", "ppp", "s u"),
        ("square_beyond", "pcp", "s u"),
        # H01: both fixed points are saddles.
        ("henon", "rrp", "u u"),
        # H04: (1 - 1/e)/(1 - 2/e) = 2.392211191177; the printed 2.3925 is unstable.
        ("servo_below", "pp", "s"),
        ("servo_printed", "rr", "u"),
        slow("servo_just_below", "pp", "s"),
        slow("servo_just_above", "rr", "u"),
        ("servo_margin", "ppr", "s"),
    ],
}


def cases():
    for file, rows in EXPECTED.items():
        for row in rows:
            marks = row.marks if hasattr(row, "marks") else ()
            name, *rest = row.values if hasattr(row, "values") else row
            yield pytest.param(file, name, *rest, marks=marks, id=name)


@pytest.mark.parametrize(("file", "name", "expected", "classes"), list(cases()))
def test_the_verdicts_are_those_the_source_calls_for(file, name, expected, classes):
    assert list(verdicts(file, name).values()) == [SHORT[c] for c in expected]
    found = [e.stability for e in point(file, name).equilibria]
    assert found == [{"s": "stable", "u": "unstable", "?": "undecided"}[c] for c in classes.split()]


NEVER_PROVED = ("transition_5", "transition_10", "transition_25", "transition_50")


@pytest.mark.parametrize("name", NEVER_PROVED)
def test_thresholds_of_transition_from_which_motions_do_not_return_are_never_proved(name):
    # L. N. Trefethen, A. E. Trefethen, S. C. Reddy, T. A. Driscoll, Science 261 (1993) 578-584.
    assert verdicts("planar", name)["C2"] not in ("proved", "supported")


def test_a_range_that_reaches_beyond_the_stability_limit_is_refuted_by_its_far_end():
    # N. Nise, Example 6.9 (from memory): 0 < K < 1386; the range is [1, 1387].
    (outcome,) = point("linear", "nise_range_beyond").outcomes
    assert outcome.verdict == "refuted" and outcome.counter_example["combination"] == "K = 1387"


def test_a_range_in_which_a_moving_equilibrium_loses_its_stability_is_refuted():
    # C. Sparrow 1982 (from memory): 470/19 = 24.7368 lies in [24.7, 24.8].
    (outcome,) = point("three_states", "lorenz_crossing").outcomes
    assert outcome.verdict == "refuted"
    r = Fraction(outcome.counter_example["combination"].removeprefix("rho = ").removeprefix("≈ "))
    assert Fraction(470, 19) < r <= Fraction("24.8")


def near(enclosure: tuple[Fraction, Fraction], known: float, tolerance: float) -> bool:
    return all(abs(float(end) - known) <= tolerance for end in enclosure) and enclosure[0] <= enclosure[1]


@pytest.mark.parametrize(
    ("name", "criterion", "known"),
    [
        # E05: K. J. Astrom and R. M. Murray (from memory): 8/3, 41.69033 deg, 0.70013845 s; the modulus margin is
        # 5/11 exactly, not the printed 0.464, so the peak is 11/5.
        ("three_lags", "C2", 20 * math.log10(8 / 3)),
        ("three_lags", "C4", math.radians(41.69032613)),
        ("three_lags", "C6", 0.70013845),
        ("three_lags", "C10", 2.2),
        # E07: K. Ogata (from memory): the exact margins, not those read off a Bode plot (8 dB, 21 deg).
        ("type_one", "C2", 20 * math.log10(3)),
        ("type_one", "C4", math.radians(25.38982326)),
        # E12: smallest eigenvalue of Frank's matrix of order 12; its seventh digit is lost in double precision.
        ("frank", "C2", 0.031028060644010015),
        ("kundur_damped", "C2", 10 / 14),
    ],
)
def test_printed_values_of_linear_loops_agree(name, criterion, known):
    assert near(value("linear", name, criterion), known, 1e-8)


@pytest.mark.parametrize(("name", "degrees"), [("swing", 26.387799961), ("swing_after", 146.837972143)])
def test_printed_angles_of_the_swing_equation_agree(name, degrees):
    # F03: H. Saadat, Power System Analysis, Example 11.5 (from memory).
    assert near(value("equilibria", name, "C4"), math.radians(degrees), 1e-8)


def test_a_proved_set_of_hahns_system_lies_in_the_basin():
    """A01: no proved ellipse may reach x y = 1: with P, the largest x y on it is level / (2 (sqrt(ac) + b))."""
    sets = [c for c in point("planar", "hahn_inside").claims if hasattr(c, "function")]
    assert sets
    for claim in sets:
        a, twice_b, c = (float(claim.function.get(e, 0)) for e in ((2, 0), (1, 1), (0, 2)))
        assert float(claim.level) / (2 * math.sqrt(a * c) + twice_b) < 1


GIVEN = {
    # B08: Khalil proves c < 9/8; the set is bounded up to 1.171875 = max over x1 of 5/8 x1^2 - x1^4/12 (elementary).
    "soft_spring_below": "proved",
    "soft_spring_above": None,
    # B12: V first stops falling at 0.2448629 (own computation; the equilibrium is irrational).
    "bistable_below": "proved",
    "bistable_above": "refuted",
    # B13: V' = -D v^2 is zero wherever nothing moves: no strict Lyapunov function (Kundur 1994, chapter 13).
    "swing_energy": "refuted",
    # C01: for r < 1, V' = -2 s (r x^2 - 2 r x y + y^2 + b z^2) is negative everywhere.
    "convection_wide": "proved",
    # C04: V first stops falling at 4.918758420 (own exact computation).
    "three_below": "proved",
    "three_above": "refuted",
    # D04, D05: printed functions; V' is negative everywhere but at the origin.
    "rational_printed": "proved",
    "thesis_printed": "proved",
}


@pytest.mark.parametrize("name", GIVEN)
def test_a_published_function_is_judged_as_given(name):
    found = [f for f in point("given", name).findings if f.subject == f"{name}.V-given" and f.is_rigorous]
    results = {f.result for f in found} - {"undecided"}
    assert results == ({GIVEN[name]} if GIVEN[name] else set())


@pytest.mark.parametrize(
    "name", ["bistable_below", "convection_wide", "three_below", "rational_printed", "thesis_printed"]
)
def test_a_function_that_was_proved_as_given_carries_the_criterion(name):
    outcome = next(o for o in point("given", name).outcomes if o.identifier.endswith(".C1"))
    assert (outcome.verdict, outcome.evidence) == ("proved", (f"{name}.V-given",))


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        # Stable exactly where the damping is positive (Routh and Hurwitz, second order).
        ("corner_inside", {"C1": "proved"}),
        ("corner_edge", {"C1": "refuted"}),
        ("corner_bad", {"C1": "refuted", "C2": "proved"}),
        ("island_bad", {"C1": "refuted", "C2": "proved"}),
        ("island_sunk", {"C1": "proved"}),
        # Triangular: the eigenvalues are the diagonal, whatever stands above it.
        ("skew_left", {"C1": "proved", "C2": "proved", "C3": "refuted"}),
        ("skew_right", {"C1": "refuted"}),
        ("skew_barely", {"C1": "proved"}),
    ],
)
def test_bad_places_of_a_parameter_box_are_found_and_good_boxes_proved(name, expected):
    case = next(c for c in project("boxes").cases if c.name == name)
    found = build_point(case, EFFORTS["standard"], lambda *_: None, Stopwatch())
    assert {o.identifier.rpartition(".")[2]: o.verdict for o in found.outcomes} == expected
