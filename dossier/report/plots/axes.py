"""Axes of figures: the unit to show, round ticks, frame, and what lies inside it."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from typing import Final

from dossier.report.svg import Canvas, Label, Point, Raised, Sign, Stroke
from dossier.report.units import PrintedUnit, unit_text

TICK_SIZE: Final = 9.5
LABEL_SIZE: Final = 10.5
"""In pixels; the smaller is 7.1 pt on paper."""

TICK_GAP: Final = 58.0
"""About the distance of ticks across, in pixels, so that their numbers never touch."""

STEPS: Final = (1.0, 2.0, 2.5, 5.0, 10.0)
"""Tick distances that read well, times a power of ten."""

PREFIXES: Final = ((1e-9, "n"), (1e-6, "µ"), (1e-3, "m"), (1.0, ""), (1e3, "k"), (1e6, "M"), (1e9, "G"))
PREFIXABLE: Final = ("m", "N", "A", "V", "W", "J", "Pa", "rad", "Hz")
"""Units that take a decimal prefix where they come first and bear no power."""

SMALLEST, LARGEST = 0.1, 10_000.0
"""Axis values between these are shown as they are."""


@dataclass(frozen=True, slots=True)
class Shown:
    """What an axis shows: one on the axis is `factor` in SI; the unit as text, and a power of ten beside it."""

    factor: float
    unit: str
    power: int = 0

    def label(self, sign: str) -> Label:
        """Quantity symbol / unit (ISO 80000-1), `sign` in LaTeX."""
        unit = f"({self.unit})" if "/" in self.unit or " " in self.unit or "\u00a0" in self.unit else self.unit
        if self.power:
            exponent = Raised(str(self.power).replace("-", "−"))
            return (Sign(sign), " / 10", exponent, f" {unit}") if unit else (Sign(sign), " / 10", exponent)
        return (Sign(sign), f" / {unit}") if unit else (Sign(sign),)


def shown_unit(unit: PrintedUnit, reach: float) -> Shown:
    """How to show values of up to `reach` (SI) declared in `unit`: with a decimal prefix or a power of ten."""
    factor = float(unit.factor) * math.pi**unit.pi_power
    size = abs(reach) / factor
    if size == 0 or SMALLEST <= size < LARGEST:
        return Shown(factor, unit_text(unit.name))
    head = re.match(r"[A-Za-z]+", unit.name)
    if head and head[0] in PREFIXABLE and not unit.name[head.end() :].startswith("^"):
        scale, prefix = next(((s, p) for s, p in reversed(PREFIXES) if size >= s), PREFIXES[0])
        return Shown(factor * scale, unit_text(prefix + unit.name))
    power = 3 * math.floor(math.log10(size) / 3)
    return Shown(factor * 10.0**power, unit_text(unit.name), power)


def ticks(low: float, high: float, about: int) -> list[float]:
    """Round numbers between `low` and `high`, about as many as asked for."""
    raw = (high - low) / max(about, 1)
    base = 10 ** math.floor(math.log10(raw))
    step = min((s * base for s in STEPS), key=lambda s: abs(math.log(s / raw)))
    first = math.ceil(low / step - 1e-9)
    count = math.floor(high / step + 1e-9) - first
    return [round((first + i) * step, 12 - math.floor(math.log10(step))) for i in range(count + 1)]


def tick_text(value: float) -> str:
    """A tick's number with a true minus sign."""
    text = f"{value:.10g}"
    return text.replace("-", "−") if "e" not in text else f"{value:.3g}".replace("-", "−")


@dataclass(frozen=True)
class Axes:
    """A rectangle of the canvas and the data range it shows."""

    canvas: Canvas
    left: float
    top: float
    width: float
    height: float
    across: tuple[float, float]
    up: tuple[float, float]

    def x(self, value: float) -> float:
        """Canvas position of a value on the horizontal axis."""
        return self.left + (value - self.across[0]) / (self.across[1] - self.across[0]) * self.width

    def y(self, value: float) -> float:
        """Canvas position of a value on the vertical axis."""
        return self.top + self.height - (value - self.up[0]) / (self.up[1] - self.up[0]) * self.height

    def place(self, points: Iterable[Point]) -> list[Point]:
        """Canvas positions of data points."""
        return [(self.x(a), self.y(b)) for a, b in points]

    def inside(self, point: Point) -> bool:
        """The data point lies in the frame."""
        return self.across[0] <= point[0] <= self.across[1] and self.up[0] <= point[1] <= self.up[1]

    def inner(self) -> Canvas:
        """A canvas for what must be cut off at the frame; give it to `close`."""
        return Canvas(self.canvas.height, self.canvas.width)

    def close(self, inner: Canvas) -> None:
        """Draw `inner`, cut off at the frame."""
        self.canvas.clipped(self.left, self.top, self.width, self.height, inner)

    def grid(self, across: Sequence[float], up: Sequence[float]) -> None:
        """Hairlines at the ticks."""
        hair = Stroke("hair", 0.7)
        for value in across:
            self.canvas.line(((self.x(value), self.top), (self.x(value), self.top + self.height)), hair)
        for value in up:
            self.canvas.line(((self.left, self.y(value)), (self.left + self.width, self.y(value))), hair)

    def frame(
        self,
        across: Sequence[float],
        up: Sequence[float],
        across_label: Label,
        up_label: Label,
        text: Callable[[float], str | Label] = tick_text,
    ) -> None:
        """Axis lines, ticks with numbers, and the labels: below on the right, above on the left."""
        c, bottom, edge = self.canvas, self.top + self.height, Stroke("mid", 0.8)
        c.line(((self.left, self.top), (self.left, bottom), (self.left + self.width, bottom)), edge)
        for value in across:
            x = self.x(value)
            c.line(((x, bottom), (x, bottom + 3.5)), edge)
            c.text(x, bottom + 14, text(value), TICK_SIZE, fill="mid", place=0.5)
        for value in up:
            y = self.y(value)
            c.line(((self.left - 3.5, y), (self.left, y)), edge)
            c.text(self.left - 6.5, y + 3.3, tick_text(value), TICK_SIZE, fill="mid", place=1)
        c.text(self.left + self.width, bottom + 29, across_label, LABEL_SIZE, place=1)
        c.text(self.left - 6.5, self.top - 7, up_label, LABEL_SIZE)

    def round_ticks(self) -> tuple[list[float], list[float]]:
        """Ticks for both axes."""
        return (
            ticks(*self.across, round(self.width / TICK_GAP)),
            ticks(*self.up, max(3, round(self.height / (0.75 * TICK_GAP)))),
        )


KEY_LINE: Final = 26.0
"""Length of the sample of a line in a key."""

KEY_STEP: Final = 32.0
"""From one entry of a key to the next."""


@dataclass
class Key:
    """A key beside the axes: each entry a sample of the line or mark, its name, and a remark below."""

    canvas: Canvas
    x: float
    y: float

    def entry(self, name: str | Label, remark: str | Label, draw: Callable[[float, float], None]) -> None:
        """Draw one entry; `draw` gets the left end and the height of the sample."""
        draw(self.x, self.y)
        self.canvas.text(self.x + KEY_LINE + 9, self.y + 3.4, name, 10, weight=600)
        if remark:
            self.canvas.text(self.x + KEY_LINE + 9, self.y + 15.6, remark, TICK_SIZE, fill="mid")
        self.y += KEY_STEP if remark else KEY_STEP - 11

    def line(self, name: str | Label, remark: str | Label, stroke: Stroke) -> None:
        """An entry for a line."""
        self.entry(name, remark, lambda x, y: self.canvas.line(((x, y), (x + KEY_LINE, y)), stroke))
