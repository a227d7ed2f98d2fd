"""A small kit for figures as SVG: measured text, thinned lines, colours as tokens, the same bytes every time.

No ids, no styles, no ``text-anchor`` (each such label costs a transparency group in the PDF): widths are
measured from the shipped fonts and positions written out.  Colours are tokens, so that one drawing serves
paper (hexadecimal values) and screen (CSS custom properties, which follow the light and dark view).
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from functools import lru_cache
from html import escape
from types import MappingProxyType
from typing import Any, Final, Literal

from fontTools.ttLib import TTFont

from dossier.report.equations import typeset
from dossier.report.locate import font
from dossier.report.outlines import flat_path

WIDTH: Final = 640.0
"""Width of a figure that spans the text column; one unit is a CSS pixel, so lettering keeps its size on paper."""

MM_PER_PIXEL: Final = 25.4 / 96
"""The CSS reference pixel: 1/96 inch."""

FAMILY: Final = "'IBM Plex Sans', sans-serif"
FONT_FILES: Final = {400: "IBMPlexSans-Regular.woff", 600: "IBMPlexSans-SemiBold.woff"}

TYPICAL_WIDTH: Final = {400: 0.55, 600: 0.58}
"""Mean advance of the letters in em, where a sign or a font file is missing."""

COLOURS: Final = MappingProxyType(
    {
        "ink": "#18212b", "mid": "#525e6b", "faint": "#c8d0d8", "hair": "#e3e8ec", "paper": "#ffffff",
        "wash": "#f4f6f8", "accent": "#1d4f80", "proved": "#1a6a45", "supported": "#2a6391",
        "not-established": "#7a5b00", "contradicted": "#a54300", "refuted": "#a11f1f",
        "no-operating-point": "#6a3d8f",
    }
)  # fmt: skip
"""Colours on paper.  On the screen the custom properties of the same names (`templates/base.css`) rule."""

LEAST_DEVIATION: Final = 0.12
"""A point nearer than this (in pixels) to the line through its neighbours is left out."""

Point = tuple[float, float]
Weight = Literal[400, 600]
_OPEN, _CLOSE = "\ue000", "\ue001"
_TOKEN: Final = re.compile(f"{_OPEN}([\\w-]+){_CLOSE}")


@lru_cache(maxsize=4)
def _metrics(weight: Weight) -> tuple[dict[int, str], dict[str, tuple[int, int]], int] | None:
    """Character map, advances and units per em of the shipped font; None where it is not installed."""
    try:
        path = font(FONT_FILES[weight])
    except FileNotFoundError:
        return None
    if not path.is_file():
        return None
    face: Any = TTFont(path, lazy=True)
    return face.getBestCmap(), face["hmtx"].metrics, face["head"].unitsPerEm


@lru_cache(maxsize=4096)
def text_width(text: str, weight: Weight = 400) -> float:
    """Advance of `text` in em."""
    metrics = _metrics(weight)
    if metrics is None:
        return TYPICAL_WIDTH[weight] * len(text)
    letters, advances, unit = metrics
    return sum(
        advances[letters[ord(c)]][0] / unit if ord(c) in letters else TYPICAL_WIDTH[weight] for c in text
    )  # fmt: skip


@dataclass(frozen=True, slots=True)
class Sign:
    """A quantity symbol inside a label, typeset like the equations of the dossier."""

    latex: str


@dataclass(frozen=True, slots=True)
class Raised:
    """A superscript inside a label."""

    text: str


Piece = str | Sign | Raised
Label = tuple[Piece, ...]

RAISED_SIZE: Final = 0.7
RAISED_BY: Final = 0.36
"""Size and height of superscripts in em, as usual in text faces."""

SIGN_SIZE: Final = 1.08
"""The mathematics face is smaller in appearance than the text face."""


def label_width(label: Label, weight: Weight = 400) -> float:
    """Width of a label in em."""
    return sum(_piece_width(p, weight) for p in label)


def _piece_width(piece: Piece, weight: Weight) -> float:
    if isinstance(piece, Sign):
        return typeset(piece.latex).drawing.width * SIGN_SIZE
    if isinstance(piece, Raised):
        return text_width(piece.text, weight) * RAISED_SIZE
    return text_width(piece, weight)


def decimals(value: float) -> str:
    """A coordinate with at most two decimals."""
    text = f"{value:.2f}".rstrip("0").rstrip(".")
    return "0" if text in ("-0", "") else text


def thin(points: Sequence[Point], deviation: float = LEAST_DEVIATION) -> list[Point]:
    """`points` without those a straight line replaces (Ramer 1972; Douglas and Peucker 1973)."""
    if len(points) < 3:  # noqa: PLR2004 - nothing between two ends
        return list(points)
    keep = {0, len(points) - 1}
    stack = [(0, len(points) - 1)]
    while stack:
        first, last = stack.pop()
        place, distance = _farthest(points, first, last)
        if distance > deviation:
            keep.add(place)
            stack += [(first, place), (place, last)]
    return [points[i] for i in sorted(keep)]


def _farthest(points: Sequence[Point], first: int, last: int) -> tuple[int, float]:
    """The point between `first` and `last` that lies farthest from the straight piece between them."""
    (x, y), (u, v) = points[first], points[last]
    squared = (u - x) ** 2 + (v - y) ** 2
    place, most = first, 0.0
    for i in range(first + 1, last):
        a, b = points[i][0] - x, points[i][1] - y
        share = min(1.0, max(0.0, ((u - x) * a + (v - y) * b) / squared)) if squared > 0 else 0.0
        distance = math.hypot(a - share * (u - x), b - share * (v - y))
        if distance > most:
            place, most = i, distance
    return place, most


def path_of(points: Iterable[Point], closed: bool = False) -> str:
    """Path data of a polyline."""
    return "M" + "L".join(f"{decimals(x)} {decimals(y)}" for x, y in points) + ("Z" if closed else "")


@dataclass(frozen=True, slots=True)
class Stroke:
    """How a line is drawn: colour token, width and dashes (which tell lines apart without colour)."""

    colour: str = "ink"
    width: float = 1.0
    dash: str = ""


def colour(token: str) -> str:
    """A colour token as it stands in the drawing until `Canvas.render` resolves it."""
    return f"{_OPEN}{token}{_CLOSE}" if token in COLOURS else token


@dataclass
class Canvas:
    """A drawing under construction, `height` high; methods return nothing and draw on top of what is there."""

    height: float
    width: float = WIDTH
    parts: list[str] = field(default_factory=list)

    def path(self, data: str, stroke: Stroke | None = None, fill: str = "none") -> None:
        """A path with a stroke or a fill."""
        line = ""
        if stroke is not None:
            line = f' stroke="{colour(stroke.colour)}" stroke-width="{decimals(stroke.width)}"'
            if stroke.dash:
                line += f' stroke-dasharray="{stroke.dash}"'
        self.parts.append(f'<path d="{data}" fill="{colour(fill)}"{line}/>')

    def line(self, points: Sequence[Point], stroke: Stroke, *, closed: bool = False, fill: str = "none") -> None:
        """A polyline, thinned."""
        self.path(path_of(thin(points), closed), stroke, fill)

    def rectangle(
        self, x: float, y: float, width: float, height: float, fill: str, stroke: Stroke | None = None
    ) -> None:
        """A rectangle from its upper left corner."""
        corners = ((x, y), (x + width, y), (x + width, y + height), (x, y + height))
        self.path(path_of(corners, True), stroke, fill)

    def circle(self, x: float, y: float, radius: float, fill: str, stroke: Stroke | None = None) -> None:
        """A circle about (x, y)."""
        line = "" if stroke is None else f' stroke="{colour(stroke.colour)}" stroke-width="{decimals(stroke.width)}"'
        if stroke is not None and stroke.dash:
            line += f' stroke-dasharray="{stroke.dash}"'
        self.parts.append(
            f'<circle cx="{decimals(x)}" cy="{decimals(y)}" r="{decimals(radius)}" fill="{colour(fill)}"{line}/>'
        )

    def cross(self, x: float, y: float, size: float, stroke: Stroke) -> None:
        """A diagonal cross."""
        s = size
        self.path(path_of(((x - s, y - s), (x + s, y + s))) + path_of(((x - s, y + s), (x + s, y - s))), stroke)

    def text(
        self,
        x: float,
        y: float,
        label: str | Label,
        size: float = 10.0,
        *,
        weight: Weight = 400,
        fill: str = "ink",
        place: float = 0.0,
        halo: bool = False,
    ) -> None:
        """A label with its baseline at y; `place` 0, 0.5, 1: x is its left end, middle or right end."""
        pieces = (label,) if isinstance(label, str) else label
        width = label_width(pieces, weight) * size
        left = x - place * width
        if halo:
            self.rectangle(left - 2, y - 0.8 * size, width + 4, 1.08 * size, "paper")
        for piece in pieces:
            self._piece(left, y, piece, size, weight, fill)
            left += _piece_width(piece, weight) * size

    def _piece(self, x: float, y: float, piece: Piece, size: float, weight: Weight, fill: str) -> None:
        if isinstance(piece, Sign):
            scale = size * SIGN_SIZE / 1000
            self.parts.append(
                f'<path transform="translate({decimals(x)} {decimals(y)}) scale({scale:.4f})" '
                f'd="{flat_path(typeset(piece.latex).drawing)}" fill="{colour(fill)}"/>'
            )
            return
        raised = isinstance(piece, Raised)
        text = piece.text if isinstance(piece, Raised) else piece
        if not text.strip():
            return
        indent = text_width(text[: len(text) - len(text.lstrip())], weight) * size
        height = size * RAISED_SIZE if raised else size
        lift = RAISED_BY * size if raised else 0.0
        bold = "" if weight == 400 else f' font-weight="{weight}"'  # noqa: PLR2004 - the initial value
        self.parts.append(
            f'<text x="{decimals(x + indent)}" y="{decimals(y - lift)}" font-size="{decimals(height)}"{bold} '
            f'fill="{colour(fill)}">{escape(text.strip(), quote=False)}</text>'
        )

    def clipped(self, x: float, y: float, width: float, height: float, inner: Canvas) -> None:
        """Everything `inner` draws, cut off outside the rectangle (a nested viewport clips without an id)."""
        box = " ".join(decimals(v) for v in (x, y, width, height))
        self.parts.append(
            f'<svg x="{decimals(x)}" y="{decimals(y)}" width="{decimals(width)}" height="{decimals(height)}" '
            f'viewBox="{box}">{"".join(inner.parts)}</svg>'
        )

    def render(self, alternative: str, paper: Literal["print", "screen"]) -> str:
        """The finished SVG; the alternative text is its title on paper and its label on the screen."""
        width, height = decimals(self.width), decimals(self.height)
        size = f'viewBox="0 0 {width} {height}" width="{width}" height="{height}"'
        head = f'<svg xmlns="http://www.w3.org/2000/svg" {size}'
        common = f'role="img" font-family="{FAMILY}" stroke-linecap="round" stroke-linejoin="round"'
        body = "".join(self.parts)
        if paper == "print":
            body = _TOKEN.sub(lambda m: COLOURS[m[1]], body)
            return f"{head} {common}><title>{escape(alternative, quote=False)}</title>{body}</svg>"
        body = _TOKEN.sub(lambda m: f"var(--{m[1]},{COLOURS[m[1]]})", body)
        return f'{head} class="figure" aria-label="{escape(alternative)}" {common}>{body}</svg>'
