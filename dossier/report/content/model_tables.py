"""Tables of one model: states, parameters, signals, disturbances, dimensions."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from dossier.model.case import Model, Parameter, Signal
from dossier.model.dossier import PointEvidence
from dossier.report import numbers, units
from dossier.report.blocks import Block, Column, Row, Table
from dossier.report.content.context import Context
from dossier.report.content.quantities import NOTHING
from dossier.report.content.sides import side_text
from dossier.report.notation import Notation, spoken
from dossier.report.rich import Formula, Mono, Rich

KIND_WORDS = {"exact": "fixed", "tolerance": "tolerance", "range": "range in use"}


def state_table(model: Model, notation: Notation) -> Table:
    """States with unit and domain."""
    rows = tuple(
        Row(
            (
                (Formula(notation.latex(s.name), spoken(s.name)),),
                (Mono(s.name),),
                (s.meaning or NOTHING,),
                (units.unit_text(s.unit) or "1",),
                (side_text(model.domain[s.name], units.absolute_unit(s.unit, s.scale)),),
            )
        )
        for s in model.states
    )
    columns = (
        Column("Sign", "formula", 9),
        Column("Name", "mono", 19),
        Column("Meaning", share=38),
        Column("Unit", "short", 10),
        Column("Domain of the model", "number", 24),
    )
    return Table("States", columns, rows)


def parameter_tables(
    context: Context, model: Model, points: Sequence[PointEvidence], notation: Notation
) -> Iterator[Block]:
    """Parameters with tolerance and range told apart, and what operating points set."""
    changed = {name: p for p in points for name, _ in p.case.set_values}
    rows = tuple(Row(_parameter_cells(context, model, p, notation, p.name in changed)) for p in model.parameters)
    columns = (
        Column("Sign", "formula", 7),
        Column("Name", "mono", 12),
        Column("Meaning", share=21),
        Column("Nominal", "number", 11),
        Column("Unit", "short", 8),
        Column("Spread", "number", 15),
        Column("Kind", "short", 11),
        Column("Source", share=15),
    )
    note: Rich = (
        "A tolerance is a spread in production, a range a spread in use; either value is unknown but constant"
        " during a motion unless marked as varying.",
    )
    yield Table("Parameters", columns, rows, note)
    if changed:
        yield _set_table(context, points, notation)


def _parameter_cells(
    context: Context, model: Model, parameter: Parameter, notation: Notation, changed: bool
) -> tuple[Rich, ...]:
    unit = units.absolute_unit(parameter.unit, parameter.scale)
    spread = NOTHING if not parameter.has_spread else side_text(parameter.spread, unit)
    kind = KIND_WORDS[parameter.kind] + (", varies" if parameter.varies else "") + (", set below" if changed else "")
    low, high = unit.from_si(parameter.nominal.lower, parameter.nominal.upper)
    value = numbers.stated((low + high) / 2) if low is not None and high is not None else NOTHING
    return (
        (Formula(notation.latex(parameter.name), spoken(parameter.name)),),
        (Mono(parameter.name),),
        (parameter.meaning or NOTHING,),
        (value,),
        (units.unit_text(parameter.unit) or "1",),
        (spread,),
        (kind,),
        (parameter.source or NOTHING,),
    )


def _set_table(context: Context, points: Sequence[PointEvidence], notation: Notation) -> Table:
    rows = tuple(
        Row(
            (
                (context.link(p.case.name),),
                (Formula(notation.latex(name), spoken(name)),),
                (Mono(name),),
                (units.written(value),),
            )
        )
        for p in points
        for name, value in p.case.set_values
    )
    columns = (
        Column("Operating point", "id", 34),
        Column("Sign", "formula", 12),
        Column("Name", "mono", 24),
        Column("Set to", "text", 30),
    )
    return Table("Parameters set by operating points", columns, rows)


def signal_table(model: Model, notation: Notation) -> Table:
    """Signals with role and limits."""
    rows = tuple(Row(_signal_cells(s, notation)) for s in model.signals)
    columns = (
        Column("Sign", "formula", 18),
        Column("Name", "mono", 20),
        Column("Meaning", share=28),
        Column("Unit", "short", 8),
        Column("Role", "short", 10),
        Column("Limits", "number", 16),
    )
    return Table("Signals", columns, rows)


def _signal_cells(signal: Signal, notation: Notation) -> tuple[Rich, ...]:
    return (
        (Formula(notation.latex(signal.name), spoken(signal.name)),),
        (Mono(signal.name),),
        (signal.meaning or NOTHING,),
        (units.unit_text(signal.unit) or "1",),
        (signal.role,),
        (side_text(signal.limits, units.absolute_unit(signal.unit, signal.scale)),),
    )


def disturbance_table(model: Model, notation: Notation) -> Table:
    """Disturbances with their bounds."""
    rows = tuple(
        Row(
            (
                (Formula(notation.latex(d.name), spoken(d.name)),),
                (Mono(d.name),),
                (side_text(d.spread, units.COHERENT),),
                (units.unit_text(d.unit) or "1",),
            )
        )
        for d in model.disturbances
    )
    columns = (
        Column("Sign", "formula", 15),
        Column("Name", "mono", 25),
        Column("Bounds in SI units", "number", 30),
        Column("Declared in", "short", 30),
    )
    return Table("Disturbances", columns, rows, ("Zero in every claim that does not name them.",))


def dimension_table(model: Model, notation: Notation) -> Table:
    """The dimension of every equation."""
    rows = []
    for state in model.states:
        sign = notation.latex(state.name)
        left = rf"{sign}[n+1]" if model.time == "sampled" else rf"\dot{{{sign}}}"
        unit = units.unit_text(state.unit) or "1"
        dimension = unit if model.time == "sampled" else _rate(unit)
        rows.append(Row(((Formula(left, f"equation of {spoken(state.name)}"),), (dimension,), ("every term agrees",))))
    columns = (
        Column("Equation for", "formula", 25),
        Column("Unit of the left side", share=35),
        Column("Right side", share=40),
    )
    note: Rich = ("The reader of project files refuses a project in which any term has another dimension.",)
    return Table("Dimensions", columns, tuple(rows), note)


def _rate(unit: str) -> str:
    if unit == "1":
        return "1/s"
    if unit.endswith("/s"):
        return f"{unit}²"
    return f"({unit})/s" if "/" in unit else f"{unit}/s"
