"""Eigenvalues of the linear part in the complex plane, with the limits that criteria set them."""

from __future__ import annotations

import cmath
import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import partial
from typing import Final

from dossier.model.ball import enclose, evaluate, precision
from dossier.model.case import Case, Criterion, value_of
from dossier.model.dossier import PointEvidence
from dossier.model.equilibrium import Eigenvalue, Equilibrium
from dossier.report import numbers
from dossier.report.content.quantities import required
from dossier.report.notation import spoken
from dossier.report.plots.axes import KEY_LINE, Axes, Key
from dossier.report.svg import Canvas, Label, Point, Sign, Stroke

HEIGHT: Final = 250.0
TOP: Final = 26.0
FRAME_HEIGHT: Final = 180.0
WHOLE: Final = (58.0, 408.0)
OVERVIEW: Final = (58.0, 178.0)
DETAIL: Final = (288.0, 178.0)
KEY_X: Final = 488.0
"""Layout in pixels: left and width of a single panel, or of two beside each other."""

SPREAD: Final = 12.0
"""Two panels are drawn where the fastest eigenvalue is this many times farther out than the slowest."""

BITS: Final = 64
AXIS = Stroke("mid", 0.9)
RATE = Stroke("contradicted", 1.5, "7 3.5")
DAMPING = Stroke("no-operating-point", 1.5, "0.1 3.4")
CIRCLE = Stroke("mid", 1.0)
MARK = Stroke("accent", 1.8)

RATE_CLAIMS: Final = ("decay_rate", "exponential_stability")


@dataclass(frozen=True, slots=True)
class Demands:
    """The strictest stated limits and the criteria that set them; None where there is none.

    `rate` in 1/s, `damping` and `contraction` are ratios; `interval` in s for sampled models.
    """

    rate: tuple[float, Criterion] | None
    damping: tuple[float, Criterion] | None
    contraction: tuple[float, Criterion] | None
    interval: float | None


def demands_of(case: Case) -> Demands:
    """What the criteria of a case ask of its eigenvalues."""
    lower = [(float(value_of(c.at_least).middle), c) for c in case.criteria if c.at_least is not None]
    rates = [d for d in lower if d[1].claim in RATE_CLAIMS]
    dampings = [d for d in lower if d[1].claim == "damping_ratio"]
    moduli = [
        (float(value_of(c.at_most).middle), c)
        for c in case.criteria
        if c.claim == "contraction" and c.at_most is not None
    ]
    return Demands(
        max(rates, key=lambda d: d[0], default=None), max(dampings, key=lambda d: d[0], default=None),
        min(moduli, key=lambda d: d[0], default=None), sample_interval(case),
    )  # fmt: skip


def sample_interval(case: Case) -> float | None:
    """The sample interval in s at the nominal parameters; None for continuous models."""
    if case.model.sample_interval is None:
        return None
    with precision(BITS):
        return float(evaluate(case.model.sample_interval, {p.name: enclose(p.nominal) for p in case.model.parameters}))


def draw_spectrum(point: PointEvidence, chosen: Equilibrium) -> Canvas:
    """The whole figure."""
    canvas = Canvas(HEIGHT)
    demands = demands_of(point.case)
    places = [(float(e.real), float(e.imaginary)) for e in chosen.eigenvalues]
    if demands.interval is not None:
        _panel(canvas, (KEY_X - 58 - FRAME_HEIGHT) / 2, FRAME_HEIGHT, _disc_window(places), chosen, demands)
    elif _spread(places) > SPREAD:
        detail = _slow_window(places, demands)
        overview = _panel(canvas, *OVERVIEW, _window(places, demands), chosen, demands)
        _outline(overview, detail)
        _panel(canvas, *DETAIL, detail, chosen, demands)
    else:
        _panel(canvas, *WHOLE, _window(places, demands), chosen, demands)
    _draw_key(Key(canvas, KEY_X, 36), chosen, demands)
    return canvas


def _spread(places: Sequence[Point]) -> float:
    sizes = [abs(x) for x, _ in places if x != 0]
    farthest = max((math.hypot(*p) for p in places), default=0.0)
    return farthest / min(sizes) if sizes else 1.0


Window = tuple[tuple[float, float], tuple[float, float]]


def _window(places: Sequence[Point], demands: Demands) -> Window:
    """Range that holds all eigenvalues, the origin and the limit, with room around."""
    xs = [0.0, *(x for x, _ in places)]
    if demands.rate is not None:
        xs.append(-demands.rate[0])
    high = max((abs(y) for _, y in places), default=0.0)
    wide = max(xs) - min(xs) or 1.0
    reach = max(1.25 * high, 0.3 * wide)
    return (min(xs) - 0.12 * wide, max(xs) + 0.12 * wide), (-reach, reach)


def _slow_window(places: Sequence[Point], demands: Demands) -> Window:
    """Range around the origin that holds the slowest eigenvalues and the limit."""
    slowest = min((abs(x) for x, _ in places if x != 0), default=1.0)
    across = 2.4 * max(slowest, demands.rate[0] if demands.rate else 0.0)
    near = [(x, y) for x, y in places if -across <= x <= across]
    high = max((abs(y) for _, y in near), default=0.0)
    right = max([0.0, *(x for x, _ in near)])
    return (-across, max(0.3 * across, 1.3 * right)), (-max(1.25 * high, 0.5 * across), max(1.25 * high, 0.5 * across))


def _disc_window(places: Sequence[Point]) -> Window:
    """The unit circle and all eigenvalues, equal on both axes."""
    reach = 1.15 * max([1.0, *(max(abs(x), abs(y)) for x, y in places)])
    return (-reach, reach), (-reach, reach)


def _panel(canvas: Canvas, left: float, width: float, window: Window, chosen: Equilibrium, demands: Demands) -> Axes:
    axes = Axes(canvas, left, TOP, width, FRAME_HEIGHT, *window)
    inner = axes.inner()
    across, up = axes.round_ticks()
    if demands.interval is None:
        _draw_half_plane(inner, axes, demands)
    else:
        _draw_disc(inner, axes, demands, demands.interval)
    axes.grid(across, up)
    for value in chosen.eigenvalues:
        _draw_eigenvalue(inner, axes, value)
    axes.close(inner)
    axes.frame(across, up, _axis_label(r"\mathrm{Re}\,", demands), _axis_label(r"\mathrm{Im}\,", demands))
    return axes


def _axis_label(part: str, demands: Demands) -> Label:
    if demands.interval is not None:
        return (Sign(part + "z"),)
    return (Sign(part + r"\lambda"), " / (1/s)")


def _draw_half_plane(inner: Canvas, axes: Axes, demands: Demands) -> None:
    top, bottom, right = axes.top, axes.top + axes.height, axes.left + axes.width
    inner.line(((axes.x(0), top), (axes.x(0), bottom)), AXIS)
    if demands.rate is not None:
        x = axes.x(-demands.rate[0])
        inner.rectangle(x, top, max(right - x, 0), axes.height, "wash")
        inner.line(((axes.x(0), top), (axes.x(0), bottom)), AXIS)
        inner.line(((x, top), (x, bottom)), RATE)
    if demands.damping is not None:
        ratio = min(max(demands.damping[0], 0.0), 1.0)
        far = 2 * max(abs(v) for v in (*axes.across, *axes.up))
        for sense in (-1, 1):
            end = (-ratio * far, sense * math.sqrt(1 - ratio**2) * far)
            inner.line(axes.place(((0.0, 0.0), end)), DAMPING)


def _draw_disc(inner: Canvas, axes: Axes, demands: Demands, interval: float) -> None:
    radius = axes.width / (axes.across[1] - axes.across[0])
    inner.circle(axes.x(0), axes.y(0), radius, "none", CIRCLE)
    limit = demands.contraction[0] if demands.contraction else None
    if demands.rate is not None:
        rate = math.exp(-demands.rate[0] * interval)
        limit = rate if limit is None else min(limit, rate)
    if limit is not None:
        inner.circle(axes.x(0), axes.y(0), radius * limit, "none", RATE)
    if demands.damping is not None:
        ratio = min(max(demands.damping[0], 0.0), 1.0)
        for sense in (-1, 1):
            exponents = (complex(-ratio, sense * math.sqrt(1 - ratio**2)) * k * math.pi / 60 for k in range(61))
            values = [cmath.exp(e / max(math.sqrt(1 - ratio**2), 0.05)) for e in exponents]
            inner.line(axes.place((z.real, z.imag) for z in values), DAMPING)


def _draw_eigenvalue(inner: Canvas, axes: Axes, value: Eigenvalue) -> None:
    """A cross, and its disc of proof where it is wide enough to be seen."""
    x, y = axes.x(float(value.real)), axes.y(float(value.imaginary))
    radius = float(value.radius) * axes.width / (axes.across[1] - axes.across[0])
    if radius > 1:
        inner.circle(x, y, radius, "wash", Stroke("accent", 1.0))
    inner.cross(x, y, 4.2, MARK)
    if value.multiplicity > 1:
        inner.text(x + 7, y - 5, f"×{value.multiplicity}", 9.5, fill="accent")


def _outline(axes: Axes, detail: Window) -> None:
    (a, b), (c, d) = detail
    low, high = max(a, axes.across[0]), min(b, axes.across[1])
    left, top, right, bottom = axes.x(low), axes.y(min(d, axes.up[1])), axes.x(high), axes.y(max(c, axes.up[0]))
    axes.canvas.rectangle(left, top, max(right - left, 3), max(bottom - top, 3), "none", Stroke("mid", 0.8, "2 2"))


def _draw_key(key: Key, chosen: Equilibrium, demands: Demands) -> None:
    key.entry(
        "eigenvalue", "enclosed by a disc", lambda x, y: key.canvas.cross(x + KEY_LINE / 2, y, 4.2, MARK)
    )  # fmt: skip
    circle = demands.contraction if demands.interval is not None and demands.contraction is not None else None
    for demand, name, stroke in (
        (circle, "least contraction", RATE),
        (None if circle else demands.rate, "slowest allowed", RATE),
        (demands.damping, "least damping", DAMPING),
    ):
        if demand is not None:
            key.line(name, f"{demand[1].name}: {required(demand[1])}", stroke)
    if demands.interval is None:
        key.line("stability border", "", AXIS)
    else:
        key.entry("unit circle", "", partial(_ring_sample, key.canvas))
    if demands.interval is None and _spread([(float(e.real), float(e.imaginary)) for e in chosen.eigenvalues]) > SPREAD:
        key.entry("part at the right", "", partial(_box_sample, key.canvas))


def _ring_sample(canvas: Canvas, x: float, y: float) -> None:
    canvas.circle(x + KEY_LINE / 2, y, 5, "none", CIRCLE)


def _box_sample(canvas: Canvas, x: float, y: float) -> None:
    canvas.rectangle(x + KEY_LINE / 2 - 7, y - 5, 14, 10, "none", Stroke("mid", 0.8, "2 2"))


def describe_spectrum(point: PointEvidence, chosen: Equilibrium) -> tuple[str, str, str]:
    """Title, alternative text and caption of the figure."""
    case, demands = point.case, demands_of(point.case)
    sampled = demands.interval is not None
    title = f"{'Multipliers' if sampled else 'Eigenvalues'} of {case.name}"
    count = sum(e.multiplicity for e in chosen.eigenvalues)
    if sampled:
        modulus = max(
            (Fraction(math.hypot(float(e.real), float(e.imaginary))) + e.radius for e in chosen.eigenvalues),
            default=Fraction(0),
        )
        slow = f"the largest modulus is about {numbers.nearest(modulus, 3)}"
    else:
        rightmost = max(e.real + e.radius for e in chosen.eigenvalues)
        slow = f"the rightmost real part is at most {numbers.above(rightmost, 4)} per second"
    what = "multipliers" if sampled else "eigenvalues"
    words = [
        f"{count} {what} in the complex plane of {spoken(case.name)}; {slow}; the equilibrium is {chosen.stability}."
    ]
    for demand, name in (
        (demands.rate, "decay rate"),
        (demands.damping, "damping ratio"),
        (demands.contraction, "modulus"),
    ):
        if demand is not None:
            verdict = next((o.verdict for o in point.outcomes if o.identifier.endswith(f".{demand[1].name}")), "open")
            words.append(f"The {name} must be {required(demand[1])}: {verdict}.")
    radius = max(e.radius for e in chosen.eigenvalues)
    caption = (
        f"{title} at {chosen.identifier}, nominal parameters, model {case.model.name} "
        f"({case.model.basis or 'no basis stated'}). Each is proved to lie within {numbers.above(radius, 2)} "
        f"{'' if sampled else 'per second '}of its cross. Limits from the criteria named in the key."
    )
    evidence = [c.identifier for c in point.claims if c.theorem == "T1"]
    if evidence:
        caption += f" Evidence: {', '.join(evidence)}."
    return title, " ".join(words), caption.replace("  ", " ")
