"""Lay a paper out as HTML by the templates; the same templates serve the screen and the PDF."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Mapping, Sequence
from typing import Final, Literal, Protocol

from jinja2 import Environment, FileSystemLoader, StrictUndefined
from markupsafe import Markup, escape

from dossier.model.outcome import VERDICTS, Verdict
from dossier.report import locate
from dossier.report.blocks import Card, Heading, Paper, Strip, Subheading, Table
from dossier.report.rich import Formula, Link, Mono, Rich, Strong
from dossier.report.wording import VERDICT_WORDS

Target = Literal["screen", "print"]
_SUPERSCRIPT: Final = frozenset("⁰¹²³⁴⁵⁶⁷⁸⁹⁻")


class Typesetter(Protocol):
    """Sets formulas for one document."""

    def __call__(self, formula: Formula) -> Markup:
        """The markup of one formula."""
        ...

    def definitions(self) -> Markup:
        """What the document must carry for its formulas."""
        ...


def lay_out(paper: Paper, math: Typesetter, target: Target, style: str, script: str = "") -> str:
    """The HTML text of `paper`.  Deterministic: the same paper gives the same text."""
    environment = Environment(
        loader=FileSystemLoader(locate.templates()),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters |= {
        "rich": lambda text: rich_markup(text, math),
        "kind": lambda value: type(value).__name__,
        "slug": slug,
        "trusted": Markup,
        "verdicts_of": verdicts_of,
    }
    environment.globals |= {
        "paper": paper,
        "math": math,
        "print": target == "print",
        "screen": target == "screen",
        "verdicts": VERDICT_WORDS,
        "places": places(paper),
        "counter": _counter(),
        "style": Markup(style),
        "script": Markup(script),
    }
    return environment.get_template(locate.ENTRY).render()


def rich_markup(text: Rich, math: Typesetter) -> Markup:
    """Rich text as HTML; everything the project says is escaped."""
    pieces: list[Markup] = []
    for part in text:
        if isinstance(part, str):
            pieces.append(_raised(part))
        elif isinstance(part, Formula):
            pieces.append(math(part))
        elif isinstance(part, Link):
            pieces.append(Markup('<a class="ref" href="#{}">{}</a>').format(part.target, part.text))
        elif isinstance(part, Mono):
            pieces.append(Markup("<code>{}</code>").format(part.text))
        elif isinstance(part, Strong):
            pieces.append(Markup("<strong>{}</strong>").format(part.text))
    return Markup("").join(pieces)


def _raised(text: str) -> Markup:
    """Superscripts in the mathematical font, which has the raised minus sign in the same drawing."""
    if not _SUPERSCRIPT & set(text) or "⁻" not in text:
        return escape(text)
    out, raised = Markup(""), ""
    for sign in text + "\0":
        if sign in _SUPERSCRIPT:
            raised += sign
            continue
        if raised:
            out += Markup('<span class="sup">{}</span>').format(raised)
            raised = ""
        out += escape(sign.strip("\0"))
    return out


def slug(verdict: str) -> str:
    """A verdict as part of a class name."""
    return verdict.replace(" ", "-")


def verdicts_of(strips: Sequence[Strip]) -> tuple[Verdict, ...]:
    """The verdicts that occur in the strips, in their usual order."""
    present = {c.verdict for s in strips for c in s.cells}
    return tuple(v for v in VERDICTS if v in present)


def places(paper: Paper) -> Mapping[str, str]:
    """Number of the section or heading under which each anchor stands."""
    found: dict[str, str] = {}
    for section in paper.sections:
        number = section.number
        found[section.anchor] = number
        for block in section.blocks:
            if isinstance(block, Heading):
                number = block.number
            if isinstance(block, Heading | Card | Subheading) and block.anchor:
                found[block.anchor] = number
            if isinstance(block, Table):
                found.update({row.anchor: number for row in block.rows if row.anchor})
    return found


def _counter() -> Callable[[str], int]:
    """Running numbers of tables and figures."""
    counts: Counter[str] = Counter()

    def following(kind: str) -> int:
        counts[kind] += 1
        return counts[kind]

    return following
