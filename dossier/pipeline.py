"""READ FIRST: one operating point, then one project, as a page of plain calls.

The stages (project, search, checks, judgement, evidence, report) are blind to each other and meet here.
Search finds, checks prove; what a search returns reaches a verdict only through `dossier.checks.assess`.
"""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path
from typing import Final

import dossier
from dossier.checks.assess import Assessment, assess
from dossier.checks.listing import list_equilibria, nearest
from dossier.checks.self_test import self_test
from dossier.checks.simulation import figure_data, run_campaign
from dossier.claims import Progress, Roots, find_claims, find_roots
from dossier.evidence.provenance import Stopwatch, components, run_log
from dossier.evidence.record import certificate_file, record_data
from dossier.evidence.store import refuse_foreign_folder, write_dossier
from dossier.judgement.points import judge_point
from dossier.model.attempt import Attempt
from dossier.model.case import Case
from dossier.model.claim import RootsClaim
from dossier.model.dossier import Campaign, Evidence, PointEvidence, Provenance
from dossier.model.equilibrium import Equilibrium
from dossier.model.figures import figure
from dossier.model.finding import Finding
from dossier.model.loop import model_data, model_hash
from dossier.model.text import canonical
from dossier.project.faults import Fault
from dossier.project.reader import Faults, Project, read_project
from dossier.report.render import Rendered, render
from dossier.search.conic import meter
from dossier.search.effort import EFFORTS, Effort

SEED: Final = 20_140
"""Seed of the simulated campaigns, so that a build can be repeated."""

TIGHT: Final = "-tight"
"""Suffix of a set that lies in another with the same V: its motions are among that one's."""


def build_point(
    case: Case, effort: Effort, progress: Progress, stopwatch: Stopwatch, roots: Roots | None = None
) -> PointEvidence:
    """Everything about one operating point; a plain function of its arguments.

    `roots` is what `find_roots` gives; it is sought here where it is not handed in.
    """
    with stopwatch.stage("search"):
        progress(case.name, "search")
        claims, attempts = find_claims(case, effort, progress, roots or find_roots(case, effort))
    with stopwatch.stage("proof"):
        progress(case.name, "proof")
        assessment = assess(case, claims, effort.boxes)
    with stopwatch.stage("simulation"):
        progress(case.name, "simulation")
        campaign, sampled = simulate(case, assessment, effort)
    chosen = assessment.knowledge.chosen
    figure = None if chosen is None else figure_data(case, chosen, assessment.proved_sets)
    outcomes = judge_point(case, (*assessment.about_criteria, *sampled), attempts, assessment.missing)
    return PointEvidence(
        case, model_hash(case), assessment.knowledge.equilibria, assessment.knowledge.complete, assessment.clusters,
        claims, (*assessment.about_claims, *assessment.about_criteria, *sampled), attempts, outcomes,
        assessment.knowledge.margins, campaign, figure,
    )  # fmt: skip


def _guarded_point(
    case: Case, effort: Effort, progress: Progress, stopwatch: Stopwatch, roots: Roots | None
) -> PointEvidence:
    """As `build_point`; a fault of the program in one operating point does not lose the others."""
    try:
        return build_point(case, effort, progress, stopwatch, roots)
    except Exception as error:  # a bug: said in the dossier and by the exit code
        what = f"a fault of the program ended its analysis ({type(error).__name__}: {error})"
    attempt = Attempt(case.name, "analysis of the operating point", "internal fault", what)
    warnings = (f"{what}; nothing about it is established.",)
    try:
        assessment = assess(case, (), effort.boxes)
    except Exception:  # the checks fail too: then nothing at all is said
        outcomes = judge_point(case, (), (attempt,), None)
        return PointEvidence(
            case, model_hash(case), (), False, (), (), (), (attempt,), outcomes, (), None, None, warnings
        )  # fmt: skip
    known = assessment.knowledge
    return PointEvidence(
        case, model_hash(case), known.equilibria, known.complete, assessment.clusters, (),
        (*assessment.about_claims, *assessment.about_criteria), (attempt,),
        judge_point(case, assessment.about_criteria, (attempt,), assessment.missing), known.margins, None, None,
        warnings,
    )  # fmt: skip


def simulate(case: Case, assessment: Assessment, effort: Effort) -> tuple[Campaign | None, tuple[Finding, ...]]:
    """The campaign that tries to refute, where there is an operating point to start around."""
    chosen = assessment.knowledge.chosen
    if chosen is None:
        return None, ()
    largest = [c for c in assessment.proved_sets if not c.identifier.endswith(TIGHT)]
    return run_campaign(case, chosen, largest, effort.motions, SEED)


@dataclass(frozen=True, slots=True)
class Build:
    """A finished build: its evidence, what was written where, and whether the PDF could be made."""

    evidence: Evidence
    rendered: Rendered
    folder: Path
    written: tuple[Path, ...]
    warnings: tuple[str, ...]
    stopwatch: Stopwatch


def ambiguous_guesses(project: Project, cases: tuple[Case, ...], roots: Mapping[str, Roots]) -> tuple[Fault, ...]:
    """A fault for every operating point whose guess is about equally far from several equilibria.

    Only the list of equilibria can tell; whichever was taken, its verdicts might not be about the point meant.
    """
    faults = []
    for case in cases:
        listed = roots.get(case.name)
        rivals = nearest(case, list_equilibria(case, listed)) if isinstance(listed, RootsClaim) else ()
        if len(rivals) > 1 and case.name in project.guesses:
            guess = project.guesses[case.name]
            places = "; ".join(_place(case, e) for e in rivals)
            faults.append(
                Fault(
                    project.files[0][0], guess.line, guess.column,
                    f"near of {case.name} is about equally far from {len(rivals)} equilibria", guess.text,
                    "a guess much nearer to one of them (distances in half widths of the region)", f"in SI: {places}",
                )
            )  # fmt: skip
    return tuple(faults)


def _place(case: Case, equilibrium: Equilibrium) -> str:
    pairs = zip(case.model.state_names, equilibrium.state, strict=True)
    return ", ".join(f"{name} = {figure(ball.middle)}" for name, ball in pairs)


def build_evidence(
    project: Project, cases: tuple[Case, ...], effort_name: str, command: str, progress: Progress,
    stopwatch: Stopwatch, roots: Mapping[str, Roots] | None = None,
) -> Evidence:  # fmt: skip
    """All operating points of `cases`, in order; `roots` as for `build_point`, by operating point."""
    tests = self_test()
    failed = [name for name, _, _, passed in tests if not passed]
    if failed:
        raise ArithmeticError(f"this machine does not compute as the proofs assume: {', '.join(failed)}")
    effort = EFFORTS[effort_name]
    known = roots or {}
    points = tuple(_guarded_point(case, effort, progress, stopwatch, known.get(case.name)) for case in cases)
    package = Path(dossier.__file__).parent
    provenance = Provenance(
        dossier.__version__,
        project.sha256,
        command,
        effort_name,
        components(package, dossier.__version__),
        tuple((name, str(known), str(found), passed) for name, known, found, passed in tests),
    )
    files = tuple((name, _sha256(content)) for name, content in project.files)
    return Evidence(project.document, project.assumptions, points, provenance, files, project.warnings)


def _sha256(content: bytes) -> str:
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
            text = canonical(certificate_file(claim, point.findings))
            files[f"certificates/{claim.identifier}.json"] = text.encode()
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
    with stopwatch.stage("search"):
        progress("", "equilibria")
        roots = _all_roots(cases, EFFORTS[effort_name])
    ambiguous = ambiguous_guesses(project, cases, roots)
    if ambiguous:
        return Faults(ambiguous)
    evidence = build_evidence(project, cases, effort_name, command, progress, stopwatch, roots)
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
        written = write_dossier(target, files, run_log(stopwatch, {"effort": effort_name, "conic": conic_log()}))
    return Build(evidence, rendered, target, written, project.warnings, stopwatch)


def _all_roots(cases: tuple[Case, ...], effort: Effort) -> dict[str, Roots]:
    """The roots by operating point; where a fault of the program prevents it, `build_point` meets it again."""
    roots: dict[str, Roots] = {}
    for case in cases:
        with suppress(Exception):
            roots[case.name] = find_roots(case, effort)
    return roots


def conic_log() -> dict[str, float]:
    """Programs solved by this process, seconds spent stating and solving them, and inside the solver alone."""
    return {
        "programs": meter.programs,
        "seconds": round(meter.seconds, 3),
        "seconds_inside_solver": round(meter.solver_seconds, 3),
    }


def _attachments(files: dict[str, bytes]) -> tuple[tuple[str, bytes, str], ...]:
    kinds = {".json": "application/json", ".yaml": "application/yaml", ".yml": "application/yaml"}
    return tuple((n, c, kinds.get(Path(n).suffix, "text/plain")) for n, c in sorted(files.items()))
