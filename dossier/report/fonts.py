"""The fonts of both papers: declared once, loaded from files for the PDF, carried inside the HTML."""

from __future__ import annotations

import base64
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Final

from dossier.report import locate


@dataclass(frozen=True, slots=True)
class Face:
    """One style of a family and its file; one complete file per style, never split by character range."""

    family: str
    weight: int
    style: str
    file: str


FACES: Final = (
    Face("IBM Plex Sans", 300, "normal", "IBMPlexSans-Light.woff"),
    Face("IBM Plex Sans", 400, "normal", "IBMPlexSans-Regular.woff"),
    Face("IBM Plex Sans", 400, "italic", "IBMPlexSans-Italic.woff"),
    Face("IBM Plex Sans", 600, "normal", "IBMPlexSans-SemiBold.woff"),
    Face("IBM Plex Sans Condensed", 400, "normal", "IBMPlexSansCondensed-Regular.woff"),
    Face("IBM Plex Sans Condensed", 600, "normal", "IBMPlexSansCondensed-SemiBold.woff"),
    Face("IBM Plex Mono", 400, "normal", "IBMPlexMono-Regular.woff"),
    Face("STIX Two Math", 400, "normal", "STIXTwoMath-Signs.woff"),
)


def face_rules(*, embed: bool) -> str:
    """``@font-face`` rules: with `embed` the fonts themselves, else the addresses of their files."""
    return "".join(_rules(embed))


def _rules(embed: bool) -> Iterator[str]:
    for face in FACES:
        path = locate.font(face.file)
        if embed:
            source = f"data:font/woff;base64,{base64.b64encode(path.read_bytes()).decode('ascii')}"
        else:
            source = path.as_uri()
        yield (
            f'@font-face{{font-family:"{face.family}";font-weight:{face.weight};font-style:{face.style};'
            f"src:url({source}) format('woff')}}\n"
        )
