"""From an engineer's criteria to what certificates should achieve: which regions, slabs, levels and loops."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Final

from dossier.model.affine import affine_parts, offset_forms
from dossier.model.case import NOMINAL, TOLERANCES, Case, Criterion, Quantity, Scope, value_of
from dossier.model.claim import SpectralRegion
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import Expression, symbol
from dossier.model.finding import Enclosure
from dossier.model.loop import inline_signals
from dossier.model.region import Box, Interval
from dossier.search.goal import Goal, Slab

ABOUT_REGIONS: Final = ("attraction", "limits_kept", "excursion")
ABOUT_MARGINS: Final = ("gain_margin", "phase_margin", "delay_margin", "peak_sensitivity")
ABOUT_SPECTRUM: Final = ("asymptotic_stability", "exponential_stability", "decay_rate", "damping_ratio", "contraction")

INSIDE: Final = Fraction(1, 10**6)
"""Share by which the set is kept clear of the open domain's edge."""


@dataclass(frozen=True, slots=True)
class SetTask:
    """One set to be sought: its scope, goal and certificate suffix; `criteria` are those it is sought for."""

    over: Scope
    goal: Goal
    suffix: str
    criteria: tuple[Criterion, ...] = ()

    def goal_at(self, case: Case, equilibrium: Equilibrium, cell: Box | None) -> Goal:
        """The same goal about an equilibrium that lies elsewhere, for the combinations of a cell of the spreads."""
        return Goal(self.goal.region, tuple(_slabs(case, equilibrium, self.criteria, cell)), self.goal.serves)


@dataclass(frozen=True, slots=True)
class SpectralTask:
    """One region of the complex plane that the linear part's eigenvalues should be shown to lie in."""

    over: Scope
    region: SpectralRegion
    level: Fraction
    suffix: str

    @property
    def worst_suffix(self) -> str:
        """Certificate suffix of the worst combination found: ``P-C2`` has ``W-C2`` on the other side."""
        return f"W{self.suffix[1:]}"


def set_tasks(case: Case, equilibrium: Equilibrium) -> Iterator[SetTask]:
    """One task per scope and region: all criteria about it in one program, then attraction by itself."""
    for over in (TOLERANCES, NOMINAL):
        groups: dict[Box, list[Criterion]] = {}
        for criterion in case.criteria:
            if criterion.claim in ABOUT_REGIONS and effective_scope(case, criterion.over) == over:
                groups.setdefault(criterion.region or case.region, []).append(criterion)
        for region, criteria in groups.items():
            tag = "V2" + ("" if over == TOLERANCES else "-nominal")
            own = next((c.name for c in criteria if c.region is not None), None)
            tag += "" if own is None else f"-{own}"
            yield from _tasks_of(case, equilibrium, over, region, criteria, tag)


def effective_scope(case: Case, over: Scope) -> Scope:
    """Without any spread, every combination is the nominal one."""
    has_spread = any(p.has_spread for p in case.model.parameters)
    return over if has_spread else NOMINAL


def _tasks_of(
    case: Case, equilibrium: Equilibrium, over: Scope, region: Box, criteria: list[Criterion], tag: str
) -> Iterator[SetTask]:
    serves = tuple(f"{case.name}.{c.name}" for c in criteria)
    whole = SetTask(over, Goal(region, (), serves), tag, tuple(criteria))
    yield replace(whole, goal=whole.goal_at(case, equilibrium, None))
    attraction = tuple(c for c in criteria if c.claim == "attraction")
    bounds = any(True for c in criteria for _ in _criterion_slabs(case, equilibrium, c, None))
    if bounds and attraction:
        serves = tuple(f"{case.name}.{c.name}" for c in attraction)
        free = SetTask(over, Goal(region, (), serves), f"{tag}-free", attraction)
        yield replace(free, goal=free.goal_at(case, equilibrium, None))


def _slabs(case: Case, equilibrium: Equilibrium, criteria: Iterable[Criterion], cell: Box | None) -> Iterator[Slab]:
    yield from _domain_slabs(case, equilibrium)
    for criterion in criteria:
        yield from _criterion_slabs(case, equilibrium, criterion, cell)


def _unit(size: int, place: int) -> tuple[Fraction, ...]:
    return tuple(Fraction(int(i == place)) for i in range(size))


def _domain_slabs(case: Case, equilibrium: Equilibrium) -> Iterator[Slab]:
    size = len(case.model.states)
    for i, ((name, side), ball) in enumerate(zip(case.model.domain.items(), equilibrium.state, strict=True)):
        lower = None if side.lower is None else (side.lower - ball.lower) * (1 - INSIDE)
        upper = None if side.upper is None else (side.upper - ball.upper) * (1 - INSIDE)
        if lower is not None or upper is not None:
            yield Slab(_unit(size, i), lower, upper, f"domain of {name}")


def _criterion_slabs(case: Case, equilibrium: Equilibrium, criterion: Criterion, cell: Box | None) -> Iterator[Slab]:
    if criterion.claim == "limits_kept":
        size = len(case.model.states)
        for i, (name, side) in enumerate(case.limits.items()):
            if side != Interval(None, None):
                yield Slab(_unit(size, i), side.lower, side.upper, f"limits of {name}")
        for signal in case.model.signals:
            if signal.limits != Interval(None, None):
                formula = inline_signals(symbol(signal.name), case.model)
                yield from _quantity_slabs(case, equilibrium, formula, criterion.over, signal.limits, signal.name, cell)
    elif criterion.claim == "excursion" and criterion.of is not None:
        low, high = criterion.between or (criterion.at_least, criterion.at_most)
        side = Interval(_low(low), _high(high))
        formula = inline_signals(criterion.of, case.model)
        yield from _quantity_slabs(case, equilibrium, formula, criterion.over, side, criterion.of_written, cell)


def _low(quantity: Quantity | None) -> Fraction | None:
    return None if quantity is None else value_of(quantity).upper


def _high(quantity: Quantity | None) -> Fraction | None:
    return None if quantity is None else value_of(quantity).lower


def _quantity_slabs(
    case: Case, equilibrium: Equilibrium, formula: Expression, over: Scope, side: Interval, label: str,
    cell: Box | None,
) -> Iterator[Slab]:  # fmt: skip
    """A slab per Bernstein coefficient of an affine quantity; a non-linear one is bounded afterwards, not sought."""
    for form in offset_forms(case, equilibrium, formula, over, cell) or ():
        parts = affine_parts(form, len(case.model.states))
        if parts is None:
            return
        constant, weights = parts
        if not any(w.middle for w in weights):
            continue
        lower = None if side.lower is None else side.lower - constant.lower
        upper = None if side.upper is None else side.upper - constant.upper
        yield Slab(tuple(w.middle for w in weights), lower, upper, label)


def spectral_tasks(case: Case, wanted: Iterator[tuple[Criterion, SpectralRegion, Fraction]]) -> Iterator[SpectralTask]:
    """One task per scope, region and level, named after the first criterion that needs it."""
    seen: set[tuple[Scope, SpectralRegion, Fraction]] = set()
    for criterion, region, level in wanted:
        key = (effective_scope(case, criterion.over), region, level)
        if key not in seen:
            seen.add(key)
            yield SpectralTask(*key, f"P-{criterion.name}")


STRONGER: Final = tuple(Fraction(share) for share in ("0.95", "0.85", "0.7", "0.5", "0.3", "0.15"))
"""Shares of the way from the level asked for to the nominal value that are tried, most ambitious first."""

LEVEL_DIGITS: Final = 3
"""Significant digits of a level the program chooses itself."""

_NOMINAL_VALUE: Final[dict[SpectralRegion, str]] = {
    "half-plane": "decay rate",
    "sector": "damping ratio",
    "disc": "contraction",
}


def stronger_levels(task: SpectralTask, nominal: Mapping[str, Enclosure]) -> Iterator[Fraction]:
    """Levels between the one asked for and the nominal value, short decimals, most ambitious first."""
    value = nominal.get(_NOMINAL_VALUE[task.region])
    best = None if value is None else value.upper if task.region == "disc" else value.lower
    if best is None or (best >= task.level if task.region == "disc" else best <= task.level):
        return
    for share in STRONGER:
        level = task.level + share * (best - task.level)
        unit = Fraction(10) ** (_magnitude(level) - LEVEL_DIGITS)
        yield -(-level // unit) * unit if task.region == "disc" else level // unit * unit


def _magnitude(value: Fraction) -> int:
    """Number of digits before the decimal point (zero or negative below 1)."""
    power = len(str(abs(value.numerator))) - len(str(value.denominator))
    return power if abs(value) < Fraction(10) ** power else power + 1


def loops(case: Case) -> tuple[str, ...]:
    """The loops whose margins are asked for, in order."""
    return tuple(dict.fromkeys(c.loop for c in case.criteria if c.claim in ABOUT_MARGINS))
