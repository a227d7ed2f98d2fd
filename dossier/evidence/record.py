"""The machine-readable record of a build: canonical data without floats (format 1)."""

from __future__ import annotations

import hashlib
from collections import Counter
from collections.abc import Mapping, Sequence
from decimal import ROUND_CEILING, ROUND_FLOOR, Context, Decimal
from fractions import Fraction
from typing import Any, Final

from dossier.model.ball import Ball
from dossier.model.claim import CellsClaim, Claim, CoverClaim, LyapunovClaim, kind_of
from dossier.model.dossier import Evidence, PointEvidence
from dossier.model.equilibrium import Equilibrium
from dossier.model.finding import Enclosure, Finding
from dossier.model.outcome import VERDICTS, LoopMargins, Outcome
from dossier.model.text import canonical, claim_to_data, encode

RECORD_FORMAT: Final = 1
CERTIFICATE_FORMAT: Final = 1
SAMPLED_CHECK: Final = "simulation"
"""Findings of this check prove nothing and are no part of a certificate."""
DIGITS: Final = 17
"""Significant digits of decimals in the record; a radius says what is lost."""


def decimal_below(value: Fraction, digits: int = DIGITS) -> str:
    """A decimal at or below `value` with `digits` significant digits."""
    return _decimal(value, digits, ROUND_FLOOR)


def decimal_above(value: Fraction, digits: int = DIGITS) -> str:
    """A decimal at or above `value` with `digits` significant digits."""
    return _decimal(value, digits, ROUND_CEILING)


def _decimal(value: Fraction, digits: int, rounding: str) -> str:
    context = Context(prec=digits, rounding=rounding, Emin=-999_999, Emax=999_999)
    result = context.divide(Decimal(value.numerator), Decimal(value.denominator))
    return "0" if result == 0 else f"{result.normalize(context)}"


def ball_data(ball: Ball) -> dict[str, str]:
    """A ball as decimal value and radius, rounded outward; exact rationals stay ``p/q``."""
    if ball.is_exact:
        return {"value": str(ball.middle), "radius": "0"}
    text = decimal_below(ball.middle)
    radius = ball.radius + abs(ball.middle - Fraction(text))
    return {"value": text, "radius": decimal_above(radius, 3)}


def enclosure_data(enclosure: Enclosure | None) -> dict[str, str] | None:
    """A measured quantity rounded outward; ``none`` where no finite value exists."""
    if enclosure is None:
        return None
    return {
        "lower": "none" if enclosure.lower is None else decimal_below(enclosure.lower),
        "upper": "none" if enclosure.upper is None else decimal_above(enclosure.upper),
        "unit": enclosure.unit,
    }


def record_data(evidence: Evidence) -> dict[str, Any]:
    """The whole record."""
    counts = Counter(o.verdict for p in evidence.points for o in p.outcomes)
    document = evidence.document
    return {
        "record": RECORD_FORMAT,
        "program": {"name": "dossier", "version": evidence.provenance.program_version},
        "project_file": evidence.project_files[0][0],
        "project_sha256": evidence.provenance.project_sha256,
        "effort": evidence.provenance.effort,
        "document": {
            "number": document.number, "title": document.title, "revision": document.revision,
            "date": document.date, "machine": document.machine, "organisation": document.organisation,
        },
        "warnings": list(evidence.warnings),
        "conclusion": {v: counts.get(v, 0) for v in VERDICTS},
        "operating_points": {p.case.name: point_data(p) for p in evidence.points},
        "components": [encode(c) for c in evidence.provenance.components],
    }  # fmt: skip


def point_data(point: PointEvidence) -> dict[str, Any]:
    """The record of one operating point."""
    return {
        "model": point.case.model.name,
        "model_sha256": point.model_hash,
        "states": list(point.case.model.state_names),
        "time": point.case.model.time,
        "equilibria": {
            "complete": point.equilibria_complete,
            "found": [_equilibrium_data(e, point.case.model.state_names) for e in point.equilibria],
            "clusters": list(point.clusters),
        },
        "certificates": [_certificate_data(c, point) for c in point.claims],
        "margins": {m.loop: _margin_data(m) for m in point.margins},
        "criteria": {o.identifier.split(".", 1)[1]: _outcome_data(o) for o in point.outcomes},
        "findings": [_finding_data(f) for f in point.findings],
        "attempts": [encode(a) for a in point.attempts],
        "campaign": None if point.campaign is None else {
            "id": point.campaign.identifier, "method": point.campaign.method, "plan": point.campaign.plan,
            "seed": point.campaign.seed, "motions": point.campaign.motions, "violations": point.campaign.violations,
            "inconclusive": point.campaign.inconclusive, "horizon": point.campaign.horizon,
            "confidence": point.campaign.confidence,
        },
        "warnings": list(point.warnings),
    }  # fmt: skip


def _equilibrium_data(equilibrium: Equilibrium, names: tuple[str, ...]) -> dict[str, Any]:
    return {
        "id": equilibrium.identifier,
        "chosen": equilibrium.chosen,
        "inside_domain": equilibrium.inside_domain,
        "fixed_for_all": equilibrium.fixed_for_all,
        "state": {n: ball_data(b) for n, b in zip(names, equilibrium.state, strict=True)},
        "class": equilibrium.stability,
        "eigenvalues": [
            {
                "re": decimal_below(e.real),
                "im": decimal_below(e.imaginary),
                "radius": decimal_above(_outer_radius(e.real, e.imaginary, e.radius), 3),
                "multiplicity": e.multiplicity,
            }
            for e in equilibrium.eigenvalues
        ],
        "remarks": list(equilibrium.remarks),
    }


def _outer_radius(real: Fraction, imaginary: Fraction, radius: Fraction) -> Fraction:
    """Radius of a disc about the printed centre that holds the disc about the exact one."""
    return radius + abs(real - Fraction(decimal_below(real))) + abs(imaginary - Fraction(decimal_below(imaginary)))


def certificate_file(claim: Claim, findings: Sequence[Finding]) -> dict[str, Any]:
    """One certificate file: the claim, and which statement of which check meets which premise of its theorem."""
    return {
        "certificate": CERTIFICATE_FORMAT,
        "claim": claim_to_data(claim),
        "checks": [
            {
                "check": f.check,
                "theorem": f.theorem,
                "statement": f.statement,
                "result": f.result,
                "premises": [
                    {"label": p.label, "statement": p.statement, "result": p.result, "strength": p.strength}
                    for p in f.premises
                ],
            }
            for f in findings
            if f.subject == claim.identifier and f.check != SAMPLED_CHECK
        ],
    }


def _certificate_data(claim: Claim, point: PointEvidence) -> dict[str, Any]:
    findings = [f for f in point.findings if f.subject == claim.identifier and f.check != SAMPLED_CHECK]
    data: dict[str, Any] = {
        "id": claim.identifier,
        "kind": kind_of(claim),
        "over": claim.over,
        "theorem": claim.theorem,
        "statement": next((f.statement for f in findings), ""),
        "checked": {f.check: f.result for f in findings},
        "file": f"certificates/{claim.identifier}.json",
        "sha256": hashlib.sha256(canonical(certificate_file(claim, point.findings)).encode()).hexdigest(),
    }
    if isinstance(claim, CellsClaim):
        data["method"] = "quadratic"
        data["cells"] = len(claim.cells)
    if isinstance(claim, LyapunovClaim | CoverClaim):
        data["method"] = claim.method if isinstance(claim, LyapunovClaim) else "interval"
        data["degree"] = max((sum(e) for e in claim.function), default=0)
        data["function"] = encode(claim.function)
        data["level"] = str(claim.level)
    return data


def _margin_data(margins: LoopMargins) -> dict[str, Any]:
    quantities = ("gain_up", "gain_down", "phase", "delay", "peak_sensitivity")
    names = [n for q in quantities for n in (q, f"{q}_at")]
    return {"evidence": margins.evidence, **{n: enclosure_data(getattr(margins, n)) for n in names}}


def _outcome_data(outcome: Outcome) -> dict[str, Any]:
    return {
        "claim": outcome.claim,
        "over": outcome.over,
        "verdict": outcome.verdict,
        "strength": outcome.strength,
        "because": outcome.because,
        "theorem": outcome.theorem,
        "evidence": list(outcome.evidence),
        "value": enclosure_data(outcome.value),
        "bound": enclosure_data(outcome.bound),
        "reserve": enclosure_data(outcome.reserve),
        "sub_scope": outcome.sub_scope,
        "counter_example": dict(outcome.counter_example),
        "currency": "current",
        "contradiction": outcome.contradiction,
    }


def _finding_data(finding: Finding) -> dict[str, Any]:
    return {
        "subject": finding.subject,
        "check": finding.check,
        "result": finding.result,
        "strength": finding.strength,
        "over": finding.over,
        "theorem": finding.theorem,
        "statement": finding.statement,
        "premises": [encode(p) for p in finding.premises],
        "facts": {n: enclosure_data(e) for n, e in _sorted(finding.facts)},
        "evidence": list(finding.evidence),
        "counter_example": dict(finding.counter_example),
    }


def _sorted(facts: Mapping[str, Enclosure]) -> list[tuple[str, Enclosure]]:
    return sorted(facts.items())
