"""Shared by the criterion families: building findings, comparing enclosures with stated bounds."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from fractions import Fraction
from typing import Literal

from dossier.checks.knowledge import Knowledge
from dossier.checks.movement import words_of_values
from dossier.model.case import NOMINAL, Criterion, value_of
from dossier.model.finding import Enclosure, Finding, Premise, Strength, weakest


def subject_of(knowledge: Knowledge, criterion: Criterion) -> str:
    """Id of a criterion: ``<operating point>.<criterion>``."""
    return f"{knowledge.case.name}.{criterion.name}"


def conclude(
    knowledge: Knowledge,
    criterion: Criterion,
    theorem: str,
    statement: str,
    premises: tuple[Premise, ...],
    evidence: tuple[str, ...],
    facts: Mapping[str, Enclosure] | None = None,
) -> Finding:
    """A finding about `criterion` that is proved exactly when every premise is."""
    result, strength = weakest(premises)
    return Finding(
        subject_of(knowledge, criterion), "interval" if strength == "enclosed" else "exact", result, strength,
        criterion.over, theorem, statement, premises, facts or {}, evidence,
    )  # fmt: skip


def refute(
    knowledge: Knowledge,
    criterion: Criterion,
    theorem: str,
    statement: str,
    strength: Strength,
    evidence: tuple[str, ...],
    counter_example: Mapping[str, str],
    facts: Mapping[str, Enclosure] | None = None,
) -> Finding:
    """A verified counter-example to `criterion`."""
    premise = Premise("refuted", statement, "refuted", strength, evidence=", ".join(evidence))
    return Finding(
        subject_of(knowledge, criterion), "interval" if strength == "enclosed" else "exact", "refuted", strength,
        criterion.over, theorem, statement, (premise,), facts or {}, evidence, counter_example,
    )  # fmt: skip


def refute_by_end(knowledge: Knowledge, criterion: Criterion) -> Iterator[Finding]:
    """Over tolerances: a combination for which the operating point no longer exists."""
    if criterion.over == NOMINAL or knowledge.place.result != "proved":
        return
    for claim, finding in knowledge.ends():
        at = {"combination": words_of_values(knowledge.case, claim.values), "equilibrium": claim.equilibrium}
        yield refute(
            knowledge, criterion, "E", finding.statement, finding.strength, (claim.identifier,), at
        )  # fmt: skip


def open_question(
    knowledge: Knowledge, criterion: Criterion, why: str, facts: Mapping[str, Enclosure] | None = None
) -> Finding:
    """Nothing could be concluded, for the reason given."""
    return Finding(
        subject_of(knowledge, criterion), "exact", "undecided", "exact", criterion.over, "", why, (), facts or {}
    )  # fmt: skip


def stated_bounds(criterion: Criterion) -> tuple[Fraction | None, Fraction | None]:
    """(greatest lower, least upper) value the criterion allows, each on the safe side where it carries pi."""
    lower = criterion.between[0] if criterion.between else criterion.at_least
    upper = criterion.between[1] if criterion.between else criterion.at_most
    return (
        None if lower is None else value_of(lower).upper,
        None if upper is None else value_of(upper).lower,
    )


def tightest_bounds(criterion: Criterion) -> tuple[Fraction | None, Fraction | None]:
    """The same on the other side: a value beyond these violates the criterion whatever the digits of pi."""
    lower = criterion.between[0] if criterion.between else criterion.at_least
    upper = criterion.between[1] if criterion.between else criterion.at_most
    return (
        None if lower is None else value_of(lower).lower,
        None if upper is None else value_of(upper).upper,
    )


def within(value: Enclosure, criterion: Criterion) -> bool | None:
    """True: proved inside the stated bounds; False: proved outside; None: the enclosure straddles one."""
    lower, upper = stated_bounds(criterion)
    least, most = tightest_bounds(criterion)
    if (least is not None and value.upper is not None and value.upper < least) or (
        most is not None and value.lower is not None and value.lower > most
    ):
        return False
    low_ok = lower is None or (value.lower is not None and value.lower >= lower)
    high_ok = upper is None or (value.upper is not None and value.upper <= upper)
    return True if low_ok and high_ok else None


def set_aside(
    knowledge: Knowledge,
    criterion: Criterion,
    kind: Literal["not applicable", "not attempted"],
    why: str,
    facts: Mapping[str, Enclosure] | None = None,
) -> Finding:
    """The criterion has no meaning here, or this version does not decide it; `why` says which and why."""
    premise = Premise(kind, why, "not run", "exact")
    return Finding(
        subject_of(knowledge, criterion), "exact", "not run", "exact", criterion.over, "", why, (premise,), facts or {}
    )  # fmt: skip
