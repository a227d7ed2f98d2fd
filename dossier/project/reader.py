"""From the file of a project to its operating points in SI, or to all of its faults at once."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from dossier.model.case import Assumption, Case
from dossier.model.dossier import Document
from dossier.project.build import build_project
from dossier.project.faults import Fault, Ledger
from dossier.project.includes import LARGEST_FILE, decoded, include_models, read_limited
from dossier.project.located import Text, compose
from dossier.project.shape import shape


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
    included = () if table is None else include_models(table, path.parent, path.name, ledger)
    entry = None if table is None else shape(table, ledger)
    if entry is None:
        return Faults(ledger.in_order())
    document, assumptions, cases = build_project(entry, ledger)
    if ledger.faults:
        return Faults(ledger.in_order())
    files = ((path.name, content), *included)
    return Project(
        document, assumptions, cases, tuple(ledger.warnings), files, _fingerprint(files),
        {str(n): _guess(p.equilibrium.near) for n, p in entry.operating_points.items() if p.equilibrium.near},
    )  # fmt: skip


def _guess(near: Mapping[Text, Text]) -> Guess:
    first = next(iter(near))
    return Guess(first.line, first.column, ", ".join(f"{n}: {v}" for n, v in near.items()))


def _fingerprint(files: tuple[tuple[str, bytes], ...]) -> str:
    """SHA-256 of the project file; with includes, of the list of all names and their hashes."""
    hashes = [(name, hashlib.sha256(content).hexdigest()) for name, content in files]
    if len(hashes) == 1:
        return hashes[0][1]
    return hashlib.sha256("".join(f"{digest}  {name}\n" for name, digest in hashes).encode()).hexdigest()


def _content(path: Path, ledger: Ledger) -> bytes | None:
    content = read_limited(path, LARGEST_FILE)
    if isinstance(content, bytes):
        return content
    if isinstance(content, int):
        ledger.add(
            1, 1, f"the file has {content} bytes", path.name, f"at most {LARGEST_FILE} bytes",
            "split it into several projects",
        )  # fmt: skip
    else:
        ledger.add(1, 1, f"the file cannot be read: {content}", path.name, "a project file", "check the path")
    return None


def _decoded(content: bytes, ledger: Ledger) -> str | None:
    text = decoded(content)
    if isinstance(text, str):
        return text
    ledger.add(text.line, text.column, text.message, text.text, text.expected, text.hint)
    return None
