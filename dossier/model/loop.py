"""The closed loop derived from a case: signals inlined, loops opened at a command, parameters set."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from dossier.model.case import Case, Model
from dossier.model.expression import (
    ZERO,
    Expression,
    differentiate,
    number,
    substitute,
    symbol,
    to_data,
)
from dossier.model.expression import names as symbols_of
from dossier.model.region import Interval

LOOP_INPUT = "loop input"
"""Name of the free input that replaces a command where its loop is opened; no project name has a space."""


@dataclass(frozen=True, slots=True)
class VectorField:
    """x' = f or x+ = f over states and parameters only, in state order."""

    states: tuple[str, ...]
    parameters: tuple[str, ...]
    equations: tuple[Expression, ...]
    sampled: bool


def inline_signals(expression: Expression, model: Model) -> Expression:
    """`expression` with every signal replaced by its formula, disturbances by zero."""
    mapping: dict[str, Expression] = {d.name: ZERO for d in model.disturbances}
    for signal in ordered_signals(model):
        mapping[signal] = substitute(_formula(model, signal), mapping)
    return substitute(expression, mapping)


def ordered_signals(model: Model) -> tuple[str, ...]:
    """Signal names such that each uses only earlier ones.  Raises ValueError on a cycle."""
    open_names = {s.name: symbols_of(s.expression) & {t.name for t in model.signals} for s in model.signals}
    order: list[str] = []
    while open_names:
        ready = [n for n, needs in open_names.items() if needs <= set(order)]
        if not ready:
            raise ValueError(f"signals define each other in a circle: {', '.join(sorted(open_names))}")
        order.extend(ready)
        for name in ready:
            del open_names[name]
    return tuple(order)


def _formula(model: Model, name: str) -> Expression:
    return next(s.expression for s in model.signals if s.name == name)


def vector_field(case: Case) -> VectorField:
    """The closed loop of `case` with signals inlined and disturbances zero."""
    model = case.model
    return VectorField(
        model.state_names,
        tuple(p.name for p in model.parameters),
        tuple(inline_signals(e, model) for e in model.equations),
        model.time == "sampled",
    )


@dataclass(frozen=True, slots=True)
class OpenedLoop:
    """The loop broken at one command: field with `LOOP_INPUT` in its place, and the command's own formula.

    ``equations`` with LOOP_INPUT = w gives the response; ``command`` is u(x), itself free of
    LOOP_INPUT unless the command's formula uses the command (refused by the reader).
    """

    command: Expression
    equations: tuple[Expression, ...]


def open_loop(case: Case, command: str) -> OpenedLoop:
    """Break the loop at signal `command`; every use of it becomes the free input, all other loops stay closed."""
    model = case.model
    mapping: dict[str, Expression] = {d.name: ZERO for d in model.disturbances}
    own = ZERO
    for signal in ordered_signals(model):
        formula = substitute(_formula(model, signal), mapping)
        if signal == command:
            own = formula
            mapping[signal] = symbol(LOOP_INPUT)
        else:
            mapping[signal] = formula
    return OpenedLoop(own, tuple(substitute(e, mapping) for e in model.equations))


def jacobian(equations: tuple[Expression, ...], names: tuple[str, ...]) -> tuple[tuple[Expression, ...], ...]:
    """Matrix of partial derivatives, row per equation, column per name."""
    return tuple(tuple(differentiate(e, n) for n in names) for e in equations)


def set_exactly(expression: Expression, values: Mapping[str, Fraction]) -> Expression:
    """`expression` with the named symbols replaced by exact numbers."""
    return substitute(expression, {n: number(v) for n, v in values.items()})


def nominal_values(case: Case) -> dict[str, Fraction]:
    """Nominal value of every parameter; for one that carries pi, the midpoint of its ball."""
    return {p.name: p.nominal.middle for p in case.model.parameters}


def model_data(case: Case) -> dict[str, object]:
    """The closed loop as analysed, as canonical data: SI rationals and expression trees."""
    field = vector_field(case)
    return {
        "operating_point": case.name,
        "model": case.model.name,
        "time": case.model.time,
        "sample_interval": None if case.model.sample_interval is None else to_data(case.model.sample_interval),
        "states": list(field.states),
        "equations": [to_data(e) for e in field.equations],
        "signals": {
            s.name: {
                "formula": to_data(inline_signals(s.expression, case.model)),
                "role": s.role,
                "limits": _sides(s.limits),
            }
            for s in case.model.signals
        },
        "parameters": {
            p.name: {
                "nominal": {"middle": str(p.nominal.middle), "radius": str(p.nominal.radius)},
                "spread": _sides(p.spread),
                "kind": p.kind,
                "varies": p.varies,
            }
            for p in case.model.parameters
        },
        "domain": {n: _sides(i) for n, i in case.model.domain.items()},
        "search": {n: _sides(i) for n, i in case.search.items()},
        "region": {n: _sides(i) for n, i in case.region.items()},
        "limits": {n: _sides(i) for n, i in case.limits.items()},
        "fixed": None if case.fixed is None else [str(v) for v in case.fixed],
        "near": None if case.near is None else [str(v) for v in case.near],
        **_candidate_data(case),
    }


def _candidate_data(case: Case) -> dict[str, object]:
    """The engineer's V, which is part of what certificates are about where there is one."""
    if case.candidate is None:
        return {}
    return {"candidate": {"function": to_data(case.candidate.function), "level": str(case.candidate.level)}}


def _sides(interval: Interval) -> list[str | None]:
    return [None if v is None else str(v) for v in (interval.lower, interval.upper)]


def model_hash(case: Case) -> str:
    """SHA-256 of the canonical text of `model_data`."""
    text = json.dumps(model_data(case), sort_keys=True, separators=(",", ":"), ensure_ascii=False)
    return hashlib.sha256(text.encode()).hexdigest()
