"""All criteria of one operating point, judged from one list of findings."""

from __future__ import annotations

from dossier.judgement.criteria import judge
from dossier.model.attempt import Attempt
from dossier.model.case import Case
from dossier.model.finding import Finding
from dossier.model.outcome import Outcome


def judge_point(
    case: Case, findings: tuple[Finding, ...], attempts: tuple[Attempt, ...], missing: Finding | None
) -> tuple[Outcome, ...]:
    """One outcome per criterion, in the engineer's order."""
    outcomes = []
    for criterion in case.criteria:
        subject = f"{case.name}.{criterion.name}"
        about = [f for f in findings if f.subject == subject]
        tried = [a for a in attempts if a.subject in (subject, f"{case.name}.P-{criterion.name}")]
        outcomes.append(judge(case, criterion, about, tried, missing))
    return tuple(outcomes)
