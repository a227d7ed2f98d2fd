"""The closed loop in scaled offsets, in floating point and vectorised: what the quadratic search looks at.

Offsets are divided by powers of two near the half widths of the region and time by a characteristic
rate, so that every number the conic solver sees is of order one.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from itertools import islice, product
from typing import Final

import numpy as np
from flint import fmpq_mpoly
from numpy.typing import NDArray

from dossier.model.case import NOMINAL, Case, Scope
from dossier.model.equilibrium import Equilibrium
from dossier.model.loop import vector_field
from dossier.model.polynomial import NotRational, OffsetField, Ring, offset_field, terms
from dossier.model.region import Box
from dossier.search.rounding import power_of_two_near

Array = NDArray[np.float64]

VERTICES: Final = 512
"""Most vertices of the parameter box looked at in floating point; the proof needs them all anyway."""

DEFAULT_HALF_WIDTH: Final = 1.0
"""Scale of a state that neither region nor limits nor domain bound."""


class Evaluator:
    """A polynomial as exponent and coefficient arrays; call with points, one row each, over all ring names."""

    def __init__(self, polynomial: fmpq_mpoly, ring: Ring) -> None:
        items = terms(polynomial)
        self.exponents = np.array(list(items) or [(0,) * len(ring.names)], dtype=np.int64)
        self.coefficients = np.array([float(c) for c in items.values()] or [0.0])

    def __call__(self, points: Array) -> Array:  # noqa: D102 - described by the class
        result = np.zeros(len(points))
        for exponents, coefficient in zip(self.exponents, self.coefficients, strict=True):
            term = np.full(len(points), coefficient)
            for column in np.flatnonzero(exponents):
                term = term * points[:, column] ** int(exponents[column])
            result = result + term
        return result


@dataclass(frozen=True)
class ScaledLoop:
    """`scales` S and `rate`: y = S z, and the scaled field is f(S z)/(S rate), or the scaled next sample.

    `vertices` are parameter rows (V x k) over `spread`; `linear` the linear parts there (V x n x n).
    """

    case: Case
    field: OffsetField
    spread: Box
    scales: tuple[Fraction, ...]
    rate: float
    vertices: Array
    linear: Array
    _numerators: tuple[Evaluator, ...]
    denominator: Evaluator

    @property
    def size(self) -> int:
        """Number of states n."""
        return len(self.scales)

    def image(self, points: Array, parameters: Array) -> Array:
        """The scaled field (continuous) or the next scaled offsets (sampled) at `points` (B x n)."""
        scales = np.array([float(s) for s in self.scales])
        rest = [0.0 if n.startswith("shift") else float(self.field.balls[n].middle) for n in self._constants()]
        full = np.hstack([points * scales, parameters, np.tile(rest, (len(points), 1))])
        with np.errstate(all="ignore"):
            numerators = np.stack([e(full) for e in self._numerators], axis=1)
            values = numerators / self.denominator(full)[:, None] / scales
        return values if self.field.sampled else values / self.rate

    def _constants(self) -> tuple[str, ...]:
        return self.field.ring.names[self.size + len(self.spread.names) :]

    def slope(self, matrix: Array, points: Array, parameters: Array) -> Array:
        """V' (or V(next) - V) for V = z' `matrix` z, divided by |z|^2."""
        image = self.image(points, parameters)
        weighted = image @ matrix
        if self.field.sampled:
            change = (weighted * image).sum(1) - (points @ matrix * points).sum(1)
        else:
            change = 2.0 * (weighted * points).sum(1)
        return change / (points * points).sum(1)

    def draw(self, count: int, generator: np.random.Generator) -> Array:
        """Parameter rows: mostly vertices, some interior."""
        inside = generator.random((count, len(self.spread.names)))
        corner = generator.random(count) < VERTEX_SHARE
        inside[corner] = np.round(inside[corner])
        lower = np.array([float(i.bounds[0]) for i in self.spread.intervals])
        upper = np.array([float(i.bounds[1]) for i in self.spread.intervals])
        return lower + inside * (upper - lower)


VERTEX_SHARE: Final = 0.6
"""Share of attack points put on vertices of the parameter box: most worst cases are there, not all."""


def scaled_loop(case: Case, equilibrium: Equilibrium, over: Scope) -> ScaledLoop | NotRational:
    """The scaled loop around `equilibrium`, with the spread parameters symbolic over tolerances."""
    free = () if over == NOMINAL else tuple(p for p in case.model.parameters if not p.spread.is_point)
    spread = Box(tuple(p.name for p in free), tuple(p.spread for p in free))
    loop = vector_field(case)
    known = {p.name: p.nominal for p in case.model.parameters}
    field = offset_field(loop.equations, loop.states, equilibrium.state, known, spread.names, sampled=loop.sampled)
    if isinstance(field, NotRational):
        return field
    scales = tuple(power_of_two_near(half_width(case, n)) for n in loop.states)
    vertices = _vertices(spread)
    evaluators = tuple(Evaluator(p, field.ring) for p in field.numerators)
    bare = ScaledLoop(
        case, field, spread, scales, 1.0, vertices, np.zeros((0, 0, 0)), evaluators,
        Evaluator(field.denominator, field.ring),
    )  # fmt: skip
    linear = _linear_parts(bare)
    rate = 1.0 if field.sampled else float(np.max(np.abs(np.linalg.eigvals(linear)), initial=0.0)) or 1.0
    return ScaledLoop(
        case, field, spread, scales, rate, vertices, linear if field.sampled else linear / rate, evaluators,
        bare.denominator,
    )  # fmt: skip


def half_width(case: Case, name: str) -> float:
    """A typical size of one offset: of the region, else limits, else domain."""
    for box in (case.region, case.limits, case.model.domain):
        side = box[name]
        if side.is_bounded and side.width > 0:
            return float(max(abs(b) for b in side.bounds)) if box is not case.model.domain else float(side.width) / 2
    return DEFAULT_HALF_WIDTH


def _vertices(spread: Box) -> Array:
    rows = list(islice(product(*(i.bounds for i in spread.intervals)), VERTICES))
    if len(rows) == VERTICES and 2 ** len(spread.names) > VERTICES:
        generator = np.random.default_rng(len(spread.names))
        picks = generator.integers(0, 2, (VERTICES, len(spread.names)))
        rows = [tuple(i.bounds[b] for i, b in zip(spread.intervals, pick, strict=True)) for pick in picks]
    return np.array([[float(v) for v in row] for row in rows]).reshape(len(rows), len(spread.names))


def _linear_parts(loop: ScaledLoop) -> Array:
    """Exact in structure: first-order terms of the numerators over the denominator at the equilibrium."""
    size = loop.size
    scales = np.array([float(s) for s in loop.scales])
    rest = [float(loop.field.balls[n].middle) for n in loop._constants()]
    rows = np.hstack([np.zeros((len(loop.vertices), size)), loop.vertices, np.tile(rest, (len(loop.vertices), 1))])
    denominator = Evaluator(loop.field.denominator, loop.field.ring)(rows)
    result = np.zeros((len(loop.vertices), size, size))
    for i, numerator in enumerate(loop.field.numerators):
        for j in range(size):
            slope = Evaluator(numerator.derivative(j), loop.field.ring)(rows)
            result[:, i, j] = slope / denominator * scales[j] / scales[i]
    return result
