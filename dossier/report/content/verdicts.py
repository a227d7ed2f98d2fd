"""The printed sentence of a verdict: one template per verdict word, filled for each family of claims."""

from __future__ import annotations

from dossier.model.case import Criterion
from dossier.model.dossier import Campaign, PointEvidence
from dossier.model.outcome import Outcome
from dossier.report import numbers, units, wording
from dossier.report.content import quantities
from dossier.report.content.context import Context, assumptions_of, short_hash
from dossier.report.rich import Link, Part, Rich, Strong, joined, rich


def criterion_of(point: PointEvidence, outcome: Outcome) -> Criterion:
    """The criterion an outcome judges."""
    return next(c for c in point.case.criteria if f"{point.case.name}.{c.name}" == outcome.identifier)


def property_text(criterion: Criterion) -> str:
    """What the criterion asks, as a clause."""
    to = "" if criterion.to is None else units.as_written(criterion.to)
    within = "" if criterion.within is None else units.as_written(criterion.within)
    return wording.property_of(criterion, quantities.required_words(criterion), to, within)


def issue_sentence(context: Context, point: PointEvidence, outcome: Outcome) -> Rich:
    """The sentence that issues the verdict on one criterion."""
    criterion = criterion_of(point, outcome)
    asked = property_text(criterion)
    if outcome.verdict == "proved":
        return _proved(context, point, outcome, criterion, asked)
    if outcome.verdict == "refuted":
        return rich(
            "For ", _model(point), ", ", wording.scope_words(criterion.over), ", it is ", Strong("false"),
            f" that {asked}. Established in ", _arithmetic(outcome), _resting(context, outcome), ".",
        )  # fmt: skip
    if outcome.verdict == "contradicted":
        return rich(
            f"A floating-point motion violates that {asked}. It is not enclosed, so this is no refutation; "
            "treat the criterion as not met until it is resolved", _resting(context, outcome), ".",
        )  # fmt: skip
    if outcome.verdict == "no operating point":
        return rich(
            "At the nominal parameter values ", _model(point), " has ", Strong("no equilibrium"),
            f" in the search box, so it has no meaning to ask whether {asked}. Established in ", _arithmetic(outcome),
            _resting(context, outcome), ".",
        )  # fmt: skip
    if outcome.verdict == "supported":
        return _supported(context, point, asked)
    if outcome.verdict == "not established":
        return _open(point, outcome, asked)
    if outcome.verdict == "not applicable":
        return (f"It has no meaning here to ask whether {asked}.",)
    return (f"Outside this issue: whether {asked}.",)


def _model(point: PointEvidence) -> Rich:
    name = point.case.model.name
    return rich("the model ", Link(f"model-{name}", name), " (fingerprint ", short_hash(point.model_hash), ")")


def _arithmetic(outcome: Outcome) -> str:
    return "exact rational arithmetic" if outcome.strength == "exact" else "interval or ball arithmetic rounded outward"


def _resting(context: Context, outcome: Outcome) -> Rich:
    return rich(" (", context.links(outcome.evidence), ")") if outcome.evidence else ()


def _proved(context: Context, point: PointEvidence, outcome: Outcome, criterion: Criterion, asked: str) -> Rich:
    starts: Rich = ()
    if criterion.claim in wording.REGION_CLAIMS:
        starts = rich(" and ", Strong("every"), " start in the region of ", Link(point.case.name, point.case.name))
    premises = assumptions_of(context.evidence, point, outcome.identifier)
    under = rich(" Assumptions: ", joined([context.link(a) for a in premises]), ".") if premises else ()
    return rich(
        "For ", _model(point), ", ", wording.scope_words(criterion.over), starts, f": {asked}. ",
        "Checked in ", _arithmetic(outcome), f" by checker {context.evidence.provenance.program_version}, ",
        "which does not rely on the search that produced the evidence", _resting(context, outcome), ".", under,
    )  # fmt: skip


def _supported(context: Context, point: PointEvidence, asked: str) -> Rich:
    campaign = point.campaign
    if campaign is None:
        return (f"No violation was found in the samples drawn. {wording.SAMPLING_CAUTION}",)
    return rich(
        "No violation occurred in ", campaign_words(campaign), f", when it was asked whether {asked}. ",
        "This is not a proof; a violation between the samples is not excluded (",
        context.link(campaign.identifier), ").",
    )  # fmt: skip


def campaign_words(campaign: Campaign) -> str:
    """How many motions, drawn how, integrated how and how far, and what that allows to say."""
    text = (
        f"{numbers.count(campaign.motions)} motions (plan: {campaign.plan}; seed {campaign.seed}), integrated by "
        f"{campaign.method} to {campaign.horizon}"
    )
    return f"{text}; {campaign.confidence}" if campaign.confidence else text


def _open(point: PointEvidence, outcome: Outcome, asked: str) -> Rich:
    tried = [a for a in point.attempts if a.subject in (outcome.identifier, point.case.name)]
    words: list[Part | Rich] = [f"{a.method} ({wording.ENDING_WORDS[a.ending]})" for a in tried]
    attempted = rich(" Tried: ", joined(words, "; "), ".") if words else ()
    return rich(
        "Neither a certificate nor a counter-example was found. ", Strong("Nothing may be concluded"),
        f" on whether {asked}.", attempted,
    )  # fmt: skip
