"""Typeset equations once for both papers: inline SVG on the screen, shared glyph objects in the PDF.

The typesetter is mathra in strict mode, so an unknown command is an error and never red ink on paper.
"""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import lru_cache

import mathra
from markupsafe import Markup, escape

from dossier.report.formulas import aligned
from dossier.report.outlines import Drawing, decimal, flat_path, path_data, read_drawing
from dossier.report.rich import Formula

LINE_WIDTH_EM = 46.0
"""Width of the text column in em of the equation's size: a wider equation is broken or reduced."""


WIDEST_EM = 1.8 * LINE_WIDTH_EM
"""A line wider than this would be reduced to less than 5.6 points, below what a print can show."""


@dataclass(frozen=True, slots=True)
class Equation:
    """A typeset formula with its words."""

    key: str
    drawing: Drawing
    speech: str


@lru_cache(maxsize=4096)
def typeset(latex: str, speech: str = "", display: bool = False) -> Equation:
    """`latex` typeset; `speech` replaces the typesetter's own words.

    Raises ValueError, naming the formula, where the typesetter does not know a command.
    """
    try:
        result = mathra.render(latex, display=display, strict=True)
    except ValueError as error:
        raise ValueError(f"cannot typeset {latex!r}: {error}") from error
    digest = hashlib.sha256(f"{display}|{latex}|{speech}".encode()).hexdigest()[:16]
    return Equation(f"eq:{digest}", read_drawing(result["svg"]), speech or result["speech"])


def width_of(latex: str) -> float:
    """Width in em of `latex` as a displayed equation."""
    return typeset(latex, display=True).drawing.width


def fitted(left: str, terms: Sequence[str], speech: str) -> Formula:
    """``left terms`` as one displayed formula, on several lines where it is wider than the column."""
    line = f"{left} {' '.join(terms)}"
    if width_of(line) > LINE_WIDTH_EM:
        line = aligned(left, terms, "", LINE_WIDTH_EM, width_of)
    return Formula(line, speech, display=True)


@dataclass
class ScreenMath:
    """Equations of one HTML page as inline SVG; every glyph outline is kept once and used by reference."""

    glyphs: dict[str, str] = field(default_factory=dict)

    def __call__(self, formula: Formula) -> Markup:
        """The markup of `formula`."""
        equation = typeset(formula.latex, formula.speech, formula.display)
        drawing = equation.drawing
        uses = []
        for placed in drawing.placed:
            outline = path_data(placed.outline)
            name = self.glyphs.setdefault(outline, f"g{len(self.glyphs):x}")
            uses.append(f'<use href="#{name}" transform="matrix({" ".join(decimal(v) for v in placed.matrix)})"/>')
        box = " ".join(decimal(v) for v in drawing.view_box)
        return Markup(
            f'<svg class="eq" viewBox="{box}" width="{decimal(drawing.width)}em" height="{decimal(drawing.height)}em" '
            f'style="vertical-align:{decimal(drawing.shift)}em" role="img" aria-label="{escape(equation.speech)}">'
            f"{''.join(uses)}</svg>"
        )

    def definitions(self) -> Markup:
        """The hidden outlines that the page's equations refer to."""
        paths = "".join(f'<path id="{name}" d="{outline}"/>' for outline, name in self.glyphs.items())
        return Markup(f'<svg class="glyphs" width="0" height="0" aria-hidden="true"><defs>{paths}</defs></svg>')


@dataclass
class PaperMath:
    """Equations of one PDF: an image reference that the PDF writer finds among `images`."""

    images: dict[str, Equation] = field(default_factory=dict)

    def __call__(self, formula: Formula) -> Markup:
        """The markup of `formula`."""
        equation = typeset(formula.latex, formula.speech, formula.display)
        self.images[equation.key] = equation
        return Markup(
            f'<img class="eq" src="{equation.key}" alt="{FORMULA_MARK}{escape(equation.speech)}" '
            f'style="vertical-align:{decimal(equation.drawing.shift)}em">'
        )

    def definitions(self) -> Markup:
        """Nothing: the PDF keeps its glyphs elsewhere."""
        return Markup("")


@dataclass
class FlatMath:
    """Equations as self-contained inline SVG: larger and slower, for a PDF writer without `PaperMath`'s hook."""

    def __call__(self, formula: Formula) -> Markup:
        """The markup of `formula`."""
        equation = typeset(formula.latex, formula.speech, formula.display)
        drawing = equation.drawing
        box = " ".join(decimal(v) for v in drawing.view_box)
        return Markup(
            f'<svg class="eq" xmlns="http://www.w3.org/2000/svg" viewBox="{box}" width="{decimal(drawing.width)}em" '
            f'height="{decimal(drawing.height)}em" style="vertical-align:{decimal(drawing.shift)}em" role="img">'
            f"<title>{FORMULA_MARK}{escape(equation.speech)}</title>"
            f'<path d="{flat_path(drawing)}"/></svg>'
        )

    def definitions(self) -> Markup:
        """Nothing: every equation carries its own outlines."""
        return Markup("")


FORMULA_MARK = "@formula "
"""Begins the alternative text of an equation in the PDF, so that the finisher can tag it as a formula."""
