"""READ FIRST: one operating point, then one project, as a page of plain calls.

The stages (project, search, checks, judgement, evidence, report) are blind to each other and meet here.
Search finds, checks prove; what a search returns reaches a verdict only through `dossier.checks.assess`.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from pathlib import Path
from typing import Final

import dossier
from dossier.checks.assess import Assessment, assess, locate
from dossier.checks.combination import check_combination
from dossier.checks.courses import alone_on, rest_family
from dossier.checks.cover import check_cover
from dossier.checks.criteria.linear import region_and_level
from dossier.checks.equilibria import Unbounded, enclose_equilibria
from dossier.checks.linear import classify, routh_claim
from dossier.checks.listing import list_equilibria, nearest
from dossier.checks.lyapunov import check_lyapunov, ellipsoid, set_premises
from dossier.checks.movement import Movement, check_absence, check_branch, check_end
from dossier.checks.self_test import self_test
from dossier.checks.sets import covers
from dossier.checks.simulation import figure_data, run_campaign
from dossier.checks.spectral import cell_holds
from dossier.checks.spectrum import spectral_values
from dossier.evidence.provenance import Stopwatch, components, run_log
from dossier.evidence.record import certificate_file, record_data
from dossier.evidence.store import refuse_foreign_folder, write_dossier
from dossier.judgement.points import judge_point
from dossier.model.affine import spread_box
from dossier.model.attempt import Attempt
from dossier.model.case import NOMINAL, Case, Criterion
from dossier.model.claim import CellsClaim, Claim, CoverClaim, EndClaim, LyapunovClaim, RootsClaim, SpectralRegion
from dossier.model.dossier import Campaign, Evidence, PointEvidence, Provenance
from dossier.model.equilibrium import Equilibrium
from dossier.model.figures import figure
from dossier.model.finding import Enclosure, Finding
from dossier.model.loop import model_data, model_hash
from dossier.model.region import Box
from dossier.model.text import canonical
from dossier.project.faults import Fault
from dossier.project.reader import Faults, Project, read_project
from dossier.report.render import Rendered, render
from dossier.search.branch import seek_branch, seek_end
from dossier.search.cells import seek_cells
from dossier.search.conic import meter
from dossier.search.cover import seek_cover_candidate
from dossier.search.effort import EFFORTS, Effort
from dossier.search.equilibria import seed_equilibria
from dossier.search.frequency import seek_crossings
from dossier.search.goals import (
    ABOUT_SPECTRUM,
    SetTask,
    effective_scope,
    loops,
    set_tasks,
    spectral_tasks,
    stronger_levels,
)
from dossier.search.linearisation import seek_matrix
from dossier.search.quadratic import seek_quadratic
from dossier.search.worst import seek_worst

SEED: Final = 20_140
"""Seed of the simulated campaigns, so that a build can be repeated."""

END_BOXES: Final = 20_000
"""Boxes per face or box in which a branch is shown to end: a case that needs more is next to a fold."""

TIGHT: Final = "-tight"
"""Suffix of a set that lies in another with the same V: its motions are among that one's."""

Progress = Callable[[str, str], None]
"""Called with the operating point and the stage that begins."""

Sets = tuple[LyapunovClaim | CoverClaim | CellsClaim, ...]
Roots = RootsClaim | Unbounded
Found = tuple[tuple[Claim, ...], tuple[Attempt, ...]]


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


def find_roots(case: Case, effort: Effort) -> Roots:
    """Boxes around every equilibrium in the search box of `case`, or why there are none."""
    return enclose_equilibria(case, seed_equilibria(case, effort), effort.boxes)


def find_claims(case: Case, effort: Effort, progress: Progress, roots: Roots) -> Found:
    """Every claim the searches can offer for `case`, none of them believed, and what was tried."""
    listed = roots if isinstance(roots, RootsClaim) else None
    equilibria, _, _ = locate(case, listed)
    claims: list[Claim] = [] if listed is None else [listed]
    attempts: list[Attempt] = []
    if not isinstance(roots, RootsClaim):
        attempts.append(Attempt(case.name, "interval branch and bound for equilibria", "out of reach", roots.reason))
    counts = [(e, routh_claim(case, e)) for e in equilibria]
    claims += [c for _, c in counts if not isinstance(c, str)]
    chosen = next((e for e in equilibria if e.chosen), None)
    if chosen is None:
        return tuple(claims), tuple(attempts)
    attempts_there, moved, movement = follow_equilibrium(case, chosen, effort, progress)
    attempts += attempts_there
    claims += moved
    if any(isinstance(c, EndClaim) for c in moved):
        # Whatever is asked over tolerances is refuted by that; the rest is about the nominal combination.
        case = replace(case, criteria=tuple(c for c in case.criteria if effective_scope(case, c.over) == NOMINAL))
    searches = [_spectral_claims(case, chosen, movement, effort), _margin_claims(case, chosen)]
    unstable = any(e is chosen and classify(c) == "unstable" for e, c in counts)
    if unstable:
        why = "the linear part is unstable: no certificate exists"
        attempts.append(Attempt(case.name, "Lyapunov certificates", "infeasible", why))
    else:
        progress(case.name, "certificates")
        searches.append(_set_claims(case, chosen, movement, effort))
    for found, tried in searches:
        claims += found
        attempts += tried
    return tuple(claims), tuple(attempts)


def follow_equilibrium(
    case: Case, chosen: Equilibrium, effort: Effort, progress: Progress
) -> tuple[tuple[Attempt, ...], tuple[Claim, ...], Movement]:
    """Where the equilibrium lies over the tolerances, where a criterion is about them and it moves."""
    asked = any(effective_scope(case, c.over) != NOMINAL for c in case.criteria)
    if chosen.fixed_for_all or not asked:
        return (), (), Movement(chosen)
    progress(case.name, "branch")
    tried, ends = seek_end(
        case, chosen, lambda end: check_end(case, chosen, end, END_BOXES).result == "proved",
        lambda absence: check_absence(case, absence, END_BOXES).result == "proved",
    )  # fmt: skip
    if ends:
        return tried, ends, Movement(chosen)
    family = rest_family(case)
    more, claim = seek_branch(
        case, chosen, effort, lambda cell, middle: alone_on(family, cell, middle) is not None,
        lambda claim: check_branch(case, chosen, claim)[0].result == "proved",
    )  # fmt: skip
    if claim is None:
        return (*tried, *more), (), Movement(chosen)
    _, movement = check_branch(case, chosen, claim)
    return (*tried, *more), (claim,), movement or Movement(chosen)


def _wanted(case: Case) -> Iterator[tuple[Criterion, SpectralRegion, Fraction]]:
    for criterion in case.criteria:
        if criterion.claim in ABOUT_SPECTRUM:
            wanted = region_and_level(criterion, sampled=case.model.time == "sampled")
            if wanted is not None:
                yield criterion, *wanted


def _spectral_claims(case: Case, chosen: Equilibrium, movement: Movement, effort: Effort) -> Found:
    """A Lyapunov inequality per task, then the same for more than was asked, so that the reserve shows."""
    claims: list[Claim] = []
    attempts: list[Attempt] = []
    nominal = spectral_values(case, chosen)
    at_worst: dict[SpectralRegion, Mapping[str, Enclosure]] = {}
    for task in spectral_tasks(case, _wanted(case)):
        if task.over != NOMINAL and task.region not in at_worst:
            tried, worst = seek_worst(case, chosen, task.region, effort, task.worst_suffix)
            attempts += tried
            claims += [] if worst is None else [worst]
            at_worst[task.region] = nominal if worst is None else check_combination(case, chosen, worst).facts
        values = nominal if task.over == NOMINAL else at_worst[task.region]
        tried, claim = seek_matrix(
            case, chosen, task.over, task.region, task.level, effort, task.suffix, cell_holds, movement.on
        )
        attempts += tried
        if claim is None:
            continue
        for level in stronger_levels(task, values):
            more, better = seek_matrix(
                case,
                chosen,
                task.over,
                task.region,
                level,
                replace(effort, cells=1),
                task.suffix,
                cell_holds,
                movement.on,
            )
            if better is not None:
                claim = better
                attempts += more
                break
        claims.append(claim)
    return tuple(claims), tuple(attempts)


def _margin_claims(case: Case, chosen: Equilibrium) -> Found:
    claims: list[Claim] = []
    attempts: list[Attempt] = []
    for loop in loops(case):
        tried, claim = seek_crossings(case, chosen, loop)
        attempts += tried
        claims += [] if claim is None else [claim]
    return tuple(claims), tuple(attempts)


def _set_claims(case: Case, chosen: Equilibrium, movement: Movement, effort: Effort) -> Found:
    """Sets for all criteria about regions; attraction alone is sought only where the whole goal was missed."""
    claims: list[Claim] = []
    attempts: list[Attempt] = []
    missed = False
    for task in set_tasks(case, chosen):
        if task.suffix.endswith("-free") and not missed:
            continue
        tried, found = _seek_set(case, chosen, movement, task, effort)
        missed = not any(_serves(case, c, task.goal.region) for c in found)
        attempts += tried
        claims += found
    return tuple(claims), tuple(attempts)


def _seek_set(
    case: Case, chosen: Equilibrium, movement: Movement, task: SetTask, effort: Effort
) -> tuple[tuple[Attempt, ...], Sets]:
    """A set by exact Gram matrices; where it misses the region, then cell by cell, or by intervals."""
    tried: tuple[Attempt, ...] = ()
    found: tuple[LyapunovClaim, ...] = ()
    whole = Box((), ()) if task.over == NOMINAL else spread_box(case)
    place = movement.on(whole)
    if place is not None:
        tried, found = seek_quadratic(
            case, place, task.over, task.goal_at(case, place, whole), effort, task.suffix,
            lambda claim: check_lyapunov(case, chosen, claim, movement.on).result == "proved",
        )  # fmt: skip
    if any(_serves(case, c, task.goal.region) for c in found):
        return tried, found
    if task.over != NOMINAL:
        more, cells = seek_cells(
            case, chosen, movement.on, lambda rest, cell: task.goal_at(case, rest, cell), effort,
            f"{task.suffix}-cells",
            lambda claim: all(
                p.result == "proved" for p in set_premises(case, chosen, claim, movement.on, of_cell=True)
            ),
        )  # fmt: skip
        return (*tried, *more), (*found, *(() if cells is None else (cells,)))
    suffix = f"{task.suffix}-boxes" if found else task.suffix
    more, cover = seek_cover_candidate(
        case, chosen, task.goal, effort, suffix,
        lambda claim: check_cover(case, chosen, claim, effort.boxes).result == "proved",
    )  # fmt: skip
    return (*tried, *more), (*found, *(() if cover is None else (cover,)))


def _serves(case: Case, claim: LyapunovClaim | CoverClaim | CellsClaim, region: Box) -> bool:
    """Its set, or that of each of its cells, covers `region`."""
    sets = claim.cells if isinstance(claim, CellsClaim) else (claim,)
    return all(_covers(case, c, region) for c in sets)


def _covers(case: Case, claim: LyapunovClaim | CoverClaim, region: Box) -> bool:
    shape = ellipsoid(claim, len(case.model.states))
    return shape is not None and region.is_bounded and covers(shape, region)


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
        listed = roots[case.name]
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
    points = tuple(build_point(case, effort, progress, stopwatch, known.get(case.name)) for case in cases)
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
        roots = {case.name: find_roots(case, EFFORTS[effort_name]) for case in cases}
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
