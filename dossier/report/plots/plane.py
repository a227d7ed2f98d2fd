"""The phase plane of an operating point: flow, region, proved sets, limits, domain, equilibria, motions."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import partial
from typing import Final

from dossier.model.case import NOMINAL
from dossier.model.dossier import FigureData, PointEvidence
from dossier.model.equilibrium import Equilibrium
from dossier.model.region import Interval
from dossier.report import numbers
from dossier.report.formulas import offset
from dossier.report.notation import Notation, notation, spoken
from dossier.report.plots.axes import KEY_LINE, Axes, Key, Shown, shown_unit
from dossier.report.plots.sets import ProvedSet, ellipse, proved_sets, section
from dossier.report.plots.streamlines import directions, draw_streamlines
from dossier.report.svg import Canvas, Point, Stroke, decimals
from dossier.report.units import difference_unit

HEIGHT: Final = 330.0
FRAME: Final = (58.0, 26.0, 408.0, 262.0)
KEY_X: Final = 488.0
"""Layout in pixels: left, top, width and height of the plane, then the key beside it."""

FLOW = Stroke("faint", 0.9)
REGION = Stroke("contradicted", 1.7, "0.1 3.6")
SECTIONS = (Stroke("accent", 2.0), Stroke("no-operating-point", 1.8, "14 4"))
PROJECTIONS = (Stroke("accent", 1.4, "6 3.4"), Stroke("no-operating-point", 1.4, "3 3"))
LIMIT = Stroke("refuted", 1.3, "9 3 1.5 3")
DOMAIN = Stroke("mid", 1.6)
MOTION = Stroke("ink", 1.0)
DOT: Final = 2.6
"""Diameter in pixels of the dots that stand for samples."""


@dataclass(frozen=True)
class Plane:
    """What is drawn where: the two states by place and name, units of the axes, the axes themselves."""

    point: PointEvidence
    data: FigureData
    places: tuple[int, int]
    shown: tuple[Shown, Shown]
    signs: tuple[str, str]
    axes: Axes

    @property
    def factors(self) -> Point:
        """SI per axis unit."""
        return self.shown[0].factor, self.shown[1].factor

    @property
    def window(self) -> tuple[Point, Point]:
        """What is seen, as ranges of offsets in SI."""
        (a, b), (c, d), (f, g) = self.axes.across, self.axes.up, self.factors
        return (a * f, b * f), (c * g, d * g)

    def to_axes(self, offsets: Sequence[float]) -> Point:
        """A point of the state space (offsets, SI) in axis units."""
        return offsets[self.places[0]] / self.factors[0], offsets[self.places[1]] / self.factors[1]

    def on_canvas(self, points: Sequence[Point]) -> list[Point]:
        """Points of the plane (offsets, SI) on the canvas."""
        return self.axes.place((a / self.factors[0], b / self.factors[1]) for a, b in points)


def plane_of(canvas: Canvas, point: PointEvidence, data: FigureData, chosen: Equilibrium) -> Plane:
    """The plane of `data`, as wide as its flow samples and everything else that must be seen."""
    model = point.case.model
    places = model.state_names.index(data.plane[0]), model.state_names.index(data.plane[1])
    shown, signs, spans = [], [], []
    signs_of = notation((*model.state_names, *(p.name for p in model.parameters), *(s.name for s in model.signals)))
    for axis, place in enumerate(places):
        state, name = model.states[place], model.state_names[place]
        seen = [s[axis] for s in data.flow] or [o[place] for t in data.trajectories for o in t.offsets]
        low, high = min(seen), max(seen)
        unit = shown_unit(difference_unit(state.unit, state.scale), max(abs(low), abs(high)))
        shown.append(unit)
        signs.append(_sign(name, chosen, place, signs_of))
        spans.append((low / unit.factor, high / unit.factor))
    return Plane(
        point, data, places, (shown[0], shown[1]), (signs[0], signs[1]), Axes(canvas, *FRAME, spans[0], spans[1])
    )


def _sign(name: str, chosen: Equilibrium, place: int, signs: Notation) -> str:
    ball = chosen.state[place]
    return signs.latex(name) if ball.is_exact and ball.middle == 0 else offset(name, signs)


def draw_plane(point: PointEvidence, data: FigureData, chosen: Equilibrium) -> Canvas:
    """The whole figure."""
    canvas = Canvas(HEIGHT)
    plane = plane_of(canvas, point, data, chosen)
    inner = plane.axes.inner()
    across, up = plane.axes.round_ticks()
    plane.axes.grid(across, up)
    key = Key(canvas, KEY_X, 36)
    _draw_domain(inner, plane, chosen, key)
    if data.flow:
        draw_streamlines(inner, plane.axes, directions(data.flow, plane.axes, plane.factors), FLOW)
    _draw_region(inner, plane, key)
    _draw_limits(inner, plane, key)
    _draw_sets(inner, plane, key)
    _draw_motions(inner, plane, key)
    _draw_equilibria(inner, plane, chosen, key)
    if data.flow:
        remark = "step to the next sample" if point.case.model.time == "sampled" else ""
        key.line("flow", remark, FLOW)
    plane.axes.close(inner)
    plane.axes.frame(across, up, plane.shown[0].label(plane.signs[0]), plane.shown[1].label(plane.signs[1]))
    return canvas


def _ends(side: Interval, shift: float = 0.0) -> tuple[float | None, float | None]:
    return (
        None if side.lower is None else float(side.lower) - shift,
        None if side.upper is None else float(side.upper) - shift,
    )


def _draw_domain(inner: Canvas, plane: Plane, chosen: Equilibrium, key: Key) -> None:
    """Outside of the domain washed, its edge a solid line."""
    axes, seen = plane.axes, False
    right, bottom = axes.left + axes.width, axes.top + axes.height
    for axis, place in enumerate(plane.places):
        side = plane.point.case.model.domain.intervals[place]
        for end, sense in zip(_ends(side, float(chosen.state[place].middle)), (-1, 1), strict=True):
            if end is None:
                continue
            value = end / plane.factors[axis]
            low, high = (axes.across, axes.up)[axis]
            if not low < value < high:
                continue
            seen = True
            if axis == 0:
                x = axes.x(value)
                edge, left, width = (
                    ((x, axes.top), (x, bottom)),
                    (axes.left if sense < 0 else x),
                    abs((axes.left if sense < 0 else right) - x),
                )
                inner.rectangle(left, axes.top, width, axes.height, "wash")
            else:
                y = axes.y(value)
                edge, top = ((axes.left, y), (right, y)), (y if sense < 0 else axes.top)
                inner.rectangle(axes.left, top, axes.width, abs((bottom if sense < 0 else axes.top) - y), "wash")
            inner.line(edge, DOMAIN)
    if seen:
        key.line("domain edge", "no claim beyond it", DOMAIN)


def _draw_region(inner: Canvas, plane: Plane, key: Key) -> None:
    sides = [plane.point.case.region.intervals[i] for i in plane.places]
    if not all(s.is_bounded for s in sides):
        return
    (a, b), (c, d) = ((float(s.lower or 0), float(s.upper or 0)) for s in sides)
    inner.line(plane.on_canvas(((a, c), (b, c), (b, d), (a, d))), REGION, closed=True)
    key.line("region of starts", "", REGION)


def _draw_limits(inner: Canvas, plane: Plane, key: Key) -> None:
    axes, drawn = plane.axes, []
    for axis, place in enumerate(plane.places):
        name = plane.point.case.model.state_names[place]
        for end in _ends(plane.point.case.limits.intervals[place]):
            value = None if end is None else end / plane.factors[axis]
            low, high = (axes.across, axes.up)[axis]
            if value is None or not low <= value <= high:
                continue
            drawn.append(name)
            if axis == 0:
                inner.line(((axes.x(value), axes.top), (axes.x(value), axes.top + axes.height)), LIMIT)
            else:
                inner.line(((axes.left, axes.y(value)), (axes.left + axes.width, axes.y(value))), LIMIT)
    if drawn:
        key.line("limit", _limit_criteria(plane.point), LIMIT)


def _limit_criteria(point: PointEvidence) -> str:
    names = [c.name for c in point.case.criteria if c.claim == "limits_kept"]
    return ", ".join(names)


def _draw_sets(inner: Canvas, plane: Plane, key: Key) -> None:
    states = len(plane.point.case.model.states)
    for proved, solid, dashed in zip(proved_sets(plane.point), SECTIONS, PROJECTIONS, strict=False):
        name = proved.evidence[0].split(".", 1)[-1]
        planar = states == 2  # noqa: PLR2004
        if not planar and proved.quadratic:
            inner.line(plane.on_canvas(ellipse(proved.claim, plane.places, states, project=True)), dashed, closed=True)
        for outline in section(proved, plane.places, states, plane.window):
            inner.line(plane.on_canvas(outline), solid, closed=True)
        scope = "nominal" if proved.claim.over == NOMINAL else "all tolerances"
        key.line(f"proved set {name}", scope if planar else f"section; {scope}", solid)
        if not planar and proved.quadratic:
            key.line(f"proved set {name}", "projection", dashed)


def _draw_motions(inner: Canvas, plane: Plane, key: Key) -> None:
    sampled = plane.point.case.model.time == "sampled"
    for motion in plane.data.trajectories:
        points = plane.axes.place(plane.to_axes(o) for o in motion.offsets)
        if sampled:
            _dots(inner, _apart([p for p in points if _within(plane.axes, p)]))
        else:
            inner.line(points, MOTION)
        inner.circle(*points[0], 2.7, "ink")
    if plane.data.trajectories:
        remark = "large dot: start" if sampled else "dot: start; not evidence"
        key.entry("simulated motion", remark, partial(_motion_sample, key.canvas, sampled))


def _within(axes: Axes, place: Point) -> bool:
    x, y = place
    return axes.left <= x <= axes.left + axes.width and axes.top <= y <= axes.top + axes.height


def _apart(points: Sequence[Point]) -> list[Point]:
    """`points` without those that would be drawn on top of the one before."""
    kept: list[Point] = []
    for point in points:
        if not kept or math.dist(kept[-1], point) > DOT:
            kept.append(point)
    return kept


def _dots(canvas: Canvas, points: Sequence[Point]) -> None:
    """Small dots, as the round ends of lines too short to be seen: one element for all of them."""
    if points:
        canvas.path("".join(f"M{decimals(x)} {decimals(y)}h.01" for x, y in points), Stroke("ink", DOT))


def _motion_sample(canvas: Canvas, sampled: bool, x: float, y: float) -> None:
    if sampled:
        _dots(canvas, [(x + 3 + 5 * i, y) for i in range(1, 5)])
    else:
        canvas.line(((x + 3, y), (x + KEY_LINE, y)), MOTION)
    canvas.circle(x + 3, y, 2.7, "ink")


def mark_equilibrium(canvas: Canvas, x: float, y: float, stability: str) -> None:
    """Filled: stable; crossed: unstable; hollow: undecided."""
    if stability == "unstable":
        canvas.circle(x, y, 4.6, "paper", Stroke("refuted", 1.4))
        canvas.cross(x, y, 3.0, Stroke("refuted", 1.4))
    else:
        canvas.circle(
            x,
            y,
            4.6,
            "proved" if stability == "stable" else "paper",
            Stroke("proved" if stability == "stable" else "mid", 1.4),
        )


def _draw_equilibria(inner: Canvas, plane: Plane, chosen: Equilibrium, key: Key) -> None:
    classes = []
    for other in plane.point.equilibria:
        offsets = [float(a.middle - b.middle) for a, b in zip(other.state, chosen.state, strict=True)]
        place = plane.to_axes(offsets)
        if not plane.axes.inside(place):
            continue
        x, y = plane.axes.x(place[0]), plane.axes.y(place[1])
        mark_equilibrium(inner, x, y, other.stability)
        inner.text(x + 8, y - 6, other.identifier.split(".", 1)[-1], 10, weight=600, halo=True)
        classes.append(other.stability)
    for stability in dict.fromkeys(classes):
        key.entry(
            f"{stability} equilibrium", "",
            lambda x, y, s=stability: mark_equilibrium(key.canvas, x + KEY_LINE / 2, y, s),
        )  # fmt: skip


def describe_plane(point: PointEvidence, data: FigureData) -> tuple[str, str, str]:
    """Title, alternative text and caption of the figure."""
    model, case = point.case.model, point.case
    names = tuple(spoken(n) for n in data.plane)
    kind = "Phase plane" if len(model.states) == 2 else "Section and projection"  # noqa: PLR2004
    title = f"{kind} of {case.name} in {data.plane[0]} and {data.plane[1]}"
    shown = proved_sets(point)
    words = [f"Plane of {names[0]} across and {names[1]} up around the equilibrium of {spoken(case.name)}."]
    words.append(_set_words(point, shown))
    away = [o.identifier for o in point.outcomes if o.verdict in ("contradicted", "refuted")]
    if data.trajectories:
        words.append(
            f"{len(data.trajectories)} simulated motions start at corners of the region and on the set's edge."
        )
    words.append(
        f"{len(point.equilibria)} equilibria were found in the search box." if len(point.equilibria) > 1 else ""
    )
    caption = [
        f"{title}: offsets from {point.chosen.identifier if point.chosen else 'the equilibrium'}, nominal parameters, "
        f"model {model.name} ({model.basis or 'no basis stated'}).",
        "" if len(model.states) == 2  # noqa: PLR2004
        else "Flow and solid outlines: section through the equilibrium, all other offsets zero; "
        "dashed outlines, motions and equilibria: projected onto the plane.",
        "; ".join(f"Proved set V ≤ {_level(s.claim.level)}: {', '.join(s.evidence)}" for s in shown)
        + ("." if shown else "No attractive set was proved."),
        "Flow and motions are floating-point drawings, not evidence.",
    ]  # fmt: skip
    if away:
        words.append(f"Not met: {', '.join(away)}.")
    return title, " ".join(w for w in words if w), " ".join(c for c in caption if c)


def _level(level: Fraction) -> str:
    return numbers.first_digits(level, level, 5) or str(level)


def _set_words(point: PointEvidence, shown: Sequence[ProvedSet]) -> str:
    if not shown:
        return "No attractive set was proved, so none is drawn."
    scales = [
        f.facts["proved scale of the region"].lower
        for f in point.findings
        if "proved scale of the region" in f.facts and set(f.evidence) & {e for s in shown for e in s.evidence}
    ]
    best = max((s for s in scales if s is not None), default=None)
    if best is None:
        return "A proved attractive set is outlined."
    relation = "lies wholly inside" if best >= 1 else "is not wholly inside"
    scale = numbers.below(best, 3)
    return f"The region of starts {relation} the proved attractive set, in which it fits at scale {scale}."
