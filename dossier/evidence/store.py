"""The only writer of files: a dossier folder appears whole or not at all, with a manifest of every hash."""

from __future__ import annotations

import hashlib
import json
import os
import shutil
import tempfile
from collections.abc import Mapping
from pathlib import Path
from typing import Final

MANIFEST: Final = "MANIFEST.sha256"
STARTER: Final = "project.yaml"
"""Name of a new project's file."""
RUN_LOG: Final = "run.json"
"""Times and host of the run: not hashed, not printed."""


class NotADossierError(ValueError):
    """The output folder exists and holds something else than a dossier."""


def manifest_text(files: Mapping[str, bytes]) -> bytes:
    """One line per file: SHA-256, two spaces, relative name, sorted by name."""
    lines = (f"{hashlib.sha256(files[name]).hexdigest()}  {name}\n" for name in sorted(files))
    return "".join(lines).encode()


def refuse_foreign_folder(folder: Path) -> None:
    """Raise NotADossierError unless `folder` is absent, empty, or holds a dossier just as it was written.

    What a person added or filled in since then (notes, a signed PDF) is not overwritten.
    """
    if not folder.exists():
        _refuse_place(folder)
        return
    if not folder.is_dir():
        raise NotADossierError(f"{folder} is a file, not a folder")
    if not any(folder.iterdir()):
        return
    if not (folder / MANIFEST).is_file():
        raise NotADossierError(f"{folder} holds files that are not a dossier's (no {MANIFEST}); choose another --out")
    changed = [p for p in verify_manifest(folder) if not p.endswith(MISSING)]
    if changed:
        raise NotADossierError(f"{folder} has changed since it was written ({changed[0]}); choose another --out")


def write_new_project(folder: Path, content: bytes) -> Path:
    """A starter project file in `folder`, which is made where it is missing; nothing is ever replaced.

    Raises FileExistsError where there is a project already, NotADossierError or OSError where it cannot be made.
    """
    if not folder.exists():
        _refuse_place(folder)
    folder.mkdir(parents=True, exist_ok=True)
    target = folder / STARTER
    with target.open("xb") as file:
        file.write(content)
    return target


def _refuse_place(folder: Path) -> None:
    """Raise NotADossierError where no folder can be made at `folder`: better known before the work than after."""
    above = next(p for p in folder.absolute().parents if p.exists() or p.is_symlink())
    if not above.is_dir():
        raise NotADossierError(f"{folder} cannot be made: {above} is a file, not a folder")
    if not os.access(above, os.W_OK | os.X_OK):
        raise NotADossierError(f"{folder} cannot be made: no permission to write in {above}")


def write_dossier(folder: Path, files: Mapping[str, bytes], run_log: Mapping[str, object]) -> tuple[Path, ...]:
    """Write `files` (relative name to content), the manifest and the run log into `folder`, replacing a dossier.

    Everything is written beside the target first and moved into place at the end, so an interruption
    leaves the previous dossier or none.  Raises NotADossierError for a foreign folder, OSError as usual.
    """
    refuse_foreign_folder(folder)
    folder.parent.mkdir(parents=True, exist_ok=True)
    staging = Path(tempfile.mkdtemp(prefix=f".{folder.name}.", dir=folder.parent))
    try:
        _fill(staging, files, run_log)
        _swap(staging, folder)
    finally:
        shutil.rmtree(staging, ignore_errors=True)
    return tuple(folder / name for name in sorted(files))


def _fill(staging: Path, files: Mapping[str, bytes], run_log: Mapping[str, object]) -> None:
    for name, content in files.items():
        target = staging / name
        target.parent.mkdir(parents=True, exist_ok=True)
        target.write_bytes(content)
    (staging / MANIFEST).write_bytes(manifest_text(files))
    (staging / RUN_LOG).write_text(json.dumps(run_log, sort_keys=True, indent=1) + "\n", encoding="utf-8")
    os.chmod(staging, 0o755)


def _swap(staging: Path, folder: Path) -> None:
    if not folder.exists():
        os.replace(staging, folder)
        return
    attic = Path(tempfile.mkdtemp(prefix=f".{folder.name}.old.", dir=folder.parent))
    retired = attic / folder.name
    try:
        os.replace(folder, retired)
        os.replace(staging, folder)
    except BaseException:  # also an interruption: the previous dossier comes back
        if retired.exists() and not folder.exists():
            os.replace(retired, folder)
        raise
    finally:
        if folder.exists():  # else the only copy of the previous dossier lies in the attic, and stays there
            shutil.rmtree(attic, ignore_errors=True)


MISSING: Final = "listed in the manifest but missing"
LINK: Final = "is a link or no plain file"


def verify_manifest(folder: Path) -> tuple[str, ...]:
    """What is wrong with the manifest of `folder`: missing, altered, unlisted or irregular files; empty when all agree.

    Nothing is read through a link.
    """
    irregular = irregular_files(folder)
    if irregular:
        return tuple(f"{name}: {LINK}" for name in irregular)
    try:
        text = (folder / MANIFEST).read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        return (f"{MANIFEST}: cannot be read ({error.__class__.__name__})",)
    listed = {name: digest for digest, _, name in (line.partition("  ") for line in text.splitlines())}
    present = present_files(folder)
    problems = [f"{name}: not listed in the manifest" for name in sorted(present - listed.keys())]
    for name in sorted(listed):
        if name not in present:
            problems.append(f"{name}: {MISSING}")
        elif _digest(folder / name) != listed[name]:
            problems.append(f"{name}: content differs from the manifest")
    if not problems and text != "".join(f"{listed[name]}  {name}\n" for name in sorted(present)):
        problems.append(f"{MANIFEST}: not one line per file in the order of their names")
    return tuple(problems)


def _digest(path: Path) -> str:
    """SHA-256 of a file; the empty text where it cannot be read, which no manifest says."""
    try:
        return hashlib.sha256(path.read_bytes()).hexdigest()
    except OSError:
        return ""


def irregular_files(folder: Path) -> tuple[str, ...]:
    """Relative names of links, pipes and devices below `folder`: a dossier holds plain files and folders only."""
    return tuple(
        sorted(
            p.relative_to(folder).as_posix()
            for p in folder.rglob("*")
            if p.is_symlink() or not (p.is_file() or p.is_dir())
        )
    )


def present_files(folder: Path) -> frozenset[str]:
    """Relative names of the files below `folder` that a manifest must list."""
    names = (p.relative_to(folder).as_posix() for p in folder.rglob("*") if p.is_file())
    return frozenset(n for n in names if n not in (MANIFEST, RUN_LOG))
