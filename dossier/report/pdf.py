"""The record copy: PDF/A-3a and PDF/UA-1, with the evidence embedded; or a value that says what is missing."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any, Final

from dossier.report import fonts, glyphs, locate
from dossier.report.blocks import Paper
from dossier.report.equations import FlatMath, PaperMath
from dossier.report.finish import finish
from dossier.report.layout import lay_out

Attachment = tuple[str, bytes, str]
"""Name, content and media type of an embedded file."""

APT_LINE: Final = "apt-get install -y --no-install-recommends libpangoft2-1.0-0 libharfbuzz-subset0"
VARIANT: Final = "pdf/a-3a"


@dataclass(frozen=True, slots=True)
class PdfUnavailable:
    """No PDF could be written here; `message` says what to install."""

    message: str


def pdf_of(paper: Paper, attachments: tuple[Attachment, ...] = ()) -> bytes | PdfUnavailable:
    """The PDF of `paper` with `attachments` embedded, or why there is none."""
    try:
        import weasyprint  # noqa: PLC0415 - without its native library the HTML must still be written
        from weasyprint.pdf.stream import Stream  # noqa: PLC0415
    except (OSError, ImportError) as error:
        missing = str(error).splitlines()[0]
        return PdfUnavailable(
            f"The PDF was not written: its library or a part of it is missing ({missing}). "
            f"On Debian and Ubuntu install it with: {APT_LINE}"
        )
    raw = _written(weasyprint, paper, attachments, shared_glyphs=glyphs.is_supported(Stream))
    return finish(raw, paper, {name: kind for name, _, kind in attachments})


@dataclass(frozen=True, slots=True)
class ShippedFonts:
    """The only source the PDF writer may ask: the shipped fonts.  Anything else stops the writing."""

    response: Any
    _fail_on_errors: bool = True
    """Read by the PDF writer: an address that is refused is an error, not a warning."""

    def __call__(self, url: str, headers: Any = None) -> Any:
        """The font at `url`.  Raises ValueError for any other address."""
        return self.response(url, body=fonts.opened(url))


def _written(weasyprint: Any, paper: Paper, attachments: tuple[Attachment, ...], *, shared_glyphs: bool) -> bytes:
    folder = locate.templates()
    style = fonts.face_rules(embed=False) + "".join(
        (folder / name).read_text(encoding="utf-8") for name in ("base.css", "print.css")
    )
    math = PaperMath() if shared_glyphs else FlatMath()
    text = lay_out(paper, math, "print", style)
    cache: Mapping[str, Any] = (
        {key: glyphs.EquationImage(equation) for key, equation in math.images.items()}
        if isinstance(math, PaperMath)
        else {}
    )
    when = datetime.fromisoformat(paper.issued).replace(tzinfo=UTC)
    files = [
        weasyprint.Attachment(
            string=content, name=name, description=description_of(name), created=when, modified=when,
            relationship=relationship_of(name),
        )
        for name, content, _ in attachments
    ]  # fmt: skip
    document = weasyprint.HTML(string=text, url_fetcher=ShippedFonts(weasyprint.urls.URLFetcherResponse))
    return document.write_pdf(
        pdf_variant=VARIANT, pdf_forms=True, pdf_tags=True, cache=dict(cache), attachments=files, custom_metadata=False
    )


def relationship_of(name: str) -> str:
    """How an embedded file relates to the document (ISO 32000-2, table 43): the project is its source."""
    return "Source" if name.startswith("project/") or name.endswith((".yaml", ".yml")) else "Data"


def description_of(name: str) -> str:
    """What an embedded file is."""
    if relationship_of(name) == "Source":
        return "Project text from which the dossier was built"
    return "Certificate: exact evidence" if name.startswith("certificates/") else "Machine-readable evidence"
