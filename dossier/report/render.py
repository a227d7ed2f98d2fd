"""Evidence to papers: HTML, PDF and figures, from one layout."""

from __future__ import annotations

from dataclasses import dataclass

from dossier.model.dossier import Evidence
from dossier.report.blocks import Picture
from dossier.report.content import paper_of
from dossier.report.figures import Figure, draw_figures
from dossier.report.html import html_of
from dossier.report.pdf import Attachment, PdfUnavailable, pdf_of


@dataclass(frozen=True, slots=True)
class Rendered:
    """One HTML file, one PDF or the reason why there is none, and the figures as files of their own."""

    html: str
    pdf: bytes | PdfUnavailable
    figures: tuple[tuple[str, bytes], ...]


def render(evidence: Evidence, attachments: tuple[Attachment, ...] = ()) -> Rendered:
    """Both papers of `evidence`, with `attachments` embedded in the PDF.  Same evidence, same bytes."""
    figures = draw_figures(evidence)
    paper = paper_of(evidence, _pictures(figures))
    return Rendered(
        html_of(paper),
        pdf_of(paper, attachments),
        tuple((f"{f.name}.svg", f.svg_print.encode("utf-8")) for f in figures),
    )


def _pictures(figures: tuple[Figure, ...]) -> dict[str, tuple[Picture, ...]]:
    grouped: dict[str, list[Picture]] = {}
    for figure in figures:
        picture = Picture(
            f"figure-{figure.name}",
            figure.kind,
            figure.svg_print,
            figure.svg_screen,
            figure.alternative,
            (figure.caption,),
        )
        grouped.setdefault(figure.operating_point, []).append(picture)
    return {point: tuple(pictures) for point, pictures in grouped.items()}
