"""Each model as analysed: equations typeset from the analysed trees, states, parameters, signals, dimensions."""

from __future__ import annotations

from collections.abc import Iterator

from dossier.model.case import Case, Model, Parameter, Signal
from dossier.model.dossier import PointEvidence
from dossier.model.expression import Expression
from dossier.model.region import Interval
from dossier.report import equations, formulas, numbers, speech, units
from dossier.report.blocks import (
    Block,
    Column,
    Equations,
    Facts,
    Heading,
    Row,
    Section,
    Table,
)
from dossier.report.content.context import Context, short_hash
from dossier.report.content.quantities import NOTHING
from dossier.report.notation import Notation, spoken
from dossier.report.rich import Formula, Mono, Rich, joined, rich

KIND_WORDS = {"exact": "fixed", "tolerance": "tolerance", "range": "range in use"}
TIME_WORDS = {"continuous": "continuous: the equations give rates of change", "sampled": "sampled: the equations give the next sample"}  # fmt: skip


def model_section(context: Context, number: str) -> Section:
    """All models, each under its own heading."""
    blocks: list[Block] = []
    for index, model in enumerate(_models(context), start=1):
        blocks.extend(_model_blocks(context, model, f"{number}.{index}"))
    return Section("models", number, "Models", tuple(blocks), new_page=True)


def _models(context: Context) -> tuple[Model, ...]:
    """Each model once, as the first operating point that uses it has it."""
    return tuple({p.case.model.name: p.case.model for p in reversed(context.evidence.points)}.values())[::-1]


def _points(context: Context, model: Model) -> tuple[PointEvidence, ...]:
    return tuple(p for p in context.evidence.points if p.case.model.name == model.name)


def _model_blocks(context: Context, model: Model, number: str) -> Iterator[Block]:
    notation = context.notations[model.name]
    yield Heading(f"model-{model.name}", number, model.title or model.name)
    yield Facts(_facts(context, model))
    yield Equations(tuple(_equations(model, notation)), "closed loop, as written")
    if model.signals:
        yield Equations(tuple(_signal_equations(model, notation)), "with the signals")
    yield _state_table(model, notation)
    yield from _parameter_tables(context, model, notation)
    if model.signals:
        yield _signal_table(model, notation)
    if model.disturbances:
        yield _disturbance_table(model, notation)
    yield _dimension_table(model, notation)


def _facts(context: Context, model: Model) -> tuple[tuple[str, Rich], ...]:
    hashes = joined([rich(context.link(p.case.name), " ", short_hash(p.model_hash)) for p in _points(context, model)])
    facts: list[tuple[str, Rich]] = [
        ("Name", (Mono(model.name),)),
        ("Basis", (model.basis or NOTHING,)),
        ("Time", (TIME_WORDS[model.time],)),
    ]
    if model.sample_interval is not None:
        notation = context.notations[model.name]
        sign = formulas.latex(model.sample_interval, notation)
        facts.append(("Sampling interval", (Formula(sign, speech.say(model.sample_interval)),)))
    facts.append(("Fingerprint as analysed", hashes))
    return tuple(facts)


def _equations(model: Model, notation: Notation) -> Iterator[Formula]:
    sampled = model.time == "sampled"
    for state, expression in zip(model.states, model.equations, strict=True):
        sign = notation.latex(state.name)
        left = rf"{sign}[n+1]" if sampled else rf"\dot{{{sign}}}"
        words = f"next {spoken(state.name)}" if sampled else f"rate of change of {spoken(state.name)}"
        yield equation(left, words, expression, notation)


def _signal_equations(model: Model, notation: Notation) -> Iterator[Formula]:
    for signal in model.signals:
        yield equation(notation.latex(signal.name), spoken(signal.name), signal.expression, notation)


def equation(left: str, words: str, expression: Expression, notation: Notation) -> Formula:
    """``left = expression``, broken over lines where it is wider than the column."""
    right = formulas.latex(expression, notation)
    said = f"{words} equals {speech.say(expression)}"
    line = f"{left} = {right}"
    if equations.width_of(line) <= equations.LINE_WIDTH_EM:
        return Formula(line, said, display=True)
    return Formula(formulas.broken(left, expression, notation, equations.LINE_WIDTH_EM, equations.width_of), said, True)


def _state_table(model: Model, notation: Notation) -> Table:
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


def side_text(side: Interval, unit: units.PrintedUnit) -> str:
    """An interval that the engineer stated, in the declared unit."""
    if side.lower is None and side.upper is None:
        return "not bounded"
    low, high = unit.from_si(side.lower, side.upper)
    left = "" if low is None else numbers.stated(low)
    right = "" if high is None else numbers.stated(high)
    if low is None:
        return f"up to {right}"
    return f"from {left}" if high is None else f"{left} {numbers.ELLIPSIS} {right}"


def _parameter_tables(context: Context, model: Model, notation: Notation) -> Iterator[Block]:
    changed = {name: p for p in _points(context, model) for name, _ in p.case.set_values}
    rows = tuple(Row(_parameter_cells(context, model, p, notation, p.name in changed)) for p in model.parameters)
    columns = (
        Column("Sign", "formula", 8),
        Column("Name", "mono", 14),
        Column("Meaning", share=24),
        Column("Nominal", "number", 12),
        Column("Unit", "short", 10),
        Column("Spread", "number", 13),
        Column("Kind", "short", 9),
        Column("Source", share=10),
    )
    note: Rich = (
        "A tolerance is a spread in production, a range a spread in use; either value is unknown but constant"
        " during a motion unless marked as varying.",
    )
    yield Table("Parameters", columns, rows, note)
    if changed:
        yield _set_table(context, model, notation)


def _parameter_cells(
    context: Context, model: Model, parameter: Parameter, notation: Notation, changed: bool
) -> tuple[Rich, ...]:
    unit = units.absolute_unit(parameter.unit, parameter.scale)
    spread = NOTHING if parameter.spread.is_point else side_text(parameter.spread, unit)
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


def _set_table(context: Context, model: Model, notation: Notation) -> Table:
    rows = tuple(
        Row(
            (
                (context.link(p.case.name),),
                (Formula(notation.latex(name), spoken(name)),),
                (Mono(name),),
                (units.written(value),),
            )
        )
        for p in _points(context, model)
        for name, value in p.case.set_values
    )
    columns = (
        Column("Operating point", "id", 34),
        Column("Sign", "formula", 12),
        Column("Name", "mono", 24),
        Column("Set to", "text", 30),
    )
    return Table("Parameters set by operating points", columns, rows)


def _signal_table(model: Model, notation: Notation) -> Table:
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


def _disturbance_table(model: Model, notation: Notation) -> Table:
    rows = tuple(
        Row(
            (
                (Formula(notation.latex(d.name), spoken(d.name)),),
                (Mono(d.name),),
                (side_text(d.spread, units.PrintedUnit(d.unit)),),
                ("SI unit of " + (units.unit_text(d.unit) or "1"),),
            )
        )
        for d in model.disturbances
    )
    columns = (
        Column("Sign", "formula", 15),
        Column("Name", "mono", 25),
        Column("Bounds", "number", 30),
        Column("Unit", "short", 30),
    )
    return Table("Disturbances", columns, rows, ("Zero in every claim that does not name them.",))


def _dimension_table(model: Model, notation: Notation) -> Table:
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
    if "/" not in unit:
        return f"{unit}/s"
    return f"({unit})/s"


def offset_side(case: Case, name: str, side: Interval) -> str:
    """A region or limit side, as an offset from the equilibrium, with its unit."""
    state = next(s for s in case.model.states if s.name == name)
    unit = units.difference_unit(state.unit, state.scale)
    text = side_text(side, unit)
    return text if text == "not bounded" else units.with_unit(text, unit.name)


def absolute_side(case: Case, name: str, side: Interval) -> str:
    """A domain or search side, in the state's unit."""
    state = next(s for s in case.model.states if s.name == name)
    unit = units.absolute_unit(state.unit, state.scale)
    text = side_text(side, unit)
    return text if text == "not bounded" else units.with_unit(text, unit.name)
