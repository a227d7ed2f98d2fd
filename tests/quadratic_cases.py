"""Loops with regions, limits and tolerances for the tests of the quadratic search."""

from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction
from math import isqrt

from loop_cases import equilibrium_at, loop_case

from dossier.model.ball import Ball
from dossier.model.case import Case, Parameter
from dossier.model.equilibrium import Equilibrium
from dossier.model.region import Box, Interval
from dossier.search.goal import Goal, Slab

Sides = Mapping[str, tuple[str | None, str | None]]


def box(names: tuple[str, ...], sides: Sides) -> Box:
    return Box.from_mapping(
        names, {n: Interval(*(None if v is None else Fraction(v) for v in side)) for n, side in sides.items()}
    )


def bounded_case(
    equations: Mapping[str, str],
    region: Sides,
    parameters: Mapping[str, str | tuple[str, str]] | None = None,
    limits: Sides | None = None,
    domain: Sides | None = None,
    sample_interval: str = "",
) -> Case:
    """A case with a region; a parameter given as (value, relative tolerance) gets that spread."""
    values = {n: v if isinstance(v, str) else v[0] for n, v in (parameters or {}).items()}
    case = loop_case(equations, {}, values, sample_interval)
    spread = tuple(_with_spread(p, (parameters or {})[p.name]) for p in case.model.parameters)
    names = tuple(equations)
    model = replace(case.model, parameters=spread, domain=box(names, domain or {}))
    return replace(case, model=model, region=box(names, region), limits=box(names, limits or {}))


def _with_spread(parameter: Parameter, given: str | tuple[str, str]) -> Parameter:
    if isinstance(given, str):
        return parameter
    value, share = Fraction(given[0]), Fraction(given[1])
    return replace(parameter, spread=Interval(value * (1 - share), value * (1 + share)), kind="tolerance")


def side_slabs(case: Case, sides: Box, place: Equilibrium | None = None) -> tuple[Slab, ...]:
    """One slab per bounded side; `place` turns absolute sides into offsets."""
    names = case.model.state_names
    slabs = []
    for k, (name, side) in enumerate(sides.items()):
        moved = side if place is None else side.shift(-place.state[k].middle)
        if side.lower is not None or side.upper is not None:
            weights = tuple(Fraction(int(k == j)) for j in range(len(names)))
            slabs.append(Slab(weights, moved.lower, moved.upper, name))
    return tuple(slabs)


def goal_of(case: Case, place: Equilibrium) -> Goal:
    """The region of the case inside its limits and its domain."""
    return Goal(case.region, (*side_slabs(case, case.limits), *side_slabs(case, case.model.domain, place)))


def press_slide() -> tuple[Case, Equilibrium]:
    """Servo press slide holding against a stiffening die: invented scenario, machine file press-slide."""
    case = bounded_case(
        {"e": "v", "v": "(F - c*v - k1*e - k3*e^3)/m", "q": "e", "F": "(-Kp*e - Kd*v - Ki*q - F)/tau"},
        {"e": ("-0.001", "0.001"), "v": ("-0.05", "0.05"), "q": ("-1e-5", "1e-5"), "F": ("-15000", "15000")},
        {
            "m": ("1200", "0.03"), "c": ("9000", "0.25"), "k1": ("4000000", "0.2"), "k3": ("2000000000000", "0.3"),
            "tau": ("0.0015", "0.15"), "Kp": "16000000", "Kd": "240000", "Ki": "200000000",
        },
        {"e": ("-0.0016", "0.0016")},
    )  # fmt: skip
    return case, equilibrium_at(0, 0, 0, 0)


def direct_current_bus(power: str, capacitance: str) -> tuple[Case, Equilibrium]:
    """Direct-current bus feeding constant-power drives: invented scenario, machine file dc-bus.

    The equilibrium is irrational: (1 + Rs/Rb) v^2 - Vs v + Rs P = 0, upper root, i = P/v + v/Rb.
    """
    case = bounded_case(
        {"i": "(Vs - Rs*i - v)/Ls", "v": "(i - P/v - v/Rb)/C"},
        {"i": ("-15", "15"), "v": ("-20", "20")},
        {"Vs": "650", "Rs": "0.15", "Ls": "0.0009", "C": capacitance, "Rb": "400", "P": power},
        domain={"v": ("200", "900")},
    )
    lead, resistance, load = 1 + Fraction("0.15") / 400, Fraction("0.15"), Fraction(power)
    scale = 10**70
    square = (650**2 - 4 * lead * resistance * load) * scale**2
    voltage = (650 + Fraction(isqrt(square.numerator // square.denominator), scale)) / (2 * lead)
    current = load / voltage + voltage / 400
    radius = Fraction(1, 10**60)
    return case, equilibrium_at(Ball(current, radius), Ball(voltage, radius))
