"""The separate checker: verify a written dossier from its project copy and certificates alone.

It reads the project again, derives every closed loop again, verifies every certificate with
`dossier.checks` and judges every criterion again; it imports no search, no solver and no report.
A rigorous verdict of the record that does not come out the same is refused.
"""

from __future__ import annotations

import json
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Final

from dossier.checks.assess import assess
from dossier.checks.self_test import self_test
from dossier.evidence.record import certificate_file, point_data
from dossier.evidence.store import verify_manifest
from dossier.judgement.points import judge_point
from dossier.model.case import Case
from dossier.model.claim import Claim
from dossier.model.dossier import PointEvidence
from dossier.model.loop import model_data, model_hash
from dossier.model.outcome import VERDICTS
from dossier.model.text import canonical, claim_from_data
from dossier.project.reader import Faults, Project, read_project

BOXES: Final = 5_000_000
"""Branch-and-bound boxes one cover may take when it is proved again (the largest budget of a build)."""

RIGOROUS: Final = ("proved", "refuted", "no operating point")
"""Verdicts that recheck must reach again; the others rest on searches or simulations it does not repeat."""

COMPARED: Final = ("model", "model_sha256", "states", "time", "equilibria", "certificates", "margins")
"""Parts of an operating point's record that must come out the same."""


@dataclass(frozen=True, slots=True)
class Recheck:
    """`refusals` says what was refused, place first; `verified` what came out the same."""

    refusals: tuple[str, ...]
    verified: tuple[str, ...]


def recheck(folder: Path) -> Recheck:
    """Verify the dossier in `folder`; never raises for a damaged one."""
    refusals = [f"manifest: {p}" for p in verify_manifest(folder)]
    refusals += [f"arithmetic: this machine fails the self-test {name}" for name, _, _, ok in self_test() if not ok]
    verified: list[str] = []
    try:
        record = json.loads((folder / "record.json").read_text(encoding="utf-8"))
        models = json.loads((folder / "model.json").read_text(encoding="utf-8"))
        main_file = folder / "project" / str(record["project_file"])
        points = dict(record["operating_points"])
    except (OSError, ValueError, KeyError, TypeError) as error:
        return Recheck((*refusals, f"record: cannot be read ({error.__class__.__name__}: {error})"), ())
    project = read_project(main_file)
    if isinstance(project, Faults):
        return Recheck((*refusals, *(f"project: {f.message}" for f in project.faults)), ())
    refusals += _document(project, record)
    cases = {c.name: c for c in project.cases}
    for name in points:
        if name not in cases:
            refusals.append(f"{name}: the project has no such operating point")
            continue
        found = list(_point(folder, cases[name], points[name], models.get(name)))
        refusals += found
        if not found:
            verified.append(f"{name}: {len(points[name]['certificates'])} certificates, "
                            f"{len(points[name]['criteria'])} criteria")  # fmt: skip
    return Recheck(tuple(refusals), tuple(verified))


def _document(project: Project, record: dict[str, Any]) -> Iterator[str]:
    if record.get("project_sha256") != project.sha256:
        yield "record: made from another project file"
    stated = record.get("document", {})
    for field in ("number", "title", "revision", "date", "machine", "organisation"):
        if stated.get(field) != getattr(project.document, field):
            yield f"record: document {field} differs from the project file"
    verdicts = Counter(c.get("verdict") for p in record["operating_points"].values() for c in p["criteria"].values())
    if record.get("conclusion") != {v: verdicts.get(v, 0) for v in VERDICTS}:
        yield "record: the conclusion does not count the verdicts listed"


def _point(folder: Path, case: Case, stated: dict[str, Any], model: Any) -> Iterator[str]:
    if canonical(model) != canonical({"sha256": model_hash(case), "loop": model_data(case)}):
        yield f"{case.name}: model.json is not the closed loop of the project file"
    files, problems = read_certificates(folder, case.name)
    yield from problems
    order = [str(c.get("id")) for c in stated.get("certificates", ())]
    if sorted(order) != sorted(f.claim.identifier for f in files):
        yield f"{case.name}: the certificate files are not those the record lists"
    place = {identifier: i for i, identifier in enumerate(order)}
    files = sorted(files, key=lambda f: place.get(f.claim.identifier, len(order)))
    yield from _compare(case, files, stated)


def _compare(case: Case, files: list[CertificateFile], stated: dict[str, Any]) -> Iterator[str]:
    claims = tuple(f.claim for f in files)
    assessment = assess(case, claims, BOXES)
    knowledge = assessment.knowledge
    for file in files:
        if canonical(certificate_file(file.claim, assessment.about_claims)) != file.text:
            yield f"{file.name}: its checks and premises are not those the claim allows"
    outcomes = judge_point(case, assessment.about_criteria, (), assessment.missing)
    derived = point_data(
        PointEvidence(
            case, model_hash(case), knowledge.equilibria, knowledge.complete, assessment.clusters, claims,
            (*assessment.about_claims, *assessment.about_criteria), (), outcomes, knowledge.margins, None, None,
        )
    )  # fmt: skip
    for part in COMPARED:
        if canonical(derived[part]) != canonical(stated.get(part)):
            yield f"{case.name}: {part} of the record cannot be derived from the certificates"
    criteria = stated.get("criteria", {})
    if set(criteria) != set(derived["criteria"]):
        yield f"{case.name}: the criteria are not those of the project file"
        return
    for name, outcome in derived["criteria"].items():
        yield from _criterion(f"{case.name}.{name}", outcome, criteria[name])


def _criterion(identifier: str, derived: dict[str, Any], stated: dict[str, Any]) -> Iterator[str]:
    verdict = stated.get("verdict")
    if RIGOROUS.count(verdict) or derived["verdict"] in RIGOROUS:
        if verdict != derived["verdict"]:
            yield f"{identifier}: the record says {verdict!r}, the certificates give {derived['verdict']!r}"
            return
        for field in ("claim", "over", "strength", "theorem", "because", "evidence", "value", "bound", "reserve"):
            if canonical(stated.get(field)) != canonical(derived[field]):
                yield f"{identifier}: {field} of the record cannot be derived from the certificates"
    elif verdict not in VERDICTS:
        yield f"{identifier}: unknown verdict {verdict!r}"


@dataclass(frozen=True, slots=True)
class CertificateFile:
    """One certificate file: its name, its text and the claim it holds."""

    name: str
    text: str
    claim: Claim


def read_certificates(folder: Path, point: str) -> tuple[list[CertificateFile], list[str]]:
    """The certificate files of one operating point, and what is wrong with those that cannot be used."""
    files, problems = [], []
    for path in sorted((folder / "certificates").glob(f"{point}.*.json")):
        try:
            text = path.read_text(encoding="utf-8")
            data = json.loads(text)
            claim = claim_from_data(data["claim"] if isinstance(data, dict) and "claim" in data else None)
        except (OSError, ValueError, RecursionError) as error:
            problems.append(f"{path.name}: {error}")
            continue
        if f"{claim.identifier}.json" == path.name:
            files.append(CertificateFile(path.name, text, claim))
        else:
            problems.append(f"{path.name}: holds the claim {claim.identifier}")
    return files, problems
