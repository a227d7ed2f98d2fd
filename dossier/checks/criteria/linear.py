"""Criteria about the linear part: stability, decay, damping, contraction (theorems T1, T2, T8)."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from typing import Final

from dossier.checks.combination import BOUNDARY, OUTSIDE, count_of, words_of
from dossier.checks.criteria.common import (
    conclude,
    open_question,
    refute,
    refute_by_end,
    set_aside,
    stated_bounds,
    within,
)
from dossier.checks.knowledge import Knowledge
from dossier.checks.linear import routh_claim_id
from dossier.checks.lyapunov import certified_field
from dossier.model.affine import spread_box
from dossier.model.case import NOMINAL, Case, Criterion, at_combination
from dossier.model.claim import CombinationClaim, MatrixClaim, RouthClaim, SpectralRegion
from dossier.model.equilibrium import Equilibrium
from dossier.model.finding import SCALE, Enclosure, Finding
from dossier.model.polynomial import NotRational

QUANTITY: Final = {
    "decay_rate": "decay rate",
    "damping_ratio": "damping ratio",
    "contraction": "contraction",
    "exponential_stability": "decay rate",
}
"""Which spectral value each criterion bounds."""


def region_and_level(criterion: Criterion, *, sampled: bool) -> tuple[SpectralRegion, Fraction] | None:
    """The region of the complex plane that shows the criterion, and its level; None where another route is needed."""
    lower, upper = stated_bounds(criterion)
    if criterion.claim == "contraction":
        return None if upper is None else ("disc", upper)
    if criterion.claim == "damping_ratio":
        return None if lower is None or sampled or lower >= 1 else ("sector", max(lower, Fraction(0)))
    if sampled:
        return None if lower else ("disc", Fraction(1))
    return "half-plane", max(lower or Fraction(0), Fraction(0))


def establish_linear(knowledge: Knowledge, criterion: Criterion) -> tuple[Finding, ...]:
    """Findings for stability, ``decay_rate``, ``damping_ratio`` and ``contraction``."""
    equilibrium = knowledge.chosen
    if equilibrium is None:
        return (open_question(knowledge, criterion, knowledge.why_no_equilibrium),)
    if criterion.claim == "contraction" and knowledge.case.model.time != "sampled":
        return (set_aside(knowledge, criterion, "not applicable", "contraction per sample needs a sampled model"),)
    found = [
        *_refutations(knowledge, criterion, equilibrium),
        *refute_by_end(knowledge, criterion),
        *_at_combinations(knowledge, criterion),
        *_by_matrix(knowledge, criterion),
        *_by_count(knowledge, criterion, equilibrium),
        *_by_value(knowledge, criterion),
        *_by_set(knowledge, criterion),
    ]
    why = knowledge.unavailable.get("linear part", "no certificate for the scope asked for was found")
    return tuple(found) or (open_question(knowledge, criterion, why, _facts(knowledge, criterion)),)


def _facts(knowledge: Knowledge, criterion: Criterion) -> dict[str, Enclosure]:
    value = knowledge.spectral.get(QUANTITY.get(criterion.claim, ""))
    return {} if value is None else {"value": value}


def _count(knowledge: Knowledge, equilibrium: Equilibrium) -> RouthClaim | None:
    identifier = routh_claim_id(equilibrium)
    if knowledge.proved(identifier) is None:
        return None
    return next((c for c in knowledge.claims if isinstance(c, RouthClaim) and c.identifier == identifier), None)


def _refutations(knowledge: Knowledge, criterion: Criterion, equilibrium: Equilibrium) -> Iterator[Finding]:
    """The nominal combination belongs to every scope, so a nominal counter-example refutes both."""
    if knowledge.place.result != "proved":
        return
    count = _count(knowledge, equilibrium)
    at = {"combination": "nominal", "equilibrium": equilibrium.identifier}
    if count is not None and _contradicts_stability(knowledge, criterion, equilibrium, count):
        what = _lying(count.outside or count.boundary, "outside" if count.outside else "on")
        yield refute(
            knowledge, criterion, "T8", what,
            "exact" if all(b.is_exact for b in count.polynomial) else "enclosed", (count.identifier,), at,
            _facts(knowledge, criterion),
        )  # fmt: skip
    value = _facts(knowledge, criterion).get("value")
    if value is not None and within(value, criterion) is False:
        yield refute(
            knowledge, criterion, "T1", f"the {QUANTITY[criterion.claim]} violates its bound at nominal",
            "enclosed", (routh_claim_id(equilibrium),), at, {"value": value},
        )  # fmt: skip


def _lying(number: int, where: str) -> str:
    who = "1 eigenvalue lies" if number == 1 else f"{number} eigenvalues lie"
    return f"{who} {where} the stability boundary"


def _at_combinations(knowledge: Knowledge, criterion: Criterion) -> Iterator[Finding]:
    """A verified combination of the spreads that violates the criterion refutes it over tolerances."""
    if criterion.over == NOMINAL or knowledge.place.result != "proved":
        return
    for claim, finding in knowledge.combinations():
        at = {"combination": words_of(knowledge.case, claim), "equilibrium": claim.equilibrium}
        outside, boundary = count_of(finding, OUTSIDE), count_of(finding, BOUNDARY)
        stability = criterion.claim in ("asymptotic_stability", "exponential_stability")
        strict = criterion.claim == "exponential_stability" or _is_linear_at(knowledge, claim)
        if stability and (outside or (boundary and strict)):
            what = _lying(outside or boundary, "outside" if outside else "on")
            yield refute(
                knowledge, criterion, "T8", f"at {at['combination']}, {what}", finding.strength, (claim.identifier,), at
            )
        value = finding.facts.get(QUANTITY.get(criterion.claim, ""))
        if value is not None and within(value, criterion) is False:
            yield refute(
                knowledge, criterion, "T1",
                f"the {QUANTITY[criterion.claim]} violates its bound at {at['combination']}", "enclosed",
                (claim.identifier,), at, {"value": value},
            )  # fmt: skip


def _contradicts_stability(
    knowledge: Knowledge, criterion: Criterion, equilibrium: Equilibrium, count: RouthClaim
) -> bool:
    """An eigenvalue outside refutes stability; one on the boundary only what needs strictness, or a linear model."""
    if criterion.claim == "asymptotic_stability":
        return count.outside > 0 or (count.boundary > 0 and is_linear(knowledge.case, equilibrium))
    if criterion.claim == "exponential_stability":
        return count.outside + count.boundary > 0
    return False


def is_linear(case: Case, equilibrium: Equilibrium) -> bool:
    """The nominal model is affine in the states, so its linear part is the whole truth."""
    try:
        field = certified_field(case, equilibrium, NOMINAL)
    except ArithmeticError:
        return False
    if isinstance(field, NotRational):
        return False
    size = len(field.states)
    return not any(any(e[:size]) for e in field.denominator.to_dict()) and all(
        sum(e[:size]) <= 1 for p in field.numerators for e in p.to_dict()
    )


def _is_linear_at(knowledge: Knowledge, claim: CombinationClaim) -> bool:
    """The model built with this combination is affine in the states (an affine model is so about any point)."""
    chosen = knowledge.chosen
    return chosen is not None and is_linear(at_combination(knowledge.case, claim.values), chosen)


def _by_matrix(knowledge: Knowledge, criterion: Criterion) -> Iterator[Finding]:
    """A verified Lyapunov inequality whose region is at least as strict as the criterion's."""
    wanted = region_and_level(criterion, sampled=knowledge.case.model.time == "sampled")
    if wanted is None:
        return
    region, level = wanted
    for claim in knowledge.claims:
        if not isinstance(claim, MatrixClaim) or claim.region != region:
            continue
        strict = claim.level <= level if region == "disc" else claim.level >= level
        serves = claim.over == criterion.over or criterion.over == NOMINAL
        finding = knowledge.proved(claim.identifier)
        if strict and serves and finding is not None:
            yield conclude(
                knowledge, criterion, finding.theorem, finding.statement, (knowledge.place, *finding.premises),
                (claim.identifier,), _value_over(knowledge, criterion, claim) | _scale(criterion, finding),
            )  # fmt: skip


def _scale(criterion: Criterion, finding: Finding) -> dict[str, Enclosure]:
    """By how much the spreads may be widened with the criterion still proved."""
    fact = finding.facts.get(SCALE)
    wider = fact is not None and fact.lower is not None and fact.lower > 1
    return {SCALE: fact} if fact is not None and wider and criterion.over != NOMINAL else {}


def _value_over(knowledge: Knowledge, criterion: Criterion, claim: MatrixClaim) -> dict[str, Enclosure]:
    """Nominal: the enclosed value.  Over tolerances: between the proved level and the worst combination's value."""
    name = QUANTITY.get(criterion.claim)
    if name is None or (criterion.claim == "exponential_stability" and criterion.at_least is None):
        return {}
    nominal = knowledge.spectral.get(name)
    unit = "1/s" if name == "decay rate" else "1"
    if criterion.over == NOMINAL:
        return {} if nominal is None else {"value": nominal}
    seen = [f.facts[name] for _, f in knowledge.combinations() if name in f.facts]
    seen += [] if nominal is None else [nominal]
    if claim.region == "disc":
        least = max((s.lower for s in seen if s.lower is not None), default=None)
        return {"value": Enclosure(least, claim.level, unit)}
    most = min((s.upper for s in seen if s.upper is not None), default=None)
    return {"value": Enclosure(claim.level, most, unit)}


def _by_count(knowledge: Knowledge, criterion: Criterion, equilibrium: Equilibrium) -> Iterator[Finding]:
    """Exact root count: enough for stability at the nominal combination."""
    plain = criterion.claim == "asymptotic_stability" or (
        criterion.claim == "exponential_stability" and criterion.at_least is None
    )
    if not plain or (criterion.over != NOMINAL and spread_box(knowledge.case).names):
        return
    count = _count(knowledge, equilibrium)
    finding = None if count is None else knowledge.proved(count.identifier)
    if count is None or finding is None or count.outside or count.boundary:
        return
    yield conclude(
        knowledge, criterion, "T1", "every eigenvalue of the linear part lies strictly inside the stability region",
        (knowledge.place, *finding.premises), (count.identifier,),
    )  # fmt: skip


def _by_value(knowledge: Knowledge, criterion: Criterion) -> Iterator[Finding]:
    """Enclosed eigenvalues, where no inequality was needed or found (sampled rates and damping)."""
    value = _facts(knowledge, criterion).get("value")
    chosen = knowledge.chosen
    bounded = any((criterion.at_least, criterion.at_most, criterion.between))
    if value is None or chosen is None or not bounded or within(value, criterion) is not True:
        return
    if criterion.over != NOMINAL and spread_box(knowledge.case).names:
        return
    count = _count(knowledge, chosen)
    finding = None if count is None else knowledge.proved(count.identifier)
    strict = criterion.claim == "exponential_stability"
    if count is None or finding is None or count.outside or (strict and count.boundary):
        return
    yield conclude(
        knowledge, criterion, "T1", f"the {QUANTITY[criterion.claim]} of the linear part is enclosed within its bound",
        (knowledge.place, *finding.premises), (count.identifier,), {"value": value},
    )  # fmt: skip


def _by_set(knowledge: Knowledge, criterion: Criterion) -> Iterator[Finding]:
    """A proved attractive set shows asymptotic stability, also where the linear part does not decide."""
    if criterion.claim != "asymptotic_stability":
        return
    own = knowledge.candidate()
    given = () if own is None or criterion.over != NOMINAL else (own,)
    for claim, finding in (*knowledge.sets(criterion.over), *knowledge.cells(), *given):
        statement = "the equilibrium attracts a whole neighbourhood and is stable"
        premises = (knowledge.place, *finding.premises)
        yield conclude(knowledge, criterion, finding.theorem, statement, premises, (claim.identifier,))
