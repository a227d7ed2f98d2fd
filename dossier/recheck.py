"""The separate checker: verify a written dossier from its project copy and certificates alone.

It reads the project again, derives every closed loop again, verifies every certificate with
`dossier.checks` and judges every criterion again; it imports no search, no solver and no report.
Whatever of the record does not come out the same is refused, with its place.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Final

from dossier.checks.assess import Assessment, assess
from dossier.checks.self_test import self_test
from dossier.evidence.differences import differences
from dossier.evidence.opened import CertificateFile, Opened, UnreadableError, open_dossier, read_certificate
from dossier.evidence.record import SAMPLED_CHECK, certificate_file, point_data
from dossier.evidence.store import irregular_files, present_files, verify_manifest
from dossier.judgement.points import judge_point
from dossier.model.case import Case
from dossier.model.dossier import PointEvidence
from dossier.model.loop import model_data, model_hash
from dossier.model.outcome import VERDICTS
from dossier.model.text import canonical
from dossier.project.reader import Faults, Project, read_project

BOXES: Final = {"quick": 200_000, "standard": 1_000_000, "thorough": 5_000_000}
"""Branch-and-bound boxes per cover by the effort of the build, so that the same is decided as there."""

RIGOROUS: Final = ("proved", "refuted", "no operating point")
"""Verdicts that rest on certificates alone."""

SIMULATED: Final = {"supported": "undecided", "contradicted": "refuted"}
"""Verdicts that a simulation may give where the certificates establish nothing, and what its finding must say."""

DERIVED: Final = ("model", "model_sha256", "states", "time", "equilibria", "certificates", "margins", "findings")
"""Parts of an operating point's record that must come out the same."""

NOT_DERIVED: Final = ("criteria", "attempts", "campaign", "warnings")
"""Parts compared by themselves, or that tell of searches and simulations, which are not repeated."""

UNVERIFIED: Final = (
    "not verified here: what searches and simulations report, and the wording of dossier.html and dossier.pdf",
    "to verify the wording, build again: the same project and versions give the same bytes",
)


@dataclass(frozen=True, slots=True)
class Recheck:
    """`refusals`: what was refused, place first; `verified`: what came out the same; `remarks`: what was left out."""

    refusals: tuple[str, ...]
    verified: tuple[str, ...] = ()
    remarks: tuple[str, ...] = ()


def recheck(folder: Path) -> Recheck:
    """Verify the dossier in `folder`; never raises for a damaged one."""
    refusals = [f"manifest: {p}" for p in verify_manifest(folder)]
    refusals += [f"arithmetic: this machine fails the self-test {name}" for name, _, _, ok in self_test() if not ok]
    if irregular_files(folder):
        return Recheck(_printable(refusals))
    try:
        opened = open_dossier(folder)
    except UnreadableError as error:
        return Recheck(_printable([*refusals, str(error)]))
    project = read_project(folder / "project" / opened.project_file)
    if isinstance(project, Faults):
        faults = (f"project/{f.file}:{f.line}:{f.column}: {f.message}" for f in project.faults)
        return Recheck(_printable([*refusals, *faults]))
    refusals += [*_document(project, opened), *_files(folder, project, opened)]
    verified: list[str] = []
    cases = {c.name: c for c in project.cases}
    for name, stated in opened.points.items():
        found = list(_guarded(folder, opened, cases, name))
        refusals += found
        if not found:
            verified.append(f"{name}: {len(stated['certificates'])} certificates, {len(stated['criteria'])} criteria")
    omitted = (f"not in this dossier: the operating point {n} of the project" for n in cases if n not in opened.points)
    return Recheck(_printable(refusals), tuple(verified), (*omitted, *UNVERIFIED))


def _printable(lines: list[str]) -> tuple[str, ...]:
    """What a damaged file says is printed without anything that could steer a terminal."""
    return tuple("".join(c if c.isprintable() else "?" for c in line) for line in lines)


def _document(project: Project, opened: Opened) -> Iterator[str]:
    record = opened.record
    if record.get("project_sha256") != project.sha256:
        yield f"record.json: project_sha256: made from another file than project/{opened.project_file}"
    fields = ("number", "title", "revision", "date", "machine", "organisation")
    document = {f: getattr(project.document, f) for f in fields}
    yield from differences(record.get("document"), document, "record.json: document")
    yield from differences(record.get("warnings"), list(project.warnings), "record.json: warnings")
    counts = Counter(str(c.get("verdict")) for p in opened.points.values() for c in p["criteria"].values())
    yield from differences(record.get("conclusion"), {v: counts.get(v, 0) for v in VERDICTS}, "record.json: conclusion")
    if str(record.get("effort")) not in BOXES:
        yield f"record.json: effort: expected one of {', '.join(BOXES)}"
    for name in opened.models.keys() - opened.points.keys():
        yield f"model.json: {name}: the record has no such operating point"


def _files(folder: Path, project: Project, opened: Opened) -> Iterator[str]:
    """Every file belongs to the dossier, and none of what a build always writes is missing."""
    needed = {"dossier.html", *(f"project/{name}" for name, _ in project.files)}
    needed |= {f"certificates/{c['id']}.json" for p in opened.points.values() for c in p["certificates"]}
    present = present_files(folder)
    for name in sorted(needed - present):
        yield f"{name}: missing"
    for name in sorted(present - needed - {"record.json", "model.json", "dossier.pdf"}):
        if not (name.startswith("figures/") and name.endswith(".svg")):
            yield f"{name}: belongs to no part of this dossier"


def _guarded(folder: Path, opened: Opened, cases: Mapping[str, Case], name: str) -> Iterator[str]:
    """The refusals about one operating point; a check that breaks off has verified nothing."""
    if name not in cases:
        yield f"{name}: the project has no such operating point"
        return
    try:
        yield from _point(folder, opened, cases[name])
    except Exception as error:
        yield f"{name}: the check broke off ({error.__class__.__name__}: {error})"


def _point(folder: Path, opened: Opened, case: Case) -> Iterator[str]:
    stated = opened.points[case.name]
    model = {"sha256": model_hash(case), "loop": model_data(case)}
    yield from differences(opened.models.get(case.name), model, f"model.json: {case.name}")
    yield from (f"record.json: {case.name}.{k}: unknown part" for k in stated.keys() - {*DERIVED, *NOT_DERIVED})
    files = []
    for entry in stated["certificates"]:
        try:
            file = read_certificate(folder, entry["id"])
        except UnreadableError as error:
            yield str(error)
            continue
        if file.sha256 != entry.get("sha256"):
            yield f"{file.name}: not the file that the record names"
        files.append(file)
    claims = tuple(f.claim for f in files)
    assessment = assess(case, claims, BOXES.get(str(opened.record.get("effort")), min(BOXES.values())))
    yield from _certificates(files, assessment)
    yield from _record(stated, derive(case, assessment), case.name)


def _certificates(files: list[CertificateFile], assessment: Assessment) -> Iterator[str]:
    for file in files:
        about = [f for f in assessment.about_claims if f.subject == file.claim.identifier]
        if canonical(certificate_file(file.claim, about)) != file.text:
            results = ", ".join(f"{f.check} {f.result}" for f in about) or "none can be made"
            yield f"{file.name}: its checks and premises are not those the claim allows ({results})"
        for finding in about:
            if finding.theorem != file.claim.theorem:
                yield f"{file.name}: names theorem {file.claim.theorem!r} where {finding.theorem!r} is checked"


def derive(case: Case, assessment: Assessment) -> dict[str, Any]:
    """The record of an operating point from its certificates alone."""
    known = assessment.knowledge
    outcomes = judge_point(case, assessment.about_criteria, (), assessment.missing)
    findings = (*assessment.about_claims, *assessment.about_criteria)
    return point_data(
        PointEvidence(
            case, model_hash(case), known.equilibria, known.complete, assessment.clusters, known.claims,
            findings, (), outcomes, known.margins, None, None,
        )
    )  # fmt: skip


def _record(stated: Mapping[str, Any], derived: dict[str, Any], place: str) -> Iterator[str]:
    for part in DERIVED:
        own, ours = stated.get(part), derived[part]
        if part == "findings":
            own, ours = _rigorous(own), _rigorous(ours)
        yield from differences(own, ours, f"record.json: {place}.{part}")
    criteria = stated["criteria"]
    for name in sorted(criteria.keys() ^ derived["criteria"].keys()):
        yield f"record.json: {place}.{name}: the criteria are not those of the project file"
    for name in sorted(criteria.keys() & derived["criteria"].keys()):
        yield from _criterion(f"{place}.{name}", criteria[name], derived["criteria"][name], stated)


def _rigorous(findings: Any) -> Any:
    """The findings that are no simulation, without the counts in their details (they may differ between machines)."""
    if not isinstance(findings, list) or not all(isinstance(f, dict) for f in findings):
        return findings
    return [_without_details(f) for f in findings if f.get("check") != SAMPLED_CHECK]


def _without_details(finding: dict[str, Any]) -> dict[str, Any]:
    premises = finding.get("premises")
    if not isinstance(premises, list) or not all(isinstance(p, dict) for p in premises):
        return finding
    return {**finding, "premises": [{k: v for k, v in p.items() if k != "detail"} for p in premises]}


def _criterion(
    identifier: str, stated: dict[str, Any], derived: dict[str, Any], point: Mapping[str, Any]
) -> Iterator[str]:
    place, verdict = f"record.json: {identifier}", str(stated.get("verdict"))
    if verdict == derived["verdict"]:
        told = () if verdict in RIGOROUS else ("because",)
    elif verdict in SIMULATED and derived["verdict"] == "not established":
        told = tuple(derived.keys() - {"claim", "over", "bound", "contradiction"})
        if not _is_simulated(identifier, SIMULATED[verdict], point):
            yield f"{place}: says {verdict!r} without a simulation that says so"
    else:
        yield f"{place}: says {verdict!r}, the certificates give {derived['verdict']!r}"
        return
    yield from differences(
        {k: v for k, v in stated.items() if k not in told}, {k: v for k, v in derived.items() if k not in told}, place
    )


def _is_simulated(identifier: str, result: str, point: Mapping[str, Any]) -> bool:
    findings = point.get("findings")
    return isinstance(findings, list) and any(
        isinstance(f, dict)
        and (f.get("subject"), f.get("check"), f.get("result")) == (identifier, SAMPLED_CHECK, result)
        for f in findings
    )
