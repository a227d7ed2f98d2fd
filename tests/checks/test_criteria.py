"""What refutes a criterion about a region, and what does not: hand-made knowledge, one premise at a time."""

from dataclasses import replace
from fractions import Fraction

import pytest
from builders import make_case
from loop_cases import formula

from dossier.checks.criteria.existence import establish_existence
from dossier.checks.criteria.linear import establish_linear
from dossier.checks.criteria.region import establish_region
from dossier.checks.knowledge import Knowledge
from dossier.model.ball import Ball
from dossier.model.case import Criterion, Quantity
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import symbol
from dossier.model.finding import Enclosure, Premise
from dossier.model.region import Box, Interval

F = Fraction


def quantity(value) -> Quantity:
    return Quantity(F(value), 0, "1", str(value))


def rest(name, *state, chosen=False, stability="stable") -> Equilibrium:
    return Equilibrium(f"point.{name}", tuple(Ball(F(v)) for v in state), chosen, True, stability, ())


def interval(low, high) -> Interval:
    return Interval(F(low), F(high))


def knowledge(case, *equilibria, place="proved", **more) -> Knowledge:
    premise = Premise("equilibrium", "the point is an equilibrium", place, "exact")
    values = {"complete": True, "claims": (), "findings": (), "spectral": {}, "margins": (), "unavailable": {}}
    return Knowledge(case, equilibria, place=premise, **{**values, **more})


@pytest.fixture
def case():
    made = make_case({"x": "-x", "y": "-y"}, {}, {"x": (-9, 9), "y": (-9, 9)}, {"x": (-1, 1), "y": (-1, 1)})
    return replace(made, name="point")


def results(findings) -> set[str]:
    return {f.result for f in findings}


def test_instability_of_the_point_refutes_attraction_only_when_the_point_is_proved(case):
    criterion = Criterion("C1", "attraction", "tolerances")
    unstable = rest("E1", 0, 0, chosen=True, stability="unstable")
    assert "refuted" in results(establish_region(knowledge(case, unstable), criterion))
    assert "refuted" not in results(establish_region(knowledge(case, unstable, place="undecided"), criterion))


@pytest.mark.parametrize(("x", "expected"), [("1/2", True), ("1", True), ("11/10", False), ("0", False)])
def test_another_equilibrium_in_the_region_refutes_attraction(case, x, expected):
    """The region is closed: a rest on its edge is a start that never converges; the point itself is none."""
    chosen, other = rest("E1", 0, 0, chosen=True), rest("E2", x, 0)
    found = establish_region(knowledge(case, chosen, other), Criterion("C1", "attraction", "nominal"))
    assert ("refuted" in results(found)) is expected


def test_an_equilibrium_known_only_to_a_ball_that_crosses_the_edge_decides_nothing(case):
    blurred = Equilibrium("point.E2", (Ball(F(1), F(1, 10)), Ball(F(0))), False, True, "stable", ())
    found = establish_region(
        knowledge(case, rest("E1", 0, 0, chosen=True), blurred), Criterion("C1", "attraction", "nominal")
    )
    assert "refuted" not in results(found)


def test_starts_outside_the_domain_or_the_limits_refute_at_time_zero(case):
    narrow = Box(("x", "y"), (interval("-1/2", 5), Interval(None, None)))
    chosen = rest("E1", 0, 0, chosen=True)
    in_domain = replace(case, model=replace(case.model, domain=narrow))
    assert "refuted" in results(
        establish_region(knowledge(in_domain, chosen), Criterion("C1", "attraction", "nominal"))
    )
    limited = replace(case, limits=narrow)
    assert "refuted" in results(establish_region(knowledge(limited, chosen), Criterion("C1", "limits_kept", "nominal")))
    assert "refuted" not in results(
        establish_region(knowledge(limited, chosen), Criterion("C1", "attraction", "nominal"))
    )


@pytest.mark.parametrize(("bound", "expected"), [("3", False), ("2", False), ("19/10", True)])
def test_a_start_beyond_its_bound_refutes_an_excursion(case, bound, expected):
    """x + y is at most 2 on the region |x|, |y| <= 1 (closed form)."""
    criterion = Criterion(
        "C1", "excursion", "nominal", of=formula("x + y"), of_written="x + y", at_most=quantity(bound)
    )
    found = establish_region(knowledge(case, rest("E1", 0, 0, chosen=True)), criterion)
    assert ("refuted" in results(found)) is expected


def test_a_region_that_leaves_a_state_free_is_not_judged(case):
    open_region = replace(case, region=Box(("x", "y"), (interval(-1, 1), Interval(None, None))))
    found = establish_region(
        knowledge(open_region, rest("E1", 0, 0, chosen=True)), Criterion("C1", "attraction", "nominal")
    )
    assert results(found) == {"undecided"}
    assert "y" in found[0].statement


def test_without_a_proved_list_neither_existence_nor_its_absence_is_claimed(case):
    found = establish_existence(knowledge(case, complete=False), Criterion("C1", "existence", "nominal"))
    assert results(found) == {"undecided"}
    found = establish_existence(knowledge(case, complete=False), Criterion("C1", "equilibria_listed", "nominal"))
    assert results(found) == {"undecided"}


def test_an_equilibrium_value_is_compared_as_an_enclosure(case):
    chosen = Equilibrium("point.E1", (Ball(F(1), F(1, 100)), Ball(F(0))), True, True, "stable", ())
    for bound, expected in (("102/100", "proved"), ("1", "undecided"), ("98/100", "refuted")):
        criterion = Criterion(
            "C1", "equilibrium_value", "nominal", of=symbol("x"), of_written="x", at_most=quantity(bound)
        )
        (finding,) = establish_existence(knowledge(case, chosen), criterion)
        assert finding.result == expected


def test_a_nominal_decay_rate_below_its_bound_refutes_every_scope(case):
    slow = {"decay rate": Enclosure(F(2), F(21, 10), "1/s")}
    chosen = rest("E1", 0, 0, chosen=True)
    for over in ("nominal", "tolerances"):
        criterion = Criterion("C1", "decay_rate", over, at_least=quantity(3))
        assert "refuted" in results(establish_linear(knowledge(case, chosen, spectral=slow), criterion))
    straddling = Criterion("C1", "decay_rate", "nominal", at_least=quantity("205/100"))
    assert results(establish_linear(knowledge(case, chosen, spectral=slow), straddling)) == {"undecided"}


def test_contraction_has_no_meaning_for_a_continuous_model(case):
    criterion = Criterion("C1", "contraction", "nominal", at_most=quantity("9/10"))
    (finding,) = establish_linear(knowledge(case, rest("E1", 0, 0, chosen=True)), criterion)
    assert finding.result == "not run"
    assert finding.premises[0].label == "not applicable"
