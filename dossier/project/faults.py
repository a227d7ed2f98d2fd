"""Faults and warnings of a project file, each with its place, collected so that all are told at once."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import Final

LONGEST_EXCERPT: Final = 80
"""Characters of offending text shown; the place says where the rest is."""

CLOSE_ENOUGH: Final = 0.6
"""Similarity (difflib ratio) from which a known name is offered; difflib's own default."""


@dataclass(frozen=True, slots=True)
class Fault:
    """One fault: where (line and column count from 1), what, the offending text, what was expected, what to do."""

    file: str
    line: int
    column: int
    message: str
    text: str = ""
    expected: str = ""
    hint: str = ""


@dataclass(frozen=True, slots=True)
class Place:
    """A position in a file; line and column count from 1."""

    file: str
    line: int
    column: int


@dataclass(slots=True)
class Collector:
    """Gathers faults and warnings while a project is read."""

    faults: list[Fault] = field(default_factory=list)
    warnings: list[str] = field(default_factory=list)

    def fault(self, place: Place, message: str, text: str = "", expected: str = "", hint: str = "") -> None:
        """Add a fault, once."""
        shown = " ".join(text.split())
        if len(shown) > LONGEST_EXCERPT:
            shown = shown[: LONGEST_EXCERPT - 1] + "…"
        found = Fault(place.file, place.line, place.column, message, shown, expected, hint)
        if found not in self.faults:
            self.faults.append(found)

    def warn(self, place: Place, message: str) -> None:
        """Add a warning, once."""
        text = f"{place.file}:{place.line}:{place.column}: {message}"
        if text not in self.warnings:
            self.warnings.append(text)

    def in_order(self) -> tuple[Fault, ...]:
        """All faults by position."""
        return tuple(sorted(self.faults, key=lambda f: (f.file, f.line, f.column, f.message)))


def nearest(name: str, known: Iterable[str]) -> str:
    """A hint that names the known name most like `name`, or nothing."""
    candidates = sorted(known)
    for candidate in candidates:
        if candidate.lower() == name.lower():
            return f"did you mean {candidate}?"
    close = difflib.get_close_matches(name, candidates, n=1, cutoff=CLOSE_ENOUGH)
    return f"did you mean {close[0]}?" if close else ""
