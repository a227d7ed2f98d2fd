"""Complete lists of equilibria against published or exactly computed values."""

import math
from fractions import Fraction

import pytest
from builders import make_case

from dossier.checks.equilibria import check_roots, enclose_equilibria, list_equilibria
from dossier.model.claim import RootsClaim
from dossier.search.effort import EFFORTS
from dossier.search.equilibria import seed_equilibria

QUICK = EFFORTS["quick"]


def proved_list(case):
    """All equilibria, after a complete and twice proved list."""
    claim = enclose_equilibria(case, seed_equilibria(case, QUICK), QUICK.boxes)
    assert isinstance(claim, RootsClaim) and claim.complete
    finding = check_roots(case, claim, QUICK.boxes)
    assert finding.result == "proved" and finding.is_rigorous
    return list_equilibria(case, claim)


def agrees(equilibria, expected, tolerance):
    """Every enclosure lies within `tolerance` of the expected state, in order."""
    assert len(equilibria) == len(expected)
    for equilibrium, state in zip(equilibria, expected, strict=True):
        for ball, value in zip(equilibrium.state, state, strict=True):
            assert abs(ball.middle - Fraction(value)) + ball.radius <= Fraction(tolerance)


def test_the_three_states_of_the_diabatic_reactor():
    # B. W. Bequette, Process Dynamics, Prentice Hall 1998, module 9, case 2 (from memory; all digits recomputed).
    case = make_case(
        {
            "C": "FV*(Caf - C) - k0*exp(-E/(R*T))*C",
            "T": "FV*(Tf - T) + 5960/500*k0*exp(-E/(R*T))*C - 150/500*(T - Tj)",
        },
        {"FV": 1, "Caf": 10, "k0": 9703 * 3600, "E": 11843, "R": "1.987", "Tf": 298, "Tj": 298},
        search={"C": (0, 10), "T": (280, 450)},
        near=(9, 310),
    )
    expected = [
        ("2.358917104364", "368.062852396908"),
        ("5.517931134914", "339.097123747561"),
        ("8.563565609819", "311.170998408425"),
    ]
    listed = proved_list(case)
    agrees(listed, expected, "1e-11")
    assert [e.chosen for e in listed] == [False, False, True]


@pytest.mark.parametrize(
    ("peak", "stable", "unstable"),
    [("1.8", "26.387799961", "153.612200039"), ("1.4625", "33.162027857", "146.837972143")],
)
def test_the_equilibria_of_the_swing_equation(peak, stable, unstable):
    # H. Saadat, Power System Analysis, example 11.5: delta0 = 26.388, delta_max = 153.612 and 146.838 degrees
    # (from memory; further digits recomputed).  The damping is ours and does not move the equilibria.
    case = make_case(
        {"d": "w", "w": "pi*f0/H*(Pm - Pmax*sin(d)) - 0.1*w"},
        {"f0": 60, "H": 5, "Pm": "0.8", "Pmax": peak},
        search={"d": (0, 4), "w": (-10, 10)},
        near=("0.5", 0),
    )
    listed = proved_list(case)
    assert len(listed) == 2
    for equilibrium, degrees in zip(listed, (stable, unstable), strict=True):
        angle, speed = equilibrium.state
        assert abs(math.degrees(angle.middle) - float(degrees)) < 1e-8
        assert speed.is_exact and speed.middle == 0


def test_the_nine_equilibria_of_himmelblau():
    # D. M. Himmelblau, Applied Nonlinear Programming, 1972 (from memory): four minima, four saddles, one maximum.
    case = make_case(
        {
            "x": "-4*x*(x^2 + y - 11) - 2*(x + y^2 - 7)",
            "y": "-2*(x^2 + y - 11) - 4*y*(x + y^2 - 7)",
        },
        search={"x": (-6, 6), "y": (-6, 6)},
        near=(3, 2),
    )
    listed = proved_list(case)
    states = [tuple(float(b.middle) for b in e.state) for e in listed]
    assert len(listed) == 9
    for known in (
        (-2.805118, 3.131312), (-3.779310, -3.283186), (3.584428, -1.848126), (-0.270845, -0.923039),
    ):  # fmt: skip
        assert any(math.dist(s, known) < 2e-6 for s in states)
    (minimum,) = (e for e in listed if e.chosen)
    assert [b.middle for b in minimum.state] == [3, 2] and all(b.is_exact for b in minimum.state)


def test_the_fifteen_equilibria_of_the_camel():
    # L. C. W. Dixon and G. P. Szego 1978, six-hump camel (from memory): 15 critical points, two global minima.
    case = make_case(
        {"x": "-8*x + 8.4*x^3 - 2*x^5 - y", "y": "-x + 8*y - 16*y^3"}, search={"x": (-3, 3), "y": (-2, 2)}, near=(0, -1)
    )
    listed = proved_list(case)
    assert len(listed) == 15
    (minimum,) = (e for e in listed if e.chosen)
    assert math.dist([float(b.middle) for b in minimum.state], (0.0898, -0.7126)) < 1e-4


def test_the_third_equilibrium_outside_the_usual_plots():
    # Planar benchmark of the Hachicho-Tibken and Chesi literature (from memory); x = -5 +- sqrt 6 exactly.
    case = make_case(
        {"x": "-x + y", "y": "0.1*x - 2*y - x^2 - 0.1*x^3"}, search={"x": (-10, 10), "y": (-10, 10)}, near=(0, 0)
    )
    listed = proved_list(case)
    assert len(listed) == 3
    for equilibrium, side in zip(listed[:2], (-1, 1), strict=True):
        for ball in equilibrium.state:
            root = (ball.lower + 5, ball.upper + 5)
            assert min(root[0] ** 2, root[1] ** 2) < 6 < max(root[0] ** 2, root[1] ** 2) and (root[0] < 0) == (side < 0)
    assert listed[2].chosen and all(b.is_exact and b.middle == 0 for b in listed[2].state)


def test_the_fixed_points_of_henon():
    # M. Henon, Comm. Math. Phys. 50 (1976) 69-77.
    case = make_case(
        {"x": "1 - a*x^2 + y", "y": "b*x"}, {"a": "1.4", "b": "0.3"}, search={"x": (-3, 3), "y": (-3, 3)},
        near=(1, 0), sampled=True,
    )  # fmt: skip
    expected = [("-1.1313544770895", "-0.3394063431269"), ("0.6313544770895", "0.1894063431269")]
    agrees(proved_list(case), expected, "1e-13")


def test_the_irrational_equilibria_of_a_bistable_pair():
    # Exercise in the manner of H. K. Khalil, Nonlinear Systems (constructed): x = 2/sqrt 3, y = 2/(3 sqrt 3).
    case = make_case({"x": "x - x^3 + y", "y": "x - 3*y"}, search={"x": (-3, 3), "y": (-3, 3)}, near=(1, 0))
    listed = proved_list(case)
    assert len(listed) == 3
    x, y = listed[2].state
    assert x.lower**2 < Fraction(4, 3) < x.upper**2 and y.lower**2 < Fraction(4, 27) < y.upper**2
    assert listed[2].chosen and all(b.is_exact for b in listed[1].state)


def test_the_claim_of_a_unique_equilibrium_is_contradicted():
    # Constructed after a public worked solution that calls the origin the only equilibrium; all (0, k pi) are.
    case = make_case({"x": "sin(y)", "y": "-x - sin(y)"}, search={"x": (-3, 3), "y": (-7, 7)}, near=(0, 0))
    listed = proved_list(case)
    assert len(listed) == 5
    for equilibrium, k in zip(sorted(listed, key=lambda e: e.state[1].middle), range(-2, 3), strict=True):
        assert abs(float(equilibrium.state[1].middle) - k * math.pi) < 1e-14
        assert equilibrium.state[0].lower <= 0 <= equilibrium.state[0].upper


BUS = {"Vs": 650, "Rs": "0.15", "Ls": "0.0009", "C": "0.00047", "Rb": 400, "P": 45000}
BUS_EQUATIONS = {"i": "(Vs - Rs*i - v)/Ls", "v": "(i - P/v - v/Rb)/C"}


def bus_voltages():
    """Exact quadratic: with i = (650 - v)/0.15, (1 + 0.15/400) v^2 - 650 v + 0.15 * 45000 = 0."""
    a, b, c = 1 + Fraction("0.15") / 400, Fraction(-650), Fraction("0.15") * 45000
    return a, b, c


@pytest.mark.parametrize(
    ("current", "voltage", "count"), [((0, 4500), (5, 900), 2), ((0, 3500), (200, 900), 1), ((0, 4500), (11, 600), 0)]
)
def test_the_working_points_of_a_bus_with_constant_power(current, voltage, count):
    case = make_case(BUS_EQUATIONS, BUS, search={"i": current, "v": voltage}, near=(71, 639), none_expected=not count)
    listed = proved_list(case)
    assert len(listed) == count
    a, b, c = bus_voltages()
    for equilibrium in listed:
        i, v = equilibrium.state
        values = [(a * x + b) * x + c for x in (v.lower, v.upper)]
        assert min(values) <= 0 <= max(values)
        assert (650 - v.upper) / Fraction("0.15") <= i.upper and i.lower <= (650 - v.lower) / Fraction("0.15")
    if count:
        agrees(listed[:1], [("71.99847601996267", "639.2002285970055")], "1e-10")
    if count > 1:
        # The collapsed point of the bus: 10.556 V at 4263 A.
        agrees(listed[1:], [("4262.9592", "10.55611")], "1e-4")
        assert [e.chosen for e in listed] == [True, False]
