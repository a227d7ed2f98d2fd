"""Text with formulas, links and identifiers in it, as plain values that say nothing about looks."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Formula:
    """A formula as LaTeX and in words; `display` on a line of its own."""

    latex: str
    speech: str = ""
    display: bool = False


@dataclass(frozen=True, slots=True)
class Link:
    """A reference to the place with the id `target` in the same document."""

    target: str
    text: str


@dataclass(frozen=True, slots=True)
class Mono:
    """An identifier, file name or hash, set as typed."""

    text: str


@dataclass(frozen=True, slots=True)
class Strong:
    """Words that carry the sentence."""

    text: str


Part = str | Formula | Link | Mono | Strong
Rich = tuple[Part, ...]


def rich(*parts: Part | Rich) -> Rich:
    """Parts and sequences of parts in one row."""
    row: list[Part] = []
    for part in parts:
        row.extend(part if isinstance(part, tuple) else (part,))
    return tuple(row)


def joined(items: Iterable[Part | Rich], between: str = ", ") -> Rich:
    """`items` with `between` from one to the next."""
    row: list[Part] = []
    for item in items:
        if row:
            row.append(between)
        row.extend(item if isinstance(item, tuple) else (item,))
    return tuple(row)


def plain(text: Rich) -> str:
    """The words of `text` without any marking."""
    return "".join(
        part if isinstance(part, str) else (part.speech or part.latex) if isinstance(part, Formula) else part.text
        for part in text
    )
