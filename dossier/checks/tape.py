"""Expressions as a straight-line tape with enclosures of values, gradients and Hessians over arrays of boxes.

    tape = Tape(expressions, ("x", "y"), {"k": Ball(Fraction(3))})
    tape.values(boxes)        -> Values(values, valid, empty)
    tape.first_order(boxes)   -> FirstOrder(values, gradients, valid, smooth, empty)
    tape.second_order(boxes)  -> SecondOrder(values, gradients, hessians, valid, smooth, twice, empty)

`boxes` is a `Span` of two float64 arrays of shape (n, B): row i is the variable i, column b is box b (lo == hi
for points).  Every name in an expression is a variable or a constant; a constant is a `Ball` that holds its
true value (a parameter, an enclosed number; also an interval, `Ball.from_bounds`) and enters rounded outward.

    values     Span (m, B)        gradients  Span (m, n, B)        hessians  Span (m, n, n, B), symmetric
    valid   (B,)  every expression is defined and continuous on the whole box, every number that occurs finite
    smooth  (B,)  also every first derivative is enclosed: the gradients hold the generalised gradient
            (F. H. Clarke, Optimization and Nonsmooth Analysis, 1983) at every point of the box; where no kink
            of abs or sat is met this is the ordinary gradient.  The mean value form f(y) - f(x) in
            gradients * (y - x) holds on the box with or without kinks (Lebourg's theorem)
    twice   (B,)  also no kink is met and every second derivative is enclosed: f is C2 on the box
    empty   (B,)  some expression is undefined at every point of the box (root of a negative number, ...)

A box without the mask proves nothing from the numbers, with one exception: each row of `values` encloses the
expression at all points of the box where it is defined (ends may be infinite or nan, "unknown"), so a row
that surely excludes zero, or `empty`, excludes a solution even where `valid` is False.

Derivatives are made on the tape by the rules of calculus (forward mode, A. Griewank and A. Walther,
Evaluating Derivatives, 2008), with common parts shared.  Boxes are worked off in batches that fit in the cache
and in memory.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Final

import numpy as np

from dossier.checks import elementary as el
from dossier.checks import intervals as iv
from dossier.checks.intervals import Array, Mask, Span
from dossier.checks.tape_builder import Builder, Node
from dossier.model.ball import Ball
from dossier.model.expression import Expression

MEMORY: Final = 2**26
"""Bytes the live registers of one batch may take (64 MiB)."""
LARGEST_BATCH: Final = 4096
SMALLEST_BATCH: Final = 128
"""Columns per batch: larger ones leave the cache, smaller ones pay more for calls than for arithmetic."""
BYTES_PER_COLUMN: Final = 16


@dataclass(frozen=True)
class Values:
    """Enclosures (m, B) and masks (B,); see the module."""

    values: Span
    valid: Mask
    empty: Mask


@dataclass(frozen=True)
class FirstOrder:
    """Enclosures (m, B) and (m, n, B), masks (B,); see the module."""

    values: Span
    gradients: Span
    valid: Mask
    smooth: Mask
    empty: Mask


@dataclass(frozen=True)
class SecondOrder:
    """Enclosures (m, B), (m, n, B) and (m, n, n, B), masks (B,); see the module."""

    values: Span
    gradients: Span
    hessians: Span
    valid: Mask
    smooth: Mask
    twice: Mask
    empty: Mask


def _sign(a: Span) -> Span:
    """Generalised derivative of |a|: -1, 1, or all between."""
    return Span(np.where(a.lo > 0, 1.0, -1.0), np.where(a.hi < 0, -1.0, 1.0))


def _step(a: Span) -> Span:
    """Generalised derivative of max(a, 0): 0, 1, or all between."""
    return Span(np.where(a.lo > 0, 1.0, 0.0), np.where(a.hi < 0, 0.0, 1.0))


def _no_kink(a: Span) -> Span:
    """Derivative of `_sign` and `_step`: zero away from the kink, unknown at it."""
    value = np.where(iv.excludes_zero(a), 0.0, np.nan)
    return Span(value, value)


_OPERATIONS: Final[dict[str, Callable[..., Span]]] = {
    "add": iv.add,
    "sub": iv.sub,
    "neg": iv.neg,
    "mul": iv.mul,
    "div": iv.div,
    "square": iv.square,
    "power": iv.power,
    "rational power": el.rational_power,
    "sqrt": iv.sqrt,
    "abs": iv.absolute,
    "max": iv.maximum,
    "min": iv.minimum,
    "sin": el.sin,
    "cos": el.cos,
    "tan": el.tan,
    "exp": el.exp,
    "log": el.log,
    "tanh": el.tanh,
    "atan": el.atan,
    "asin": el.asin,
    "acos": el.acos,
    "sign": _sign,
    "step": _step,
    "no kink": _no_kink,
}


def _defined(node: Node, arguments: list[Span]) -> tuple[Mask, Mask] | None:
    """Where a partial operation is defined on the whole interval, and where nowhere; None for total ones."""
    a = arguments[0]
    if node.op == "div":
        b = arguments[1]
        return iv.excludes_zero(b), (b.lo == 0) & (b.hi == 0)
    if node.op == "sqrt":
        return a.lo >= 0, a.hi < 0
    if node.op == "log":
        return a.lo > 0, a.hi <= 0
    if node.op == "rational power":
        return (a.lo >= 0, a.hi < 0) if node.data > 0 else (a.lo > 0, a.hi <= 0)
    if node.op in ("asin", "acos"):
        return (a.lo >= -1) & (a.hi <= 1), (a.lo > 1) | (a.hi < -1)
    return None


class _Program:
    """The part of a tape one call needs: instructions in order, masks by order of derivative, registers freed."""

    def __init__(self, nodes: list[Node], levels: tuple[Iterable[int | None], ...]) -> None:
        order: dict[int, int] = {}
        for level, outputs in enumerate(levels):
            for index in _reachable(nodes, outputs):
                order.setdefault(index, level)
        self.steps = [(i, nodes[i], order[i]) for i in sorted(order)]
        self.outputs = [list(outputs) for outputs in levels]
        kept = {i for outputs in self.outputs for i in outputs if i is not None}
        last_use: dict[int, int] = {}
        for index, node, _ in self.steps:
            for argument in node.args:
                last_use[argument] = index
        self.freed: dict[int, list[int]] = {}
        for index, user in last_use.items():
            if index not in kept:
                self.freed.setdefault(user, []).append(index)
        live = peak = 0
        for index, _, _ in self.steps:
            live += 1
            peak = max(peak, live)
            live -= len(self.freed.get(index, ()))
        self.batch = int(np.clip(MEMORY // (BYTES_PER_COLUMN * max(peak, 1)), SMALLEST_BATCH, LARGEST_BATCH))

    def run(self, boxes: Span) -> tuple[dict[int, Span], list[Mask], Mask]:
        """Registers of all outputs, a mask per level, and where an expression is undefined throughout."""
        count = boxes.lo.shape[1]
        registers: dict[int, Span] = {}
        good = [np.ones(count, bool) for _ in self.outputs]
        empty = np.zeros(count, bool)
        with np.errstate(all="ignore"):
            for index, node, level in self.steps:
                if node.op == "variable":
                    registers[index] = Span(boxes.lo[node.data], boxes.hi[node.data])
                elif node.op == "constant":
                    registers[index] = node.data
                else:
                    arguments = [registers[a] for a in node.args]
                    domain = _defined(node, arguments)
                    if domain is not None:
                        good[level] &= domain[0]
                        if level == 0:
                            empty |= domain[1]
                    extra = () if node.data is None else (node.data,)
                    registers[index] = _OPERATIONS[node.op](*arguments, *extra)
                good[level] &= iv.is_sound(registers[index])
                for dead in self.freed.get(index, ()):
                    del registers[dead]
        for level in range(1, len(good)):
            good[level] &= good[level - 1]
        return registers, good, empty


def _reachable(nodes: list[Node], outputs: Iterable[int | None]) -> set[int]:
    found: set[int] = set()
    stack = [i for i in outputs if i is not None]
    while stack:
        index = stack.pop()
        if index not in found:
            found.add(index)
            stack.extend(nodes[index].args)
    return found


class Tape:
    """Expressions over `variables`, ready for evaluation; see the module.

    Raises KeyError for a name that is neither variable nor constant.
    """

    def __init__(
        self, expressions: Iterable[Expression], variables: Iterable[str], constants: Mapping[str, Ball]
    ) -> None:
        self.variables = tuple(variables)
        self._builder = Builder(self.variables, constants)
        self._values = [self._builder.expression(e) for e in expressions]

    @property
    def size(self) -> int:
        """Number of expressions m."""
        return len(self._values)

    @cached_property
    def _gradients(self) -> list[int | None]:
        return [self._builder.derivative(v, i) for v in self._values for i in range(len(self.variables))]

    @cached_property
    def _hessians(self) -> list[int | None]:
        """Lower triangles, row by row."""
        n = len(self.variables)
        rows = [self._gradients[k * n : (k + 1) * n] for k in range(self.size)]
        return [self._builder.derivative(row[i], j) for row in rows for i in range(n) for j in range(i + 1)]

    @cached_property
    def _program0(self) -> _Program:
        return _Program(self._builder.nodes, (self._values,))

    @cached_property
    def _program1(self) -> _Program:
        gradients = self._gradients
        return _Program(self._builder.nodes, (self._values, gradients))

    @cached_property
    def _program2(self) -> _Program:
        gradients, hessians = self._gradients, self._hessians
        return _Program(self._builder.nodes, (self._values, gradients, hessians))

    def values(self, boxes: Span) -> Values:
        """Values over `boxes` (n, B)."""
        (values,), (valid,), empty = _evaluate(self._program0, boxes)
        return Values(values, valid, empty)

    def first_order(self, boxes: Span) -> FirstOrder:
        """Values and generalised gradients over `boxes` (n, B)."""
        (values, rows), (valid, smooth), empty = _evaluate(self._program1, boxes)
        shape = (self.size, len(self.variables), boxes.lo.shape[1])
        return FirstOrder(values, Span(rows.lo.reshape(shape), rows.hi.reshape(shape)), valid, smooth, empty)

    def second_order(self, boxes: Span) -> SecondOrder:
        """Values, gradients and Hessians over `boxes` (n, B)."""
        (values, rows, parts), (valid, smooth, twice), empty = _evaluate(self._program2, boxes)
        n, count = len(self.variables), boxes.lo.shape[1]
        gradients = Span(rows.lo.reshape(self.size, n, count), rows.hi.reshape(self.size, n, count))
        hessians = Span(_symmetric(parts.lo, self.size, n), _symmetric(parts.hi, self.size, n))
        return SecondOrder(values, gradients, hessians, valid, smooth, twice, empty)


def _symmetric(lower_triangles: Array, size: int, n: int) -> Array:
    rows, columns = np.tril_indices(n)
    parts = lower_triangles.reshape(size, len(rows), -1)
    full = np.empty((size, n, n, parts.shape[2]))
    full[:, rows, columns] = parts
    full[:, columns, rows] = parts
    return full


def _evaluate(program: _Program, boxes: Span) -> tuple[list[Span], list[Mask], Mask]:
    count = boxes.lo.shape[1]
    results = [Span(np.zeros((len(o), count)), np.zeros((len(o), count))) for o in program.outputs]
    masks = [np.zeros(count, bool) for _ in program.outputs]
    empty = np.zeros(count, bool)
    for start in range(0, count, program.batch):
        part = slice(start, min(start + program.batch, count))
        registers, good, nowhere = program.run(Span(boxes.lo[:, part], boxes.hi[:, part]))
        empty[part] = nowhere
        for outputs, result, mask, fine in zip(program.outputs, results, masks, good, strict=True):
            mask[part] = fine
            for row, index in enumerate(outputs):
                if index is not None:  # None: zero by structure, exactly
                    result.lo[row, part], result.hi[row, part] = registers[index]
    return results, masks, empty
