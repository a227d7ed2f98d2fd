"""READ FIRST: one operating point, then one project, as a page of plain calls.

The stages (project, search, checks, judgement, evidence, report) are blind to each other and meet here.
Search finds, checks prove; what a search returns reaches a verdict only through `dossier.checks`.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Final

import dossier
from dossier.checks.assess import Assessment, assess
from dossier.checks.simulation import figure_data, run_campaign
from dossier.evidence.provenance import Stopwatch, components, run_log
from dossier.evidence.record import record_data
from dossier.evidence.store import refuse_foreign_folder, write_dossier
from dossier.goals import search_claims
from dossier.judgement.points import judge_point
from dossier.model.case import Case
from dossier.model.dossier import Evidence, PointEvidence, Provenance
from dossier.model.loop import model_data, model_hash
from dossier.model.text import canonical, claim_to_data
from dossier.project.reader import Faults, Project, read_project
from dossier.report.render import Rendered, render
from dossier.search.effort import EFFORTS, Effort

SEED: Final = 20_140
"""Seed of every pseudo-random sequence, so that a build can be repeated."""

Progress = Callable[[str, str], None]
"""Called with the operating point and the stage that begins."""


def build_point(case: Case, effort: Effort, progress: Progress, stopwatch: Stopwatch) -> PointEvidence:
    """Everything about one operating point; a plain function of its arguments."""
    with stopwatch.stage("search"):
        progress(case.name, "search")
        claims, attempts = search_claims(case, effort)
    with stopwatch.stage("proof"):
        progress(case.name, "proof")
        assessment = assess(case, claims, effort.boxes)
    with stopwatch.stage("simulation"):
        progress(case.name, "simulation")
        campaign, sampled = _simulate(case, assessment, effort)
    outcomes = judge_point(case, (*assessment.about_criteria, *sampled), attempts, assessment.missing)
    figure = None
    if assessment.knowledge.chosen is not None:
        figure = figure_data(case, assessment.knowledge.chosen, assessment.proved_sets)
    return PointEvidence(
        case, model_hash(case), assessment.knowledge.equilibria, assessment.knowledge.complete, assessment.clusters,
        assessment.knowledge.claims, (*assessment.about_claims, *assessment.about_criteria, *sampled),
        attempts, outcomes, assessment.knowledge.margins, campaign, figure, assessment.warnings,
    )  # fmt: skip


def _simulate(case: Case, assessment: Assessment, effort: Effort):  # noqa: ANN202 - the pair run_campaign returns
    chosen = assessment.knowledge.chosen
    if chosen is None:
        return None, ()
    return run_campaign(case, chosen, assessment.proved_sets, effort.motions, SEED)


@dataclass(frozen=True, slots=True)
class Build:
    """A finished build: its evidence, what was written where, and whether the PDF could be made."""

    evidence: Evidence
    rendered: Rendered
    folder: Path
    written: tuple[Path, ...]
    warnings: tuple[str, ...]
    stopwatch: Stopwatch


def build_evidence(
    project: Project, cases: tuple[Case, ...], effort_name: str, command: str, progress: Progress, stopwatch: Stopwatch
) -> Evidence:
    """All operating points of `cases`, in order."""
    effort = EFFORTS[effort_name]
    points = tuple(build_point(case, effort, progress, stopwatch) for case in cases)
    package = Path(dossier.__file__).parent
    provenance = Provenance(
        dossier.__version__, project.sha256, command, effort_name, components(package, dossier.__version__)
    )
    files = tuple((name, _sha256(content)) for name, content in project.files)
    return Evidence(project.document, project.assumptions, points, provenance, files)


def _sha256(content: bytes) -> str:
    import hashlib

    return hashlib.sha256(content).hexdigest()


def evidence_files(project: Project, evidence: Evidence) -> dict[str, bytes]:
    """Every machine-readable file of the output folder, by relative name."""
    files: dict[str, bytes] = {
        "record.json": canonical(record_data(evidence)).encode(),
        "model.json": canonical(
            {p.case.name: {"sha256": p.model_hash, "loop": model_data(p.case)} for p in evidence.points}
        ).encode(),
    }
    for point in evidence.points:
        for claim in point.claims:
            files[f"certificates/{claim.identifier}.json"] = canonical(claim_to_data(claim)).encode()
    for name, content in project.files:
        files[f"project/{name}"] = content
    return files


def select(project: Project, only: tuple[str, ...]) -> tuple[Case, ...] | str:
    """The chosen operating points, or a sentence that names what is unknown."""
    known = {c.name: c for c in project.cases}
    unknown = [n for n in only if n not in known]
    if unknown:
        return f"unknown operating point {', '.join(unknown)}; the project has {', '.join(known)}"
    return tuple(known[n] for n in only) if only else project.cases


def build(
    path: Path, folder: Path | None, only: tuple[str, ...], effort_name: str, progress: Progress
) -> Build | Faults | str:
    """Read, search, prove, judge, render and write one project.

    Returns the faults of a faulty project, or one sentence for a wrong request; nothing is written then.
    Raises NotADossierError for a foreign output folder, OSError where files cannot be written.
    """
    stopwatch = Stopwatch()
    with stopwatch.stage("reading"):
        progress("", "reading")
        project = read_project(path)
    if isinstance(project, Faults):
        return project
    cases = select(project, only)
    if isinstance(cases, str):
        return cases
    target = folder or path.parent / ("out" if not only else "out-" + "-".join(only))
    if only and target.exists():
        return f"--only writes to a new folder, but {target} exists; name another with --out"
    refuse_foreign_folder(target)
    command = f"dossier build {path.name} --effort {effort_name}" + "".join(f" --only {n}" for n in only)
    evidence = build_evidence(project, cases, effort_name, command, progress, stopwatch)
    files = evidence_files(project, evidence)
    with stopwatch.stage("rendering"):
        progress("", "rendering")
        rendered = render(evidence, _attachments(files))
    files["dossier.html"] = rendered.html.encode()
    if isinstance(rendered.pdf, bytes):
        files["dossier.pdf"] = rendered.pdf
    files.update({f"figures/{name}": content for name, content in rendered.figures})
    with stopwatch.stage("writing"):
        progress("", "writing")
        written = write_dossier(target, files, run_log(stopwatch, {"effort": effort_name}))
    return Build(evidence, rendered, target, written, project.warnings, stopwatch)


def _attachments(files: dict[str, bytes]) -> tuple[tuple[str, bytes, str], ...]:
    kinds = {".json": "application/json", ".yaml": "application/yaml", ".yml": "application/yaml"}
    return tuple((n, c, kinds.get(Path(n).suffix, "text/plain")) for n, c in sorted(files.items()))
