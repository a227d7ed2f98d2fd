"""One loop opened at its command: magnitude and phase over frequency, and the Nyquist plot near the point -1."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

from dossier.model.case import Criterion, value_of
from dossier.model.dossier import PointEvidence
from dossier.model.finding import Enclosure
from dossier.model.outcome import LoopMargins
from dossier.report import numbers, units
from dossier.report.content.quantities import printed, required
from dossier.report.notation import spoken
from dossier.report.plots.axes import Axes, tick_text, ticks
from dossier.report.svg import Canvas, Label, Point, Raised, Sign, Stroke, label_width
from dossier.report.units import PrintedUnit

Sample = tuple[float, float, float]
"""Angular frequency in rad/s, real and imaginary part of the open loop."""

HEIGHT: Final = 352.0
MAGNITUDE: Final = (58.0, 26.0, 250.0, 108.0)
PHASE: Final = (58.0, 160.0, 250.0, 112.0)
NYQUIST: Final = (374.0, 26.0, 252.0, 246.0)
KEY_Y: Final = 334.0
"""Layout in pixels: left, top, width and height of the panels, height of the key below them."""

NYQUIST_ACROSS: Final = (-2.6, 1.1)
"""Real parts shown around the point -1; the imaginary parts follow from equal scales."""

DECIBELS: Final = (-60.0, 60.0)
"""Magnitudes shown at most."""

PLAIN_DECADES: Final = (-2, 4)
"""Frequencies from 0.01 Hz to 10 000 Hz are written out, others as powers of ten."""

HALF_TURN: Final = 180.0
FULL_TURN: Final = 360.0

CURVE = Stroke("accent", 1.8)
MIRROR = Stroke("accent", 0.9, "2 2.4")
MARGIN = Stroke("no-operating-point", 1.8)
UNIT = Stroke("mid", 0.9)
REQUIRED = Stroke("refuted", 1.3, "9 3 1.5 3")
PEAK = Stroke("no-operating-point", 1.3, "6 3.4")


@dataclass(frozen=True, slots=True)
class Loop:
    """A loop's samples with its proved margins and the criteria about it."""

    name: str
    samples: tuple[Sample, ...]
    margins: LoopMargins | None
    criteria: tuple[Criterion, ...]

    def asked(self, claim: str) -> Criterion | None:
        """The criterion about one kind of margin."""
        return next((c for c in self.criteria if c.claim == claim), None)


def loops_of(point: PointEvidence) -> tuple[Loop, ...]:
    """Loops with a frequency response, in the order of the figure data."""
    if point.figure is None:
        return ()
    return tuple(
        Loop(
            name, samples, next((m for m in point.margins if m.loop == name), None),
            tuple(c for c in point.case.criteria if c.loop == name),
        )
        for name, samples in point.figure.responses
        if len(samples) > 1 and all(re or im for _, re, im in samples)
    )  # fmt: skip


def draw_loop(loop: Loop) -> Canvas:
    """The whole figure."""
    canvas = Canvas(HEIGHT)
    hertz = [w / (2 * math.pi) for w, _, _ in loop.samples]
    decades = (math.log10(hertz[0]), math.log10(hertz[-1]))
    _draw_magnitude(canvas, loop, decades)
    _draw_phase(canvas, loop, decades)
    _draw_nyquist(canvas, loop)
    _draw_key(canvas, loop)
    return canvas


def decibels(sample: Sample) -> float:
    """Magnitude of the open loop in dB."""
    return 20 * math.log10(math.hypot(sample[1], sample[2]))


def phases(samples: Sequence[Sample], crossover: float | None) -> list[float]:
    """Phase in degrees without jumps, in (-360, 0] at `crossover` (rad/s), else at the first sample."""
    found: list[float] = []
    for _, real, imaginary in samples:
        angle = math.degrees(math.atan2(imaginary, real))
        if found:
            angle += FULL_TURN * round((found[-1] - angle) / FULL_TURN)
        found.append(angle)
    at = min(range(len(samples)), key=lambda i: abs(samples[i][0] - crossover)) if crossover else 0
    turns = math.ceil(found[at] / FULL_TURN)
    return [a - FULL_TURN * turns for a in found]


def _middle(enclosure: Enclosure | None) -> float | None:
    if enclosure is None or enclosure.lower is None or enclosure.upper is None:
        return None
    return float((enclosure.lower + enclosure.upper) / 2)


def _decade_ticks(decades: tuple[float, float]) -> list[float]:
    whole = range(math.ceil(decades[0]), math.floor(decades[1]) + 1)
    step = max(1, math.ceil(len(whole) / 5))
    return [float(d) for d in whole if d % step == 0]


def _frequency_text(decade: float) -> str | Label:
    if PLAIN_DECADES[0] <= decade <= PLAIN_DECADES[1]:
        return tick_text(10**decade)
    return ("10", Raised(tick_text(decade)))


def _bode_panel(
    canvas: Canvas, frame: tuple[float, float, float, float], decades: tuple[float, float], span: tuple[float, float],
    step: float,
) -> tuple[Axes, list[float], list[float]]:  # fmt: skip
    axes = Axes(canvas, *frame, decades, span)
    across = _decade_ticks(decades)
    up = [k * step for k in range(math.ceil(span[0] / step - 1e-9), math.floor(span[1] / step + 1e-9) + 1)]
    axes.grid(across, up)
    return axes, across, up


def _draw_magnitude(canvas: Canvas, loop: Loop, decades: tuple[float, float]) -> None:
    values = [decibels(s) for s in loop.samples]
    low, high = max(min(values), DECIBELS[0]), min(max(values), DECIBELS[1])
    step = 20.0 if high - low > 40 else 10.0  # noqa: PLR2004 - dB
    span = step * math.floor(min(low, -step) / step), step * math.ceil(max(high, step) / step)
    axes, across, up = _bode_panel(canvas, MAGNITUDE, decades, span, step)
    inner = axes.inner()
    inner.line(((axes.left, axes.y(0)), (axes.left + axes.width, axes.y(0))), UNIT)
    points = axes.place(zip(_decades(loop), values, strict=True))
    inner.line(points, CURVE)
    if loop.margins is not None:
        for margin, at in (
            (loop.margins.gain_up, loop.margins.gain_up_at),
            (loop.margins.gain_down, loop.margins.gain_down_at),
        ):
            where, size = _middle(at), _middle(margin)
            if margin is not None and where and size is not None:
                _mark(inner, axes, where, (0.0, -size), _least(margin, PrintedUnit("dB")))
    axes.close(inner)
    axes.frame(across, up, (), (Sign(r"|L|"), " / dB"), lambda _: "")


def _decades(loop: Loop) -> list[float]:
    return [math.log10(w / (2 * math.pi)) for w, _, _ in loop.samples]


def _mark(inner: Canvas, axes: Axes, omega: float, ends: tuple[float, float], text: str) -> None:
    """A margin as an upright stretch at its frequency, with its value beyond the first end, off the curve."""
    x = axes.x(math.log10(omega / (2 * math.pi)))
    inner.line(((x, axes.y(ends[0])), (x, axes.y(ends[1]))), MARGIN)
    for end in ends:
        inner.line(((x - 3, axes.y(end)), (x + 3, axes.y(end))), MARGIN)
    width = label_width((text,), 600) * 10
    left = min(max(x - width / 2, axes.left + 4), axes.left + axes.width - width - 4)
    below = ends[1] > ends[0]
    y = axes.y(ends[0]) + (13.0 if below else -6.0)
    inner.text(left, y, text, 10, weight=600, fill=MARGIN.colour, halo=True)


def _least(enclosure: Enclosure, unit: PrintedUnit) -> str:
    """A proved margin, rounded to the less favourable side (towards zero)."""
    low, high = units.convert(enclosure, unit)
    if low is None or high is None:
        return ""
    return units.with_unit(numbers.below(low, 3) if low >= 0 else numbers.above(high, 3), unit.name)


def _draw_phase(canvas: Canvas, loop: Loop, decades: tuple[float, float]) -> None:
    crossover = _middle(loop.margins.phase_at) if loop.margins else None
    values = phases(loop.samples, crossover)
    low, high = min(*values, -HALF_TURN), max(*values, -HALF_TURN)
    step = 45.0 if high - low <= 225 else 90.0  # noqa: PLR2004 - degrees
    if high - low > 2 * FULL_TURN:
        low, step = high - 2 * FULL_TURN, HALF_TURN
    span = step * math.floor((low - 10) / step), step * math.ceil((high + 10) / step)
    axes, across, up = _bode_panel(canvas, PHASE, decades, span, step)
    inner = axes.inner()
    inner.line(((axes.left, axes.y(-HALF_TURN)), (axes.left + axes.width, axes.y(-HALF_TURN))), UNIT)
    asked = loop.asked("phase_margin")
    inner.line(axes.place(zip(_decades(loop), values, strict=True)), CURVE)
    margin = _middle(loop.margins.phase) if loop.margins else None
    if loop.margins is not None and loop.margins.phase is not None and margin is not None and crossover:
        size = math.degrees(margin)
        if asked is not None and asked.at_least is not None:
            wanted = math.degrees(float(value_of(asked.at_least).middle)) * (1 if size >= 0 else -1)
            x = axes.x(math.log10(crossover / (2 * math.pi)))
            inner.line(((x - 16, axes.y(wanted - HALF_TURN)), (x + 16, axes.y(wanted - HALF_TURN))), REQUIRED)
        _mark(inner, axes, crossover, (-HALF_TURN, size - HALF_TURN), _least(loop.margins.phase, units.DEGREE))
    axes.close(inner)
    axes.frame(across, up, (Sign("f"), " / Hz"), (Sign(r"\arg L"), " / °"), _frequency_text)


def _draw_nyquist(canvas: Canvas, loop: Loop) -> None:
    left, top, width, height = NYQUIST
    reach = (NYQUIST_ACROSS[1] - NYQUIST_ACROSS[0]) * height / width / 2
    axes = Axes(canvas, left, top, width, height, NYQUIST_ACROSS, (-reach, reach))
    across, up = ticks(*axes.across, 4), ticks(*axes.up, 4)
    axes.grid(across, up)
    inner, one = axes.inner(), width / (NYQUIST_ACROSS[1] - NYQUIST_ACROSS[0])
    inner.circle(axes.x(0), axes.y(0), one, "none", UNIT)
    asked = loop.asked("peak_sensitivity")
    if asked is not None and asked.at_most is not None:
        inner.circle(axes.x(-1), axes.y(0), one / float(value_of(asked.at_most).middle), "none", REQUIRED)
    peak = _middle(loop.margins.peak_sensitivity) if loop.margins else None
    if peak:
        inner.circle(axes.x(-1), axes.y(0), one / peak, "none", PEAK)
    for sense, stroke in ((-1.0, MIRROR), (1.0, CURVE)):
        for piece in _near(loop.samples, axes, sense):
            inner.line(axes.place(piece), stroke)
    inner.cross(axes.x(-1), axes.y(0), 4.5, Stroke("refuted", 1.8))
    inner.text(axes.x(-1) + 7, axes.y(0) - 6, "−1", 10, weight=600, fill="refuted", halo=True)
    axes.close(inner)
    axes.frame(across, up, (Sign(r"\mathrm{Re}\,L"),), (Sign(r"\mathrm{Im}\,L"),))


def _near(samples: Sequence[Sample], axes: Axes, sense: float) -> list[list[Point]]:
    """Pieces of the curve (or its mirror image) in and around the frame, so that far parts cost no bytes."""
    far = 3 * max(abs(v) for v in (*axes.across, *axes.up))
    pieces: list[list[Point]] = [[]]
    for _, real, imaginary in samples:
        if math.hypot(real, imaginary) <= far:
            pieces[-1].append((real, sense * imaginary))
        elif pieces[-1]:
            pieces.append([])
    return [p for p in pieces if len(p) > 1]


def _draw_key(canvas: Canvas, loop: Loop) -> None:
    """One row of samples below the panels."""
    entries: list[tuple[str, Stroke]] = [("open loop", CURVE), ("mirror image", MIRROR)]
    margins = loop.margins
    if margins is not None and (margins.phase or margins.gain_up):
        entries.append(("margin", MARGIN))
    if margins is not None and _middle(margins.peak_sensitivity):
        entries.append(("peak sensitivity", PEAK))
    if any(c.claim in ("phase_margin", "peak_sensitivity") for c in loop.criteria):
        entries.append(("required", REQUIRED))
    entries.append(("|L| = 1, arg L = −180°", UNIT))
    x = MAGNITUDE[0]
    for name, stroke in entries:
        canvas.line(((x, KEY_Y - 3.4), (x + 20, KEY_Y - 3.4)), stroke)
        canvas.text(x + 25, KEY_Y, name, 9.5)
        x += 25 + label_width((name,)) * 9.5 + 16


def describe_loop(point: PointEvidence, loop: Loop) -> tuple[str, str, str]:
    """Title, alternative text and caption of the figure."""
    case = point.case
    title = f"Loop of {case.name} opened at {loop.name}"
    words = [f"Magnitude, phase and Nyquist plot of the loop opened at {spoken(loop.name)}."]
    if loop.margins is not None:
        m = loop.margins
        words.extend(
            f"The {name} is {printed(value, unit)}."
            for name, value, unit in (
                ("gain margin upward", m.gain_up, PrintedUnit("dB")), ("phase margin", m.phase, units.DEGREE),
                ("delay margin", m.delay, units.MILLISECOND),
                ("peak sensitivity", m.peak_sensitivity, PrintedUnit("1")),
            )
            if value is not None
        )  # fmt: skip
    for criterion in loop.criteria:
        verdict = next((o.verdict for o in point.outcomes if o.identifier == f"{case.name}.{criterion.name}"), "open")
        words.append(f"{criterion.name} asks for {required(criterion)}: {verdict}.")
    caption = (
        f"{title}, all other loops closed; nominal parameters, model {case.model.name} "
        f"({case.model.basis or 'no basis stated'}). Curves are floating-point drawings; the margins marked are proved"
        + (
            f", evidence {loop.margins.evidence}."
            if loop.margins and loop.margins.evidence
            else " where they are given."
        )
    )
    return title, " ".join(words), caption
