"""The closed loop in scaled offsets, in floating point and vectorised: what the quadratic search looks at.

Offsets are divided by powers of two near the half widths of the region and time by a characteristic
rate, so that every number the conic solver sees is of order one.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property, reduce
from itertools import islice, product
from typing import Final

import numpy as np
from flint import fmpq_mpoly
from numpy.typing import NDArray

from dossier.model.affine import spread_box
from dossier.model.case import NOMINAL, Case, Scope
from dossier.model.equilibrium import Equilibrium
from dossier.model.loop import VectorField, vector_field
from dossier.model.polynomial import NotRational, OffsetField, Ring, offset_field, terms
from dossier.model.region import Box
from dossier.search.numeric import NumericFunction, nominal_floats
from dossier.search.rounding import power_of_two_near

Array = NDArray[np.float64]
Evaluate = Callable[[Array, Array], Array]
"""(offsets B x n, parameters B x k) to derivatives of the offsets, or to the next offsets."""

VERTICES: Final = 512
"""Most vertices of the parameter box looked at in floating point; the proof needs them all anyway."""
DEFAULT_HALF_WIDTH: Final = 1.0
"""Scale of a state that neither region nor limits nor domain bound."""
VERTEX_SHARE: Final = 0.6
"""Share of attack points put on vertices of the parameter box: most worst cases are there, not all."""
DIFFERENCE: Final = 1e-5
"""Step of central differences in scaled offsets: error near 1e-10, ample for a candidate."""
SLOWEST: Final = 1e-9
"""Decay (scaled) below this is taken as zero: such a linear part decides nothing."""


@dataclass(frozen=True)
class ScaledLoop:
    """y = S z with S = diag(`scales`), and time in units of 1/`rate` where it is continuous.

    `vertices` are parameter rows (V x k) over `spread`; `linear` the scaled linear parts there
    (V x n x n).  `field` is the exact form where the equations are quotients of polynomials, or where their
    elementary functions were expanded, else why not; the factors of an expansion count as parameters in `spread`.
    """

    case: Case
    field: OffsetField | NotRational
    sampled: bool
    spread: Box
    scales: tuple[Fraction, ...]
    rate: float
    vertices: Array
    linear: Array
    evaluate: Evaluate

    @property
    def size(self) -> int:
        """Number of states n."""
        return len(self.scales)

    @property
    def is_expanded(self) -> bool:
        """Elementary functions were replaced by polynomials with factors."""
        return isinstance(self.field, OffsetField) and bool(self.field.factors.names)

    @property
    def parameters(self) -> Box:
        """The true parameters of `spread`."""
        factors = self.field.factors.names if isinstance(self.field, OffsetField) else ()
        count = len(self.spread.names) - len(factors)
        return Box(self.spread.names[:count], self.spread.intervals[:count])

    @cached_property
    def decay(self) -> float:
        """Slowest decay of the linear parts, per unit of scaled time; 1 - rho^2 for sampled loops; <= 0: none."""
        eigenvalues = np.linalg.eigvals(self.linear)
        if self.sampled:
            return float(1.0 - np.max(np.abs(eigenvalues)) ** 2)
        return float(-np.max(eigenvalues.real))

    @property
    def is_settling(self) -> bool:
        """Every linear part looked at is asymptotically stable."""
        return self.decay > SLOWEST

    def image(self, points: Array, parameters: Array) -> Array:
        """The scaled field (continuous) or the next scaled offsets (sampled) at `points` (B x n)."""
        scales = np.array([float(s) for s in self.scales])
        values = self.evaluate(points * scales, parameters) / scales
        return values if self.sampled else values / self.rate

    def slope(self, matrix: Array, points: Array, parameters: Array, share: float = 0.0) -> Array:
        """(V' + `share` x decay x V)/V for V = z' `matrix` z, with V(next) - V for sampled loops; inf if undefined.

        Negative: V falls at least at that share of the slowest decay.
        """
        image = self.image(points, parameters)
        value = ((points @ matrix) * points).sum(1)
        with np.errstate(all="ignore"):
            if self.sampled:
                change = ((image @ matrix) * image).sum(1) - value
                decay = self.decay
            else:
                change = 2.0 * ((image @ matrix) * points).sum(1)
                decay = 2.0 * self.decay
            slope = change / value + share * decay
        return np.where(np.isfinite(slope), slope, np.inf)

    def draw(self, count: int, generator: np.random.Generator) -> Array:
        """Parameter rows: mostly vertices, some interior."""
        inside = generator.random((count, len(self.spread.names)))
        corner = generator.random(count) < VERTEX_SHARE
        inside[corner] = np.round(inside[corner])
        lower = np.array([float(i.bounds[0]) for i in self.spread.intervals])
        upper = np.array([float(i.bounds[1]) for i in self.spread.intervals])
        return lower + inside * (upper - lower)


def scaled_loop(
    case: Case, equilibrium: Equilibrium, over: Scope, region: Box, expanded: tuple[Box, int] | None = None,
    cell: Box | None = None,
) -> ScaledLoop:  # fmt: skip
    """The scaled loop around `equilibrium`, with the spread parameters symbolic over tolerances.

    `cell` is a part of the box of spreads, by default the whole; `expanded` gives half widths of a box (absolute
    bounds of the states) on which elementary functions are expanded, and the order.
    Raises ArithmeticError where a constant of the equations has no finite enclosure.
    """
    spread = Box((), ()) if over == NOMINAL else cell or spread_box(case)
    loop = vector_field(case)
    field = field_of(case, equilibrium, spread, expanded)
    scales = tuple(power_of_two_near(half_width(case, region, n)) for n in loop.states)
    if isinstance(field, NotRational):
        vertices = _vertices(spread)
        evaluate = _from_expressions(case, loop, equilibrium, spread)
        linear = _differences(evaluate, vertices, scales)
    else:
        spread = Box((*spread.names, *field.factors.names), (*spread.intervals, *field.factors.intervals))
        vertices = _vertices(spread)
        evaluate = _from_polynomials(field)
        linear = _linear_parts(field, vertices, scales)
    rate = 1.0 if loop.sampled else float(np.max(np.abs(np.linalg.eigvals(linear)), initial=0.0)) or 1.0
    return ScaledLoop(case, field, loop.sampled, spread, scales, rate, vertices, linear / rate, evaluate)


def field_of(
    case: Case, equilibrium: Equilibrium, parameters: Box, expanded: tuple[Box, int] | None = None
) -> OffsetField | NotRational:
    """The exact field over `parameters`; `expanded` as for `scaled_loop`."""
    loop = vector_field(case)
    known = {p.name: p.nominal for p in case.model.parameters}
    place, order = None, 0
    if expanded is not None:
        around, order = expanded
        place = Box((*around.names, *parameters.names), (*around.intervals, *parameters.intervals))
    return offset_field(
        loop.equations, loop.states, equilibrium.state, known, parameters.names, sampled=loop.sampled, place=place,
        order=order, course=equilibrium.course,
    )  # fmt: skip


def half_width(case: Case, region: Box, name: str) -> float:
    """A typical size of one offset: of the region, else limits, else domain."""
    for box in (region, case.limits, case.model.domain):
        side = box[name]
        if side.is_bounded and side.width > 0:
            return float(side.width) / 2
    return DEFAULT_HALF_WIDTH


def _vertices(spread: Box) -> Array:
    sides = [i.bounds for i in spread.intervals]
    rows = list(islice(product(*sides), VERTICES))
    if 2 ** len(sides) > VERTICES:
        picks = np.random.default_rng(len(sides)).integers(0, 2, (VERTICES, len(sides)))
        rows = [tuple(side[b] for side, b in zip(sides, pick, strict=True)) for pick in picks]
    return np.array([[float(v) for v in row] for row in rows]).reshape(len(rows), len(sides))


class Evaluator:
    """A polynomial as exponent and coefficient arrays; call with points, one row each, over all ring names."""

    def __init__(self, polynomial: fmpq_mpoly, ring: Ring) -> None:
        items = terms(polynomial)
        self.exponents = np.array(list(items) or [(0,) * len(ring.names)], dtype=np.int64)
        self.coefficients = np.array([float(c) for c in items.values()] or [0.0])

    def __call__(self, points: Array) -> Array:
        """Values at `points`, one per row."""
        result = np.zeros(len(points))
        for exponents, coefficient in zip(self.exponents, self.coefficients, strict=True):
            factors = [points[:, k] for k in np.flatnonzero(exponents) for _ in range(exponents[k])]
            result = result + reduce(np.multiply, factors, coefficient)
        return result


def constants_of(field: OffsetField) -> list[float]:
    """Middle values of the uncertain constants, in the order of the ring."""
    return [float(field.balls[n].middle) for n in field.ring.names if n in field.balls]


def _from_polynomials(field: OffsetField) -> Evaluate:
    numerators = [Evaluator(p, field.ring) for p in field.numerators]
    denominator = Evaluator(field.denominator, field.ring)
    rest = constants_of(field)

    def evaluate(points: Array, parameters: Array) -> Array:
        full = np.hstack([points, parameters, np.tile(rest, (len(points), 1))])
        with np.errstate(all="ignore"):
            return np.stack([n(full) for n in numerators], axis=1) / denominator(full)[:, None]

    return evaluate


def _linear_parts(field: OffsetField, vertices: Array, scales: tuple[Fraction, ...]) -> Array:
    """First-order terms of the numerators over the denominator at the equilibrium."""
    size = len(field.states)
    widths = np.array([float(s) for s in scales])
    rows = np.hstack([np.zeros((len(vertices), size)), vertices, np.tile(constants_of(field), (len(vertices), 1))])
    denominator = Evaluator(field.denominator, field.ring)(rows)
    result = np.zeros((len(vertices), size, size))
    for i, numerator in enumerate(field.numerators):
        for j in range(size):
            result[:, i, j] = Evaluator(numerator.derivative(j), field.ring)(rows) / denominator
    return result * widths[None, None, :] / widths[None, :, None]


def _from_expressions(case: Case, loop: VectorField, equilibrium: Equilibrium, spread: Box) -> Evaluate:
    """The equations as written, less their value at the equilibrium, which is zero but for rounding."""
    place = np.array([float(b.middle) for b in equilibrium.state])
    constants = {n: v for n, v in nominal_floats(case).items() if n not in spread.names}
    function = NumericFunction(loop.equations, (*loop.states, *spread.names), constants)

    course = equilibrium.course
    slopes = np.zeros((len(place), len(spread.names)))
    middle = np.zeros(len(spread.names))
    if course is not None:
        place = np.array([float(c) for c in course.centre])
        slopes = np.array([[float(s) for s in row] for row in course.slopes]).reshape(slopes.shape)
        middle = np.array([float(i.middle) for i in course.parameters.intervals])

    def evaluate(points: Array, parameters: Array) -> Array:
        rests = place + (parameters - middle) @ slopes.T
        moved = function(np.hstack([points + rests, parameters]).T).T
        return moved - function(np.hstack([np.broadcast_to(rests, points.shape), parameters]).T).T

    return evaluate


def _differences(evaluate: Evaluate, vertices: Array, scales: tuple[Fraction, ...]) -> Array:
    """Scaled linear parts by central differences, vertex by vertex."""
    size = len(scales)
    widths = np.array([float(s) for s in scales])
    result = np.zeros((len(vertices), size, size))
    for j in range(size):
        step = np.zeros((len(vertices), size))
        step[:, j] = DIFFERENCE * widths[j]
        result[:, :, j] = (evaluate(step, vertices) - evaluate(-step, vertices)) / (2 * DIFFERENCE * widths)
    return result


def denominator_sign(field: OffsetField, vertices: Array) -> int:
    """Sign of the denominator at the equilibrium and the first vertex; the check proves it everywhere."""
    row = np.concatenate([np.zeros(len(field.states)), vertices[:1].ravel(), constants_of(field)])
    return 1 if Evaluator(field.denominator, field.ring)(row[None, :]).item() >= 0 else -1
