"""Evidence to the parts of a dossier: what is said, in which order, before anything is laid out."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from datetime import date

from dossier.model.dossier import Evidence
from dossier.report.blocks import Paper, Picture, Section
from dossier.report.content.argument import argument_section
from dossier.report.content.context import read_context
from dossier.report.content.front import control_blocks, cover_of
from dossier.report.content.model_section import model_section
from dossier.report.content.point_section import point_section
from dossier.report.content.record import file_annex, guide_annex, record_section, sign_off_section
from dossier.report.content.scope import assumption_section, caution_section, scope_section
from dossier.report.content.summary import summary_section
from dossier.report.content.trace import trace_section

NO_DATE = "2000-01-01"
"""Stands in the files' properties where the project states no date; nothing of it is printed."""

FIRST_POINT = 5
"""Sections 1 to 4 are summary, scope, assumptions and models."""


def paper_of(evidence: Evidence, pictures: Mapping[str, Sequence[Picture]]) -> Paper:
    """The whole dossier; `pictures` are the figures of each operating point."""
    context = read_context(evidence)
    sections: list[Section] = [
        summary_section(context, "1"),
        scope_section(context, "2"),
        assumption_section(context, "3"),
        model_section(context, "4"),
    ]
    for number, point in enumerate(evidence.points, start=FIRST_POINT):
        sections.append(point_section(context, point, str(number), pictures.get(point.case.name, ())))
    after = FIRST_POINT + len(evidence.points)
    sections.extend(
        (
            argument_section(context, str(after)),
            trace_section(context, str(after + 1)),
            record_section(context, str(after + 2)),
            caution_section(str(after + 3)),
            sign_off_section(context, str(after + 4)),
            file_annex(context, "A"),
            guide_annex("B"),
        )
    )
    document = evidence.document
    author = next((r.name for r in document.sign_off if r.role == "prepared"), "")
    return Paper(
        cover_of(evidence), control_blocks(evidence), tuple(sections), evidence.provenance.project_sha256,
        f"dossier {evidence.provenance.program_version}", f"Stability evidence for {document.machine}",
        "stability, control loop, certificate, machine", author, issued(document.date),
    )  # fmt: skip


def issued(text: str) -> str:
    """The stated date of issue as an ISO date; the only time that enters the papers."""
    try:
        return date.fromisoformat(text).isoformat()
    except ValueError:
        return NO_DATE
