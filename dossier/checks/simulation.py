"""Try to refute criteria and proved sets by simulated motions; what survives is supported, never proved.

Evaluates the formulas by its own route (`dossier.checks.field`).  A violation counts only when a far more
accurate motion shows it too, by a thousand times the estimated error; it is then `floating`, not enclosed.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import Final

import numpy as np
from numpy.typing import NDArray

from dossier.checks.campaign import Group, confidence_of, rounded, summary_of
from dossier.checks.field import Columns, Flow, Formulas, compile_field
from dossier.checks.portrait import figure_data
from dossier.checks.starts import boundary_points, polynomial_values, region_starts, scale_of, set_starts
from dossier.checks.suspicion import (
    TRIED,
    confirm_rise,
    largest_excess,
    not_attracted,
    rows_of,
    worst_confirmed,
)
from dossier.checks.trial import Pace, Trial, run_trial
from dossier.checks.watch import ROUNDING, FallRecorder, Recorder, watch
from dossier.model.case import NOMINAL, Case, Criterion, Scope
from dossier.model.claim import CoverClaim, LyapunovClaim
from dossier.model.dossier import Campaign
from dossier.model.equilibrium import Equilibrium
from dossier.model.finding import Enclosure, Finding
from dossier.model.region import Box

__all__ = ["figure_data", "run_campaign"]

SIMULATED: Final = ("attraction", "limits_kept", "excursion")
"""Claims about motions that a campaign tries to refute."""

BOUNDARY_MOTIONS: Final = 200
"""Motions from the boundary of one proved set; V is watched along all of them."""

RISE: Final = 1e-6
"""Rise of V from sight to sight, as a share of the level, that is looked into; above the error per step."""

SetClaim = LyapunovClaim | CoverClaim


def run_campaign(
    case: Case, equilibrium: Equilibrium, lyapunov_claims: Sequence[SetClaim], motions: int, seed: int
) -> tuple[Campaign | None, tuple[Finding, ...]]:
    """Simulate from the regions of the criteria and from the boundary of the proved sets.

    `motions` independent draws per region and scope, besides the corners.  One finding per criterion that
    speaks of motions, and per proved set.  No campaign where there is nothing to simulate.
    """
    field = compile_field(case)
    identifier = f"{case.name}.M1"
    groups = [_run_group(case, equilibrium, field, *key, motions, seed + i) for i, key in enumerate(_keys(case))]
    findings, broken = [], []
    for group in groups:
        for criterion in group.criteria:
            finding, violating = _judge(case, group, criterion, identifier, seed)
            findings.append(finding)
            broken.append((group, violating))
    falls = [
        _run_set(case, equilibrium, field, claim, min(motions, BOUNDARY_MOTIONS), seed) for claim in lyapunov_claims
    ]
    for claim, trial in zip(lyapunov_claims, falls, strict=True):
        findings.append(_judge_set(case, claim, trial, identifier))
    trials = [g.trial for g in groups] + falls
    if not trials:
        return None, ()
    return summary_of(case, identifier, groups, falls, tuple(findings), broken, seed), tuple(findings)


def _keys(case: Case) -> list[tuple[tuple[Criterion, ...], Box, Scope]]:
    """Criteria about motions, by region of starts and scope; those without a bounded region cannot be sampled."""
    groups: dict[tuple[Box, Scope], list[Criterion]] = {}
    for criterion in case.criteria:
        region = criterion.region or case.region
        if criterion.claim in SIMULATED and not criterion.under and region.is_bounded:
            groups.setdefault((region, criterion.over), []).append(criterion)
    return [(tuple(criteria), region, over) for (region, over), criteria in groups.items()]


def _run_group(
    case: Case, equilibrium: Equilibrium, field: Formulas, criteria: tuple[Criterion, ...], region: Box, over: Scope,
    motions: int, seed: int,
) -> Group:  # fmt: skip
    random = np.random.default_rng(seed)
    starts = region_starts(case, equilibrium, field, region, over, motions, random)
    trial = run_trial(case, field, starts, watch(case, criteria), scale_of(case, region))
    return Group(criteria, region, over, trial)


def _run_set(case: Case, equilibrium: Equilibrium, field: Formulas, claim: SetClaim, count: int, seed: int) -> Trial:
    random = np.random.default_rng(seed)
    scale = scale_of(case, case.region)
    level = float(claim.level)
    offsets = boundary_points(claim.function, level, scale, count, random)
    starts = set_starts(case, equilibrium, field, offsets, claim.over, random)

    def fall(at: Columns) -> Columns:
        return polynomial_values(claim.function, at) / level

    def recorder(flow: Flow, pace: Pace) -> Recorder:
        return FallRecorder(watched, flow, scale, (pace.dwell, pace.rest), fall)

    watched = watch(case, ())
    return run_trial(case, field, starts, watched, scale, recorder)


def _judge(
    case: Case, group: Group, criterion: Criterion, identifier: str, seed: int
) -> tuple[Finding, NDArray[np.bool_]]:
    """The finding about one criterion and the motions that seem to violate it."""
    trial = group.trial
    rows = rows_of(trial, criterion)
    excess, at, row = largest_excess(trial, rows)
    violating = (excess > ROUNDING) | not_attracted(trial, criterion)
    violation = worst_confirmed(case, trial, criterion, violating, (excess, at, row))
    subject = f"{case.name}.{criterion.name}"
    facts = _facts(trial, criterion)
    if violation is not None:
        return Finding(
            subject, "simulation", "refuted", "floating", criterion.over, "", violation.statement, (), facts,
            (identifier,), violation.counter_example,
        ), violating  # fmt: skip
    open_motions = ~violating & ~trial.converged
    if violating.any() or open_motions.any() or trial.starts.lost:
        statement = _open_statement(trial, violating, open_motions)
    else:
        facts["motions without violation"] = _count(violating.size)
        statement = _survived_statement(trial, group.over, seed)
    return Finding(
        subject, "simulation", "undecided", "sampled", criterion.over, "", statement, (), facts, (identifier,)
    ), violating  # fmt: skip


def _count(number: int) -> Enclosure:
    return Enclosure(Fraction(number), Fraction(number), "1")


def _facts(trial: Trial, criterion: Criterion) -> dict[str, Enclosure]:
    facts = {"motions simulated": _count(trial.motions.endings.size)}
    if criterion.claim == "excursion":
        row = trial.watched.place(criterion.name, "quantity")
        least, greatest = float(trial.recorder.least[row].min()), float(trial.recorder.greatest[row].max())
        if np.isfinite(least) and np.isfinite(greatest):
            facts["range seen"] = Enclosure(rounded(least), rounded(greatest), "SI")
    return facts


def _open_statement(trial: Trial, violating: NDArray[np.bool_], undecided: NDArray[np.bool_]) -> str:
    parts = []
    if violating.any():
        parts.append(f"{np.count_nonzero(violating)} seemed to violate it, not by enough to count")
    if undecided.any():
        parts.append(f"{np.count_nonzero(undecided)} neither violated it nor converged within the horizon")
    if trial.starts.lost:
        parts.append(f"{trial.starts.lost} more were left out, for no equilibrium was found at their parameters")
    return f"of {violating.size} simulated motions " + " and ".join(parts)


def _survived_statement(trial: Trial, over: Scope, seed: int) -> str:
    drawn = int(np.count_nonzero(trial.starts.drawn))
    where = "the region" if over == NOMINAL else "region and tolerances"
    statement = (
        f"no violation occurred in {trial.starts.drawn.size} motions ({drawn} drawn uniformly from {where}, the others "
        f"from corners; seed {seed}), each followed until it had converged"
    )
    confidence = confidence_of(drawn)
    return f"{statement}; {confidence}" if confidence else statement


def _judge_set(case: Case, claim: SetClaim, trial: Trial, identifier: str) -> Finding:
    """V must fall along motions from the boundary of its set."""
    recorder = trial.recorder
    assert isinstance(recorder, FallRecorder)
    facts = {"motions simulated": _count(trial.motions.endings.size)}
    scope = claim.over
    for column in np.argsort(-recorder.rise, kind="stable")[:TRIED]:
        if recorder.rise[column] > RISE:
            example = confirm_rise(case, trial, recorder, int(column))
            if example is not None:
                return Finding(
                    claim.identifier, "simulation", "refuted", "floating", scope, "",
                    "V rises along a simulated motion that starts on the boundary of its set", (), facts,
                    (identifier,), example,
                )  # fmt: skip
    statement = f"V fell along all {trial.motions.endings.size} motions simulated from the boundary of its set"
    if (recorder.rise > RISE).any():
        statement = "V seemed to rise along a simulated motion, not by enough to count"
    return Finding(
        claim.identifier, "simulation", "undecided", "sampled", scope, "", statement, (), facts, (identifier,)
    )
