"""Draw typeset equations into the PDF: each glyph becomes one shared form object, used wherever it stands.

WeasyPrint looks an image address up in the ``cache`` mapping given to ``write_pdf`` before it fetches it, and
draws whatever object lies there.  The objects reach into one internal of its streams (the resource dictionary);
`is_supported` says whether this version of WeasyPrint still has it.
"""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from typing import Any

import pydyf

from dossier.report.equations import Equation
from dossier.report.outlines import Outline, Placed, decimal

_OPERATORS = {"M": "m", "L": "l", "C": "c", "Z": "h"}


@dataclass(frozen=True, slots=True)
class EquationImage:
    """An equation as WeasyPrint wants its images: a size and a way to draw itself."""

    equation: Equation

    def get_intrinsic_size(self, resolution: float, font_size: float) -> tuple[float, float, float]:
        """Width, height and their ratio at `font_size`."""
        drawing = self.equation.drawing
        return drawing.width * font_size, drawing.height * font_size, drawing.width / drawing.height

    def draw(self, stream: Any, width: float, height: float, style: Any) -> None:
        """Draw into a concrete box of `width` by `height`, in the colour of the text."""
        left, top, across, down = self.equation.drawing.view_box
        scale_x, scale_y = width / across, height / down
        stream.push_state()
        stream.set_color(style["color"])
        stream.transform(a=scale_x, d=scale_y, e=-left * scale_x, f=-top * scale_y)
        for placed in self.equation.drawing.placed:
            key = _form_of(stream, placed.outline)
            stream.stream.append(_use(placed, key))
        stream.pop_state()


def _use(placed: Placed, key: str) -> bytes:
    return f"q {' '.join(decimal(v) for v in placed.matrix)} cm /{key} Do Q".encode("ascii")


def _form_of(stream: Any, outline: Outline) -> str:
    """The name of the form object with this outline, made on first use."""
    forms = stream._resources["XObject"]
    key = "g" + hashlib.sha256(repr(outline).encode("ascii")).hexdigest()[:12]
    if key not in forms:
        steps = [f"{' '.join(decimal(v) for v in values)} {_OPERATORS[c]}".strip() for c, values in outline]
        xs = [v for _, values in outline for v in values[::2]]
        ys = [v for _, values in outline for v in values[1::2]]
        box = pydyf.Array((min(xs), min(ys), max(xs), max(ys)))
        extra = {"Type": "/XObject", "Subtype": "/Form", "BBox": box, "Resources": pydyf.Dictionary()}
        forms[key] = pydyf.Stream(["\n".join([*steps, "f"]).encode("ascii")], extra, compress=stream.compress)
    return key


def is_supported(stream_type: type) -> bool:
    """This stream class of WeasyPrint still has the resource dictionary that `EquationImage` reaches into."""
    return hasattr(stream_type, "set_color") and "_resources" in stream_type.__init__.__code__.co_names
