"""Evaluate formulas in floating point over many points at once, by closures over numpy arrays.

A route of its own: it shares nothing but the expression trees with the searches, so a mistake in their
evaluation cannot hide here.  Values are for looking for counter-examples; they prove nothing.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import reduce
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from dossier.model.case import Case
from dossier.model.expression import Expression, nodes
from dossier.model.loop import vector_field

Columns = NDArray[np.float64]
"""One row per variable, one column per motion."""

Rates = Callable[[Columns], Columns]
"""Offsets to their derivatives (continuous) or next offsets (sampled), same shape."""

_FUNCTIONS: Final[dict[str, Callable[..., Any]]] = {
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
    "neg": np.negative,
    "div": np.divide,
}

LARGEST_PRODUCT_POWER: Final = 16
"""Integer powers up to this are products; larger ones use the library's power function."""


class Formulas:
    """Compiled `formulas` over the variables `names`: call with one row per name, get one row per formula.

    Undefined values come back as nan or infinity, never as an exception.
    """

    def __init__(self, formulas: Sequence[Expression], names: Sequence[str]) -> None:
        self._rows = {name: i for i, name in enumerate(names)}
        self._slots: dict[Expression, int] = {}
        self._steps: list[Callable[[list[Any], Columns], Any]] = []
        for formula in formulas:
            for node in nodes(formula):
                if node not in self._slots:
                    self._steps.append(self._step(node))
                    self._slots[node] = len(self._slots)
        self._outputs = [self._slots[f] for f in formulas]

    def __call__(self, values: Columns) -> Columns:
        """Every formula at every column of `values`."""
        registers: list[Any] = []
        with np.errstate(all="ignore"):
            for step in self._steps:
                registers.append(step(registers, values))
        result = np.empty((len(self._outputs), values.shape[1]))
        for row, slot in enumerate(self._outputs):
            result[row] = registers[slot]
        return result

    def _step(self, node: Expression) -> Callable[[list[Any], Columns], Any]:
        slots = [self._slots[a] for a in node.args]
        if node.op == "number":
            return _constant(_as_float(node))
        if node.op == "pi":
            return _constant(float(np.pi))
        if node.op == "symbol":
            row = self._rows[str(node.value)]
            return lambda registers, values: values[row]
        if node.op == "add":
            return _chain(np.add, slots)
        if node.op == "mul":
            return _chain(np.multiply, slots)
        if node.op == "sat":
            x, low, high = slots
            return lambda registers, values: np.minimum(np.maximum(registers[x], registers[low]), registers[high])
        if node.op == "pow":
            return _power(slots[0], _as_float(node))
        function = _FUNCTIONS[node.op]
        if len(slots) == 1:
            (argument,) = slots
            return lambda registers, values: function(registers[argument])
        return _chain(function, slots)


def _as_float(node: Expression) -> float:
    if node.value is None:
        raise ValueError(f"{node.op} carries no number")
    return float(node.value)


def _constant(value: float) -> Callable[[list[Any], Columns], Any]:
    scalar = np.float64(value)
    return lambda registers, values: scalar


def _chain(function: Callable[..., Any], slots: list[int]) -> Callable[[list[Any], Columns], Any]:
    """`function` of two arguments applied from the left along all `slots`."""
    first, second, *rest = slots
    if not rest:
        return lambda registers, values: function(registers[first], registers[second])
    return lambda registers, values: reduce(function, [registers[s] for s in slots])


def _power(slot: int, exponent: float) -> Callable[[list[Any], Columns], Any]:
    if exponent.is_integer() and 0 < abs(exponent) <= LARGEST_PRODUCT_POWER:
        count = int(abs(exponent))
        if exponent > 0:
            return lambda registers, values: reduce(np.multiply, [registers[slot]] * count)
        return lambda registers, values: 1 / reduce(np.multiply, [registers[slot]] * count)
    return lambda registers, values: np.power(registers[slot], exponent)


@dataclass(frozen=True)
class Flow:
    """The closed loop over offsets from each motion's own equilibrium.

    `centres` (n x N) and `parameters` (m x N) belong to the N motions; `names` are states, then parameters.
    """

    field: Formulas
    centres: Columns
    parameters: Columns
    sampled: bool

    def absolute(self, index: NDArray[np.intp], offsets: Columns) -> Columns:
        """States (absolute) and parameters of the motions `index`, as the formulas read them."""
        return np.concatenate((self.centres[:, index] + offsets, self.parameters[:, index]))

    def select(self, index: NDArray[np.intp]) -> Rates:
        """Right-hand side for the motions `index`."""
        size = self.centres.shape[0]
        centre = self.centres[:, index]
        values = np.concatenate((centre, self.parameters[:, index]))

        def rates(offsets: Columns) -> Columns:
            np.add(centre, offsets, out=values[:size])
            result = self.field(values)
            return result - centre if self.sampled else result

        return rates


def compile_field(case: Case) -> Formulas:
    """The right-hand sides of `case` over its states, then its parameters."""
    loop = vector_field(case)
    return Formulas(loop.equations, (*loop.states, *loop.parameters))
