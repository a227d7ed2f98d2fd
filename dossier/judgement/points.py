"""All criteria of one operating point, judged from one list of findings."""

from __future__ import annotations

from collections.abc import Iterable

from dossier.judgement.criteria import dispute, judge
from dossier.model.attempt import Attempt
from dossier.model.case import Case
from dossier.model.finding import Finding
from dossier.model.outcome import Outcome


def judge_point(
    case: Case, findings: tuple[Finding, ...], attempts: tuple[Attempt, ...], missing: Finding | None
) -> tuple[Outcome, ...]:
    """One outcome per criterion, in the engineer's order.

    Where two checks of one certificate disagree, no criterion that rests on it is called proved.
    """
    disputed = _disputed(findings)
    outcomes = []
    for criterion in case.criteria:
        subject = f"{case.name}.{criterion.name}"
        about = [f for f in findings if f.subject == subject]
        tried = [a for a in attempts if a.subject in (subject, f"{case.name}.P-{criterion.name}")]
        outcome = judge(case, criterion, about, tried, missing)
        against = next((disputed[e] for e in outcome.evidence if e in disputed), None)
        outcomes.append(outcome if against is None or outcome.verdict != "proved" else dispute(outcome, against))
    return tuple(outcomes)


def _disputed(findings: Iterable[Finding]) -> dict[str, Finding]:
    """Subjects that one check proved and another refuted, with the refutation."""
    proved = {f.subject for f in findings if f.result == "proved" and f.is_rigorous}
    return {f.subject: f for f in findings if f.result == "refuted" and f.subject in proved}
