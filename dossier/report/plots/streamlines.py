"""Evenly spaced streamlines from directions on a grid, for the eye only.

Seeds in a fixed order; a line stops where another already runs (a coarse occupancy grid, in the manner of
B. Jobard and W. Lefer, "Creating evenly-spaced streamlines of arbitrary density", 1997).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

from dossier.report.plots.axes import Axes
from dossier.report.svg import Canvas, Point, Stroke, decimals

CELL: Final = 15.0
"""Distance between streamlines in pixels."""

STEP: Final = 2.0
"""Length of a step in pixels."""

SHORTEST: Final = 11.0
"""Streamlines shorter than this are left out."""

STEPS: Final = 400

ARROW: Final = ((2.9, 0.0), (2.7, 2.5), (2.7, -2.5))
"""Corners of an arrow head: radius in pixels and angle from its direction."""


@dataclass(frozen=True)
class Directions:
    """Unit directions in pixels on a regular grid of canvas positions; None where the model has no value."""

    xs: tuple[float, ...]
    ys: tuple[float, ...]
    values: dict[tuple[int, int], Point]

    def at(self, x: float, y: float) -> Point | None:
        """Bilinear interpolation, of unit length; None outside the grid, beside gaps and at rest."""
        i, j = _cell(self.xs, x), _cell(self.ys, y)
        if i is None or j is None:
            return None
        corners = [self.values.get(c) for c in ((i, j), (i + 1, j), (i, j + 1), (i + 1, j + 1))]
        if any(c is None for c in corners):
            return None
        s = (x - self.xs[i]) / (self.xs[i + 1] - self.xs[i])
        t = (y - self.ys[j]) / (self.ys[j + 1] - self.ys[j])
        weights = ((1 - s) * (1 - t), s * (1 - t), (1 - s) * t, s * t)
        u = sum(w * c[0] for w, c in zip(weights, corners, strict=True) if c is not None)
        v = sum(w * c[1] for w, c in zip(weights, corners, strict=True) if c is not None)
        length = math.hypot(u, v)
        return None if length < 1e-6 else (u / length, v / length)  # noqa: PLR2004 - opposed neighbours


def _cell(places: Sequence[float], value: float) -> int | None:
    """Index of the interval of evenly spaced `places` that holds `value`."""
    if len(places) < 2:  # noqa: PLR2004 - no interval
        return None
    i = math.floor((value - places[0]) / (places[1] - places[0]))
    return i if 0 <= i < len(places) - 1 else None


def directions(samples: Sequence[tuple[float, float, float, float]], axes: Axes, factors: Point) -> Directions:
    """Directions on the canvas of flow samples (x, y, dx, dy) in SI; `factors` are SI per axis unit."""
    columns, rows = (sorted({round(s[k] / f, 12) for s in samples}) for k, f in zip((0, 1), factors, strict=True))
    column = {v: i for i, v in enumerate(columns)}
    row = {v: j for j, v in enumerate(rows)}
    per_x = axes.width / (axes.across[1] - axes.across[0]) / factors[0]
    per_y = -axes.height / (axes.up[1] - axes.up[0]) / factors[1]
    values = {}
    for x, y, dx, dy in samples:
        u, v = dx * per_x, dy * per_y
        length = math.hypot(u, v)
        place = column[round(x / factors[0], 12)], row[round(y / factors[1], 12)]
        values[place] = (u / length, v / length) if length > 0 else (0.0, 0.0)
    return Directions(tuple(axes.x(v) for v in columns), tuple(axes.y(v) for v in rows), values)


def draw_streamlines(canvas: Canvas, axes: Axes, flow: Directions, stroke: Stroke) -> None:
    """Streamlines all over the frame with one arrow head each."""
    taken: set[tuple[int, int]] = set()
    heads: list[str] = []
    for seed in _seeds(axes):
        if _occupied(seed) in taken:
            continue
        line = _trace(seed, flow, axes, taken, -1)[::-1] + _trace(seed, flow, axes, taken, 1)[1:]
        taken |= {_occupied(p) for p in line}
        if STEP * len(line) >= SHORTEST:
            canvas.line(line, stroke)
            heads.append(_head(line))
    if heads:
        canvas.path("".join(heads), fill=stroke.colour)


def _seeds(axes: Axes) -> list[Point]:
    """Midpoints of all cells, those nearest the centre of the frame first."""
    columns, rows = int(axes.width / CELL), int(axes.height / CELL)
    seeds = [
        (axes.left + (i + 0.5) * axes.width / columns, axes.top + (j + 0.5) * axes.height / rows)
        for i in range(columns)
        for j in range(rows)
    ]
    middle = axes.left + axes.width / 2, axes.top + axes.height / 2
    return sorted(seeds, key=lambda p: (round(math.hypot(p[0] - middle[0], p[1] - middle[1]) / (3 * CELL)), p))


def _occupied(point: Point) -> tuple[int, int]:
    return math.floor(point[0] / CELL), math.floor(point[1] / CELL)


def _trace(seed: Point, flow: Directions, axes: Axes, taken: set[tuple[int, int]], sense: int) -> list[Point]:
    """A streamline from `seed` by the midpoint rule, until it leaves the frame or meets another."""
    line = [seed]
    x, y = seed
    for _ in range(STEPS):
        first = flow.at(x, y)
        if first is None:
            break
        middle = flow.at(x + sense * STEP / 2 * first[0], y + sense * STEP / 2 * first[1])
        if middle is None:
            break
        x, y = x + sense * STEP * middle[0], y + sense * STEP * middle[1]
        within = axes.left <= x <= axes.left + axes.width and axes.top <= y <= axes.top + axes.height
        if not within or _occupied((x, y)) in taken or _returns(line, (x, y)):
            break
        line.append((x, y))
    return line


def _returns(line: list[Point], point: Point) -> bool:
    """The line has come back on itself, as around a centre or into a node."""
    return any(math.hypot(p[0] - point[0], p[1] - point[1]) < 0.7 * STEP for p in line[:-2])


def _head(line: Sequence[Point]) -> str:
    middle = len(line) // 2
    before, after = line[middle - 1], line[min(middle + 1, len(line) - 1)]
    angle = math.atan2(after[1] - before[1], after[0] - before[0])
    x, y = line[middle]
    corners = [(x + r * math.cos(angle + a), y + r * math.sin(angle + a)) for r, a in ARROW]
    return "M" + "L".join(f"{decimals(a)} {decimals(b)}" for a, b in corners) + "Z"
