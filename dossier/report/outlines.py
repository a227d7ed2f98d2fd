"""Read the outlines of a typeset equation: glyph paths and where each stands, from the typesetter's SVG."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache
from typing import Final
from xml.etree import ElementTree

Matrix = tuple[float, float, float, float, float, float]
Step = tuple[str, tuple[float, ...]]
Outline = tuple[Step, ...]

IDENTITY: Final[Matrix] = (1.0, 0.0, 0.0, 1.0, 0.0, 0.0)
_SVG: Final = "{http://www.w3.org/2000/svg}"
_TOKEN: Final = re.compile(r"([A-Za-z])|([-+]?(?:\d*\.\d+|\d+\.?)(?:[eE][-+]?\d+)?)")
_ARGUMENTS: Final = {"M": 2, "L": 2, "H": 1, "V": 1, "C": 6, "Q": 4, "Z": 0}
_TRANSFORM: Final = re.compile(r"(\w+)\(([^)]*)\)")


@dataclass(frozen=True, slots=True)
class Placed:
    """A closed outline and the matrix that puts it in place."""

    matrix: Matrix
    outline: Outline


@dataclass(frozen=True, slots=True)
class Drawing:
    """A typeset formula: view box in thousandths of an em, size in em, depth below the baseline, outlines."""

    view_box: tuple[float, float, float, float]
    width: float
    height: float
    shift: float
    placed: tuple[Placed, ...]


def read_drawing(svg: str) -> Drawing:
    """The drawing in the typesetter's `svg`.  Raises ValueError for an element or path it does not know."""
    root = ElementTree.fromstring(svg)
    left, top, width, height = (float(v) for v in root.get("viewBox", "").split())
    shift = re.search(r"vertical-align:\s*(-?[\d.]+)em", root.get("style", ""))
    paths = {p.get("id", ""): p.get("d", "") for p in root.iter(f"{_SVG}path") if p.get("id")}
    placed = tuple(p for child in root if child.tag == f"{_SVG}g" for p in _walk(child, IDENTITY, paths))
    return Drawing(
        (left, top, width, height),
        _em(root.get("width", "")),
        _em(root.get("height", "")),
        float(shift[1]) if shift else 0.0,
        placed,
    )


def _em(text: str) -> float:
    return float(text.removesuffix("em"))


def _walk(node: ElementTree.Element, matrix: Matrix, paths: dict[str, str]) -> Iterator[Placed]:
    matrix = product(matrix, _read_transform(node.get("transform") or ""))
    tag = node.tag.removeprefix(_SVG)
    if tag == "g":
        for child in node:
            yield from _walk(child, matrix, paths)
    elif tag == "use":
        here = (1.0, 0.0, 0.0, 1.0, float(node.get("x", 0)), float(node.get("y", 0)))
        yield Placed(product(matrix, here), read_path(paths[node.get("href", "")[1:]]))
    elif tag == "rect":
        x, y, width, height = (float(node.get(k, 0)) for k in ("x", "y", "width", "height"))
        corners = ((x, y), (x + width, y), (x + width, y + height), (x, y + height))
        yield Placed(matrix, (("M", corners[0]), *(("L", c) for c in corners[1:]), ("Z", ())))
    elif tag == "path":
        yield Placed(matrix, read_path(node.get("d", "")))
    else:
        raise ValueError(f"unknown element {tag!r} in a typeset formula")


def _read_transform(text: str) -> Matrix:
    matrix = IDENTITY
    for name, arguments in _TRANSFORM.findall(text):
        values = [float(v) for v in re.split(r"[\s,]+", arguments.strip())]
        if name == "translate":
            step = (1.0, 0.0, 0.0, 1.0, values[0], values[1] if len(values) > 1 else 0.0)
        elif name == "scale":
            step = (values[0], 0.0, 0.0, values[-1], 0.0, 0.0)
        elif name == "matrix":
            step = (values[0], values[1], values[2], values[3], values[4], values[5])
        else:
            raise ValueError(f"unknown transformation {name!r} in a typeset formula")
        matrix = product(matrix, step)
    return matrix


def product(first: Matrix, second: Matrix) -> Matrix:
    """The matrix that applies `second`, then `first` (SVG 2, section 8.4)."""
    a, b, c, d, e, f = first
    g, h, i, j, k, m = second
    return a * g + c * h, b * g + d * h, a * i + c * j, b * i + d * j, a * k + c * m + e, b * k + d * m + f


@lru_cache(maxsize=4096)
def read_path(data: str) -> Outline:
    """A path of absolute commands as moves, lines and cubic curves.  Raises ValueError for any other command."""
    steps: list[Step] = []
    command, arguments, x, y = "", [], 0.0, 0.0
    for letter, figure in _TOKEN.findall(data):
        if letter:
            if letter not in _ARGUMENTS:
                raise ValueError(f"unknown path command {letter!r} in a typeset formula")
            command, arguments = letter, []
            if letter == "Z":
                steps.append(("Z", ()))
            continue
        arguments.append(float(figure))
        if len(arguments) == _ARGUMENTS[command]:
            step = _absolute(command, arguments, x, y)
            steps.append(step)
            x, y = step[1][-2:]
            command, arguments = ("L" if command == "M" else command), []
    return tuple(steps)


def _absolute(command: str, arguments: list[float], x: float, y: float) -> Step:
    if command == "H":
        return "L", (arguments[0], y)
    if command == "V":
        return "L", (x, arguments[0])
    if command == "Q":  # degree elevation of a quadratic to a cubic curve
        a, b, c, d = arguments
        return "C", (x + 2 / 3 * (a - x), y + 2 / 3 * (b - y), c + 2 / 3 * (a - c), d + 2 / 3 * (b - d), c, d)
    return command, tuple(arguments)


def decimal(value: float) -> str:
    """A coordinate with at most three decimals."""
    text = f"{value:.3f}".rstrip("0").rstrip(".")
    return "0" if text in ("-0", "") else text


def path_data(outline: Outline) -> str:
    """An outline as SVG path data."""
    return "".join(command + " ".join(decimal(v) for v in values) for command, values in outline)


def flat_path(drawing: Drawing) -> str:
    """All outlines of a drawing in place, as one path."""
    return "".join(path_data(_moved(p)) for p in drawing.placed)


def _moved(placed: Placed) -> Outline:
    a, b, c, d, e, f = placed.matrix
    return tuple(
        (
            command,
            tuple(
                v
                for x, y in zip(values[::2], values[1::2], strict=True)
                for v in (a * x + c * y + e, b * x + d * y + f)
            ),
        )
        for command, values in placed.outline
    )
