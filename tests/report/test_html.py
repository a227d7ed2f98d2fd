"""The page for the screen: self-contained, labelled, faithful to what the project says."""

from __future__ import annotations

import re
from dataclasses import replace
from html.parser import HTMLParser

from dossier.model.dossier import Evidence
from dossier.report.content import paper_of
from dossier.report.html import html_of
from dossier.report.render import Rendered

VOID = {"meta", "link", "img", "br", "col", "input", "hr"}


class Reader(HTMLParser):
    """Collects tags, ids and references, and checks that elements close in order."""

    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []
        self.ids: list[str] = []
        self.targets: set[str] = set()
        self.addresses: list[str] = []
        self.disorder: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        if tag not in VOID:
            self.open.append(tag)
        values = dict(attrs)
        if "id" in values:
            self.ids.append(str(values["id"]))
        for key in ("href", "src"):
            address = str(values.get(key) or "")
            if address.startswith("#"):
                self.targets.add(address[1:])
            elif address:
                self.addresses.append(address)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.handle_starttag(tag, attrs)
        if tag not in VOID:
            self.open.pop()

    def handle_endtag(self, tag: str) -> None:
        if not self.open or self.open.pop() != tag:
            self.disorder.append(tag)


def reader(text: str) -> Reader:
    result = Reader()
    result.feed(text)
    return result


def test_the_page_asks_nothing_of_anybody(rendered: Rendered) -> None:
    found = reader(rendered.html)
    assert found.addresses == []
    outside = re.findall(r"""(?:url\(|src=|href=|@import)\s*["']?(https?:|//|file:)""", rendered.html)
    assert outside == []
    assert "default-src 'none'" in rendered.html


def test_elements_close_and_ids_are_unique(rendered: Rendered) -> None:
    found = reader(rendered.html)
    assert found.disorder == []
    assert found.open == []
    assert len(found.ids) == len(set(found.ids))


def test_every_reference_has_a_place(rendered: Rendered) -> None:
    found = reader(rendered.html)
    assert found.targets <= set(found.ids)


def test_pictures_and_formulas_have_words(rendered: Rendered) -> None:
    for tag in re.findall(r"<svg\b[^>]*>", rendered.html):
        if 'role="img"' in tag:
            assert "aria-label=" in tag or "aria-labelledby=" in tag
        else:
            assert "aria-hidden" in tag or 'x="' in tag, tag


def test_what_the_project_says_cannot_become_markup(evidence: Evidence) -> None:
    hostile = '<script>alert("x")</script> & <b>'
    changed = replace(evidence, points=(), document=replace(evidence.document, title=hostile, scope=hostile))
    text = html_of(paper_of(changed, {}))
    assert "<script>alert" not in text
    assert "&lt;script&gt;alert(&#34;x&#34;)&lt;/script&gt; &amp; &lt;b&gt;" in text


def test_the_screen_copy_fills_in_no_decision(rendered: Rendered) -> None:
    block = rendered.html.split('<div class="signoff">')[1].split("</section>")[0]
    assert "<input" not in block
    for label in ("Decision", "Date, YYYY-MM-DD", "Conditions and sections reviewed", "Signature: sign the PDF"):
        assert block.count(f'<span class="what">{label}</span></span>') == 4


def test_verdicts_are_words_and_marks_not_colour_alone(rendered: Rendered) -> None:
    for found in re.findall(r'<span class="verdict is-[a-z-]+">(.*?)</span>\s*</?', rendered.html):
        assert re.search(r'class="mark">.</span> [a-z ]+', found)
