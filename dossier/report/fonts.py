"""The fonts of both papers: declared once, handed to the PDF writer opened, carried inside the HTML as shipped."""

from __future__ import annotations

import base64
from collections.abc import Iterator
from dataclasses import dataclass
from io import BytesIO
from typing import Final

from fontTools.ttLib import TTFont

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
    Face("IBM Plex Sans", 600, "normal", "IBMPlexSans-SemiBold.woff"),
    Face("IBM Plex Sans Condensed", 400, "normal", "IBMPlexSansCondensed-Regular.woff"),
    Face("IBM Plex Sans Condensed", 600, "normal", "IBMPlexSansCondensed-SemiBold.woff"),
    Face("IBM Plex Mono", 400, "normal", "IBMPlexMono-Regular.woff"),
    Face("STIX Two Math", 400, "normal", "STIXTwoMath-Signs.woff"),
)


SCHEME: Final = "font:"
"""Addresses of shipped fonts inside the document given to the PDF writer."""


def opened(address: str) -> bytes:
    """The font at ``font:NAME`` as plain TrueType, byte for byte the same each time.

    Opened here and not by the PDF writer, which would stamp it with the time of the run.
    Raises ValueError for any address that is not a shipped font's.
    """
    name = address.removeprefix(SCHEME)
    if name == address or name not in {f.file for f in FACES}:
        raise ValueError(f"the paper asks for {address!r}, which is not a shipped font")
    font = TTFont(locate.font(name), recalcTimestamp=False)
    font.flavor = None
    out = BytesIO()
    font.save(out)
    return out.getvalue()


def face_rules(*, embed: bool) -> str:
    """``@font-face`` rules: with `embed` the fonts themselves, else addresses that `opened` answers."""
    return "".join(_rules(embed))


def _rules(embed: bool) -> Iterator[str]:
    for face in FACES:
        source = f"{SCHEME}{face.file}"
        if embed:
            content = locate.font(face.file).read_bytes()
            source = f"data:font/woff;base64,{base64.b64encode(content).decode('ascii')}"
        yield (
            f'@font-face{{font-family:"{face.family}";font-weight:{face.weight};font-style:{face.style};'
            f"src:url({source}) format('woff')}}\n"
        )
