"""Sound project files become cases with exact SI values; spreads and boxes are on the safe side.

Numbers of the machines are those of the files in tests/data/machines (constructed); conversions by hand.
"""

import dataclasses
import hashlib
import time
from fractions import Fraction as F
from pathlib import Path

import pytest

from dossier.model.ball import Ball
from dossier.model.case import Case, value_of
from dossier.model.expression import symbol, to_text
from dossier.model.region import UNBOUNDED, Interval
from dossier.project.reader import Faults, Project, read_project
from dossier.project.schema import json_schema

TESTS = Path(__file__).parent.parent
MACHINES = sorted((TESTS / "data" / "machines").glob("*.yaml"))
EXAMPLES = sorted((TESTS.parent / "example_projects").glob("*/project.yaml"))
SOUND = (TESTS / "faults" / "sound.yaml").read_text()
PI_LOW = F("3.1415926535897932384626433832795028841971693993751058209749445923078164062862089986280348253421170679")
PI_HIGH = PI_LOW + F(1, 10**100)
"""pi to 100 decimals (published since 1706, J. Machin; digits from memory), below and above."""


def project(path: Path) -> Project:
    result = read_project(path)
    assert not isinstance(result, Faults), result
    return result


def machine(name: str) -> Project:
    return project(TESTS / "data" / "machines" / f"{name}.yaml")


def variant(folder: Path, *changes: tuple[str, str]) -> Project | Faults:
    text = SOUND
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    path = folder / "project.yaml"
    path.write_text(text)
    return read_project(path)


def case_of(folder: Path, *changes: tuple[str, str]) -> Case:
    result = variant(folder, *changes)
    assert isinstance(result, Project), result
    return result.cases[0]


def parameter(case: Case, name: str):
    return next(p for p in case.model.parameters if p.name == name)


@pytest.mark.parametrize("path", [*MACHINES, *EXAMPLES], ids=lambda p: f"{p.parent.name}/{p.stem}")
def test_every_machine_is_read_without_fault_and_quickly(path: Path) -> None:
    project(path)
    begin = time.perf_counter()
    read = project(path)
    assert time.perf_counter() - begin < 0.5
    assert read.files == ((path.name, path.read_bytes()),)
    assert read.sha256 == hashlib.sha256(path.read_bytes()).hexdigest()


def test_there_are_machines_and_examples_to_read() -> None:
    assert len(MACHINES) >= 7 and len(EXAMPLES) >= 3


def test_the_press_slide_is_read_exactly() -> None:
    read = machine("press-slide")
    (case,) = read.cases
    assert read.document.number == "SD-0101"
    assert [r.role for r in read.document.sign_off] == ["prepared", "checked", "approved"]
    assert case.model.state_names == ("e", "v", "q", "F")
    mass, tau, gain = (parameter(case, n) for n in ("m", "tau", "Kp"))
    assert (mass.nominal, mass.kind, mass.spread) == (Ball(F(1200)), "tolerance", Interval(F(1164), F(1236)))
    assert (tau.nominal.middle, tau.spread) == (F(3, 2000), Interval(F(51, 40000), F(69, 40000)))
    assert (gain.kind, gain.spread) == ("exact", Interval.point(F(16_000_000)))
    assert parameter(case, "k3").nominal.middle == 2 * 10**12
    assert case.region["q"] == Interval(F(-1, 100_000), F(1, 100_000))
    assert case.limits["e"] == Interval(F(-1, 625), F(1, 625))
    assert case.limits["v"] == UNBOUNDED
    assert case.fixed == (0, 0, 0, 0)
    assert case.near is None
    assert case.search["F"] == Interval(F(-15000), F(15000))
    assert case.search["e"] == case.limits["e"]
    assert case.model.signals[0].limits == Interval(F(-160_000), F(160_000))
    assert case.assumptions == ("A1", "A2")
    rate, decibel, angle, delay, excursion = case.criteria[1:6]
    assert (rate.at_least.factor, rate.over) == (5, "tolerances")
    assert (decibel.at_least.factor, decibel.at_least.unit, decibel.loop) == (6, "dB", "u")
    assert (angle.at_least.factor, angle.at_least.pi_power) == (F(2, 9), 1)
    assert (delay.at_least.factor, delay.over) == (F(1, 500), "nominal")
    assert (excursion.of, excursion.of_written) == (symbol("e"), "e")
    assert [q.factor for q in excursion.between] == [F(-1, 625), F(1, 625)]
    assert to_text(case.model.equations[1]) == "(F - c*v - k1*e - k3*e^3)/m"


def test_the_bus_is_read_with_its_set_values() -> None:
    full, third, larger = machine("dc-bus").cases
    assert parameter(full, "P").kind == "exact"
    assert parameter(third, "P").nominal.middle == 15_000
    assert parameter(third, "P").spread.is_point
    assert parameter(larger, "C").spread == Interval(F("0.00176"), F("0.00264"))
    assert larger.set_values == (("P", "45000"), ("C", "0.0022"))
    assert full.near == (71, 639)
    assert full.search["i"] == Interval(F(0), F(3500))
    assert full.model.domain["v"] == Interval(F(200), F(900))
    assert full.model.domain["i"] == UNBOUNDED


def test_the_sampled_axis_keeps_its_varying_interval_and_warns_of_the_set_one() -> None:
    read = machine("gantry-axis")
    fast, slow = read.cases
    assert fast.model.time == "sampled"
    assert fast.model.sample_interval == symbol("Ts")
    interval = parameter(fast, "Ts")
    assert (interval.varies, interval.kind, interval.spread) == (True, "range", Interval(F(1, 1250), F(7, 5000)))
    assert (parameter(slow, "Ts").varies, parameter(slow, "Ts").spread) == (False, Interval.point(F(1, 200)))
    assert any("Ts is set to 0.005, outside its declared range" in w for w in read.warnings)


def test_the_reactor_states_its_absolute_bound() -> None:
    read = machine("stirred-reactor")
    criterion = read.cases[0].criteria[3]
    assert criterion.at_most.factor == 365
    assert criterion.between is None
    assert read.cases[0].criteria[5].region["c"] == Interval(F(-300), F(300))
    assert any("differ only in case" in w for w in read.warnings)


def test_scales_carry_pi_and_boxes_stay_on_the_safe_side(tmp_path: Path) -> None:
    case = case_of(
        tmp_path,
        ("x: {unit: m}", "x: {unit: deg}"),
        ("v: {unit: m/s}", "v: {unit: deg/s}"),
        ("value: 8 kN/m, unit: N/m", "value: 8, unit: N*m/deg"),
        ("unit: N*s/m", "unit: N*m*s/deg"),
        ("unit: kg,", "unit: kg*m^2,"),
        ("unit: N, role", "unit: N*m, role"),
    )
    assert (case.model.states[0].scale.factor, case.model.states[0].scale.pi_power) == (F(1, 180), 1)
    region, limits, domain = case.region["x"], case.limits["x"], case.model.domain["x"]
    assert region.upper >= PI_HIGH / 1800 > PI_LOW / 1800 > region.upper * (1 - F(1, 2**99))
    assert region.lower == -region.upper
    assert limits.upper <= PI_LOW / 360
    assert domain.upper <= PI_LOW / 180
    spring = parameter(case, "k")
    assert spring.nominal.lower <= 1440 / PI_HIGH < 1440 / PI_LOW <= spring.nominal.upper
    assert spring.spread.contains(Interval(spring.nominal.lower, spring.nominal.upper))


def test_degrees_celsius_shift_absolute_values_only(tmp_path: Path) -> None:
    case = case_of(
        tmp_path,
        ("x: {unit: m}", "x: {unit: degC}"),
        ("v: {unit: m/s}", "v: {unit: K/s}"),
        ("value: 8 kN/m, unit: N/m", "value: 8, unit: N/K"),
        ("unit: N*s/m", "unit: N*s/K"),
        ("unit: kg,", "unit: N*s^2/K,"),
        ("[-1, 1]}\nop", "[-1 degC, 280 K]}\nop"),
        ("[-0.5, 0.5]", "[-0.5 K, 0.5]"),
        ("C1: {claim: attraction}", "C1: {claim: excursion, of: x, at_most: 3}"),
    )
    assert case.model.domain["x"] == Interval(F("272.15"), F(280))
    assert case.fixed == (F("273.15"), 0)
    assert case.region["x"] == Interval(F(-1, 10), F(1, 10))
    assert case.limits["x"] == Interval(F(-1, 2), F(1, 2))
    assert value_of(case.criteria[0].at_most) == Ball(F("276.15"))


@pytest.mark.parametrize(
    ("setting", "nominal", "spread", "kind"),
    [
        ("m: 3", F(3), (F("2.85"), F("3.15")), "tolerance"),
        ("m: 3000 g", F(3), (F("2.85"), F("3.15")), "tolerance"),
        ("m: {value: 3, range: [2, 5]}", F(3), (F(2), F(5)), "range"),
        ("m: {value: 3, tolerance: 1 kg}", F(3), (F(2), F(4)), "tolerance"),
        ("m: {value: 3, tolerance: 10 %}", F(3), (F("2.7"), F("3.3")), "tolerance"),
    ],
)
def test_set_values_carry_the_spread_they_should(
    tmp_path: Path, setting: str, nominal: F, spread: tuple[F, F], kind: str
) -> None:
    case = case_of(tmp_path, ("    model: cart\n", f"    model: cart\n    set: {{{setting}}}\n"))
    mass = parameter(case, "m")
    assert (mass.nominal, mass.spread, mass.kind) == (Ball(nominal), Interval(*spread), kind)


def test_the_default_search_is_the_domain_or_else_the_hull_about_the_point(tmp_path: Path) -> None:
    case = case_of(tmp_path, ("{at: {x: 0, v: 0}}", "{near: {x: 0.25, v: 3}}"))
    assert case.search["x"] == Interval(F(-1), F(1))
    assert case.search["v"] == Interval(F(2), F(4))
    free = case_of(tmp_path, ("    domain: {x: [-1, 1]}\n", ""), ("v: [-1, 1]}", "v: [-1, 1]}"))
    assert free.search["x"] == Interval(F(-1, 2), F(1, 2))


def test_no_equilibrium_may_be_expected(tmp_path: Path) -> None:
    case = case_of(tmp_path, ("{at: {x: 0, v: 0}}", "{none_expected: true}"))
    assert (case.fixed, case.near, case.none_expected) == (None, None, True)
    assert case.search["v"] == UNBOUNDED


@pytest.mark.parametrize(
    "criterion",
    [
        "existence",
        "equilibria_listed",
        "equilibrium_value, of: x, at_least: -1 mm",
        "equilibrium_value, of: m*v^2, between: [0 J, 1 kJ]",
        "asymptotic_stability, requirement: RQ-1, hazard: HZ-2",
        "exponential_stability",
        "exponential_stability, at_least: 5 1/s",
        "attraction, region: {x: [-0.2, 0.2], v: [-1, 1]}",
        "limits_kept",
        "excursion, of: u, between: [-9 kN, 9000]",
        "damping_ratio, at_least: 0.3",
        "damping_ratio, at_least: 30 %",
        "settling_time, of: x, to: 1 mm, within: 200 ms",
        "phase_margin, loop: u, at_least: 0.5 rad",
        "delay_margin, loop: u, at_least: 2 ms",
        "peak_sensitivity, loop: u, at_most: 2",
        "parameter_margin, of: k, at_least: 20 %",
        "parameter_margin, of: k, at_least: 1 kN/m",
    ],
)
def test_every_claim_takes_its_fields(tmp_path: Path, criterion: str) -> None:
    case = case_of(tmp_path, ("{claim: attraction}", f"{{claim: {criterion}}}"))
    assert case.criteria[0].claim == criterion.split(",")[0]


@pytest.mark.parametrize(
    ("criterion", "message"),
    [
        ("existence, at_least: 3", "existence takes no at_least"),
        ("decay_rate", "decay_rate needs a bound"),
        ("decay_rate, at_least: 5", "a number without a unit"),
        ("decay_rate, at_least: 5 m", "the unit m does not fit"),
        ("decay_rate, at_most: 5 1/s", "decay_rate takes no at_most"),
        ("gain_margin, loop: u, at_least: 2", "a number without a unit"),
        ("gain_margin, loop: u, at_least: -6 dB", "at_least is not positive"),
        ("gain_margin, at_least: 6 dB", "gain_margin needs loop"),
        ("phase_margin, loop: u, at_least: 6 dB", "the unit dB does not fit"),
        ("excursion, of: x", "excursion needs a bound"),
        ("excursion, of: x, at_least: 0, at_most: 1", "at_least and at_most are given together"),
        ("excursion, of: x + v, at_most: 1 m", "terms of a sum have different dimensions"),
        ("excursion, of: m*v^2, at_most: 1", "a number without a unit"),
        ("excursion, of: x, between: [1, -1]", "the range is empty"),
        ("excursion, of: 1/0, at_most: 1", "becomes 0"),
        ("contraction, at_most: 0.9", "contraction is a claim about sampled models"),
        ("invariance", "the model has no disturbances"),
        ("parameter_margin, of: x, at_least: 5 %", "x is not a parameter"),
        ("settling_time, of: x, to: 1 mm, within: 0 s", "within is not positive"),
        ("excursion, of: {x: v}, at_most: 1 m", "a table or list stands where one value is expected"),
        ("attraction, over: everything", "this word is not allowed here"),
    ],
)
def test_a_criterion_that_does_not_fit_its_claim_is_a_fault(tmp_path: Path, criterion: str, message: str) -> None:
    result = variant(tmp_path, ("{claim: attraction}", f"{{claim: {criterion}}}"))
    assert isinstance(result, Faults)
    assert any(message in f.message for f in result.faults), result.faults
    assert all(f.line == 26 for f in result.faults)


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("C1: {claim", "9x: {claim", "the name of a criterion"),
        ("k: {value", "sin: {value", "already means something"),
        ("v: {value", "v: {value", ""),
        ("b: {value: 40,", "b: {value: 40, tolerance: 3 %, range: [1, 50],", "a tolerance and a range"),
        ("b: {value: 40,", "b: {value: 40, range: [50, 60],", "outside its range"),
        ("b: {value: 40,", "b: {value: 40, varies: true,", "varies but has no range"),
        ("k: {value: 8 kN/m, unit: N/m}", 'k: {value: 8 %, unit: "%", tolerance: 1 %}', "may mean two things"),
        ("b: {value: 40,", "b: {value: .inf,", "is not a number"),
        ("b: {value: 40,", "b: {value: 1_000,", "is not a number"),
        ("{at: {x: 0, v: 0}}", "{at: {x: 0}}", "gives no value for v"),
        ("{at: {x: 0, v: 0}}", "{at: {x: 0, v: 0}, near: {x: 0, v: 0}}", "at and near"),
        ("{at: {x: 0, v: 0}}", "{}", "is not stated"),
        ("model: cart", "model: card", "card is not a model"),
        ('x: "v", v', "v", "the state x has no equation"),
        ('x: "v"', 'x: "v/m"', "the formula has the dimension"),
        ('x: "v"', 'x: "v + v*sin(x)"', "the argument of sin has the dimension m"),
        ('x: "v"', 'x: "v*log(-1)"', "becomes 0 or negative"),
        ("time: continuous", "time: continuous\n    sample_interval: m", "has no sample_interval"),
        ("    model: cart\n", "    model: cart\n    set: {mm: 3}\n", "mm is not a parameter"),
        ("models:\n", "assumptions: {A1: {text: t, basis: b, covers: [carts]}}\nmodels:\n", "carts is nothing"),
    ],
)
def test_rules_of_reading_are_kept(tmp_path: Path, old: str, new: str, message: str) -> None:
    if not message:
        old, new, message = "      b: {value", "      v: {value", "is the name of a state already"
    result = variant(tmp_path, (old, new))
    assert isinstance(result, Faults)
    assert any(message in f.message for f in result.faults), result.faults


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("(u - b*v)/m", "(u - b*v)/(m*(2*x - 1)*x0)", "becomes 0"),
        ("(u - b*v)/m", "(sat(u, k*x0, -k*x0) - b*v)/m", "the lower limit lies above the upper one"),
        ("C1: {claim: attraction}", "E1: {claim: attraction}", "names its own evidence"),
        ("C1: {claim: attraction}", "cells: {claim: attraction}", "names its own evidence"),
        ("C1: {claim: attraction}", "C1: {claim: phase_margin, loop: u, at_least: 40 %}", "a percentage is a ratio"),
        ("C1: {claim: attraction}", "C1: {claim: global_attraction}", "the model has a domain"),
        ("models:\n", "assumptions: {A 1: {text: t, basis: b, covers: [cart]}}\nmodels:\n", "an assumption"),
    ],
)
def test_what_is_proved_wrong_somewhere_is_a_fault(tmp_path: Path, old: str, new: str, message: str) -> None:
    changes = [(old, new.replace("(2*x - 1)*x0", "(2*x/x0 - 1)"))]
    if "x0" in new:
        changes.append(("      b: {value: 40", "      x0: {value: 1, unit: m}\n      b: {value: 40"))
    result = variant(tmp_path, *changes)
    assert isinstance(result, Faults)
    assert [message in f.message for f in result.faults] == [True], result.faults


def test_a_denominator_that_intervals_exclude_piece_by_piece_is_no_warning(tmp_path: Path) -> None:
    """1 - s + s^2 is at least 3/4, which one interval does not show."""
    result = variant(
        tmp_path,
        ("(u - b*v)/m", "(u - b*v)/(m*(1 - x/x0 + (x/x0)^2))"),
        ("      b: {value: 40", "      x0: {value: 1, unit: m}\n      b: {value: 40"),
    )
    assert isinstance(result, Project)
    assert not any("away from 0" in w for w in result.warnings)


def test_only_the_sides_a_condition_depends_on_are_cut(tmp_path: Path) -> None:
    changes = (("m: {value: 2, unit: kg, tolerance: 5 %}", "m: {value: 1, unit: kg, range: [-1, 3]}"),)
    result = variant(tmp_path, *changes)
    assert isinstance(result, Faults)
    assert ["m becomes 0" in f.message for f in result.faults] == [True]


@pytest.mark.parametrize(("value", "count"), [("[1, 2]", 1), ("{a: 1}", 2)])
def test_a_set_value_of_the_wrong_shape_is_told_and_nothing_breaks_off(tmp_path: Path, value: str, count: int) -> None:
    result = variant(tmp_path, ("    model: cart\n", f"    model: cart\n    set: {{m: {value}}}\n"))
    assert isinstance(result, Faults)
    assert len(result.faults) == count


def test_thousands_of_faults_are_told_in_seconds(tmp_path: Path) -> None:
    many = "".join(f"      p{i}: {{value: 1, unit: m}}\n" for i in range(5_000))
    began = time.monotonic()
    result = variant(tmp_path, ("      b: {value: 40", many + "      b: {value: 40"))
    assert isinstance(result, Faults) and len(result.faults) == 5_000
    assert time.monotonic() - began < 20


def test_global_attraction_is_for_models_without_a_domain(tmp_path: Path) -> None:
    changes = (("    domain: {x: [-1, 1]}\n", ""), ("C1: {claim: attraction}", "C1: {claim: global_attraction}"))
    assert isinstance(variant(tmp_path, *changes), Project)


def test_what_a_reader_of_the_dossier_would_miss_is_a_warning(tmp_path: Path) -> None:
    result = variant(tmp_path, ("x: {unit: m}", "x: {unit: m}"))
    assert isinstance(result, Project)
    for word in ("has no scope", "no meaning is given for x, v, m, k, b of cart", "rest has no meaning"):
        assert any(word in w for w in result.warnings), word


def test_what_is_not_excluded_is_a_warning(tmp_path: Path) -> None:
    result = variant(
        tmp_path,
        ("(u - b*v)/m", "(u - b*v)/(m*(1 - x/L)^2)"),
        ("      b: {value: 40", "      L: {value: 0.5, unit: m}\n      b: {value: 40"),
    )
    assert isinstance(result, Project), result
    assert any("m*(1 - x/L)^2 is not proved to stay away from 0" in w for w in result.warnings)


def test_an_absolute_tolerance_is_dropped_by_a_set_value_with_a_warning(tmp_path: Path) -> None:
    changes = (("tolerance: 5 %", "tolerance: 0.1 kg"), ("    model: cart\n", "    model: cart\n    set: {m: 3}\n"))
    result = variant(tmp_path, *changes)
    assert isinstance(result, Project)
    assert parameter(result.cases[0], "m").spread == Interval.point(F(3))
    assert any("absolute and dropped" in w for w in result.warnings)


@pytest.mark.parametrize("formula", ["{0}*{0}", "{0} + 1 + {0}", "cos(cos(cos(cos(cos(cos(cos(cos(cos({0})))))))))"])
def test_signals_within_signals_are_bounded(tmp_path: Path, formula: str) -> None:
    chain = [f"      s{i}: {{is: '{formula.format(f's{i - 1}')}', unit: '1'}}\n" for i in range(1, 60)]
    signals = "    signals:\n      s0: {is: 'x*k/(m*g)', unit: '1'}\n" + "".join(chain)
    gravity = "      g: {value: 9.81, unit: m/s^2}\n      b: {value"
    result = variant(tmp_path, ("    signals:\n", signals), ("      b: {value", gravity), ("- b*v)/m", "- b*v)/m*s59"))
    assert isinstance(result, Faults)
    assert any("with its signals written out" in f.message for f in result.faults)


def test_the_schema_for_editors_names_every_field() -> None:
    schema = json_schema()
    assert {"dossier", "document", "models", "operating_points"} <= set(schema["required"])
    assert schema["$defs"]["SignalEntry"]["required"] == ["is", "unit"]
    assert "attraction" in schema["$defs"]["CriterionEntry"]["properties"]["claim"]["enum"]
    described = [p for d in schema["$defs"].values() for p in d["properties"].values()]
    assert all(p.get("description") for p in described)


def test_disturbances_hold_zero(tmp_path: Path) -> None:
    added = "    disturbances: {w: {unit: N, range: [%s, 50]}}\n    equations:"
    changes = [("(u - b*v)/m", "(u + w - b*v)/m"), ("{claim: attraction}", "{claim: invariance}")]
    case = case_of(tmp_path, ("    equations:", added % "-50"), *changes)
    assert case.model.disturbances[0].spread == Interval(F(-50), F(50))
    assert isinstance(variant(tmp_path, ("    equations:", added % "20"), *changes), Faults)


def test_anchors_and_aliases_are_followed(tmp_path: Path) -> None:
    plain = case_of(tmp_path)
    shared = case_of(tmp_path, ("region: {x: [-0.1, 0.1], v: [-1, 1]}", "region: &r {x: [-0.1, 0.1], v: [-1, 1]}"),
                     ("{claim: attraction}", "{claim: attraction, region: *r}"))  # fmt: skip
    assert shared.criteria[0].region == plain.region
    assert dataclasses.replace(shared, criteria=plain.criteria) == plain
