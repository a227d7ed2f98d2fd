"""One operating point of one closed loop, as the engineer stated it, in SI units and exact numbers."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Final, Literal

from flint import arb

from dossier.model.ball import WORKING_BITS, Ball, enclose, from_arb, precision
from dossier.model.expression import Expression
from dossier.model.region import Box, Interval

NOMINAL: Final = "nominal"
TOLERANCES: Final = "tolerances"
Scope = Literal["nominal", "tolerances"]


@dataclass(frozen=True, slots=True)
class Quantity:
    """An exact value `factor` * pi**`pi_power` in SI (or dB where `unit` is ``dB``), and how it was written."""

    factor: Fraction
    pi_power: int
    unit: str
    written: str


@dataclass(frozen=True, slots=True)
class State:
    """A state variable; `unit` as declared, `scale` is the SI value of one declared unit (offset for degC apart)."""

    name: str
    unit: str
    scale: Quantity
    meaning: str


@dataclass(frozen=True, slots=True)
class Parameter:
    """A constant of the closed loop; unknown but constant within `spread` unless `varies`.

    `nominal` is exact unless its unit carries pi; then it is a ball far tighter than any use of it.
    `kind` is ``exact`` (no spread), ``tolerance`` (production spread) or ``range`` (use).
    """

    name: str
    unit: str
    scale: Quantity
    nominal: Ball
    spread: Interval
    kind: Literal["exact", "tolerance", "range"]
    varies: bool
    meaning: str
    source: str
    written: str
    spread_written: str

    @property
    def has_spread(self) -> bool:
        """More than one value is meant; False for an exact value that is a tiny ball only because it carries pi."""
        return self.kind != "exact" and not self.spread.is_point


@dataclass(frozen=True, slots=True)
class Signal:
    """A named expression of states and parameters.  `expression` is as written (it may use other signals)."""

    name: str
    unit: str
    scale: Quantity
    expression: Expression
    role: Literal["command", "measurement", "internal"]
    limits: Interval
    meaning: str


@dataclass(frozen=True, slots=True)
class Disturbance:
    """A bounded input, otherwise arbitrary in time; zero in every claim that does not name it."""

    name: str
    unit: str
    spread: Interval


@dataclass(frozen=True, slots=True)
class Model:
    """A closed loop: x' = f (continuous) or x+ = f (sampled), equations as written, in the order of `states`."""

    name: str
    title: str
    basis: str
    time: Literal["continuous", "sampled"]
    sample_interval: Expression | None
    states: tuple[State, ...]
    parameters: tuple[Parameter, ...]
    signals: tuple[Signal, ...]
    disturbances: tuple[Disturbance, ...]
    equations: tuple[Expression, ...]
    domain: Box

    @property
    def state_names(self) -> tuple[str, ...]:
        """Names of the states in order."""
        return tuple(s.name for s in self.states)


@dataclass(frozen=True, slots=True)
class Criterion:
    """What the engineer asks for.  Bounds are absolute SI values (dB for gain margins)."""

    name: str
    claim: str
    over: Scope
    region: Box | None = None
    of: Expression | None = None
    of_written: str = ""
    at_least: Quantity | None = None
    at_most: Quantity | None = None
    between: tuple[Quantity, Quantity] | None = None
    loop: str = ""
    under: str = ""
    within: Quantity | None = None
    to: Quantity | None = None
    requirement: str = ""
    hazard: str = ""


@dataclass(frozen=True, slots=True)
class Candidate:
    """The engineer's own V over the offsets, whose symbols are the state names and stand for SI values, and its level.

    `written` is the formula as typed, over offsets in the states' own units.
    """

    function: Expression
    level: Fraction
    written: str


@dataclass(frozen=True, slots=True)
class Assumption:
    """One row of the assumption register."""

    name: str
    text: str
    basis: str
    covers: tuple[str, ...]
    kind: str
    owner: str
    state: str
    kept_by: str


@dataclass(frozen=True, slots=True)
class Case:
    """A model with one operating point: everything a claim can be about.

    `model.parameters` already carry this point's `set` values.  `region` and `limits` are offsets
    from the equilibrium, `search` and `model.domain` absolute.  `fixed` is the equilibrium stated
    with `at`, `near` the guess that chooses one; both None with `none_expected`.
    """

    name: str
    meaning: str
    model: Model
    fixed: tuple[Fraction, ...] | None
    near: tuple[Fraction, ...] | None
    none_expected: bool
    search: Box
    region: Box
    limits: Box
    criteria: tuple[Criterion, ...]
    assumptions: tuple[str, ...]
    set_values: tuple[tuple[str, str], ...] = ()
    candidate: Candidate | None = None

    @property
    def identifier(self) -> str:
        """The operating point's id, the prefix of the ids of its criteria and evidence."""
        return self.name


def at_combination(case: Case, values: Mapping[str, Fraction]) -> Case:
    """`case` built with exactly these values of the named parameters: they are its nominal ones and have no spread."""
    parameters = tuple(
        replace(p, nominal=Ball(values[p.name]), spread=Interval.point(values[p.name])) if p.name in values else p
        for p in case.model.parameters
    )
    return replace(case, model=replace(case.model, parameters=parameters))


def with_spreads(case: Case, box: Box) -> Case:
    """`case` with other spreads of the parameters in `box`."""
    sides = dict(box.items())
    parameters = tuple(replace(p, spread=sides.get(p.name, p.spread)) for p in case.model.parameters)
    return replace(case, model=replace(case.model, parameters=parameters))


def value_of(quantity: Quantity) -> Ball:
    """The SI value (dB for gains) of a stated quantity; exact unless it carries pi."""
    if quantity.pi_power == 0:
        return Ball(quantity.factor)
    with precision(WORKING_BITS):
        value = from_arb(arb.pi() ** quantity.pi_power * enclose(Ball(quantity.factor)))
    if value is None:
        raise ArithmeticError(f"{quantity.written} has no finite value")
    return value
