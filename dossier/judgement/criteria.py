"""Verdict on each criterion from the findings about it: one outcome, its value, bound and reserve."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction
from typing import Final

from dossier.model.attempt import Attempt
from dossier.model.case import Case, Criterion, value_of
from dossier.model.finding import Enclosure, Finding
from dossier.model.outcome import Outcome, Verdict

LATER_CLAIMS: Final = {
    "global_attraction": "global certificates",
    "settling_time": "settling-time certificates",
    "parameter_margin": "parameter margins",
    "invariance": "invariance under disturbances",
    "ultimate_bound": "ultimate bounds",
}
"""Claims that are read and checked but not yet decided by this version, and what they would need."""

STRENGTH_ORDER: Final = ("exact", "enclosed", "floating", "sampled")


def judge(
    case: Case,
    criterion: Criterion,
    findings: Sequence[Finding],
    attempts: Sequence[Attempt],
    missing: Finding | None,
) -> Outcome:
    """The outcome of `criterion`.

    `findings` are those whose subject is the criterion; `missing` is the rigorous finding that the model has
    no equilibrium where one is needed, if there is one.
    """
    blank = Outcome(f"{case.name}.{criterion.name}", criterion.claim, criterion.over, "not established", None, "", "")
    if criterion.claim in LATER_CLAIMS:
        return replace(
            blank, verdict="not attempted", because=f"This version does not decide {LATER_CLAIMS[criterion.claim]}."
        )
    if criterion.under:
        return replace(
            blank, verdict="not attempted", because="This version does not decide claims under disturbances."
        )
    if missing is not None and criterion.claim not in ("existence", "equilibria_listed"):
        return replace(
            blank, verdict="no operating point", strength=missing.strength, theorem=missing.theorem,
            because=_sentence(missing.statement), evidence=missing.evidence,
        )  # fmt: skip
    return _judge_findings(blank, criterion, list(findings), attempts)


def _judge_findings(
    blank: Outcome, criterion: Criterion, findings: list[Finding], attempts: Sequence[Attempt]
) -> Outcome:
    proofs = [f for f in findings if f.result == "proved" and f.is_rigorous]
    refutations = [f for f in findings if f.result == "refuted" and f.is_rigorous]
    contradictions = [f for f in findings if f.result == "refuted" and not f.is_rigorous]
    unmet = [f for f in findings if f.result == "not run"]
    if proofs and refutations:
        outcome = _from(blank, criterion, "refuted", refutations[0])
        return replace(
            outcome, contradiction=True,
            because=f"Internal contradiction: {refutations[0].statement}; but also proved: {proofs[0].statement}.",
            evidence=(*refutations[0].evidence, *proofs[0].evidence),
        )  # fmt: skip
    if refutations:
        return _from(blank, criterion, "refuted", _strongest(refutations))
    if proofs:
        outcome = _from(blank, criterion, "proved", _best(proofs, criterion))
        return dispute(outcome, contradictions[0]) if contradictions else outcome
    if contradictions:
        return _from(blank, criterion, "contradicted", contradictions[0])
    if unmet:
        return _set_aside(blank, criterion, unmet[0])
    return _open(blank, criterion, findings, attempts)


def dispute(outcome: Outcome, against: Finding) -> Outcome:
    """A proof that simulated evidence speaks against: one of the two is wrong, so nothing is called proved."""
    return replace(
        outcome, verdict="contradicted", contradiction=True,
        because=f"Internal contradiction: {against.statement}; but also proved: {_lower(outcome.because)}",
        counter_example=against.counter_example, evidence=(*outcome.evidence, *against.evidence), reserve=None,
    )  # fmt: skip


def _from(blank: Outcome, criterion: Criterion, verdict: Verdict, finding: Finding) -> Outcome:
    value = finding.facts.get("bound", finding.facts.get("value"))
    bound = stated_bound(criterion)
    reserve = None
    if verdict == "proved" and value is not None and bound is not None:
        reserve = reserve_of(value, bound, finding.facts.get("equilibrium value"))
    return replace(
        blank, verdict=verdict, strength=finding.strength, theorem=finding.theorem,
        because=_sentence(finding.statement), evidence=finding.evidence, value=value, bound=bound,
        reserve=reserve, counter_example=finding.counter_example,
    )  # fmt: skip


def _set_aside(blank: Outcome, criterion: Criterion, finding: Finding) -> Outcome:
    verdict: Verdict = "not attempted" if finding.premises[0].label == "not attempted" else "not applicable"
    return replace(
        blank, verdict=verdict, because=_sentence(finding.statement), value=finding.facts.get("value"),
        bound=stated_bound(criterion),
    )  # fmt: skip


def _strongest(findings: list[Finding]) -> Finding:
    return min(findings, key=lambda f: STRENGTH_ORDER.index(f.strength))


def _best(proofs: list[Finding], criterion: Criterion) -> Finding:
    """The strongest proof; among equals the one with the largest reserve."""

    def key(finding: Finding) -> tuple[Fraction, int]:
        outcome_value = finding.facts.get("bound", finding.facts.get("value"))
        bound = stated_bound(criterion)
        reserve = None
        if outcome_value is not None and bound is not None:
            reserve = reserve_of(outcome_value, bound, finding.facts.get("equilibrium value"))
        worth = Fraction(0) if reserve is None or reserve.lower is None else reserve.lower
        return -worth, STRENGTH_ORDER.index(finding.strength)

    return min(proofs, key=key)


def _open(blank: Outcome, criterion: Criterion, findings: list[Finding], attempts: Sequence[Attempt]) -> Outcome:
    """Not established, or supported where a sampling campaign found no violation."""
    scales = [f.facts["proved scale of the region"] for f in findings if "proved scale of the region" in f.facts]
    tried = [a for a in attempts if a.remark]
    reasons = [f.statement for f in findings if f.check != "simulation" and f.result == "undecided"]
    missing = [
        f"{p.statement}: {p.detail or 'not shown'}"
        for f in findings
        if f.check != "simulation"
        for p in f.premises
        if p.result != "proved"
    ]
    why = missing[0] if missing else reasons[0] if reasons else "no check could decide it"
    if not missing and tried:
        why += f"; the last attempt, {tried[-1].method}, ended with: {tried[-1].remark}"
    outcome = replace(blank, because=f"Not shown: {_lower(why)}.".replace("..", "."), bound=stated_bound(criterion))
    best = max((s.lower for s in scales if s.lower is not None), default=None)
    if best is not None and best > 0:
        outcome = replace(outcome, sub_scope=f"the same for {float(best):.4g} times the region of starts")
    sampled = next((f for f in findings if f.check == "simulation" and f.result == "undecided"), None)
    if sampled is not None and sampled.facts.get("motions without violation"):
        return replace(
            outcome, verdict="supported", strength="sampled",
            because=f"{_sentence(sampled.statement)} This is not a proof. {outcome.because}",
            evidence=sampled.evidence,
        )  # fmt: skip
    return outcome


def _sentence(text: str) -> str:
    return text[:1].upper() + text[1:].rstrip(".") + "."


def _lower(text: str) -> str:
    return text[:1].lower() + text[1:] if text[1:2].islower() else text


def stated_bound(criterion: Criterion) -> Enclosure | None:
    """What the criterion allows: SI values (dB for gains), each end on the safe side; None for a yes-no claim."""
    lower = criterion.between[0] if criterion.between else criterion.at_least
    upper = criterion.between[1] if criterion.between else criterion.at_most
    if lower is None and upper is None:
        return None
    unit = next(q.unit for q in (lower, upper) if q is not None)
    return Enclosure(
        None if lower is None else value_of(lower).upper, None if upper is None else value_of(upper).lower, unit
    )


def reserve_of(value: Enclosure, bound: Enclosure, at_rest: Enclosure | None) -> Enclosure | None:
    """How much of the way to the bound is left, the smaller over both sides; dimensionless.

    Along motions: (limit - bound)/(limit - equilibrium value).  Otherwise relative to the limit itself.
    """
    shares: list[Fraction] = []
    if bound.lower is not None and value.lower is not None:
        base = abs(bound.lower) if at_rest is None or at_rest.upper is None else at_rest.upper - bound.lower
        if base > 0:
            shares.append((value.lower - bound.lower) / base)
    if bound.upper is not None and value.upper is not None:
        base = abs(bound.upper) if at_rest is None or at_rest.lower is None else bound.upper - at_rest.lower
        if base > 0:
            shares.append((bound.upper - value.upper) / base)
    if not shares:
        return None
    least = min(shares)
    return Enclosure(least, least, "1")
