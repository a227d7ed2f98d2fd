"""What every section needs to know of the whole: which ids can be linked to, and the notation of each model."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

from dossier.model.case import Case, Model
from dossier.model.dossier import Evidence, PointEvidence
from dossier.report.notation import Notation, notation
from dossier.report.rich import Formula, Link, Mono, Part, Rich, joined

HASH_DIGITS = 12
"""Printed digits of a fingerprint; the whole one stands in the method record."""


@dataclass(frozen=True, slots=True)
class Context:
    """The evidence with its linkable ids and notations."""

    evidence: Evidence
    anchors: frozenset[str]
    notations: Mapping[str, Notation]

    def link(self, identifier: str) -> Part:
        """A link to `identifier` where the dossier has such a place, else the bare identifier."""
        return Link(identifier, identifier) if identifier in self.anchors else Mono(identifier)

    def links(self, identifiers: Iterable[str], nothing: str = "–") -> Rich:
        """Links to all of `identifiers`."""
        return joined([self.link(i) for i in identifiers if i]) or (nothing,)

    def sign(self, case: Case, name: str) -> Formula:
        """The mathematical sign of `name` in the model of `case`."""
        return Formula(self.notations[case.model.name].latex(name), name)


def read_context(evidence: Evidence) -> Context:
    """The context of one dossier."""
    models = {p.case.model.name: p.case.model for p in evidence.points}
    notations = {name: notation(names_of(model)) for name, model in models.items()}
    return Context(evidence, frozenset(_anchors(evidence)), MappingProxyType(notations))


def names_of(model: Model) -> tuple[str, ...]:
    """Every name of a model, in the order in which a reader meets them."""
    return (
        *model.state_names,
        *(p.name for p in model.parameters),
        *(s.name for s in model.signals),
        *(d.name for d in model.disturbances),
    )


def _anchors(evidence: Evidence) -> Iterable[str]:
    for assumption in evidence.assumptions:
        yield assumption.name
    for point in evidence.points:
        yield point.case.name
        yield from (c.identifier for c in point.claims)
        yield from (o.identifier for o in point.outcomes)
        yield from (e.identifier for e in point.equilibria)
        if point.campaign is not None:
            yield point.campaign.identifier


def assumptions_of(evidence: Evidence, point: PointEvidence, identifier: str) -> tuple[str, ...]:
    """Ids of the assumptions that cover the criterion, its operating point or its model."""
    covered = {identifier, identifier.split(".", 1)[-1], point.case.name, point.case.model.name}
    own = set(point.case.assumptions)
    return tuple(a.name for a in evidence.assumptions if a.name in own or covered & set(a.covers))


def short_hash(digest: str) -> Mono:
    """The first digits of a fingerprint."""
    return Mono(digest[:HASH_DIGITS])


def spoken_id(identifier: str) -> str:
    """The last part of an id, as it is called inside its operating point."""
    return identifier.split(".", 1)[-1]
