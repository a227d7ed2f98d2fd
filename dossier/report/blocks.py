"""The parts a dossier is laid out from: frozen values between what is said and how it looks."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Final, Literal

from dossier.model.outcome import Verdict
from dossier.report.rich import Formula, Part, Rich

ColumnKind = Literal["text", "number", "mono", "id", "formula", "short"]


@dataclass(frozen=True, slots=True)
class VerdictMark:
    """A verdict as mark and word."""

    verdict: Verdict


@dataclass(frozen=True, slots=True)
class Gauge:
    """A reserve as a short bar beside its number; `share` 1 is the whole way to the limit."""

    share: Fraction
    text: str

    @property
    def permille(self) -> int:
        """Filled length in thousandths, between 0 and 1000; for looking at only."""
        return int(max(Fraction(0), min(Fraction(1), self.share)) * 1000)


@dataclass(frozen=True, slots=True)
class PageReference:
    """Where `target` is: its page on paper, its section on the screen."""

    target: str
    text: str


SHORT_TABLE: Final = 9
"""Rows up to which a table is kept together: a few lines more than a third of a page."""

Cell = Rich | VerdictMark | Gauge | PageReference


@dataclass(frozen=True, slots=True)
class Column:
    """A column of a table; `share` is its width in per cent, 0 where the content decides."""

    title: str
    kind: ColumnKind = "text"
    share: int = 0


@dataclass(frozen=True, slots=True)
class Row:
    """A row; `anchor` is the id other places refer to; a `spanning` row has one cell, over all columns."""

    cells: tuple[Cell, ...]
    anchor: str = ""
    spanning: bool = False


@dataclass(frozen=True, slots=True)
class Table:
    """A table with a title; `note` is printed below it."""

    title: str
    columns: tuple[Column, ...]
    rows: tuple[Row, ...]
    note: Rich = ()

    @property
    def is_short(self) -> bool:
        """It should stand on one page."""
        return len(self.rows) <= SHORT_TABLE


@dataclass(frozen=True, slots=True)
class Heading:
    """A numbered heading inside a section."""

    anchor: str
    number: str
    title: str


@dataclass(frozen=True, slots=True)
class Subheading:
    """An unnumbered heading of the third rank."""

    title: Rich
    anchor: str = ""


@dataclass(frozen=True, slots=True)
class Paragraph:
    """A paragraph of running text, or a caution beside it."""

    text: Rich
    style: Literal["plain", "lead", "caution", "small"] = "plain"


@dataclass(frozen=True, slots=True)
class Facts:
    """Labels and what they stand for."""

    items: tuple[tuple[str, Rich], ...]


@dataclass(frozen=True, slots=True)
class Bullets:
    """A list of statements."""

    items: tuple[Rich, ...]


@dataclass(frozen=True, slots=True)
class Equations:
    """Displayed equations, one below the other."""

    rows: tuple[Formula, ...]
    label: str = ""


@dataclass(frozen=True, slots=True)
class Card:
    """One verdict with its sentence and what belongs to it."""

    anchor: str
    verdict: Verdict
    title: Rich
    blocks: tuple[Block, ...]


@dataclass(frozen=True, slots=True)
class Step:
    """One line of an argument: `kind` says what it is (claim, reason, premise, evidence, context)."""

    depth: int
    kind: str
    text: Rich
    mark: str = ""


@dataclass(frozen=True, slots=True)
class Argument:
    """An argument as indented text."""

    steps: tuple[Step, ...]
    anchor: str = ""


@dataclass(frozen=True, slots=True)
class Picture:
    """A figure in both papers' colours; `kind` says to which part of an operating point it belongs."""

    anchor: str
    kind: str
    print_svg: str
    screen_svg: str
    alternative: str
    caption: Rich


@dataclass(frozen=True, slots=True)
class SignField:
    """One row of the sign-off block; the fields to fill in stay empty."""

    key: str
    role: str
    name: str
    duty: str
    statement: str


@dataclass(frozen=True, slots=True)
class SignOff:
    """The sign-off block."""

    rows: tuple[SignField, ...]


Block = Heading | Subheading | Paragraph | Facts | Bullets | Table | Equations | Card | Argument | Picture | SignOff


@dataclass(frozen=True, slots=True)
class Section:
    """A numbered section; `landscape` sections stand on their own turned pages."""

    anchor: str
    number: str
    title: str
    blocks: tuple[Block, ...]
    landscape: bool = False
    new_page: bool = False

    @property
    def headings(self) -> tuple[Heading, ...]:
        """The numbered headings, for the contents."""
        return tuple(b for b in self.blocks if isinstance(b, Heading))


@dataclass(frozen=True, slots=True)
class StripCell:
    """One criterion in the strip of results on the cover."""

    target: str
    name: str
    verdict: Verdict


@dataclass(frozen=True, slots=True)
class Strip:
    """The results of one operating point, one cell per criterion."""

    point: str
    cells: tuple[StripCell, ...]


@dataclass(frozen=True, slots=True)
class Cover:
    """The first sheet: title block (field names after ISO 7200), results at a glance, the caution."""

    number: str
    revision: str
    date: str
    title: str
    supplement: str
    organisation: str
    machine: str
    conclusion: str
    weakest: Verdict
    strips: tuple[Strip, ...]
    fields: tuple[tuple[str, str], ...]
    caution: str


@dataclass(frozen=True, slots=True)
class Paper:
    """A whole dossier, ready to be laid out."""

    cover: Cover
    control: tuple[Block, ...]
    sections: tuple[Section, ...]
    fingerprint: str
    program: str
    subject: str
    keywords: str
    author: str
    issued: str
    """Date of issue, or a fixed date where the project states none that is a date."""


def cell(*parts: Part) -> Rich:
    """The parts of one table cell."""
    return tuple(parts)
