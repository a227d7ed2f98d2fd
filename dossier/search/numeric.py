"""Expressions as fast floating functions of many points at once, for searches only: nothing here is evidence.

A formula becomes a list of numpy calls on numbered registers, shared sub-expressions once.  No text is
evaluated and no computer algebra is loaded.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from fractions import Fraction
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from dossier.model.ball import Ball
from dossier.model.case import Case
from dossier.model.expression import Expression, nodes, sub, symbol
from dossier.model.loop import vector_field

Points = NDArray[np.float64]
"""One row per variable (or formula), one column per point."""

DIFFERENCE: Final = 6e-6
"""Step of central differences relative to the scale of a variable: the cube root of the double's precision."""

_CALLS: Final[dict[str, Callable[..., Any]]] = {
    "neg": np.negative,
    "div": np.divide,
    "sin": np.sin,
    "cos": np.cos,
    "tan": np.tan,
    "asin": np.arcsin,
    "acos": np.arccos,
    "atan": np.arctan,
    "exp": np.exp,
    "log": np.log,
    "sqrt": np.sqrt,
    "abs": np.abs,
    "tanh": np.tanh,
}


def _sum(*terms: Any) -> Any:
    return sum(terms[1:], start=terms[0])


def _product(*factors: Any) -> Any:
    total = factors[0]
    for factor in factors[1:]:
        total = total * factor
    return total


def _saturated(x: Any, lower: Any, upper: Any) -> Any:
    return np.minimum(np.maximum(x, lower), upper)


def _power(exponent: Fraction) -> Callable[[Any], Any]:
    if exponent.denominator == 1:
        whole = int(exponent)
        return lambda base: np.power(base, whole) if whole >= 0 else 1.0 / np.power(base, -whole)
    value = float(exponent)
    return lambda base: np.power(base, value)


class NumericFunction:
    """`formulas` over `names`, with the values of all other symbols in `constants`.

    Call with Points (n, N) for Points (m, N); undefined values come back as nan or infinity.
    Raises KeyError when built for a symbol that is neither.
    """

    def __init__(self, formulas: Iterable[Expression], names: Sequence[str], constants: Mapping[str, float]) -> None:
        rows = {name: i for i, name in enumerate(names)}
        slots: dict[Expression, int] = {}
        self._start: list[Any] = []
        self._inputs: list[tuple[int, int]] = []
        self._steps: list[tuple[int, Callable[..., Any], tuple[int, ...]]] = []
        self._outputs: list[int] = []
        for formula in formulas:
            for node in nodes(formula):
                if node not in slots:
                    slots[node] = len(self._start)
                    self._start.append(self._fixed_value(node, rows, constants))
                    self._record(node, slots, rows)
            self._outputs.append(slots[formula])

    @staticmethod
    def _fixed_value(node: Expression, rows: Mapping[str, int], constants: Mapping[str, float]) -> float | None:
        if node.op == "number":
            return float(node.fraction)
        if node.op == "pi":
            return float(np.pi)
        if node.op == "symbol" and node.value not in rows:
            return constants[str(node.value)]
        return None

    def _record(self, node: Expression, slots: Mapping[Expression, int], rows: Mapping[str, int]) -> None:
        slot = slots[node]
        if node.op == "symbol" and node.value in rows:
            self._inputs.append((slot, rows[str(node.value)]))
        elif node.args:
            special = {"add": _sum, "mul": _product, "sat": _saturated}
            call = _power(node.fraction) if node.op == "pow" else special.get(node.op) or _CALLS[node.op]
            self._steps.append((slot, call, tuple(slots[a] for a in node.args)))

    def __call__(self, points: Points) -> Points:
        """Every formula at every column of `points`."""
        registers = list(self._start)
        for slot, row in self._inputs:
            registers[slot] = points[row]
        with np.errstate(all="ignore"):
            for slot, call, arguments in self._steps:
                registers[slot] = call(*(registers[a] for a in arguments))
        result = np.empty((len(self._outputs), points.shape[1]))
        for row, slot in enumerate(self._outputs):
            result[row] = registers[slot]
        return result


def nominal_floats(case: Case) -> dict[str, float]:
    """Nominal parameter values in floating point."""
    return {p.name: _middle(p.nominal) for p in case.model.parameters}


def _middle(ball: Ball) -> float:
    return float(ball.middle)


def rest_function(case: Case) -> NumericFunction:
    """f(x), or f(x) - x for sampled models, at the nominal parameters: zero at equilibria."""
    loop = vector_field(case)
    equations = loop.equations
    if loop.sampled:
        equations = tuple(sub(e, symbol(s)) for e, s in zip(equations, loop.states, strict=True))
    return NumericFunction(equations, loop.states, nominal_floats(case))


def slopes_by_differences(function: NumericFunction, points: Points, scale: Points) -> Points:
    """Central differences (m, n, N) per unit of each variable; `scale` (n,) sets the steps."""
    columns = []
    for j, size in enumerate(scale.tolist()):
        shift = np.zeros((points.shape[0], 1))
        shift[j] = DIFFERENCE * size
        upper, lower = points + shift, points - shift
        with np.errstate(invalid="ignore"):
            columns.append((function(upper) - function(lower)) / (upper[j] - lower[j]))
    return np.stack(columns, axis=1)
