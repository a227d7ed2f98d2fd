"""How a build came about: versions, the size and hash of the trusted core, the command to run again.

The only reader of the clock; times go to the run log, never into hashed or printed output.
"""

from __future__ import annotations

import hashlib
import platform
import time
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field
from importlib import metadata
from pathlib import Path
from typing import Final

from dossier.model.dossier import Component

LIBRARIES: Final[Mapping[str, str]] = {
    "python-flint": "exact and ball arithmetic (proof)",
    "numpy": "arrays: interval checks (IEEE + - * / only), searches, simulation",
    "scipy": "searches only",
    "cvxpy": "searches only: states conic programs",
    "clarabel": "searches only: solves conic programs",
    "pint": "units at the border of the project file",
    "pyyaml": "reads the project file",
    "pydantic": "field definitions of the project file",
    "mathra": "typesets equations",
    "weasyprint": "writes the PDF",
}


def components(package: Path, version: str) -> tuple[Component, ...]:
    """The program, its trusted core (model and checks) with size and hash, and the libraries it used."""
    own = [Component("dossier", version, "this program")]
    for part, role in (("model", "trusted core: what is said"), ("checks", "trusted core: what is proved")):
        lines, digest = _size_and_hash(package / part)
        own.append(Component(f"dossier.{part}", version, role, lines, digest))
    libraries = [Component(name, _version(name), role) for name, role in LIBRARIES.items()]
    python = Component("Python", platform.python_version(), "runs the program")
    return (*own, python, *libraries)


def _version(name: str) -> str:
    try:
        return metadata.version(name)
    except metadata.PackageNotFoundError:
        return "not installed"


def _size_and_hash(folder: Path) -> tuple[int, str]:
    digest, lines = hashlib.sha256(), 0
    for path in sorted(folder.rglob("*.py")):
        content = path.read_bytes()
        digest.update(path.relative_to(folder).as_posix().encode() + b"\0" + content)
        lines += content.count(b"\n")
    return lines, digest.hexdigest()


@dataclass
class Stopwatch:
    """Seconds per stage, for the run log and the terminal."""

    seconds: dict[str, float] = field(default_factory=dict)

    @contextmanager
    def stage(self, name: str) -> Iterator[None]:
        """Add the time of the enclosed block to `name`."""
        begin = time.perf_counter()
        try:
            yield
        finally:
            self.seconds[name] = self.seconds.get(name, 0.0) + time.perf_counter() - begin


def run_log(stopwatch: Stopwatch, extra: Mapping[str, object]) -> dict[str, object]:
    """Times, host and date of this run."""
    return {
        "finished": time.strftime("%Y-%m-%dT%H:%M:%SZ", time.gmtime()),
        "host": platform.node(),
        "platform": platform.platform(),
        "seconds": {k: round(v, 3) for k, v in stopwatch.seconds.items()},
        **extra,
    }
