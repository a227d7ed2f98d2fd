"""Opens a written dossier that may have been altered: canonical JSON only, every place named, nothing believed."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Final, NoReturn

from dossier.evidence.record import RECORD_FORMAT
from dossier.model.claim import Claim
from dossier.model.text import canonical, claim_from_data

LARGEST: Final = 100_000_000
"""Bytes of a JSON file that is read; a build writes a hundredth of this."""


class UnreadableError(ValueError):
    """A file of a dossier that cannot be what a build wrote; the message begins with its name."""


@dataclass(frozen=True, slots=True)
class CertificateFile:
    """One certificate file: its name below the folder, its text and the claim it holds."""

    name: str
    text: str
    claim: Claim

    @property
    def sha256(self) -> str:
        """Hash of the file."""
        return hashlib.sha256(self.text.encode()).hexdigest()


@dataclass(frozen=True, slots=True)
class Opened:
    """The parts of a dossier as they are stated; `points` maps each operating point to its record."""

    record: Mapping[str, Any]
    models: Mapping[str, Any]
    project_file: str
    points: Mapping[str, Mapping[str, Any]]


def read_json(folder: Path, name: str) -> dict[str, Any]:
    """The object in the JSON file `name` of `folder`.  Raises UnreadableError unless it is in canonical text.

    Data has one canonical text, so repeated keys, floats and whatever could be read in two ways are refused.
    """
    path = folder / name
    try:
        if path.stat().st_size > LARGEST:
            raise UnreadableError(f"{name}: more than {LARGEST} bytes")
        text = path.read_text(encoding="utf-8")
        data = json.loads(text, parse_float=_refuse_float, parse_constant=_refuse_float)
        is_canonical = canonical(data) == text
    except UnreadableError:
        raise
    except (OSError, ValueError, RecursionError) as error:
        raise UnreadableError(f"{name}: cannot be read ({error.__class__.__name__}: {error})") from error
    if not is_canonical:
        raise UnreadableError(f"{name}: not in canonical form (repeated keys, another order or layout)")
    if not isinstance(data, dict):
        raise UnreadableError(f"{name}: not an object")
    return data


def _refuse_float(text: str) -> NoReturn:
    raise ValueError(f"a floating-point number, {text}")


def open_dossier(folder: Path) -> Opened:
    """The record and the models of the dossier in `folder`.  Raises UnreadableError, naming the place."""
    record, models = read_json(folder, "record.json"), read_json(folder, "model.json")
    if record.get("record") != RECORD_FORMAT:
        raise UnreadableError(f"record.json: format {record.get('record')!r}, expected {RECORD_FORMAT}")
    points = record.get("operating_points")
    if not isinstance(points, dict) or not points:
        raise UnreadableError("record.json: operating_points: expected at least one")
    for name, point in points.items():
        _check_shape(name, point)
    project_file = record.get("project_file")
    if not isinstance(project_file, str) or Path(project_file).name != project_file:
        raise UnreadableError("record.json: project_file: expected the name of a file in project/")
    return Opened(record, models, project_file, points)


def _check_shape(name: str, point: Any) -> None:
    """The few places that are looked into before everything is compared."""
    place = f"record.json: {name}"
    if not isinstance(point, dict):
        raise UnreadableError(f"{place}: not an object")
    criteria, certificates = point.get("criteria"), point.get("certificates")
    if not isinstance(criteria, dict) or not all(isinstance(c, dict) for c in criteria.values()):
        raise UnreadableError(f"{place}: criteria: expected an object per criterion")
    if not isinstance(certificates, list) or not all(
        isinstance(c, dict) and isinstance(c.get("id"), str) and "/" not in c["id"] for c in certificates
    ):
        raise UnreadableError(f"{place}: certificates: expected an object with an id per certificate")


def read_certificate(folder: Path, identifier: str) -> CertificateFile:
    """The certificate file of the claim `identifier`.  Raises UnreadableError, naming the file."""
    name = f"certificates/{identifier}.json"
    data = read_json(folder, name)
    try:
        claim = claim_from_data(data.get("claim"))
    except (ValueError, TypeError, RecursionError) as error:
        raise UnreadableError(f"{name}: {error}") from error
    if claim.identifier != identifier:
        raise UnreadableError(f"{name}: holds the claim {claim.identifier}")
    return CertificateFile(name, canonical(data), claim)
