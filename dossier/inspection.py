"""The project as understood: what ``dossier inspect`` prints, in SI."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from dossier.model.case import Assumption, Case, Criterion, Parameter, Quantity
from dossier.model.dossier import Document
from dossier.model.expression import conditions, to_text
from dossier.model.loop import vector_field
from dossier.model.region import Box, Interval
from dossier.report import numbers


def inspection_lines(document: Document, assumptions: Sequence[Assumption], cases: Sequence[Case]) -> Iterator[str]:
    """One line of text after another."""
    yield f"{document.number}  {document.title}  revision {document.revision}, {document.date}"
    yield f"{document.organisation}: {document.machine}"
    for assumption in assumptions:
        yield f"assumption {assumption.name} ({assumption.state or 'no state'}): {assumption.text}"
    for case in cases:
        yield ""
        yield from _case_lines(case)


def _case_lines(case: Case) -> Iterator[str]:
    model = case.model
    yield f"operating point {case.name}: {case.meaning}"
    yield f"  model {model.name} ({model.time}): {model.title}; basis: {model.basis}"
    for state, equation in zip(model.states, model.equations, strict=True):
        left = f"d{state.name}/dt" if model.time == "continuous" else f"next {state.name}"
        yield f"  {left} = {to_text(equation)}    [{state.unit}] {state.meaning}"
    for signal in model.signals:
        formula = to_text(signal.expression)
        yield f"  {signal.name} = {formula}    [{signal.unit}] {signal.role}, limits {_side(signal.limits)}"
    for parameter in model.parameters:
        yield f"  {_parameter(parameter)}"
    found = list(dict.fromkeys(c for e in vector_field(case).equations for c in conditions(e)))
    for condition in found:
        yield f"  premise to be proved: {to_text(condition.expression)} is {condition.relation.replace('_', ' ')}"
    boxes = {"domain": model.domain, "search": case.search, "region": case.region, "limits": case.limits}
    for name, box in boxes.items():
        yield f"  {name} (SI): {_box(box)}"
    yield f"  equilibrium: {_equilibrium(case)}"
    for criterion in case.criteria:
        yield f"  {_criterion(criterion)}"


def _criterion(criterion: Criterion) -> str:
    bounds = [q for q in (criterion.at_least, criterion.at_most, *(criterion.between or ())) if q is not None]
    about = f" of {criterion.of_written}" if criterion.of_written else ""
    loop = f" of loop {criterion.loop}" if criterion.loop else ""
    limits = "".join(f" {_quantity(q)}" for q in bounds)
    return f"criterion {criterion.name}: {criterion.claim}{about}{loop} over {criterion.over}{limits}"


def _parameter(parameter: Parameter) -> str:
    spread = "" if not parameter.has_spread else f", {parameter.kind} {_side(parameter.spread)}"
    varies = ", may vary in time" if parameter.varies else ""
    value = numbers.number(parameter.nominal.middle)
    return f"{parameter.name} = {value} (SI; written {parameter.written} {parameter.unit}){spread}{varies}"


def _quantity(quantity: Quantity) -> str:
    turn = f" pi^{quantity.pi_power}" if quantity.pi_power else ""
    return f"{quantity.written} (SI {numbers.number(quantity.factor)}{turn})"


def _side(interval: Interval) -> str:
    lower, upper = ("unbounded" if v is None else numbers.number(v) for v in (interval.lower, interval.upper))
    return "unbounded" if lower == upper == "unbounded" else f"[{lower}, {upper}]"


def _box(box: Box) -> str:
    return ", ".join(f"{name} {_side(side)}" for name, side in box.items())


def _equilibrium(case: Case) -> str:
    if case.none_expected:
        return "none expected"
    place = case.fixed if case.fixed is not None else case.near
    values = ", ".join(f"{n} = {numbers.number(v)}" for n, v in zip(case.model.state_names, place or (), strict=False))
    return f"{'at' if case.fixed is not None else 'near'} {values}"
