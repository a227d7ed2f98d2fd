"""The examples: every verdict as expected, and every expectation backed by a calculation of its own.

The calculations below start from the equations in the project files, written out here again, with numpy and scipy;
nothing of the program is used in them.
"""

from itertools import product
from pathlib import Path

import numpy as np
import pytest
import yaml
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from dossier.evidence.provenance import Stopwatch
from dossier.model.dossier import Evidence
from dossier.pipeline import build_evidence
from dossier.project.reader import Project, read_project

FOLDER = Path(__file__).parents[2] / "example_projects"
FILES = [
    ("press_slide", "project.yaml"),
    ("dc_bus", "project.yaml"),
    ("dc_bus", "widened_search.yaml"),
    ("magnetic_bearing", "project.yaml"),
    pytest.param("crane_trolley", "project.yaml", marks=pytest.mark.slow),
]


class Built(dict[tuple[str, str], Evidence]):
    """Every example, built when it is first asked for."""

    def __missing__(self, key: tuple[str, str]) -> Evidence:
        project = read_project(FOLDER / key[0] / key[1])
        assert isinstance(project, Project), project
        self[key] = build_evidence(project, project.cases, "quick", "", lambda *_: None, Stopwatch())
        return self[key]


@pytest.fixture(scope="module")
def examples() -> Built:
    return Built()


def expected(folder: str, name: str) -> dict:
    return yaml.safe_load((FOLDER / folder / "expected" / "verdicts.yaml").read_text(encoding="utf-8"))[name]


def outcomes(evidence: Evidence) -> dict:
    return {o.identifier: o for p in evidence.points for o in p.outcomes}


@pytest.mark.parametrize(("folder", "name"), FILES)
def test_every_verdict_is_the_expected_one_and_every_expectation_has_its_reason(folder, name, examples):
    found, known = outcomes(examples[folder, name]), expected(folder, name)
    assert {k: o.verdict for k, o in found.items()} == {k: e["verdict"] for k, e in known.items()}
    assert all(len(e["reason"]) > 20 for e in known.values())


@pytest.mark.parametrize(("folder", "name"), FILES)
def test_every_value_agrees_with_the_expected_one(folder, name, examples):
    found = outcomes(examples[folder, name])
    for criterion, entry in expected(folder, name).items():
        value = found[criterion].value
        if "value" in entry:
            assert float(value.lower) == pytest.approx(entry["value"], rel=1e-6)
            assert float(value.upper) == pytest.approx(entry["value"], rel=1e-6)
        if "at_least" in entry:
            assert entry["at_least"] <= float(value.lower) <= float(value.upper) <= entry["at_most"]


# --- press slide ------------------------------------------------------------------------------------

NOMINAL = {"m": 1200.0, "c": 9000.0, "k1": 4.0e6, "k3": 2.0e12, "tau": 0.0015}
SPREAD = {"m": 0.03, "c": 0.25, "k1": 0.2, "k3": 0.3, "tau": 0.15}
KP, KD, KI = 1.6e7, 2.4e5, 2.0e8
LIMIT = 1.6e-3


def corners():
    for signs in product((-1, 1), repeat=len(SPREAD)):
        yield {n: NOMINAL[n] * (1 + s * SPREAD[n]) for n, s in zip(SPREAD, signs, strict=True)}


def slowest(p: dict) -> float:
    plant = np.polymul([p["tau"], 1, 0], [p["m"], p["c"], p["k1"]])
    return -max(np.roots(np.polyadd(plant, [KD, KP, KI])).real)


def loop(s):
    plant = s * (NOMINAL["tau"] * s + 1) * (NOMINAL["m"] * s**2 + NOMINAL["c"] * s + NOMINAL["k1"])
    return (KD * s**2 + KP * s + KI) / plant


def test_the_slide_decays_as_expected_at_every_corner_and_inside():
    random = np.random.default_rng(1)
    inside = [{n: v * (1 + SPREAD[n] * random.uniform(-1, 1)) for n, v in NOMINAL.items()} for _ in range(2000)]
    worst = min(slowest(p) for p in (*corners(), *inside))
    assert 10.7 < worst < slowest(NOMINAL) == pytest.approx(11.631, abs=1e-3)


def test_the_margins_of_the_slide_come_out_of_its_transfer_function():
    crossover = brentq(lambda w: abs(loop(1j * w)) - 1, 100, 1000)
    phase = np.pi + np.angle(loop(1j * crossover))
    known = expected("press_slide", "project.yaml")
    assert phase == pytest.approx(known["bottom_hold.C9"]["value"], rel=1e-5)
    assert phase / crossover == pytest.approx(known["bottom_hold.C5"]["value"], rel=1e-6)
    frequencies = np.logspace(-1, 5, 200_001)
    response = loop(1j * frequencies)
    assert np.max(np.abs(1 / (1 + response))) == pytest.approx(known["bottom_hold.C10"]["value"], rel=1e-5)
    real_axis = np.flatnonzero(np.diff(np.sign(response.imag)))
    assert not any(response.real[i] < 0 and response.real[i + 1] < 0 for i in real_axis)


def test_the_slide_returns_from_every_corner_within_its_limits(examples):
    starts = np.array(list(product((-1e-3, 1e-3), (-0.05, 0.05), (-1e-5, 1e-5), (-15e3, 15e3)))).T
    bound = outcomes(examples["press_slide", "project.yaml"])["bottom_hold.C6"].value
    peak = 0.0
    for p in corners():

        def flow(_, flat, p=p):
            e, v, q, force = flat.reshape(4, -1)
            command = -KP * e - KD * v - KI * q
            push = force - p["c"] * v - p["k1"] * e - p["k3"] * e**3
            return np.concatenate([v, push / p["m"], e, (command - force) / p["tau"]])

        motion = solve_ivp(flow, (0, 1.0), starts.ravel(), method="LSODA", rtol=1e-8, atol=1e-10)
        path = motion.y.reshape(4, starts.shape[1], -1)
        peak = max(peak, np.abs(path[0]).max())
        assert peak < float(bound.upper) < LIMIT
        assert np.abs(KP * path[0] + KD * path[1] + KI * path[2]).max() < 160e3
        assert np.abs(path[:, :, -1] / starts).max() < 1e-2
    assert peak == pytest.approx(1.14e-3, rel=0.02)


# --- direct-current bus -----------------------------------------------------------------------------

VS, RS, LS, RB = 650.0, 0.15, 0.0009, 400.0
POINTS = {"full_power": (45e3, 470e-6), "third_power": (15e3, 470e-6), "full_power_2mF": (45e3, 2.2e-3)}


def at_rest(power: float) -> list[float]:
    return sorted(np.roots([1 / RS + 1 / RB, -VS / RS, power]).real)


def linear(power: float, capacitance: float, v: float):
    return np.array([[-RS / LS, -1 / LS], [1 / capacitance, (power / v**2 - 1 / RB) / capacitance]])


def test_the_listed_voltages_are_the_roots_of_the_quadratic(examples):
    for point in examples["dc_bus", "project.yaml"].points:
        power, _ = POINTS[point.case.name]
        assert [float(e.state[1].middle) for e in point.equilibria] == pytest.approx(at_rest(power)[1:], rel=1e-12)
    for point in examples["dc_bus", "widened_search.yaml"].points:
        found = sorted(float(e.state[1].middle) for e in point.equilibria)
        assert found == pytest.approx(at_rest(45e3), rel=1e-12)
        assert found[0] == pytest.approx(10.556, abs=1e-3)
        currents = sorted(float(e.state[0].middle) for e in point.equilibria)
        assert currents[1] == pytest.approx(4263, abs=0.1)


def test_full_power_is_unstable_and_the_other_points_are_not():
    real = {n: max(np.linalg.eigvals(linear(p, c, at_rest(p)[1])).real) for n, (p, c) in POINTS.items()}
    assert real["full_power"] == pytest.approx(31.18, abs=0.01)
    assert real["third_power"] == pytest.approx(-47.79, abs=0.01)
    assert real["full_power_2mF"] == pytest.approx(-58.87, abs=0.01)
    assert np.linalg.det(linear(45e3, 470e-6, at_rest(45e3)[0])) < 0


def test_the_bus_decays_at_every_corner_of_its_tolerances_at_full_power():
    slowest = []
    for s in product((-1, 1), repeat=5):
        source, feeder, coil = VS * (1 + 0.05 * s[0]), RS * (1 + 0.1 * s[1]), LS * (1 + 0.1 * s[2])
        capacitance, bleed = 2.2e-3 * (1 + 0.2 * s[3]), RB * (1 + 0.05 * s[4])
        v = max(np.roots([1 / feeder + 1 / bleed, -source / feeder, 45e3]).real)
        matrix = [[-feeder / coil, -1 / coil], [1 / capacitance, (45e3 / v**2 - 1 / bleed) / capacitance]]
        slowest.append(-max(np.linalg.eigvals(matrix).real))
    assert min(slowest) == pytest.approx(34.2, abs=0.1)


@pytest.mark.parametrize("name", ["third_power", "full_power_2mF"])
def test_the_bus_returns_from_the_corners_of_its_region(name, examples):
    power, capacitance = POINTS[name]
    v0 = at_rest(power)[1]
    i0 = (VS - v0) / RS
    bound = outcomes(examples["dc_bus", "project.yaml"])["full_power_2mF.C3"].value

    def flow(_, x):
        return [(VS - RS * x[0] - x[1]) / LS, (x[0] - power / x[1] - x[1] / RB) / capacitance]

    for di, dv in product((-15, 15), (-20, 20)):
        motion = solve_ivp(flow, (0, 0.3), [i0 + di, v0 + dv], rtol=1e-9, atol=1e-9)
        assert motion.y[:, -1] == pytest.approx([i0, v0], abs=0.05)
        if name == "full_power_2mF":
            assert 500 < float(bound.lower) < motion.y[1].min() and motion.y[1].max() < float(bound.upper) < 760
            assert motion.y[1].min() > 616 and motion.y[1].max() < 662


# --- magnetic bearing -------------------------------------------------------------------------------

ROTOR = {"m": 8.0, "k": 3e-6, "i0": 2.5, "g0": 4e-4, "tau": 1.5e-4}
ROTOR_SPREAD = {"m": 0.02, "k": 0.08, "i0": 0.01, "g0": 0.04, "tau": 0.15}
POSITION_GAIN, VELOCITY_GAIN = 15e3, 28.0


def rotor_corners():
    for signs in product((-1, 1), repeat=len(ROTOR)):
        yield {n: ROTOR[n] * (1 + s * ROTOR_SPREAD[n]) for n, s in zip(ROTOR, signs, strict=True)}


def rotor_matrix(p: dict):
    stiffness, force = 4 * p["k"] * p["i0"] ** 2 / p["g0"] ** 3, 4 * p["k"] * p["i0"] / p["g0"] ** 2
    lag = [-POSITION_GAIN / p["tau"], -VELOCITY_GAIN / p["tau"], -1 / p["tau"]]
    return np.array([[0, 1, 0], [stiffness / p["m"], 0, force / p["m"]], lag])


def test_the_rotor_decays_as_expected_at_every_corner_and_inside(examples):
    random = np.random.default_rng(1)
    inside = [{n: v * (1 + ROTOR_SPREAD[n] * random.uniform(-1, 1)) for n, v in ROTOR.items()} for _ in range(2000)]
    worst = min(-np.linalg.eigvals(rotor_matrix(p)).real.max() for p in (*rotor_corners(), *inside))
    assert worst == pytest.approx(269.3, abs=0.1)
    value = outcomes(examples["magnetic_bearing", "project.yaml"])["levitated.C3"].value
    assert float(value.lower) < worst < float(value.upper) * (1 + 1e-9)


def test_the_margins_of_the_rotor_come_out_of_its_transfer_function():
    known = expected("magnetic_bearing", "project.yaml")
    s = 1j * np.logspace(0, 6, 400_001)
    plant = (ROTOR["tau"] * s + 1) * (ROTOR["m"] * s**2 - 1.171875e6)
    response = (POSITION_GAIN + VELOCITY_GAIN * s) * 187.5 / plant
    assert np.max(np.abs(1 / (1 + response))) == pytest.approx(known["levitated.C8"]["value"], rel=1e-5)
    assert 20 * np.log10(15e3 * 187.5 / 1.171875e6) == pytest.approx(known["levitated.C7"]["value"], rel=1e-9)
    assert not np.diff(np.sign(response.imag)).any()


def test_the_rotor_returns_from_every_corner_within_its_bounds(examples):
    starts = np.array(list(product((-5e-5, 5e-5), (-0.015, 0.015), (-0.5, 0.5)))).T
    found = outcomes(examples["magnetic_bearing", "project.yaml"])
    gap, current = (float(found[f"levitated.{c}"].value.upper) for c in ("C4", "C5"))
    peaks = np.zeros(2)
    for p in rotor_corners():

        def flow(_, flat, p=p):
            x, v, i = flat.reshape(3, -1)
            near, far = (p["i0"] + i) / (p["g0"] - x), (p["i0"] - i) / (p["g0"] + x)
            command = -POSITION_GAIN * x - VELOCITY_GAIN * v
            return np.concatenate([v, p["k"] * (near**2 - far**2) / p["m"], (command - i) / p["tau"]])

        motion = solve_ivp(flow, (0, 0.05), starts.ravel(), method="LSODA", rtol=1e-9, atol=1e-12)
        path = motion.y.reshape(3, starts.shape[1], -1)
        peaks = np.maximum(peaks, [np.abs(path[0]).max(), np.abs(path[2]).max()])
        assert np.abs(path[0, :, -1]).max() < 1e-6
    assert peaks == pytest.approx([62.1e-6, 1.148], rel=0.02)
    assert peaks[0] < gap < 120e-6 and peaks[1] < current < 2.4


# --- crane trolley -----------------------------------------------------------------------------------

CRANE = {"M": 850.0, "mL": 600.0, "L": 6.0, "b": 220.0, "d": 0.06, "g": 9.81}
CRANE_BOX = {"M": (824.5, 875.5), "mL": (100, 1200), "L": (3, 9), "b": (132, 308), "d": (0.03, 0.09)}
CRANE_GAINS = np.array([900.0, 2300.0, -5200.0, -1500.0])


def crane_parts(p: dict) -> tuple[np.ndarray, np.ndarray]:
    """A and B of the open loop x' = A x + B u."""
    trolley = np.array([0, -p["b"], p["mL"] * p["g"], p["mL"] * p["d"]]) / p["M"]
    swing = -(np.array([0, 0, p["g"], p["d"]]) + trolley) / p["L"]
    a = np.array([[0, 1, 0, 0], trolley, [0, 0, 0, 1], swing])
    return a, np.array([0, 1, 0, -1 / p["L"]]) / p["M"]


def crane_decay(p: dict) -> float:
    a, b = crane_parts(p)
    return -max(np.linalg.eigvals(a - np.outer(b, CRANE_GAINS)).real)


def test_the_crane_decays_as_expected_for_every_load_and_rope():
    random = np.random.default_rng(1)
    corners_ = [dict(zip(CRANE_BOX, v, strict=True)) for v in product(*CRANE_BOX.values())]
    inside = [{n: random.uniform(*side) for n, side in CRANE_BOX.items()} for _ in range(3000)]
    worst = min(crane_decay({**CRANE, **p}) for p in (*corners_, *inside))
    assert worst == pytest.approx(0.13509, abs=1e-5)
    assert expected("crane_trolley", "project.yaml")["over_target.C2"]["at_most"] == pytest.approx(worst, abs=1e-5)


def test_the_margins_of_the_crane_come_out_of_its_response():
    a, b = crane_parts(CRANE)

    def response(w: float) -> complex:
        return complex(CRANE_GAINS @ np.linalg.solve(1j * w * np.eye(4) - a, b))

    grid = np.logspace(-3, 3, 20_001)
    size = np.abs([response(w) for w in grid]) - 1
    places = np.flatnonzero(np.diff(np.sign(size)))
    crossovers = [brentq(lambda w: abs(response(w)) - 1, grid[i], grid[i + 1]) for i in places]
    least = min(abs(np.angle(-response(w))) for w in crossovers)
    assert len(crossovers) == 3
    assert least == pytest.approx(expected("crane_trolley", "project.yaml")["over_target.C9"]["value"], rel=1e-6)
    values = np.array([response(w) for w in grid])
    crossing = np.flatnonzero(np.diff(np.sign(values.imag)))
    assert (values.real[crossing] > 0).all()


@pytest.mark.slow
def test_the_crane_returns_from_the_corners_and_swings_less_than_proved(examples):
    bound = outcomes(examples["crane_trolley", "project.yaml"])["over_target.C5"].value
    peak = 0.0
    for values in product(*CRANE_BOX.values()):
        p = {**CRANE, **dict(zip(CRANE_BOX, values, strict=True))}

        def flow(_, state, p=p):
            _, v, th, w = state
            pull = p["mL"] * np.sin(th) * (p["L"] * w**2 + p["g"] * np.cos(th)) + p["mL"] * p["d"] * w * np.cos(th)
            push = -CRANE_GAINS @ state - p["b"] * v + pull
            speed_up = push / (p["M"] + p["mL"] * np.sin(th) ** 2)
            return [v, speed_up, w, -(p["g"] * np.sin(th) + p["d"] * w + np.cos(th) * speed_up) / p["L"]]

        for start in product((1,), (-0.4, 0.4), (-0.1, 0.1), (-0.12, 0.12)):
            motion = solve_ivp(flow, (0, 60), start, rtol=1e-7, atol=1e-9, max_step=0.1)
            peak = max(peak, float(np.abs(motion.y[2]).max()))
            assert np.abs(motion.y[:, -1]).max() < 2.1e-4
    assert 0.185 < peak < 0.186 < float(bound.upper) <= 0.30
