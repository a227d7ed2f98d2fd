"""Cover and document control: title block fields after ISO 7200, results at a glance."""

from __future__ import annotations

from collections.abc import Iterator

from dossier.model.dossier import Evidence
from dossier.report import wording
from dossier.report.blocks import Block, Cover, Facts, Strip, StripCell
from dossier.report.content.context import HASH_DIGITS, spoken_id
from dossier.report.content.record import verdict_legend
from dossier.report.content.summary import conclusion, weakest
from dossier.report.rich import Mono

DOCUMENT_TYPE = "Stability dossier"
LANGUAGE = "en"


def cover_of(evidence: Evidence) -> Cover:
    """The first sheet."""
    document = evidence.document
    strips = tuple(
        Strip(p.case.name, tuple(StripCell(o.identifier, spoken_id(o.identifier), o.verdict) for o in p.outcomes))
        for p in evidence.points
    )
    return Cover(
        document.number, document.revision, document.date, document.title, document.scope, document.organisation,
        document.machine, conclusion(evidence), weakest(evidence), strips, tuple(_fields(evidence)),
        wording.COVER_CAUTION,
    )  # fmt: skip


def _fields(evidence: Evidence) -> Iterator[tuple[str, str]]:
    """Fields of the title block that the cover prints; what nobody has decided stays empty."""
    document = evidence.document
    names = {r.role: r.name for r in document.sign_off}
    yield "Legal owner", document.organisation
    yield "Machine", document.machine
    yield "Document type", DOCUMENT_TYPE
    yield "Document status", ""
    yield "Creator", names.get("prepared", "")
    yield "Approval person", names.get("approved", "")
    yield "Date of issue", document.date
    yield "Language", LANGUAGE
    yield "Identification number", document.number
    yield "Revision", document.revision
    yield "Project fingerprint", evidence.provenance.project_sha256[:HASH_DIGITS]
    yield "Program", f"dossier {evidence.provenance.program_version}"


def control_blocks(evidence: Evidence) -> tuple[Block, ...]:
    """The sheet behind the cover: identification in full and what the verdict words mean."""
    document, provenance = evidence.document, evidence.provenance
    facts = Facts(
        (
            ("Document", (f"{document.number}, revision {document.revision}, {document.date}",)),
            ("Title", (document.title,)),
            ("Machine", (document.machine or "–",)),
            ("Legal owner", (document.organisation or "–",)),
            ("Project fingerprint", (Mono(provenance.project_sha256),)),
            ("Currency", ("current: built from the project files listed in annex A",)),
            ("Made with", (f"dossier {provenance.program_version}, effort {provenance.effort}",)),
        )
    )
    return (facts, *verdict_legend())
