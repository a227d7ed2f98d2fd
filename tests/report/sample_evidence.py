"""A constructed dossier of Tarn Lane Automation that shows everything a report must be able to print.

The machine, its numbers and its verdicts are made up; they exercise the report and prove nothing.
Every verdict word occurs, one criterion is refuted with a counter-example, one equilibrium is irrational,
one model is sampled, and some names are long.
"""

from __future__ import annotations

from fractions import Fraction as F

from dossier.model.attempt import Attempt
from dossier.model.ball import Ball
from dossier.model.case import Assumption, Case, Criterion, Disturbance, Model, Parameter, Quantity, Signal, State
from dossier.model.claim import (
    Claim,
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
from dossier.model.dossier import (
    Campaign,
    Component,
    Document,
    Evidence,
    FigureData,
    PointEvidence,
    Provenance,
    SignOffRole,
    Trajectory,
)
from dossier.model.equilibrium import Eigenvalue, Equilibrium
from dossier.model.expression import Expression, add, call, div, mul, neg, number, power, symbol
from dossier.model.finding import Enclosure, Finding, Premise
from dossier.model.loop import model_hash
from dossier.model.outcome import LoopMargins, Outcome
from dossier.model.region import UNBOUNDED, Box, Interval

ONE = Quantity(F(1), 0, "1", "1")


def si(unit: str) -> Quantity:
    """One coherent SI unit."""
    return Quantity(F(1), 0, unit, f"1 {unit}")


def stated(value: str, unit: str, factor: F | int = 1, pi_power: int = 0) -> Quantity:
    """A bound as written, `value` times `factor` in SI."""
    return Quantity(F(value) * F(factor), pi_power, unit, f"{value} {unit}")


def side(low: str | int, high: str | int) -> Interval:
    return Interval(F(low), F(high))


def parameter(
    name: str,
    unit: str,
    value: str,
    low: str = "",
    high: str = "",
    kind: str = "exact",
    meaning: str = "",
    source: str = "",
    spread: str = "",
) -> Parameter:
    interval = side(low, high) if low else Interval.point(F(value))
    return Parameter(
        name, unit, si(unit), Ball(F(value)), interval, kind, False, meaning, source, value, spread or f"{low} … {high}"
    )  # type: ignore[arg-type]


e, v, force, grip, u = (symbol(n) for n in ("e", "v", "F", "grip", "u"))
SLIDE = Model(
    "slide", "Slide position loop at die contact", "Design note DN-012 rev 3", "continuous", None,
    (
        State("e", "m", si("m"), "slide position minus set point"),
        State("v", "m/s", si("m/s"), "slide velocity"),
        State("F", "N", si("N"), "drive force minus holding force"),
    ),
    (
        parameter("m", "kg", "1200", "1164", "1236", "tolerance", "moving mass", "weighing record W-7", "± 3 %"),
        parameter("k1", "N/m", "4e6", "3.2e6", "4.8e6", "range", "die stiffness", "die catalogue, 4 dies"),
        parameter("k3", "N/m^3", "2e12", meaning="stiffening of the die contact", source="press test PT-3"),
        parameter("tau", "s", "0.0015", meaning="time constant of the drive", source="drive data sheet"),
        parameter("Kp", "N/m", "1.6e7", meaning="position gain", source="release 4.2"),
        parameter("Kd", "N*s/m", "2.4e5", meaning="velocity gain", source="release 4.2"),
    ),
    (
        Signal("u", "N", si("N"), add(neg(mul(symbol("Kp"), e)), neg(mul(symbol("Kd"), v))), "command",
               side(-160000, 160000), "force command"),
        Signal("grip", "N", si("N"), add(mul(symbol("k1"), e), mul(symbol("k3"), power(e, 3))), "internal",
               UNBOUNDED, "die contact force beyond the holding force"),
    ),
    (Disturbance("w", "N", side(-50, 50)),),
    (v, div(add(force, neg(grip)), symbol("m")), div(add(u, neg(force)), symbol("tau"))),
    Box(("e", "v", "F"), (side("-1/500", "1/500"), UNBOUNDED, UNBOUNDED)),
)  # fmt: skip

th, om = symbol("theta"), symbol("omega")
ARM = Model(
    "transfer_arm_with_counterweight", "Transfer arm, angle loop in the drive controller",
    "Commissioning report CR-88, section 4", "sampled", symbol("Ts"),
    (
        State("theta", "deg", Quantity(F(1, 180), 1, "rad", "1 deg"), "arm angle from the horizontal"),
        State("omega", "deg/s", Quantity(F(1, 180), 1, "rad/s", "1 deg/s"), "angular velocity of the arm"),
    ),
    (
        parameter("Ts", "s", "0.002", meaning="sampling interval", source="task list TL-2"),
        parameter("g_over_length", "1/s^2", "12.26", "11.9", "12.7", "tolerance", "gravity over length", "DWG 4711"),
        parameter("K", "1/s^2", "900", meaning="angle gain", source="release 4.2"),
        parameter("D", "1/s", "60", meaning="rate gain", source="release 4.2"),
    ),
    (
        Signal("torque_command_per_inertia", "1/s^2", si("1/s^2"),
               call("sat", neg(add(mul(symbol("K"), th), mul(symbol("D"), om))), number(-80), number(80)),
               "command", side(-80, 80), "commanded angular acceleration, limited in the drive"),
    ),
    (),
    (
        add(th, mul(symbol("Ts"), om)),
        add(om, mul(symbol("Ts"), add(symbol("torque_command_per_inertia"),
                                      neg(mul(symbol("g_over_length"), call("cos", th)))))),
    ),
    Box(("theta", "omega"), (side("-157/100", "157/100"), UNBOUNDED)),
)  # fmt: skip


def _criteria_hold() -> tuple[Criterion, ...]:
    decibel = stated("6", "dB")
    return (
        Criterion("C1", "asymptotic_stability", "tolerances", requirement="RQ-17", hazard="HZ-4"),
        Criterion("C2", "attraction", "tolerances", requirement="RQ-18", hazard="HZ-4"),
        Criterion("C3", "excursion", "tolerances", of=e, of_written="e",
                  between=(stated("-1.6", "mm", F(1, 1000)), stated("1.6", "mm", F(1, 1000))), requirement="RQ-19"),
        Criterion("C4", "decay_rate", "tolerances", at_least=stated("5", "1/s"), requirement="RQ-20"),
        Criterion("C5", "gain_margin", "nominal", loop="u", at_least=decibel, requirement="RQ-21"),
        Criterion("C6", "phase_margin", "nominal", loop="u", at_least=stated("40", "deg", F(1, 180), 1)),
        Criterion("C7", "delay_margin", "nominal", loop="u", at_least=stated("1.5", "ms", F(1, 1000))),
        Criterion("C8", "limits_kept", "tolerances"),
        Criterion("C9", "equilibria_listed", "nominal"),
        Criterion("C10", "settling_time", "nominal", of=e, of_written="e", to=stated("0.1", "mm", F(1, 1000)),
                  within=stated("200", "ms", F(1, 1000))),
    )  # fmt: skip


HOLD = Case(
    "bottom_hold", "Hold at bottom dead point with the die closed", SLIDE, (F(0), F(0), F(0)), None, False,
    Box(("e", "v", "F"), (side("-1/500", "1/500"), side(-1, 1), side(-200000, 200000))),
    Box(("e", "v", "F"), (side("-1/1000", "1/1000"), side("-1/20", "1/20"), side(-15000, 15000))),
    Box(("e", "v", "F"), (side("-8/5000", "8/5000"), UNBOUNDED, UNBOUNDED)),
    _criteria_hold(), ("A1", "A2", "A3"), (("k1", "4.4e6 N/m"),),
)  # fmt: skip
LOADED = Case(
    "hold_under_load", "Hold against the ejector, die partly open", SLIDE, None, (F(1, 2000), F(0), F(0)), False,
    HOLD.search, HOLD.region, HOLD.limits,
    (
        Criterion("C1", "attraction", "nominal", requirement="RQ-18"),
        Criterion("C2", "equilibrium_value", "nominal", of=e, of_written="e",
                  between=(stated("0.2", "mm", F(1, 1000)), stated("0.5", "mm", F(1, 1000)))),
        Criterion("C3", "limits_kept", "nominal"),
        Criterion("C4", "damping_ratio", "nominal", at_least=stated("0.4", "1")),
        Criterion("C5", "peak_sensitivity", "nominal", loop="u", at_most=stated("2", "1")),
    ),
    ("A1", "A3"),
)  # fmt: skip
PARK = Case(
    "arm_parked", "Transfer arm held in the parking position", ARM, None, (F(0), F(0)), False,
    Box(("theta", "omega"), (side("-157/100", "157/100"), side(-10, 10))),
    Box(("theta", "omega"), (side("-1/10", "1/10"), side("-1/2", "1/2"))),
    Box(("theta", "omega"), (side("-1/5", "1/5"), UNBOUNDED)),
    (
        Criterion("C1", "existence", "nominal"),
        Criterion("C2", "asymptotic_stability", "tolerances"),
        Criterion("C3", "contraction", "nominal", at_most=stated("0.99", "1")),
    ),
    ("A4",),
)  # fmt: skip

HASH = model_hash(HOLD)
V = {(2, 0, 0): F(7, 4) * 10**6, (1, 1, 0): F(48213, 1), (0, 2, 0): F(1861, 3), (1, 0, 1): F(1, 9),
     (0, 1, 1): F(11, 10000), (0, 0, 2): F(22, 10**9)}  # fmt: skip
ZEROS = ((1, 0, 0), (0, 1, 0), (0, 0, 1))
P = ((F(7, 4) * 10**6, F(48213, 2), F(1, 18)), (F(48213, 2), F(1861, 3), F(11, 20000)),
     (F(1, 18), F(11, 20000), F(22, 10**9)))  # fmt: skip
SPREAD = Box(("m", "k1"), (side(1164, 1236), side(3200000, 4800000)))


def _claims_hold() -> tuple[Claim, ...]:
    origin = tuple(Ball(F(0)) for _ in range(3))
    gram = Gram(ZEROS, P)
    return (
        RootsClaim("bottom_hold.R1", HASH, "nominal", "E", HOLD.search, (SolutionBox(HOLD.search, origin),), (),
                   True, 41),
        RouthClaim("bottom_hold.H1", HASH, "nominal", "T1", "bottom_hold.E1",
                   tuple(Ball(c) for c in (F(1), F(2000, 3), F(420000, 1), F(9, 7) * 10**7)), (), 3, 0, 0),
        MatrixClaim("bottom_hold.L1", HASH, "tolerances", "T1", "bottom_hold.E1", "half-plane", F(0),
                    (MatrixCell(SPREAD, P),)),
        MatrixClaim("bottom_hold.L2", HASH, "tolerances", "T1", "bottom_hold.E1", "half-plane", F(5),
                    (MatrixCell(SPREAD, P), MatrixCell(SPREAD, P))),
        LyapunovClaim("bottom_hold.V2", HASH, "tolerances", "T2", "bottom_hold.E1", "quadratic", V, F(9, 4), SPREAD, 0,
                      (DecreaseWitness((0, 0), gram, gram),)),
        CoverClaim("bottom_hold.B2", HASH, "nominal", "T2", "bottom_hold.E1", V, F(9, 4), 18204),
        SturmClaim("bottom_hold.S-u", HASH, "nominal", "T11", "bottom_hold.E1", "u", (Ball(F(1)),), (Ball(F(1)),),
                   (Crossing(F(40000), F(40001)),), (Crossing(F(90000), F(90001)),), ()),
    )  # fmt: skip


def _premises(evidence: str) -> tuple[Premise, ...]:
    return (
        Premise("a", "every start of the region lies in the proved set", "proved", "exact",
                "the region fits at scale 1.213", evidence),
        Premise("b", "the set is compact and lies in the interior of the domain", "proved", "exact",
                "bounding box of the set e in [−1.71e-3, 1.71e-3]", evidence),
        Premise("c", "the equations are continuously differentiable on the set", "proved", "enclosed", "", evidence),
        Premise("d", "V = y'Py with P positive definite and a positive level", "proved", "exact", "", evidence),
        Premise("e", "the derivative of V is negative elsewhere in the set", "proved", "exact",
                "Gram identities at 4 Bernstein indices", evidence),
    )  # fmt: skip


def _findings_hold() -> tuple[Finding, ...]:
    unit = "SI"
    value = {"value": Enclosure(F("13.68"), F("13.69"), "1/s")}
    bound = {"bound": Enclosure(F("-0.00138"), F("0.00138"), unit), "equilibrium value": Enclosure(F(0), F(0), unit),
             "proved scale of the region": Enclosure(F("1.2131"), F("1.2131"), "1")}  # fmt: skip
    claim = "V is positive and decreases along every motion in the set V ≤ 9/4 around bottom_hold.E1"
    return (
        Finding("bottom_hold.R1", "exact", "proved", "exact", "nominal", "E", "the list of equilibria is complete",
                (Premise("cover", "every part of the search box is excluded or lies in a uniqueness box", "proved",
                         "enclosed", "41 boxes", "bottom_hold.R1"),), {}, ("bottom_hold.R1",)),
        Finding("bottom_hold.V2", "exact", "proved", "exact", "tolerances", "T2", claim,
                _premises("bottom_hold.V2")[1:], {}, ("bottom_hold.V2",)),
        Finding("bottom_hold.B2", "interval", "proved", "enclosed", "nominal", "T2", claim,
                (Premise("e", "the derivative of V is negative elsewhere in the set", "proved", "enclosed",
                         "18204 boxes, none open", "bottom_hold.B2"),), {}, ("bottom_hold.B2",)),
        Finding("bottom_hold.L2", "exact", "proved", "exact", "tolerances", "T1",
                "every eigenvalue lies left of −5 1/s for every parameter combination",
                (Premise("spectrum", "P and the Lyapunov inequality are positive definite on every cell", "proved",
                         "exact", "2 cells", "bottom_hold.L2"),), {}, ("bottom_hold.L2",)),
        Finding("bottom_hold.C1", "exact", "proved", "exact", "tolerances", "T1",
                "the operating point is asymptotically stable for every combination",
                (Premise("smooth", "the right-hand side is continuously differentiable near the equilibrium", "proved",
                         "exact"), Premise("equilibrium", "the point is an equilibrium", "proved", "exact", "",
                                           "bottom_hold.R1"),
                 Premise("spectrum", "every eigenvalue lies strictly inside the stated region of the complex plane",
                         "proved", "exact", "", "bottom_hold.L1")), {}, ("bottom_hold.L1", "bottom_hold.R1")),
        Finding("bottom_hold.C2", "exact", "proved", "exact", "tolerances", "T2",
                "every motion from the region stays in the set, exists for all time and converges",
                _premises("bottom_hold.V2"), {}, ("bottom_hold.V2",)),
        Finding("bottom_hold.C3", "exact", "proved", "exact", "tolerances", "T9",
                "e stays within its bounds along every motion from the region", _premises("bottom_hold.V2"), bound,
                ("bottom_hold.V2",)),
        Finding("bottom_hold.C4", "exact", "proved", "exact", "tolerances", "T1",
                "the decay rate of the linear part is at least 5 1/s", _premises("bottom_hold.L2")[2:3], value,
                ("bottom_hold.L2",)),
        Finding("bottom_hold.C8", "exact", "undecided", "exact", "tolerances", "T9",
                "no motion from the region leaves the limits",
                (*_premises("bottom_hold.V2"),
                 Premise("limit u", "the signal u stays within its limits on the set", "undecided", "enclosed",
                         "within −181000 .. 181000", "bottom_hold.V2")),
                {"proved scale of the region": Enclosure(F("0.8412"), F("0.8412"), "1")}, ("bottom_hold.V2",)),
        Finding("bottom_hold.C8", "simulation", "undecided", "sampled", "tolerances", "",
                "400 motions met it and none violated it", (),
                {"motions without violation": Enclosure(F(400), F(400), "1")},
                ("bottom_hold.M1",)),
    )  # fmt: skip


def _outcomes_hold() -> tuple[Outcome, ...]:
    p = "bottom_hold"
    none = Enclosure(None, None, "dB")
    return (
        Outcome(f"{p}.C1", "asymptotic_stability", "tolerances", "proved", "exact", "T1",
                "The operating point is asymptotically stable for every combination.", (f"{p}.L1", f"{p}.R1")),
        Outcome(f"{p}.C2", "attraction", "tolerances", "proved", "exact", "T2",
                "Every motion from the region stays in the set, exists for all time and converges.", (f"{p}.V2",)),
        Outcome(f"{p}.C3", "excursion", "tolerances", "proved", "exact", "T9",
                "e stays within its bounds along every motion from the region.", (f"{p}.V2",),
                Enclosure(F("-0.00138123"), F("0.00138123"), "SI"), Enclosure(F("-0.0016"), F("0.0016"), "mm"),
                Enclosure(F("0.13673125"), F("0.13673125"), "1")),
        Outcome(f"{p}.C4", "decay_rate", "tolerances", "proved", "exact", "T1",
                "The decay rate of the linear part is at least 5 1/s.", (f"{p}.L2",),
                Enclosure(F("13.6812345"), F("13.6912345"), "1/s"), Enclosure(F(5), None, "1/s"),
                Enclosure(F("1.7362469"), F("1.7362469"), "1")),
        Outcome(f"{p}.C5", "gain_margin", "nominal", "proved", "enclosed", "T11",
                "No finite gain change upward loses stability; downward the loop stays stable to zero.", (f"{p}.S-u",),
                none, Enclosure(F(6), None, "dB")),
        Outcome(f"{p}.C6", "phase_margin", "nominal", "refuted", "enclosed", "T11",
                "The phase margin is proved to be less than 40 deg.", (f"{p}.S-u",),
                Enclosure(F("0.58214471"), F("0.58214472"), "rad"), Enclosure(F("0.698"), None, "deg"), None, "",
                {"phase margin": "33.354 … 33.355 deg at 54.1 Hz", "loop": "u", "parameters": "nominal"}),
        Outcome(f"{p}.C7", "delay_margin", "nominal", "proved", "enclosed", "T11",
                "The least delay that loses stability is enclosed above 1.5 ms.", (f"{p}.S-u",),
                Enclosure(F("0.00171234"), F("0.00171235"), "s"), Enclosure(F("0.0015"), None, "ms"),
                Enclosure(F("0.14156"), F("0.14156"), "1")),
        Outcome(f"{p}.C8", "limits_kept", "tolerances", "supported", "sampled", "",
                "400 motions met it and none violated it. This is not a proof. "
                "Not shown: the signal u stays within its limits on the set: within −181000 .. 181000.",
                (f"{p}.M1",), sub_scope="the same for 0.8412 times the region of starts"),
        Outcome(f"{p}.C9", "equilibria_listed", "nominal", "proved", "enclosed", "E",
                "The list of equilibria in the search box is complete and each is classified.", (f"{p}.R1",)),
        Outcome(f"{p}.C10", "settling_time", "nominal", "not attempted", None, "",
                "This version does not decide settling-time certificates."),
    )  # fmt: skip


def _flow() -> tuple[tuple[float, float, float, float], ...]:
    return tuple((x / 4000, y / 80, y / 80, -30 * x / 40 - y / 4) for x in range(-4, 5) for y in range(-4, 5))


def _hold() -> PointEvidence:
    path = tuple((0.001 * 0.9**k, -0.02 * 0.9**k * (k % 7 - 3) / 3, 4000 * 0.9**k) for k in range(60))
    zero = tuple(Ball(F(0)) for _ in range(3))
    eigenvalues = (
        Eigenvalue(F("-13.68123456"), F(0), F(1, 10**14)),
        Eigenvalue(F("-326.4926938"), F("540.1182736"), F(3, 10**13)),
        Eigenvalue(F("-326.4926938"), F("-540.1182736"), F(3, 10**13)),
    )
    return PointEvidence(
        HOLD, HASH,
        (Equilibrium("bottom_hold.E1", zero, True, True, "stable", eigenvalues, True),),
        True, (), _claims_hold(), _findings_hold(),
        (
            Attempt("bottom_hold.C8", "quadratic certificate shaped by the signal limits", "infeasible",
                    "no ellipsoid holds the region and keeps u within its limits", {"solves": 24, "iterations": 611}),
            Attempt("bottom_hold.C2", "common quadratic function at the vertices", "found", "level 9/4",
                    {"solves": 7, "iterations": 132}),
        ),
        _outcomes_hold(),
        (LoopMargins("u", Enclosure(None, None, "dB"), None, Enclosure(F("-31.412345"), F("-31.412344"), "dB"),
                     Enclosure(F(0), F(0), "rad/s"), Enclosure(F("0.58214471"), F("0.58214472"), "rad"),
                     Enclosure(F("339.9712"), F("339.9713"), "rad/s"), Enclosure(F("0.00171234"), F("0.00171235"), "s"),
                     Enclosure(F("339.9712"), F("339.9713"), "rad/s"), Enclosure(F("1.8412"), F("1.8413"), "1"),
                     Enclosure(F("512.1"), F("512.2"), "rad/s"), "bottom_hold.S-u"),),
        Campaign("bottom_hold.M1", "Dormand–Prince 5(4), relative tolerance 1e-10",
                 "independent starts uniform over the region, parameters uniform over their spreads",
                 20261130, 400, 0, 2,
                 "1.2 s", "with confidence 95 % the violating share under this distribution is below 0.75 %",
                 {"e": (-0.00101, 0.00104), "v": (-0.083, 0.079), "F": (-16120.0, 15980.0)},
                 "e reaches 0.00104 m from the corner e = 0.001, v = 0.05"),
        FigureData(("e", "v"), (Trajectory(tuple(0.01 * k for k in range(60)), path),), _flow()),
        ("the sign of m is taken from its tolerance: never zero",),
    )  # fmt: skip


def _loaded() -> PointEvidence:
    root = F("0.000314159265358979323846")
    state = (Ball(root, F(1, 10**21)), Ball(F(0)), Ball(root * 16 * 10**6, F(1, 10**13)))
    other = (Ball(F("-0.0013071828182845904"), F(1, 10**19)), Ball(F(0)), Ball(F("-20914.925"), F(1, 1000)))
    digest = model_hash(LOADED)
    p = "hold_under_load"
    return PointEvidence(
        LOADED, digest,
        (
            Equilibrium(f"{p}.E1", state, True, True, "stable", (Eigenvalue(F("-11.2"), F("41.7"), F(1, 10**9), 1),
                        Eigenvalue(F("-11.2"), F("-41.7"), F(1, 10**9), 1),
                        Eigenvalue(F("-644.2"), F(0), F(1, 10**9)))),
            Equilibrium(f"{p}.E2", other, False, True, "unstable", (Eigenvalue(F("3.1"), F(0), F(1, 10**9)),
                        Eigenvalue(F("-31.2"), F(0), F(1, 10**9)), Eigenvalue(F("-632"), F(0), F(1, 10**9))), False,
                        ("reached only from beyond the region",)),
        ),
        False, ("two boxes near e = 1.9 mm could not be resolved",),
        (RootsClaim(f"{p}.R1", digest, "nominal", "E", LOADED.search, (SolutionBox(LOADED.search, state),),
                    (LOADED.search,), False, 2000),
         LyapunovClaim(f"{p}.V4", digest, "nominal", "T2", f"{p}.E1", "sum of squares",
                       {(4, 0, 0): F(1, 3), (2, 0, 0): F(5), (0, 2, 0): F(1, 7), (0, 0, 2): F(2, 7),
                        (2, 2, 0): F(1, 90)},
                       F(1), Box((), ()), 0, ())),
        (Finding(f"{p}.V4", "exact", "undecided", "exact", "nominal", "T2", "V decreases in the set V ≤ 1",
                 (Premise("e", "the derivative of V is negative elsewhere in the set", "undecided", "exact",
                          "Gram matrix not positive definite after rounding", f"{p}.V4"),), {}, (f"{p}.V4",)),
         Finding(f"{p}.C2", "interval", "proved", "enclosed", "nominal", "E",
                 "e at the equilibrium is within its bounds",
                 (Premise("value", "the enclosure lies within the bounds", "proved", "enclosed", "", f"{p}.R1"),), {},
                 (f"{p}.R1",)),
         Finding(f"{p}.C3", "simulation", "refuted", "floating", "nominal", "", "a motion leaves the limits",
                 (), {}, (f"{p}.M1",))),
        (Attempt(f"{p}.C1", "sum of squares, degree 4", "numerical failure",
                 "the candidate was not positive definite after rounding", {"solves": 3, "iterations": 90}),
         Attempt(f"{p}.C1", "quadratic certificate", "no candidate", "the largest proved level is too small",
                 {"solves": 12}),),
        (
            Outcome(f"{p}.C1", "attraction", "nominal", "not established", None, "",
                    "Not shown: every start of the region lies in the proved set: the region fits at scale 0.41.",
                    sub_scope="the same for 0.41 times the region of starts"),
            Outcome(f"{p}.C2", "equilibrium_value", "nominal", "proved", "enclosed", "E",
                    "e at the equilibrium is within its bounds.", (f"{p}.R1",),
                    Enclosure(root - F(1, 10**21), root + F(1, 10**21), "SI"),
                    Enclosure(F("0.0002"), F("0.0005"), "mm"),
                    Enclosure(F("0.37168"), F("0.37168"), "1")),
            Outcome(f"{p}.C3", "limits_kept", "nominal", "contradicted", "floating", "",
                    "A floating-point motion leaves the limit of e by 14 times its estimated error, not enclosed.",
                    (f"{p}.M1",), counter_example={"start": "e = 0.001 m, v = 0.05 m/s, F = −15000 N",
                                                    "event": "e = 1.613 mm at t = 4.1 ms", "parameters": "nominal"}),
            Outcome(f"{p}.C4", "damping_ratio", "nominal", "refuted", "enclosed", "T1",
                    "The least damping ratio is proved to be below 0.4.", (f"{p}.R1",),
                    Enclosure(F("0.259393"), F("0.259394"), "1"), Enclosure(F("0.4"), None, "1"), None, "",
                    {"eigenvalue": "−11.2 ± 41.7 i 1/s", "damping ratio": "0.2593…"}),
            Outcome(f"{p}.C5", "peak_sensitivity", "nominal", "not applicable", None, "",
                    "The closed loop is not proved stable at this point, so its margins have no meaning.")
        ),
        (), Campaign(f"{p}.M1", "Dormand–Prince 5(4)", "corners of the region", 7, 64, 1, 0, "1.2 s", "", {}, ""), None,
    )  # fmt: skip


def _parked() -> PointEvidence:
    p, digest = "arm_parked", model_hash(PARK)
    because = "The model has no equilibrium in the search box: 118 boxes exclude it."
    return PointEvidence(
        PARK, digest, (), True, (),
        (RootsClaim(f"{p}.R1", digest, "nominal", "E", PARK.search, (), (), True, 118),),
        (Finding(f"{p}.R1", "interval", "proved", "enclosed", "nominal", "E",
                 "the model has no equilibrium in the search box", (), {}, (f"{p}.R1",)),),
        (),
        (
            Outcome(f"{p}.C1", "existence", "nominal", "refuted", "enclosed", "E", because, (f"{p}.R1",),
                    counter_example={"search box": "θ in [−90, 90] deg", "equilibria": "none"}),
            Outcome(f"{p}.C2", "asymptotic_stability", "tolerances", "no operating point", "enclosed", "E", because,
                    (f"{p}.R1",)),
            Outcome(f"{p}.C3", "contraction", "nominal", "no operating point", "enclosed", "E", because, (f"{p}.R1",)),
        ),
        (), None, None, ("the saturation of torque_command_per_inertia is met inside the search box",),
    )  # fmt: skip


def sample_evidence() -> Evidence:
    """The whole constructed dossier."""
    digest = "9f2c41e07d5b8a6630aa1c84d2be97f15c3e6a4fd0e1b27c88d93f40615ab7ce"
    return Evidence(
        Document("SD-0142", "Slide hold and transfer arm of the servo press", "B", "2026-11-30", "Servo press SP-160",
                 "Tarn Lane Automation",
                 "Position loops of the slide at die contact and of the transfer arm, in the modes listed. Hydraulic "
                 "ejector, guard locking and random hardware faults are not covered.",
                 ("ISO 13849-1:2023", "ISO 12100:2010"),
                 (SignOffRole("prepared", "R. Okonjo", "control engineer"), SignOffRole("checked", "", ""),
                  SignOffRole("independently reviewed", "", ""), SignOffRole("approved", "", ""))),
        (
            Assumption("A1", "The die contact is elastic: unloading follows loading within 2 %.", "Design note DN-012",
                       ("slide",), "modelling", "R. Okonjo", "accepted", "yearly die inspection"),
            Assumption("A2", "The drive force follows its command with one time constant.", "Drive data sheet DS-5",
                       ("slide", "bottom_hold"), "physical", "", "open", ""),
            Assumption("A3", "Controller release 4.2 with the listed gains is loaded and locked.", "Release note 4.2",
                       ("slide",), "organisational", "Service", "accepted", "parameter lock"),
            Assumption("A4", "The sampling interval is constant.", "Task list TL-2",
                       ("transfer_arm_with_counterweight",), "timing", "", "open", "watchdog WD-3"),
        ),
        (_hold(), _loaded(), _parked()),
        Provenance("0.1.0", digest, "dossier build press.yaml --effort standard", "standard",
                   (Component("dossier", "0.1.0", "this program"),
                    Component("dossier.model", "0.1.0", "trusted core: what is said", 2201, digest[::-1]),
                    Component("dossier.checks", "0.1.0", "trusted core: what is proved", 1840, digest),
                    Component("Python", "3.11.7", "runs the program"),
                    Component("python-flint", "0.8.0", "exact and ball arithmetic (proof)")),
                   (("van der Pol, reversed time", "attractive", "attractive", True),
                    ("x' = x with V = x²", "refused", "refused", True))),
        (("press.yaml", digest), ("models/slide.yaml", digest[::-1])),
    )  # fmt: skip


def expression_of_every_kind() -> Expression:
    """One expression in which every operation of the formula language occurs."""
    x = symbol("x")
    functions = [call(n, x) for n in ("sin", "cos", "tan", "asin", "acos", "atan", "exp", "log", "sqrt", "abs", "tanh")]
    return add(*functions, call("sat", x, number(-1), number("1/3")), neg(div(x, power(x, F(3, 2)))), Expression("pi"))
