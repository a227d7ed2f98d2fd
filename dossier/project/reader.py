"""From the file of a project to its operating points in SI, or to all of its faults at once."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Final

from dossier.model.case import Assumption, Case
from dossier.model.dossier import Document
from dossier.project.build import build_project
from dossier.project.faults import Fault, Ledger
from dossier.project.located import Text, compose
from dossier.project.shape import shape

LARGEST_FILE: Final = 500_000
"""Bytes of a project file; a large one has a tenth of this."""


@dataclass(frozen=True, slots=True)
class Guess:
    """The place of a ``near`` in the file, and its text."""

    line: int
    column: int
    text: str


@dataclass(frozen=True, slots=True)
class Project:
    """A project without faults: what it states, the operating points in SI, and the bytes it was read from."""

    document: Document
    assumptions: tuple[Assumption, ...]
    cases: tuple[Case, ...]
    warnings: tuple[str, ...]
    files: tuple[tuple[str, bytes], ...]
    sha256: str
    guesses: Mapping[str, Guess]
    """Where the file guesses an equilibrium, by operating point."""


@dataclass(frozen=True, slots=True)
class Faults:
    """Why a project cannot be used, in the order of the file."""

    faults: tuple[Fault, ...]


def read_project(path: Path) -> Project | Faults:
    """The project in the file at `path`; its faults, all of them, where it has any.  Raises nothing."""
    ledger = Ledger(path.name)
    content = _content(path, ledger)
    text = None if content is None else _decoded(content, ledger)
    if text is None or content is None:
        return Faults(ledger.in_order())
    table, troubles = compose(text)
    for t in troubles:
        ledger.add(t.line, t.column, t.message, t.text, t.expected, t.hint)
    entry = None if table is None else shape(table, ledger)
    if entry is None:
        return Faults(ledger.in_order())
    document, assumptions, cases = build_project(entry, ledger)
    if ledger.faults:
        return Faults(ledger.in_order())
    files = ((path.name, content),)
    return Project(
        document, assumptions, cases, tuple(ledger.warnings), files, hashlib.sha256(content).hexdigest(),
        {str(n): _guess(p.equilibrium.near) for n, p in entry.operating_points.items() if p.equilibrium.near},
    )  # fmt: skip


def _guess(near: Mapping[Text, Text]) -> Guess:
    first = next(iter(near))
    return Guess(first.line, first.column, ", ".join(f"{n}: {v}" for n, v in near.items()))


def _content(path: Path, ledger: Ledger) -> bytes | None:
    try:
        size = path.stat().st_size
        if size <= LARGEST_FILE:
            return path.read_bytes()
    except OSError as error:
        reason = (error.strerror or "not readable").lower()
        ledger.add(1, 1, f"the file cannot be read: {reason}", path.name, "a project file", "check the path")
        return None
    ledger.add(
        1, 1, f"the file has {size} bytes", path.name, f"at most {LARGEST_FILE} bytes", "split it into several projects"
    )  # fmt: skip
    return None


def _decoded(content: bytes, ledger: Ledger) -> str | None:
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        before = content[: error.start].decode("utf-8", "replace")
        column = len(before) - (before.rfind("\n") + 1) + 1
        offending = content[error.start : error.end].hex(" ")
        ledger.add(
            before.count("\n") + 1, column, "the file is not UTF-8 text", f"byte {offending}", "UTF-8 text",
            "save the file as UTF-8",
        )  # fmt: skip
        return None
