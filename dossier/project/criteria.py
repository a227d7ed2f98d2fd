"""Criteria of one operating point: which fields each claim takes, and every bound in exact SI."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Final

from dossier.model.case import Criterion, Quantity, value_of
from dossier.model.expression import Expression, symbol
from dossier.model.region import Box, Interval
from dossier.project.dimensions import Scope, check_formula
from dossier.project.faults import Ledger, listed, suggestion
from dossier.project.located import Text
from dossier.project.models import ModelReading
from dossier.project.parameters import ParameterReading
from dossier.project.quantities import Meaning, decibels, read_quantity, read_sides, unit_for
from dossier.project.schema import CriterionEntry, PointEntry
from dossier.project.units import PERCENT, PLAIN, Unit, parse_unit

BOUNDS: Final = ("between", "at_least", "at_most")
COMMON: Final = ("claim", "over", "requirement", "hazard")


@dataclass(frozen=True, slots=True)
class _Rule:
    """What one claim needs and may have; `bounds` are alternatives, of which exactly one is needed.

    `unit` is that of the bounds: a unit, ``of`` (that of the field `of`) or empty (no bounds).
    """

    needs: tuple[str, ...] = ()
    may: tuple[str, ...] = ()
    bounds: tuple[str, ...] = ()
    optional_bounds: bool = False
    unit: str = ""


CLAIM_RULES: Final[dict[str, _Rule]] = {
    "existence": _Rule(),
    "equilibria_listed": _Rule(),
    "equilibrium_value": _Rule(("of",), bounds=BOUNDS, unit="of"),
    "asymptotic_stability": _Rule(),
    "exponential_stability": _Rule(bounds=("at_least",), optional_bounds=True, unit="1/s"),
    "attraction": _Rule(("region",)),
    "global_attraction": _Rule(),
    "limits_kept": _Rule(("region", "limits")),
    "excursion": _Rule(("region", "of"), ("under",), BOUNDS, unit="of"),
    "decay_rate": _Rule(bounds=("at_least",), unit="1/s"),
    "damping_ratio": _Rule(bounds=("at_least",), unit="1"),
    "contraction": _Rule(bounds=("at_most",), unit="1"),
    "settling_time": _Rule(("region", "of", "to", "within")),
    "gain_margin": _Rule(("loop",), bounds=("at_least",), unit="dB"),
    "phase_margin": _Rule(("loop",), bounds=("at_least",), unit="deg"),
    "delay_margin": _Rule(("loop",), bounds=("at_least",), unit="s"),
    "peak_sensitivity": _Rule(("loop",), bounds=("at_most",), unit="1"),
    "parameter_margin": _Rule(("of",), bounds=("at_least",), unit="parameter"),
    "invariance": _Rule(("region", "limits"), ("under",)),
    "ultimate_bound": _Rule(("region", "of"), ("under",), ("between", "at_most"), unit="of"),
}
"""Fields per claim, as in the table of the format's description."""

POSITIVE: Final = ("gain_margin", "phase_margin", "delay_margin", "peak_sensitivity", "parameter_margin", "contraction")
"""Claims whose bound means nothing unless it is positive."""


@dataclass(frozen=True, slots=True)
class PointContext:
    """What criteria may refer to at one operating point."""

    reading: ModelReading
    parameters: Mapping[str, ParameterReading | None]
    entry: PointEntry
    ledger: Ledger


def read_criteria(context: PointContext) -> tuple[Criterion, ...]:
    """All criteria of the point without faults; the faults of the others go to the ledger."""
    found = [_CriterionReader(name, entry, context).read() for name, entry in context.entry.criteria.items()]
    return tuple(c for c in found if c is not None)


class _CriterionReader:
    """Reads one criterion by the rule of its claim."""

    def __init__(self, name: Text, entry: CriterionEntry, context: PointContext) -> None:
        self.name, self.entry, self.context = name, entry, context
        self.ledger, self.reading = context.ledger, context.reading
        self.rule = CLAIM_RULES.get(entry.claim, _Rule())

    def read(self) -> Criterion | None:
        """The criterion; None where it has a fault."""
        if self.entry.claim.is_absent:
            return None
        before = len(self.ledger.faults)
        self._check_fields()
        self._check_circumstances()
        region = self._region()
        of, unit = self._of()
        loop = self._loop()
        bounds = self._bounds(unit)
        within = self._positive("within", self._quantity("within", Meaning(parse_unit("s"), plain=False)))
        to = self._positive("to", self._quantity("to", Meaning(unit, True, self._is_plain())))
        if len(self.ledger.faults) > before:
            return None
        entry = self.entry
        between = (bounds["lower"], bounds["upper"])
        return Criterion(
            str(self.name), str(entry.claim), "tolerances" if entry.over == "tolerances" else "nominal", region,
            of, str(entry.of or ""), bounds["at_least"], bounds["at_most"],
            (between[0], between[1]) if between[0] is not None and between[1] is not None else None,
            loop, str(entry.under or ""), within, to, str(entry.requirement or ""), str(entry.hazard or ""),
        )  # fmt: skip

    def _value(self, field: str) -> object:
        return getattr(self.entry, field)

    def _given(self) -> list[str]:
        fields = CriterionEntry.model_fields
        return [f for f in fields if f not in COMMON and self._value(f) is not None]

    def _check_fields(self) -> None:
        claim, rule = self.entry.claim, self.rule
        permitted = {*rule.needs, *rule.may, *rule.bounds} - {"limits"}
        for field in self._given():
            if field not in permitted:
                takes = listed(sorted(permitted)) if permitted else "no further fields"
                hint = f"remove {field}, or choose another claim"
                self._report(field, f"{claim} takes no {field}", takes, hint)
        for field in rule.needs:
            if not self._is_there(field):
                where = " here or at the operating point" if field == "region" else ""
                where = " at the operating point" if field == "limits" else where
                self._report("claim", f"{claim} needs {field}{where}", f"a field {field}", f"add {field}")
        self._check_bounds()

    def _check_bounds(self) -> None:
        bounds = [b for b in self.rule.bounds if self._value(b) is not None]
        wanted = " or ".join(self.rule.bounds)
        if not bounds and self.rule.bounds and not self.rule.optional_bounds:
            self._report("claim", f"{self.entry.claim} needs a bound", wanted, f"add {wanted}")
        elif len(bounds) > 1:
            hint = "write both bounds as between: [lower, upper]"
            self._report(bounds[1], f"{' and '.join(bounds)} are given together", f"one of {wanted}", hint)

    def _is_there(self, field: str) -> bool:
        entry = self.context.entry
        if field == "region":
            return bool(self.entry.region is not None or entry.region is not None)
        if field == "limits":
            model = self.reading.entry
            limited = any(s.limits is not None for s in self.reading.signals.values())
            return bool(entry.limits is not None or model.domain or limited)
        return self._value(field) is not None

    def _report(self, field: str, message: str, expected: str, hint: str) -> None:
        value = self._value(field)
        where = value if isinstance(value, Text) else value[0] if isinstance(value, list) and value else self.name
        text = str(where) if isinstance(value, Text) else field if value is not None else str(self.name)
        self.ledger.fault(where, message, text=text, expected=expected, hint=hint)

    def _check_circumstances(self) -> None:
        claim = self.entry.claim
        if claim == "contraction" and self.reading.entry.time == "continuous":
            self._report(
                "claim", "contraction is a claim about sampled models", "a claim about continuous models",
                "ask for decay_rate",
            )  # fmt: skip
        if claim == "global_attraction" and self.reading.entry.domain:
            self._report(
                "claim", "global_attraction is about the whole state space, but the model has a domain",
                "attraction of a region, or a model without a domain", "ask for attraction",
            )  # fmt: skip
        acted = claim == "invariance" or self.entry.under is not None
        if acted and not self.reading.entry.disturbances:
            self._report(
                "under" if self.entry.under is not None else "claim", "the model has no disturbances",
                "a model with disturbances", "declare them in the model",
            )  # fmt: skip

    def _region(self) -> Box | None:
        if self.entry.region is None:
            return None
        sides = read_region(self.entry.region, self.reading, self.ledger, "region")
        return Box.from_mapping(self.reading.state_names, sides)

    def _is_plain(self) -> bool:
        """A plain number is enough: `of` is one declared quantity, or dimensionless."""
        name = str(self.entry.of or "")
        if name in self.reading.units:
            return True
        return self._of_dimension in (None, PLAIN)

    def _of(self) -> tuple[Expression | None, Unit | None]:
        self._of_dimension = None
        text = self.entry.of
        if text is None or text.is_absent or "of" not in self.rule.needs:
            return None, None
        if self.rule.unit == "parameter":
            if str(text) not in self.context.parameters:
                hint = suggestion(text, self.context.parameters)
                self.ledger.fault(text, f"{text} is not a parameter", expected="a parameter of the model", hint=hint)
                return None, None
            return symbol(str(text)), self.reading.units[str(text)]
        disturbances = {str(n): "a disturbance is not a quantity of the loop" for n in
                        self.reading.entry.disturbances or {}}  # fmt: skip
        scope = self.reading.scope
        known = {n: d for n, d in scope.dimensions.items() if n not in disturbances}
        checked = check_formula(text, Scope(known, disturbances, scope.open), self.ledger)
        if checked is None:
            return None, None
        self._of_dimension = checked.dimension
        if str(text) in self.reading.units:
            return checked.expression, self.reading.units[str(text)]
        return checked.expression, None if checked.dimension is None else unit_for(checked.dimension)

    def _loop(self) -> str:
        text = self.entry.loop
        if text is None or text.is_absent or "loop" not in self.rule.needs:
            return ""
        commands = [str(n) for n, s in self.reading.signals.items() if s.role == "command"]
        if str(text) not in commands and not self.reading.scope.open:
            signals = self.reading.signals
            known = str(text) in signals
            if known and (signals[text].role or text).is_absent:
                return str(text)
            self.ledger.fault(
                text, f"{text} is not a command" if known else f"{text} is not a signal of the model",
                expected="a signal with role: command" + (f", such as {commands[0]}" if commands else ""),
                hint=f"give {text} the role command" if known else suggestion(text, commands),
            )  # fmt: skip
        return str(text)

    def _quantity(self, field: str, meaning: Meaning) -> Quantity | None:
        value = self._value(field)
        if not isinstance(value, Text) or field not in (*self.rule.needs, *self.rule.bounds):
            return None
        return read_quantity(value, meaning, self.ledger)

    def _positive(self, field: str, value: Quantity | None) -> Quantity | None:
        if value is not None and value.factor <= 0:
            self._report(field, f"{field} is not positive", "a positive value", "correct the value")
        return value

    def _meaning(self, unit: Unit | None) -> Meaning:
        kind = self.rule.unit
        if kind == "of":
            return Meaning(unit, plain=self._is_plain())
        if kind == "parameter":
            at_least = self.entry.at_least
            relative = at_least is not None and at_least.rstrip().endswith(PERCENT.text)
            return Meaning(PERCENT) if relative else Meaning(unit, difference=True)
        if kind == "dB":
            return decibels()
        wanted = parse_unit(kind or "1")
        return Meaning(wanted, plain=kind in ("", "1"))

    def _bounds(self, unit: Unit | None) -> dict[str, Quantity | None]:
        meaning = self._meaning(unit)
        found = {b: self._quantity(b, meaning) for b in ("at_least", "at_most")}
        if self.entry.claim in POSITIVE:
            for field, value in found.items():
                self._positive(field, value)
        pair = self.entry.between
        found |= {"lower": None, "upper": None}
        if pair is not None and "between" in self.rule.bounds:
            found["lower"], found["upper"] = (read_quantity(t, meaning, self.ledger) for t in pair)
            self._check_order(found["lower"], found["upper"])
        return found

    def _check_order(self, lower: Quantity | None, upper: Quantity | None) -> None:
        if lower is None or upper is None or value_of(lower).lower < value_of(upper).upper:
            return
        pair = self.entry.between or []
        self.ledger.fault(
            pair[0], "the range is empty", text=f"[{pair[0]}, {pair[1]}]", expected="the smaller bound first",
            hint=f"write [{pair[1]}, {pair[0]}]",
        )  # fmt: skip


def read_region(
    sides: Mapping[Text, Sequence[Text]], reading: ModelReading, ledger: Ledger, what: str
) -> dict[str, Interval]:
    """Offsets per state, outward for a region and inward for limits; each must hold 0."""
    direction = "inward" if what == "limits" else "outward"
    found = read_sides(sides, reading.state_units, ledger, direction, True, what)
    for name, bounds in sides.items():
        interval = found.get(str(name))
        if interval is not None and not _holds_zero(interval):
            first, second = bounds
            ledger.fault(
                first, f"the {what} of {name} does not hold 0", text=f"[{first}, {second}]",
                expected="offsets from the equilibrium, on both sides of 0",
                hint="region and limits are offsets, not absolute values",
            )  # fmt: skip
    return found


def _holds_zero(side: Interval) -> bool:
    low, high = side.bounds
    return low <= 0 <= high
