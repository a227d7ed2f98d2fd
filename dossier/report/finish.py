"""Finish the record copy: identification, tags and form fields brought to PDF/A-3a and PDF/UA-1.

The PDF writer leaves running heads as tagged content, header cells without scope, equations as plain figures,
form fields without appearance, and only one of the two identifications.  Each step here cures one of these
(ISO 19005-3; ISO 14289-1, clause 7; ISO 32000-1, 14.8 and 12.7).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from io import BytesIO
from typing import Any, Final

import pikepdf
from pikepdf import Array, Dictionary, Name

from dossier.report import xmp
from dossier.report.blocks import Paper
from dossier.report.equations import FORMULA_MARK

PIXEL: Final = 0.75
"""Points per CSS pixel, the unit of the writer's page coordinates."""

PRODUCER: Final = "WeasyPrint and pikepdf"
SIGNATURE_SUFFIX: Final = "_signature"
"""A text field whose name ends so becomes a signature field."""


def finish(raw: bytes, paper: Paper, media_types: Mapping[str, str]) -> bytes:
    """The finished file; `media_types` of embedded files by name.  Deterministic."""
    with pikepdf.open(BytesIO(raw)) as pdf:
        if Name.StructTreeRoot in pdf.Root:
            elements = dict(_reachable(pdf))
            _scope_headers(elements)
            _name_formulas(elements)
            _free_running_heads(pdf, set(elements))
            _unwrap_forms(elements)
        _list_attachments_once(pdf, media_types)
        _prepare_fields(pdf)
        _identify(pdf, paper)
        if Name.ID in pdf.trailer:
            del pdf.trailer.ID  # the writer's own hangs on the time of the run; saving makes one from the content
        out = BytesIO()
        pdf.save(out, deterministic_id=True, object_stream_mode=pikepdf.ObjectStreamMode.generate)
        return out.getvalue()


def _reachable(pdf: pikepdf.Pdf) -> Iterator[tuple[tuple[int, int], Any]]:
    """Every structure element below the root, by object number."""
    seen: set[tuple[int, int]] = set()
    stack = _kids(pdf.Root.StructTreeRoot)
    while stack:
        element = stack.pop()
        if not isinstance(element, Dictionary) or element.get(Name.Type) != Name.StructElem:
            continue
        if element.objgen not in seen:
            seen.add(element.objgen)
            yield element.objgen, element
            stack.extend(_kids(element))


def _kids(element: Any) -> list[Any]:
    kids = element.get(Name.K)
    if kids is None:
        return []
    return list(kids) if isinstance(kids, Array) else [kids]


def _scope_headers(elements: Mapping[Any, Any]) -> None:
    """Every header cell says whether it heads a column or a row (ISO 14289-1, 7.5)."""
    for element in elements.values():
        if element.S != Name.TH:
            continue
        attributes = element.get(Name.A)
        if not isinstance(attributes, Dictionary):
            attributes = Dictionary(O=Name.Table)
            element.A = attributes
        attributes.Scope = Name.Column if _is_inside(element, Name.THead) else Name.Row


def _is_inside(element: Any, tag: Name) -> bool:
    while Name.P in element and element.get(Name.S) != Name.Table:
        if element.get(Name.S) == tag:
            return True
        element = element.P
    return False


def _name_formulas(elements: Mapping[Any, Any]) -> None:
    """Equations are formulas with their words, not figures (ISO 14289-1, 7.7)."""
    for element in elements.values():
        words = str(element.get(Name.Alt, ""))
        if Name.Figure == element.S and words.startswith(FORMULA_MARK):
            element.S = Name.Formula
            element.Alt = pikepdf.String(words.removeprefix(FORMULA_MARK))


def _free_running_heads(pdf: pikepdf.Pdf, real: set[Any]) -> None:
    """Marked content whose element hangs in no tree is a running head or foot: an artifact (ISO 14289-1, 7.8)."""
    numbers = pdf.Root.StructTreeRoot.ParentTree.Nums
    parents = {int(numbers[i]): numbers[i + 1] for i in range(0, len(numbers), 2)}
    for page in pdf.pages:
        owners = parents.get(int(page.get(Name.StructParents, -1)))
        if owners is None or not isinstance(owners, Array):
            continue
        loose = {i for i, owner in enumerate(owners) if isinstance(owner, Dictionary) and owner.objgen not in real}
        if loose:
            _mark_artifacts(pdf, page, loose)
            for index in loose:
                owners[index] = None


def _mark_artifacts(pdf: pikepdf.Pdf, page: pikepdf.Page, loose: set[int]) -> None:
    middle = float(page.mediabox[3]) / PIXEL / 2
    instructions: list[Any] = list(pikepdf.parse_content_stream(page))
    for position, instruction in enumerate(instructions):
        if _mark_number(instruction) in loose:
            kind = _pagination(instructions[position:], middle)
            instructions[position] = pikepdf.ContentStreamInstruction([Name.Artifact, kind], instruction.operator)
    page.Contents = pdf.make_stream(pikepdf.unparse_content_stream(instructions))


def _mark_number(instruction: Any) -> int:
    """The marked-content number that an instruction opens, or -1."""
    if str(instruction.operator) != "BDC" or not isinstance(instruction.operands[1], Dictionary):
        return -1
    return int(instruction.operands[1].get("/MCID", -1))


def _pagination(following: list[Any], middle: float) -> Dictionary:
    """Header or footer, by the height at which the first text after the mark stands."""
    for instruction in following:
        if str(instruction.operator) == "Tm":
            above = float(instruction.operands[5]) < middle
            return Dictionary(
                Type=Name.Pagination,
                Subtype=Name.Header if above else Name.Footer,
                Attached=Array([Name.Top if above else Name.Bottom]),
            )
        if str(instruction.operator) == "EMC":
            break
    return Dictionary(Type=Name.Layout)


def _unwrap_forms(elements: Mapping[Any, Any]) -> None:
    """A form element's only kid stands alone: validators of signed files look for the field there."""
    for element in elements.values():
        if Name.Form == element.S:
            kids = _kids(element)
            if len(kids) == 1:
                element.K = kids[0]


def _list_attachments_once(pdf: pikepdf.Pdf, media_types: Mapping[str, str]) -> None:
    files = pdf.Root.get(Name.AF)
    if not isinstance(files, Array):
        return
    unique = {str(f.F): f for f in files}
    pdf.Root.AF = Array(list(unique.values()))
    for name, specification in unique.items():
        if name in media_types:
            specification.EF.F.Subtype = Name("/" + media_types[name])


def _prepare_fields(pdf: pikepdf.Pdf) -> None:
    """Every field has an appearance, an empty one, and the file does not ask the reader to make it."""
    form = pdf.Root.get(Name.AcroForm)
    if not isinstance(form, Dictionary):
        return
    if Name.NeedAppearances in form:
        del form.NeedAppearances
    for field in form.get(Name.Fields, Array()):
        field.AP = Dictionary(N=_blank(pdf, field))
        if str(field.get(Name.T, "")).endswith(SIGNATURE_SUFFIX):
            for key in (Name.DA, Name.V, Name.Ff, Name.MaxLen):
                if key in field:
                    del field[key]
            field.FT = Name.Sig


def _blank(pdf: pikepdf.Pdf, field: Any) -> pikepdf.Stream:
    left, bottom, right, top = (float(v) for v in field.Rect)
    stream = pdf.make_stream(b"/Tx BMC EMC")
    stream.Type, stream.Subtype = Name.XObject, Name.Form
    stream.BBox = Array([0, 0, abs(right - left), abs(top - bottom)])
    stream.Resources = Dictionary()
    return stream


def _identify(pdf: pikepdf.Pdf, paper: Paper) -> None:
    cover = paper.cover
    identity = xmp.Identity(
        f"{cover.title}: {cover.number} revision {cover.revision}", paper.author, paper.subject, paper.keywords,
        paper.program, PRODUCER, f"{paper.issued}T00:00:00Z", cover.number, cover.revision, paper.fingerprint,
    )  # fmt: skip
    metadata = pdf.make_stream(xmp.packet(identity))
    metadata.Type, metadata.Subtype = Name.Metadata, Name.XML
    pdf.Root.Metadata = metadata
    pdf.trailer.Info = pdf.make_indirect(Dictionary(Title=pikepdf.String(identity.title)))
