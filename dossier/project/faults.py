"""Faults and warnings of a project file, each with its place, collected so that all are told at once."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import Final

from dossier.project.located import Items, Table, Text

LONGEST_EXCERPT: Final = 80
"""Characters of offending text shown; the place says where the rest is."""

CLOSE_ENOUGH: Final = 0.6
"""Similarity (difflib ratio) from which a known name is offered; difflib's own default."""

LONGEST_LIST: Final = 12
"""Names told when one of several is expected."""


GENERAL_HINT: Final = "write here what is expected"
"""What to do where the fault says it all."""


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


@dataclass(slots=True)
class Ledger:
    """Gathers the faults and warnings of one file while it is read."""

    file: str
    faults: list[Fault] = field(default_factory=list)
    warnings: list[str] = field(default_factory=list)
    _told: set[Fault] = field(default_factory=set)

    def fault(
        self,
        where: Text | Table | Items,
        message: str,
        *,
        text: str | None = None,
        expected: str = "",
        hint: str = "",
        offset: int = 0,
    ) -> None:
        """Add a fault at character `offset` of `where`; nothing is added about what is already reported."""
        if isinstance(where, Text):
            if where.is_absent:
                return
            line, column = where.place(offset)
            text = str(where) if text is None else text
        else:
            line, column = where.line, where.column
        self.add(line, column, message, text or "", expected, hint, where.file)

    def add(
        self, line: int, column: int, message: str, text: str, expected: str, hint: str, file: str = ""
    ) -> None:  # fmt: skip
        """Add a fault, once; `file` is one that the project includes."""
        shown = " ".join(text.split())
        if len(shown) > LONGEST_EXCERPT:
            shown = shown[: LONGEST_EXCERPT - 1] + "…"
        found = Fault(file or self.file, line, column, message, shown, expected, hint or GENERAL_HINT)
        if found not in self._told:
            self._told.add(found)
            self.faults.append(found)

    def warn(self, where: Text, message: str, offset: int = 0) -> None:
        """Add a warning, once."""
        if where.is_absent:
            return
        line, column = where.place(offset)
        text = f"{where.file or self.file}:{line}:{column}: {message}"
        if text not in self.warnings:
            self.warnings.append(text)

    def in_order(self) -> tuple[Fault, ...]:
        """All faults by position, those of the project file first."""
        return tuple(sorted(self.faults, key=lambda f: (f.file != self.file, f.file, f.line, f.column, f.message)))


NOTHING_CLOSE: Final = "no known name is close: check the spelling, or declare it"


def suggestion(name: str, known: Iterable[str], otherwise: str = NOTHING_CLOSE) -> str:
    """A hint that names the known name most like `name`, or `otherwise`."""
    candidates = sorted(known)
    for candidate in candidates:
        if candidate.lower() == name.lower():
            return f"did you mean {candidate}?"
    close = difflib.get_close_matches(name, candidates, n=1, cutoff=CLOSE_ENOUGH)
    return f"did you mean {close[0]}?" if close else otherwise


def listed(names: Iterable[str]) -> str:
    """Names as a short list."""
    every = list(names)
    return ", ".join(every[:LONGEST_LIST]) + (", …" if len(every) > LONGEST_LIST else "")
