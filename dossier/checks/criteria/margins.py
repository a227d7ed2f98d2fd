"""Criteria about the margins of one loop at the nominal combination (theorem T11)."""

from __future__ import annotations

from dossier.checks.criteria.common import conclude, open_question, refute, set_aside, within
from dossier.checks.knowledge import Knowledge
from dossier.model.affine import spread_box
from dossier.model.case import NOMINAL, Criterion
from dossier.model.finding import Enclosure, Finding, Premise
from dossier.model.outcome import LoopMargins


def margin_claim_id(knowledge: Knowledge, loop: str) -> str:
    """Id of the certificate that isolates the crossings of `loop`."""
    return f"{knowledge.case.name}.M-{loop}"


def establish_margins(knowledge: Knowledge, criterion: Criterion) -> tuple[Finding, ...]:
    """Findings for ``gain_margin``, ``phase_margin``, ``delay_margin`` and ``peak_sensitivity``."""
    if knowledge.chosen is None:
        return (open_question(knowledge, criterion, knowledge.why_no_equilibrium),)
    evidence = margin_claim_id(knowledge, criterion.loop)
    margins = next((m for m in knowledge.margins if m.loop == criterion.loop), None)
    if margins is None:
        return (_unmeasured(knowledge, criterion, evidence),)
    values = _quantities(criterion, margins)
    if any(v is None for v in values):
        return (open_question(knowledge, criterion, "this margin could not be enclosed"),)
    known = tuple(v for v in values if v is not None)
    return (_compare(knowledge, criterion, known, evidence),)


def _unmeasured(knowledge: Knowledge, criterion: Criterion, evidence: str) -> Finding:
    about = next((f for f in knowledge.findings if f.subject == evidence), None)
    unstable = about is not None and any(p.label == "stable" and p.result == "refuted" for p in about.premises)
    if unstable:
        why = "the closed loop is proved not to be stable at the nominal combination, so the loop has no margins"
        return set_aside(knowledge, criterion, "not applicable", why)
    reasons = [p.detail for p in about.premises if p.result != "proved" and p.detail] if about is not None else []
    why = (
        reasons[0] if reasons else knowledge.unavailable.get(criterion.loop, "the crossings of the loop were not found")
    )
    return open_question(knowledge, criterion, why)


def _quantities(criterion: Criterion, margins: LoopMargins) -> tuple[Enclosure | None, ...]:
    """What the criterion bounds; the downward gain margin counts by its size in dB."""
    if criterion.claim == "gain_margin":
        return margins.gain_up, None if margins.gain_down is None else _mirrored(margins.gain_down)
    if criterion.claim == "phase_margin":
        return (margins.phase,)
    if criterion.claim == "delay_margin":
        return (margins.delay,)
    return (margins.peak_sensitivity,)


def _mirrored(value: Enclosure) -> Enclosure:
    return Enclosure(
        None if value.upper is None else -value.upper, None if value.lower is None else -value.lower, value.unit
    )


def _compare(knowledge: Knowledge, criterion: Criterion, values: tuple[Enclosure, ...], evidence: str) -> Finding:
    """A margin without finite value meets any lower bound."""
    finite = [v for v in values if v.lower is not None or v.upper is not None]
    least = min(finite, key=lambda v: v.lower if v.lower is not None else v.upper or 0, default=values[0])
    facts = {"value": least}
    name = criterion.claim.replace("_", " ")
    judged = [within(v, criterion) for v in finite]
    if False in judged:
        return refute(
            knowledge, criterion, "T11", f"the {name} of loop {criterion.loop} violates its bound at nominal",
            "enclosed", (evidence,), {"combination": "nominal"}, facts,
        )  # fmt: skip
    if criterion.over != NOMINAL and spread_box(knowledge.case).names:
        why = f"the {name} over tolerances is not decided by this version; it is enclosed at the nominal combination"
        return set_aside(knowledge, criterion, "not attempted", why, facts)
    premise = Premise(
        "crossings", f"the closed loop is stable and the {name} is enclosed",
        "proved" if all(judged) else "undecided", "enclosed", evidence=evidence,
    )  # fmt: skip
    statement = f"the {name} of loop {criterion.loop} meets its bound at the nominal combination"
    return conclude(knowledge, criterion, "T11", statement, (knowledge.place, premise), (evidence,), facts)
