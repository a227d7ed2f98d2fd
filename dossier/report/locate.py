"""Find the templates and fonts, in an installed wheel or in the source tree."""

from __future__ import annotations

from pathlib import Path
from typing import Final

PACKAGE: Final = Path(__file__).resolve().parent.parent
CANDIDATES: Final = (PACKAGE / "_templates", PACKAGE.parent / "templates")
"""The wheel carries the templates inside the package, the source tree beside it."""

ENTRY: Final = "dossier.html.j2"


def templates(candidates: tuple[Path, ...] = CANDIDATES) -> Path:
    """The folder of templates, style sheets and fonts.

    Raises FileNotFoundError naming the places looked at where neither holds the entry template.
    """
    for folder in candidates:
        if (folder / ENTRY).is_file():
            return folder
    places = " and ".join(str(c) for c in candidates)
    raise FileNotFoundError(f"the dossier's templates are missing: {ENTRY} was looked for in {places}")


STARTERS = ("axis", "equilibria", "linear", "regions", "margins")
"""Commented projects to start from: one with everything, and one for each family of claims."""


def starter(name: str) -> bytes:
    """A commented project file that a new project starts from; `name` is one of `STARTERS`."""
    return (templates() / "starters" / f"{name}.yaml").read_bytes()


def font(name: str) -> Path:
    """The font file `name` in the template folder's ``fonts``."""
    return templates() / "fonts" / name
