"""The figures of a dossier: drawn from the evidence, each for paper and for the screen, with words for both."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

from dossier.model.dossier import Evidence, PointEvidence
from dossier.report.plots.loops import describe_loop, draw_loop, loops_of
from dossier.report.plots.plane import describe_plane, draw_plane
from dossier.report.plots.reserves import describe_reserves, draw_reserves
from dossier.report.plots.spectrum import describe_spectrum, draw_spectrum
from dossier.report.svg import MM_PER_PIXEL, Canvas

Kind = Literal["plane", "eigenvalues", "loop", "reserves"]


@dataclass(frozen=True, slots=True)
class Figure:
    """One figure.  `svg_print` carries its alternative text as title, `svg_screen` as label and custom properties.

    `name` is a file name without suffix; `caption` is plain text.
    """

    name: str
    svg_print: str
    svg_screen: str
    title: str
    alternative: str
    caption: str
    width_mm: float
    height_mm: float
    operating_point: str
    kind: Kind


def draw_figures(evidence: Evidence) -> tuple[Figure, ...]:
    """All figures, operating point by operating point; what has no data has no figure."""
    return tuple(figure for point in evidence.points for figure in _figures_of(point))


def _figures_of(point: PointEvidence) -> Iterator[Figure]:
    chosen = point.chosen
    if chosen is not None and point.figure is not None:
        canvas = draw_plane(point, point.figure, chosen)
        yield _finished(point, "plane", "plane", canvas, describe_plane(point, point.figure))
    if chosen is not None and chosen.eigenvalues:
        canvas = draw_spectrum(point, chosen)
        yield _finished(point, "eigenvalues", "eigenvalues", canvas, describe_spectrum(point, chosen))
    for loop in loops_of(point):
        yield _finished(point, "loop", f"loop-{loop.name}", draw_loop(loop), describe_loop(point, loop))
    if point.outcomes:
        yield _finished(point, "reserves", "reserves", draw_reserves(point), describe_reserves(point))


def _finished(point: PointEvidence, kind: Kind, suffix: str, canvas: Canvas, words: tuple[str, str, str]) -> Figure:
    title, alternative, caption = words
    return Figure(
        f"{point.case.name}-{suffix}", canvas.render(alternative, "print"), canvas.render(alternative, "screen"),
        title, alternative, caption, canvas.width * MM_PER_PIXEL, canvas.height * MM_PER_PIXEL, point.case.name, kind,
    )  # fmt: skip
