"""The only writer of files: a dossier folder appears whole or not at all, with a manifest of every hash."""

from __future__ import annotations

import hashlib
import json
import os
import shutil
import tempfile
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Final

MANIFEST: Final = "MANIFEST.sha256"
RUN_LOG: Final = "run.json"
"""Times and host of the run: not hashed, not printed."""


class NotADossierError(ValueError):
    """The output folder exists and holds something else than a dossier."""


def manifest_text(files: Mapping[str, bytes]) -> bytes:
    """One line per file: SHA-256, two spaces, relative name, sorted by name."""
    lines = (f"{hashlib.sha256(files[name]).hexdigest()}  {name}\n" for name in sorted(files))
    return "".join(lines).encode()


def refuse_foreign_folder(folder: Path) -> None:
    """Raise NotADossierError unless `folder` is absent, empty, or holds a dossier's manifest."""
    if not folder.exists():
        return
    if not folder.is_dir():
        raise NotADossierError(f"{folder} is a file, not a folder")
    if any(folder.iterdir()) and not (folder / MANIFEST).is_file():
        raise NotADossierError(f"{folder} holds files that are not a dossier's (no {MANIFEST}); choose another --out")


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
    retired = None
    if folder.exists():
        retired = Path(tempfile.mkdtemp(prefix=f".{folder.name}.old.", dir=folder.parent)) / folder.name
        os.replace(folder, retired)
    os.replace(staging, folder)
    if retired is not None:
        shutil.rmtree(retired.parent, ignore_errors=True)


def read_files(folder: Path, names: Iterable[str]) -> dict[str, bytes]:
    """Contents of the named files of `folder`."""
    return {name: (folder / name).read_bytes() for name in names}


def verify_manifest(folder: Path) -> tuple[str, ...]:
    """What is wrong with the manifest of `folder`: missing, altered or unlisted files.  Empty when all agree."""
    try:
        text = (folder / MANIFEST).read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        return (f"{MANIFEST}: cannot be read ({error.__class__.__name__})",)
    listed = dict(_manifest_lines(text))
    present = {
        p.relative_to(folder).as_posix() for p in folder.rglob("*") if p.is_file() and p.name not in (MANIFEST, RUN_LOG)
    }
    problems = [f"{name}: not listed in the manifest" for name in sorted(present - listed.keys())]
    for name in sorted(listed):
        if name not in present:
            problems.append(f"{name}: listed in the manifest but missing")
        elif hashlib.sha256((folder / name).read_bytes()).hexdigest() != listed[name]:
            problems.append(f"{name}: content differs from the manifest")
    return tuple(problems)


def _manifest_lines(text: str) -> Iterable[tuple[str, str]]:
    for line in text.splitlines():
        digest, _, name = line.partition("  ")
        yield name, digest
