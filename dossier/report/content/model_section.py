"""Each model as analysed: equations typeset from the analysed trees, states, parameters, signals, dimensions."""

from __future__ import annotations

from collections.abc import Iterator

from dossier.model.case import Model
from dossier.model.dossier import PointEvidence
from dossier.model.expression import Expression
from dossier.report import equations, formulas, speech
from dossier.report.blocks import (
    Block,
    Equations,
    Facts,
    Heading,
    Section,
)
from dossier.report.content import model_tables
from dossier.report.content.context import Context, short_hash
from dossier.report.content.quantities import NOTHING
from dossier.report.notation import Notation, spoken
from dossier.report.rich import Formula, Mono, Rich, joined, rich

TIME_WORDS = {
    "continuous": "continuous: the equations give rates of change",
    "sampled": "sampled: the equations give the next sample",
}


TOO_WIDE = "an expression too wide for the page; model.json has it"


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
    yield model_tables.state_table(model, notation)
    yield from model_tables.parameter_tables(context, model, _points(context, model), notation)
    if model.signals:
        yield model_tables.signal_table(model, notation)
    if model.disturbances:
        yield model_tables.disturbance_table(model, notation)
    yield model_tables.dimension_table(model, notation)


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
    text = formulas.broken(left, expression, notation, equations.LINE_WIDTH_EM, equations.width_of)
    if equations.width_of(text) <= equations.WIDEST_EM:
        return Formula(text, said, display=True)
    return Formula(rf"{left} = \text{{{TOO_WIDE}}}", said, display=True)
