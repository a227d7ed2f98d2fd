"""The record copy: text, fonts, tags, attachments, empty fields, identification, and the way without Pango."""

from __future__ import annotations

import builtins
import hashlib
import os
import re
import subprocess
import sys
from dataclasses import replace
from io import BytesIO
from pathlib import Path
from typing import Any

import pikepdf
import pytest
from conftest import ATTACHMENTS

from dossier.model.dossier import Evidence
from dossier.report import pdf
from dossier.report.blocks import Paper
from dossier.report.content import paper_of
from dossier.report.pdf import PdfUnavailable, pdf_of
from dossier.report.render import Rendered, render


@pytest.fixture(scope="module")
def content(rendered: Rendered) -> bytes:
    assert isinstance(rendered.pdf, bytes), rendered.pdf
    return rendered.pdf


@pytest.fixture(scope="module")
def document(content: bytes) -> pikepdf.Pdf:
    return pikepdf.open(BytesIO(content))


@pytest.fixture(scope="module")
def text(document: pikepdf.Pdf) -> str:
    return " ".join(words_of(document).split())


def words_of(document: pikepdf.Pdf) -> str:
    """The text of all pages, through the fonts' own ToUnicode maps."""
    maps: dict[tuple[int, int], dict[int, str]] = {}
    out: list[str] = []
    for page in document.pages:
        fonts = page.Resources.get("/Font", pikepdf.Dictionary())
        current: dict[int, str] = {}
        for instruction in pikepdf.parse_content_stream(page):
            operator = str(instruction.operator)
            if operator == "Tf":
                font = fonts[str(instruction.operands[0])]
                current = maps.setdefault(font.objgen, _unicode_map(font))
            elif operator == "Tj":
                out.append(_decode(bytes(instruction.operands[0]), current))
            elif operator == "TJ":
                pieces = [bytes(p) for p in instruction.operands[0] if isinstance(p, pikepdf.String)]
                out.append("".join(_decode(p, current) for p in pieces))
            elif operator == "ET":
                out.append(" ")
    return "".join(out)


def _unicode_map(font: Any) -> dict[int, str]:
    cmap = font.ToUnicode.read_bytes().decode("latin-1")
    pairs = re.findall(r"<([0-9a-fA-F]+)> <([0-9a-fA-F]+)>(?! <)", cmap)
    return {int(a, 16): bytes.fromhex(b).decode("utf-16-be") for a, b in pairs}


def _decode(raw: bytes, table: dict[int, str]) -> str:
    return "".join(table.get(int.from_bytes(raw[i : i + 2], "big"), "?") for i in range(0, len(raw), 2))


def test_the_needed_sentences_are_in_the_text(text: str) -> None:
    dense = text.replace(" ", "")
    for words in ("does not certify a machine", "Nothing may be concluded", "it is false that", "This is not a proof",
                  "no finite value in this model", "for every combination in the box of parameter spreads",
                  "A verdict lapses when any listed input changes", "Internal contradiction"):  # fmt: skip
        assert (words.replace(" ", "") in dense) == (words != "Internal contradiction"), words


def test_every_font_is_embedded_and_maps_back_to_text(document: pikepdf.Pdf) -> None:
    names = set()
    for item in document.objects:
        if isinstance(item, pikepdf.Dictionary) and item.get("/Type") == "/FontDescriptor":
            assert any(key in item for key in ("/FontFile", "/FontFile2", "/FontFile3"))
            names.add(str(item.FontName).split("+")[-1])
    assert any("Plex-Sans" in n for n in names)
    assert any("STIX" in n for n in names)
    assert all("Plex" in n or "STIX" in n for n in names), names


def test_the_right_glyphs_are_drawn_and_not_only_the_right_text(document: pikepdf.Pdf) -> None:
    """A style split over files would draw glyphs of another one: one font program per name."""
    seen: dict[str, set[str]] = {}
    for item in document.objects:
        if isinstance(item, pikepdf.Dictionary) and item.get("/Type") == "/FontDescriptor":
            program = item.get("/FontFile2", item.get("/FontFile3"))
            digest = hashlib.sha256(program.read_raw_bytes()).hexdigest()
            seen.setdefault(str(item.FontName), set()).add(digest)
    assert all(len(programs) == 1 for programs in seen.values())


def test_the_evidence_is_attached_byte_for_byte(document: pikepdf.Pdf) -> None:
    listed = [str(f.F) for f in document.Root.AF]
    assert listed == [name for name, _, _ in ATTACHMENTS]
    for specification, (name, body, kind) in zip(document.Root.AF, ATTACHMENTS, strict=True):
        stream = specification.EF.F
        assert stream.read_bytes() == body
        assert str(stream.Subtype) == f"/{kind}"
        assert str(specification.AFRelationship) == ("/Source" if name.startswith("project/") else "/Data")


def test_no_field_is_filled_and_each_role_can_sign(document: pikepdf.Pdf, evidence: Evidence) -> None:
    fields = list(document.Root.AcroForm.Fields)
    signatures = [f for f in fields if f.FT == "/Sig"]
    assert len(signatures) == len(evidence.document.sign_off)
    assert all("/V" not in f or str(f.V) == "" for f in fields)
    assert all("." not in str(f.T) for f in fields)
    assert "/NeedAppearances" not in document.Root.AcroForm
    for name in ("decision", "date", "conditions", "signature"):
        assert sum(str(f.T).endswith(name) for f in fields) == len(signatures)


def test_it_declares_archive_and_accessibility_once(document: pikepdf.Pdf) -> None:
    packet = document.Root.Metadata.read_bytes().decode("utf-8")
    assert "/Filter" not in document.Root.Metadata
    for words in ("<pdfaid:part>3<", "<pdfaid:conformance>A<", "<pdfuaid:part>1<", "<dossier:documentNumber>SD-0142<",
                  "2026-11-30T00:00:00Z"):  # fmt: skip
        assert packet.count(words) >= 1
    assert bool(document.Root.MarkInfo.Marked)
    assert str(document.Root.Lang).startswith("en")
    assert document.Root.OutputIntents[0].S == "/GTS_PDFA1"


def elements_of(document: pikepdf.Pdf) -> list[Any]:
    return [o for o in document.objects if isinstance(o, pikepdf.Dictionary) and o.get("/Type") == "/StructElem"]


def test_tables_have_scopes_and_formulas_have_words(document: pikepdf.Pdf) -> None:
    elements = elements_of(document)
    headers = [e for e in elements if e.S == "/TH"]
    assert headers
    assert {str(e.A.Scope) for e in headers} == {"/Row", "/Column"}
    formulas = [e for e in elements if e.S == "/Formula"]
    assert len(formulas) > 20
    assert all(str(e.Alt) and not str(e.Alt).startswith("@") for e in formulas)
    figures = [e for e in elements if e.S == "/Figure"]
    assert figures
    assert all(str(e.get("/Alt", "")) for e in figures)


def test_running_heads_are_artifacts(document: pikepdf.Pdf) -> None:
    kinds = set()
    for instruction in pikepdf.parse_content_stream(document.pages[4]):
        if str(instruction.operator) == "BDC" and instruction.operands[0] == "/Artifact":
            kinds.add(str(instruction.operands[1].get("/Subtype")))
    assert kinds == {"/Header", "/Footer"}


def test_headings_are_bookmarks(document: pikepdf.Pdf, paper: Paper) -> None:
    with document.open_outline() as outline:
        titles = [item.title for item in outline.root]
    assert titles == [f"{s.number} {s.title}" for s in paper.sections]


def test_no_transparency_or_javascript_is_in_the_file(content: bytes, document: pikepdf.Pdf) -> None:
    for page in document.pages:
        assert "/Group" not in page or page.Group.get("/S") != "/Transparency"
    assert b"/JavaScript" not in content


def test_the_same_evidence_gives_the_same_bytes_under_another_hash_seed(small: Evidence) -> None:
    here = render(small, ATTACHMENTS)
    assert isinstance(here.pdf, bytes)
    script = (
        "import sys, hashlib; sys.path.insert(0, sys.argv[1])\n"
        "from conftest import ATTACHMENTS; from sample_evidence import sample_evidence\n"
        "from dataclasses import replace; from dossier.report.render import render\n"
        "e = sample_evidence(); r = render(replace(e, points=e.points[2:]), ATTACHMENTS)\n"
        "print(hashlib.sha256(r.html.encode()).hexdigest(), hashlib.sha256(r.pdf).hexdigest())"
    )
    environment = {**os.environ, "PYTHONHASHSEED": "99", "TZ": "Asia/Tokyo", "LC_ALL": "C"}
    run = subprocess.run(
        [sys.executable, "-c", script, str(Path(__file__).parent)], env=environment, capture_output=True, check=True
    )
    digests = [hashlib.sha256(b).hexdigest() for b in (here.html.encode(), here.pdf)]
    assert run.stdout.decode().split() == digests


def test_without_the_native_library_there_is_a_reason_and_an_apt_line(
    paper: Paper, monkeypatch: pytest.MonkeyPatch
) -> None:
    real = builtins.__import__

    def refuse(name: str, *args: Any, **kwargs: Any) -> Any:
        if name.startswith("weasyprint"):
            raise OSError("cannot load library 'libpangoft2-1.0-0'")
        return real(name, *args, **kwargs)

    monkeypatch.setattr(builtins, "__import__", refuse)
    result = pdf_of(paper)
    assert isinstance(result, PdfUnavailable)
    assert "libpangoft2-1.0-0" in result.message
    assert "apt-get install -y --no-install-recommends libpangoft2-1.0-0 libharfbuzz-subset0" in result.message


def test_a_writer_without_the_hook_draws_the_same_formulas_flat(
    evidence: Evidence, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(pdf.glyphs, "is_supported", lambda _: False)
    few = replace(evidence, points=(), assumptions=())
    point = replace(evidence.points[2], claims=(), findings=(), outcomes=())
    raw = pdf_of(paper_of(replace(few, points=(point,)), {}))
    assert isinstance(raw, bytes)
    document = pikepdf.open(BytesIO(raw))
    assert any(e.S == "/Formula" and str(e.Alt).startswith("next theta equals") for e in elements_of(document))
