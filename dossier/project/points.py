"""One operating point of a project file to a case: set values, equilibrium, boxes and criteria."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from fractions import Fraction

from dossier.model.case import Case, Quantity, value_of
from dossier.model.region import UNBOUNDED, Box, Interval
from dossier.project.candidate import read_candidate
from dossier.project.conditions import check_conditions
from dossier.project.criteria import PointContext, read_criteria, read_region
from dossier.project.dimensions import Checked
from dossier.project.faults import Ledger, listed, suggestion
from dossier.project.formulas import parse
from dossier.project.located import Table, Text
from dossier.project.models import ModelReading
from dossier.project.names import check_criterion_names, check_names
from dossier.project.parameters import ParameterReading, set_parameter
from dossier.project.quantities import Meaning, read_quantity, read_sides
from dossier.project.schema import PointEntry


def read_point(
    name: Text, entry: PointEntry, models: Mapping[Text, ModelReading], covering: tuple[str, ...], ledger: Ledger
) -> Case | None:
    """The operating point `name`; None where it or its model has a fault."""
    if entry.model.is_absent or (isinstance(models, Table) and models.is_absent):
        return None
    if entry.model not in models:
        ledger.fault(
            entry.model, f"{entry.model} is not a model of this project", expected="one of " + listed(models),
            hint=suggestion(entry.model, models),
        )  # fmt: skip
        return None
    return _PointReader(name, entry, models[entry.model], ledger).read(covering)


class _PointReader:
    """Reads one operating point of a known model."""

    def __init__(self, name: Text, entry: PointEntry, reading: ModelReading, ledger: Ledger) -> None:
        self.name, self.entry, self.reading, self.ledger = name, entry, reading, ledger

    def read(self, covering: tuple[str, ...]) -> Case | None:
        """The case; None where it has a fault."""
        before = len(self.ledger.faults)
        entry, states = self.entry, self.reading.state_names
        parameters = self._parameters()
        self._check_sample_interval(parameters)
        at, near = self._point(entry.equilibrium.at, "at"), self._point(entry.equilibrium.near, "near")
        none_expected = entry.equilibrium.none_expected == "true"
        self._check_equilibrium()
        region = Box.from_mapping(states, self._offsets(entry.region, "region"))
        limits = Box.from_mapping(states, self._offsets(entry.limits, "limits"))
        search = self._search(at or near, region, limits)
        candidate = read_candidate(entry.candidate, self.reading, self.ledger)
        check_names([(n, "criterion") for n in entry.criteria], self.ledger, in_formulas=False)
        check_criterion_names(entry.criteria, self.ledger)
        if not entry.criteria and not (isinstance(entry.criteria, Table) and entry.criteria.is_absent):
            self.ledger.fault(
                self.name, "no criterion is asked for", expected="at least one criterion",
                hint="add one, such as criteria: {C1: {claim: asymptotic_stability}}",
            )  # fmt: skip
        criteria = read_criteria(PointContext(self.reading, parameters, entry, self.ledger))
        model = self.reading.model
        if not entry.meaning:
            self.ledger.warn(
                self.name, f"the operating point {self.name} has no meaning: say what it is on the machine"
            )
        if model is None or len(self.ledger.faults) > before:
            return None
        known = {n: p.parameter for n, p in parameters.items() if p is not None}
        domain = self.reading.domain
        box = Box(
            states, tuple(d if d.is_bounded else s for d, s in zip(domain.intervals, search.intervals, strict=True))
        )
        if len(known) < len(parameters):
            return None
        check_conditions(self.reading, self._asked(), box, known, self.ledger)
        if len(self.ledger.faults) > before:
            return None
        return Case(
            str(self.name), str(entry.meaning or ""), replace(model, parameters=tuple(known.values())),
            at, near, none_expected, search, region, limits, criteria, covering,
            tuple((str(n), _written(v)) for n, v in (entry.set or {}).items()), candidate,
        )  # fmt: skip

    def _parameters(self) -> dict[str, ParameterReading | None]:
        found = dict(self.reading.parameters)
        for name, setting in (self.entry.set or {}).items():
            if name not in found:
                if not self.reading.scope.open:
                    self.ledger.fault(
                        name, f"{name} is not a parameter of {self.reading.name}",
                        expected="one of " + listed(found) if found else "a model with parameters",
                        hint=suggestion(name, found),
                    )  # fmt: skip
                continue
            declared = found[name]
            if declared is not None:
                found[str(name)] = set_parameter(name, setting, declared, self.ledger)
        return found

    def _check_equilibrium(self) -> None:
        entry = self.entry.equilibrium
        given = [f for f in ("at", "near") if getattr(entry, f) is not None]
        given += ["none_expected"] if entry.none_expected == "true" else []
        if len(given) != 1 and not (entry.none_expected or self.name).is_absent and not self._equilibrium_is_absent():
            self.ledger.fault(
                self.name, "which equilibrium is meant is not stated" if not given else
                f"the equilibrium is stated by {' and '.join(given)}",
                expected="one of at, near, none_expected: true", hint="equilibrium: {near: {state: value}}",
            )  # fmt: skip

    def _equilibrium_is_absent(self) -> bool:
        entry = self.entry.equilibrium
        return any(isinstance(t, Table) and t.is_absent for t in (entry.at, entry.near))

    def _point(self, values: Mapping[Text, Text] | None, field: str) -> tuple[Fraction, ...] | None:
        if values is None or (isinstance(values, Table) and values.is_absent):
            return None
        states = self.reading.state_names
        for name in values:
            if name not in states:
                self.ledger.fault(
                    name, f"{name} is not a state of {self.reading.name}", expected="one of " + listed(states),
                    hint=suggestion(name, states),
                )  # fmt: skip
        missing = [s for s in states if s not in values]
        if missing and all(n in states for n in values):
            self.ledger.fault(
                next(iter(values), self.name), f"{field} gives no value for {listed(missing)}", text=listed(values),
                expected="a value for every state: " + listed(states), hint=f"add {missing[0]}",
            )  # fmt: skip
        found = [self._coordinate(n, values[n], field) for n in values if n in states]
        if missing or any(v is None for v in found):
            return None
        by_name = dict(zip((str(n) for n in values if n in states), found, strict=True))
        return tuple(v for s in states if (v := by_name[s]) is not None)

    def _coordinate(self, state: Text, text: Text, field: str) -> Fraction | None:
        quantity = read_quantity(text, Meaning(self.reading.units[str(state)]), self.ledger)
        if quantity is None:
            return None
        if field == "at" and quantity.pi_power:
            self.ledger.fault(
                text, "an equilibrium stated by at must be rational in SI units; this one carries pi",
                expected="an exact value", hint="state it by near",
            )  # fmt: skip
            return None
        self._check_in_domain(state, text, quantity)
        return value_of(quantity).middle

    def _check_in_domain(self, state: Text, text: Text, quantity: Quantity) -> None:
        side, value = self.reading.domain[str(state)], value_of(quantity)
        if not side.contains(Interval(value.lower, value.upper)):
            bounds = (self.reading.entry.domain or {}).get(state)
            stated = "" if bounds is None else f"[{bounds[0]}, {bounds[1]}]"
            self.ledger.fault(
                text, f"{state} lies outside the domain of the model", expected=f"a value within {stated}",
                hint="correct the operating point or the domain",
            )  # fmt: skip

    def _offsets(self, sides: Mapping[Text, Sequence[Text]] | None, what: str) -> dict[str, Interval]:
        found = {} if sides is None else read_region(sides, self.reading, self.ledger, what)
        if what == "region" and sides:
            for state in self.reading.state_names:
                if state not in sides:
                    self.ledger.warn(next(iter(sides)), f"the region of {self.name} leaves {state} free")
        return found

    def _asked(self) -> list[tuple[Text, Checked]]:
        """Formulas of criteria (they were read without fault)."""
        entries = self.entry.criteria.values()
        return [(e.of, Checked(parse(str(e.of)), None)) for e in entries if e.of is not None and not e.of.is_absent]

    def _check_sample_interval(self, parameters: Mapping[str, ParameterReading | None]) -> None:
        text = self.reading.entry.sample_interval
        reading = None if text is None else parameters.get(str(text))
        if text is None or reading is None:
            return
        lower = reading.parameter.spread.lower
        if lower is None or lower <= 0:
            value = (self.entry.set or {}).get(text, self.reading.entry.sample_interval)
            where = value if isinstance(value, Text) else text
            self.ledger.fault(
                where, "the sampling interval is not positive", expected="a positive time over its whole spread"
            )

    def _search(self, centre: tuple[Fraction, ...] | None, region: Box, limits: Box) -> Box:
        """Stated sides; else the domain where bounded, else the hull of region and limits about the point."""
        stated = read_sides(self.entry.search or {}, self.reading.state_units, self.ledger, "outward", False, "search")
        sides = {}
        for i, state in enumerate(self.reading.state_names):
            domain = self.reading.domain[state]
            if state in stated:
                sides[state] = stated[state]
            elif domain.is_bounded:
                sides[state] = domain
            elif centre is not None:
                sides[state] = _hull(region[state], limits[state]).shift(centre[i])
        return Box.from_mapping(self.reading.state_names, sides)


def _hull(one: Interval, other: Interval) -> Interval:
    bounded = [i.bounds for i in (one, other) if i.is_bounded]
    if not bounded:
        return UNBOUNDED
    return Interval(min(b[0] for b in bounded), max(b[1] for b in bounded))


def _written(setting: object) -> str:
    if isinstance(setting, Text):
        return str(setting)
    value, sides, tolerance = (getattr(setting, f) for f in ("value", "range", "tolerance"))
    if sides is not None:
        return f"{value} in [{sides[0]}, {sides[1]}]"
    return f"{value} ± {tolerance}" if tolerance is not None else str(value)
