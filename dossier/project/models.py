"""One model of a project file to exact SI: units, names, signals, equations and domain."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

from dossier.model.case import Disturbance, Model, Quantity, Signal, State
from dossier.model.expression import Expression
from dossier.model.region import UNBOUNDED, Box, Interval
from dossier.project.dimensions import Checked, Scope, check_formula, require_dimension
from dossier.project.faults import Ledger, listed, suggestion
from dossier.project.inlining import check_inlining
from dossier.project.located import Table, Text
from dossier.project.names import check_names
from dossier.project.parameters import ParameterReading, read_parameter
from dossier.project.quantities import Meaning, read_interval, read_sides, read_unit, scale_of
from dossier.project.schema import ROLES, ModelEntry, Role, SignalEntry
from dossier.project.units import TIME, Dimension, Unit

MOST_STATES: Final = 32
"""States of one model; no method here proves anything beyond."""

_WORD: Final = re.compile(r"[A-Za-z_][A-Za-z0-9_]*")


@dataclass(frozen=True, slots=True)
class ModelReading:
    """A model as read: what operating points need of it. `model` is None where it has a fault."""

    name: Text
    entry: ModelEntry
    units: Mapping[str, Unit | None]
    scope: Scope
    parameters: Mapping[str, ParameterReading | None]
    formulas: tuple[tuple[Text, Checked], ...]
    domain: Box
    model: Model | None

    @property
    def state_names(self) -> tuple[str, ...]:
        """Names of the states in order."""
        return tuple(str(n) for n in self.entry.states)

    @property
    def state_units(self) -> dict[str, Unit | None]:
        """Declared units of the states."""
        return {n: self.units[n] for n in self.state_names}

    @property
    def signals(self) -> Mapping[Text, SignalEntry]:
        """Signals as typed."""
        return self.entry.signals or {}


def read_model(name: Text, entry: ModelEntry, ledger: Ledger) -> ModelReading:
    """The model `name`; its faults go to `ledger`."""
    return _ModelReader(name, entry, ledger).read()


def _dimension(unit: Unit | None) -> Dimension | None:
    return None if unit is None else unit.dimension


def _role(text: Text | None) -> Role:
    for role in ROLES:
        if text == role:
            return role
    return "internal"


def _is_absent(table: Mapping[Text, object]) -> bool:
    return isinstance(table, Table) and table.is_absent


class _ModelReader:
    """Reads one model; every rule adds its faults to the ledger."""

    def __init__(self, name: Text, entry: ModelEntry, ledger: Ledger) -> None:
        self.name, self.entry, self.ledger = name, entry, ledger
        self.parameters = entry.parameters or {}
        self.signals = entry.signals or {}
        self.disturbances = entry.disturbances or {}
        self.sampled = entry.time == "sampled"
        declared = {**entry.states, **self.parameters, **self.signals, **self.disturbances}
        self.units = {str(n): read_unit(e.unit, ledger) for n, e in declared.items()}
        unread = any(_is_absent(t) for t in (entry.states, self.parameters, self.signals, self.disturbances))
        self.scope = Scope({n: _dimension(u) for n, u in self.units.items()}, open=unread)

    def read(self) -> ModelReading:
        """Everything, in the order of the file; the model is whole only if nothing was reported."""
        before = len(self.ledger.faults)
        self._check_names()
        self._check_meanings()
        parameters = {str(n): read_parameter(n, e, self.units[n], self.ledger) for n, e in self.parameters.items()}
        signals = {str(n): self._formula(e.is_, _dimension(self.units[n]), f"the unit of {n}") for n, e in
                   self.signals.items()}  # fmt: skip
        limits = {str(n): self._limits(n, e) for n, e in self.signals.items()}
        disturbances = [self._disturbance(n) for n in self.disturbances]
        equations = self._equations()
        interval = self._sample_interval()
        placed = {str(n): (e.is_, signals[str(n)]) for n, e in self.signals.items()}
        placed |= {f"equation {n}": (self._equation_text(n), equations[str(n)]) for n in self.entry.states}
        check_inlining(placed, frozenset(signals), self.ledger)
        self._check_use()
        sides = read_sides(
            self.entry.domain or {}, {n: self.units[n] for n in self.entry.states}, self.ledger, "inward", False,
            "domain",
        )  # fmt: skip
        domain = Box.from_mapping(tuple(str(n) for n in self.entry.states), sides)
        texts = [*(e.is_ for e in self.signals.values()), *(self._equation_text(n) for n in self.entry.states)]
        formulas = tuple(
            (t, c) for t, c in zip(texts, [*signals.values(), *equations.values()], strict=True) if c is not None
        )
        model = None
        whole = not (self.scope.open or self._anything_absent(signals, equations, parameters, self.units))
        if whole and len(self.ledger.faults) == before:
            model = self._model(parameters, signals, limits, disturbances, equations, interval, domain)
        return ModelReading(self.name, self.entry, self.units, self.scope, parameters, formulas, domain, model)

    @staticmethod
    def _anything_absent(*tables: Mapping[str, object]) -> bool:
        return any(v is None for t in tables for v in t.values())

    def _check_names(self) -> None:
        groups = (
            ("state", self.entry.states), ("parameter", self.parameters), ("signal", self.signals),
            ("disturbance", self.disturbances),
        )  # fmt: skip
        check_names([(n, kind) for kind, table in groups for n in table], self.ledger, in_formulas=True)
        count = len(self.entry.states)
        if count > MOST_STATES:
            self.ledger.fault(self.name, f"the model has {count} states", expected=f"at most {MOST_STATES} states")
        if not self.entry.states and not _is_absent(self.entry.states):
            self.ledger.fault(self.name, "the model has no states", expected="at least one state")

    def _check_meanings(self) -> None:
        """One warning for all states and parameters that the tables of the dossier could not explain."""
        unsaid = [n for table in (self.entry.states, self.parameters) for n, e in table.items() if not e.meaning]
        if unsaid:
            self.ledger.warn(unsaid[0], f"no meaning is given for {listed(unsaid)} of {self.name}")

    def _formula(self, text: Text, wanted: Dimension | None, why: str) -> Checked | None:
        checked = check_formula(text, self.scope, self.ledger)
        if checked is not None:
            before = len(self.ledger.faults)
            require_dimension(text, checked, wanted, self.ledger, why)
            if len(self.ledger.faults) > before:
                return None
        return checked

    def _limits(self, name: Text, entry: SignalEntry) -> Interval:
        if entry.limits is None:
            return UNBOUNDED
        found = read_interval(entry.limits, Meaning(self.units[name]), self.ledger, "inward")
        return UNBOUNDED if found is None else found[0]

    def _disturbance(self, name: Text) -> Disturbance | None:
        entry, unit = self.disturbances[name], self.units[name]
        found = read_interval(entry.range, Meaning(unit), self.ledger, "outward")
        if found is None or unit is None:
            return None
        if not found[0].contains(Interval.point(Fraction(0))):
            self.ledger.fault(
                entry.range[0], f"0 lies outside the range of the disturbance {name}",
                text=f"[{entry.range[0]}, {entry.range[1]}]", expected="a range that holds 0",
                hint="put the constant part into a parameter",
            )  # fmt: skip
        return Disturbance(str(name), unit.text, found[0])

    def _equation_text(self, state: Text) -> Text:
        return self.entry.equations.get(state, Text.absent(state.line, state.column))

    def _equations(self) -> dict[str, Checked | None]:
        states, given = self.entry.states, self.entry.equations
        for name in given:
            if name not in states:
                self.ledger.fault(
                    name, f"{name} is not a state, so it has no equation", expected="one of " + listed(states),
                    hint=suggestion(name, [n for n in states if n not in given] or states),
                )  # fmt: skip
        result: dict[str, Checked | None] = {}
        misspelt = any(n not in states for n in given)
        for name in states:
            if name not in given and not misspelt and not _is_absent(given):
                self.ledger.fault(
                    name, f"the state {name} has no equation", expected=f"equations: {{{name}: ...}}",
                    hint=f"add the {'next sample' if self.sampled else 'rate of change'} of {name}",
                )  # fmt: skip
            unit = self.units[name]
            wanted, why = _dimension(unit), f"the unit of {name}"
            if wanted is not None and not self.sampled:
                wanted, why = wanted / TIME, f"the unit of {name} over s"
            if self.entry.time.is_absent:
                wanted = None
            result[str(name)] = self._formula(self._equation_text(name), wanted, why)
        return result

    def _sample_interval(self) -> Expression | None:
        text = self.entry.sample_interval
        if text is None or self.entry.time.is_absent:
            if self.sampled:
                self.ledger.fault(
                    self.entry.time, "a sampled model needs its sample_interval", expected="sample_interval: Ts",
                    hint="declare the interval as a parameter in s and name it here",
                )  # fmt: skip
            return None
        if not self.sampled:
            self.ledger.fault(
                text, "a continuous model has no sample_interval", expected="time: sampled, or no sample_interval",
                hint="remove the field or change time",
            )  # fmt: skip
            return None
        if str(text) not in self.parameters:
            self.ledger.fault(
                text, f"{text} is not a parameter", expected="the parameter that is the sampling interval",
                hint=suggestion(text, self.parameters),
            )  # fmt: skip
            return None
        checked = self._formula(text, TIME, "the unit of time")
        return None if checked is None else checked.expression

    def _check_use(self) -> None:
        texts = [e.is_ for e in self.signals.values()] + list(self.entry.equations.values())
        if self.entry.sample_interval is not None:
            texts.append(self.entry.sample_interval)
        if any(t.is_absent for t in texts) or _is_absent(self.entry.equations) or self.scope.open:
            return
        used = {word for t in texts for word in _WORD.findall(t)}
        for kind, table in (("parameter", self.parameters), ("disturbance", self.disturbances)):
            for name in table:
                if name not in used:
                    self.ledger.fault(
                        name, f"the {kind} {name} is not used", expected="a formula that uses it",
                        hint=suggestion(name, used - set(self.units), "remove it"),
                    )  # fmt: skip

    def _scale(self, name: str) -> Quantity:
        unit = self.units[name]
        assert unit is not None, "a model is built from readable units only"
        return scale_of(unit)

    def _model(
        self,
        parameters: Mapping[str, ParameterReading | None],
        signals: Mapping[str, Checked | None],
        limits: Mapping[str, Interval],
        disturbances: list[Disturbance | None],
        equations: Mapping[str, Checked | None],
        interval: Expression | None,
        domain: Box,
    ) -> Model:
        entry = self.entry
        return Model(
            str(self.name), str(entry.title), str(entry.basis), "sampled" if self.sampled else "continuous", interval,
            tuple(
                State(str(n), str(e.unit), self._scale(n), str(e.meaning or "")) for n, e in entry.states.items()
            ),
            tuple(p.parameter for p in parameters.values() if p is not None),
            tuple(
                Signal(str(n), str(e.unit), self._scale(n), c.expression, _role(e.role),
                       limits[n], str(e.meaning or ""))
                for n, e in self.signals.items() if (c := signals[n]) is not None
            ),
            tuple(d for d in disturbances if d is not None),
            tuple(c.expression for c in equations.values() if c is not None),
            domain,
        )  # fmt: skip
