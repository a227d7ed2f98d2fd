"""How the dossier was made: components, trusted core, self tests, files, command; and the annexes."""

from __future__ import annotations

from collections.abc import Iterator

from dossier.model.claim import kind_of
from dossier.model.dossier import Evidence
from dossier.report import guide, numbers, wording
from dossier.report.blocks import (
    Block,
    Bullets,
    Column,
    Facts,
    Paragraph,
    Row,
    Section,
    SignField,
    SignOff,
    Table,
)
from dossier.report.content.context import Context
from dossier.report.content.quantities import NOTHING
from dossier.report.rich import Link, Mono, Rich, rich

KIND_WORDS = {
    "roots": "boxes that hold every equilibrium",
    "matrix": "Lyapunov matrices of the linear part",
    "routh": "characteristic polynomial and Routh array",
    "combination": "linear part at one parameter combination",
    "branch": "cells on which the equilibrium is followed",
    "absence": "a combination without an equilibrium",
    "end": "where the equilibrium ceases to exist",
    "candidate": "the engineer’s own function, as given",
    "gram": "function V with its Gram matrices",
    "cells": "functions V of parameter cells with their Gram matrices",
    "cover": "interval cover of the decrease of V",
    "sturm": "isolated crossings in frequency",
}


def record_section(context: Context, number: str) -> Section:
    """The method and tool record."""
    provenance = context.evidence.provenance
    blocks: list[Block] = [
        Facts(
            (
                ("Program", (f"dossier {provenance.program_version}",)),
                ("Effort", (provenance.effort,)),
                ("Command", (Mono(provenance.command),)),
                (
                    "Check again",
                    (
                        Mono("dossier recheck OUT"),
                        " repeats every check from the project text and the certificates alone",
                    ),
                ),
                ("Project fingerprint", (Mono(provenance.project_sha256),)),
            )
        ),
        Paragraph(
            (
                "A search in floating point only guesses. What counts was established again by the trusted core, in "
                "exact rational or outward-rounded arithmetic, from the project text and the certificates alone.",
            )
        ),
        _components(context.evidence),
    ]
    if provenance.self_tests:
        blocks.append(_self_tests(context.evidence))
    return Section("record", number, "Method and tool record", tuple(blocks), new_page=True)


def _components(evidence: Evidence) -> Table:
    rows = tuple(
        Row(
            (
                (c.name,),
                (c.version,),
                (c.role,),
                (numbers.count(c.lines) if c.lines else NOTHING,),
                (Mono(c.sha256[:16]) if c.sha256 else NOTHING,),
            )
        )
        for c in evidence.provenance.components
    )
    columns = (
        Column("Component", share=20),
        Column("Version", "short", 12),
        Column("Role", share=36),
        Column("Lines", "number", 10),
        Column("SHA-256, first digits", "mono", 22),
    )
    return Table("Components", columns, rows)


def _self_tests(evidence: Evidence) -> Table:
    rows = tuple(
        Row(((name,), (known,), (found,), ("● passed" if passed else "⊗ failed",)))
        for name, known, found, passed in evidence.provenance.self_tests
    )
    columns = (
        Column("Reference case", share=40),
        Column("Known answer", share=22),
        Column("Obtained", share=22),
        Column("Result", "short", 16),
    )
    return Table("Self tests of this run", columns, rows)


def sign_off_section(context: Context, number: str) -> Section:
    """The sign-off block; its fields stay empty whatever the evidence says."""
    rows = tuple(
        SignField(f"role{i}", r.role.replace("_", " "), r.name, r.duty, wording.role_statement(r.role))
        for i, r in enumerate(context.evidence.document.sign_off, start=1)
    )
    text = (
        "A signature stands for the statement beside it and for nothing else. The program fills in no decision, date "
        "or signature. Decisions: accepted, accepted with conditions, returned, rejected."
    )
    if not rows:
        return Section("sign-off", number, "Sign-off", (Paragraph(("The project names no role to sign.",)),))
    return Section("sign-off", number, "Sign-off", (Paragraph((text,)), SignOff(rows)))


def file_annex(context: Context, letter: str) -> Section:
    """Annex: certificate and project files."""
    certificates = tuple(
        Row(((Link(c.identifier, c.identifier),), (kind_of(c), ": ", KIND_WORDS[kind_of(c)]), (c.theorem or NOTHING,),
             (wording.scope_short(c.over),), (Mono(f"certificates/{c.identifier}.json"),)))
        for p in context.evidence.points
        for c in p.claims
    )  # fmt: skip
    columns = (
        Column("Evidence", "id", 19),
        Column("Kind", share=30),
        Column("Theorem", "short", 9),
        Column("Parameters", "short", 11),
        Column("File", "mono", 31),
    )
    inputs = tuple(Row(((Mono(name),), (Mono(digest),))) for name, digest in context.evidence.project_files)
    blocks: list[Block] = [
        Paragraph(
            (
                "The certificates are attached to the PDF and lie beside it, as exact numbers that anyone can check. ",
                "The manifest ", Mono("MANIFEST.sha256"), " beside this document lists the hash of every file.",
            )
        ),
    ]  # fmt: skip
    if certificates:
        blocks.append(Table("Certificate files", columns, certificates))
    if inputs:
        blocks.append(Table("Project files", (Column("File", "mono", 30), Column("SHA-256", "mono", 70)), inputs))
    return Section("files", letter, "Evidence and project files", tuple(blocks), new_page=True)


def guide_annex(letter: str) -> Section:
    """Annex: reading guide and glossary for readers who are not specialists."""
    rows = tuple(Row(((term,), (meaning,))) for term, meaning in guide.GLOSSARY)
    blocks: tuple[Block, ...] = (
        Bullets(tuple((line,) for line in guide.READING_GUIDE)),
        Paragraph((guide.READING_NUMBERS,)),
        Table("Glossary", (Column("Word", share=20), Column("Meaning", share=80)), rows),
    )
    return Section("guide", letter, "Reading guide", blocks, new_page=True)


def verdict_legend() -> Iterator[Block]:
    """What each verdict and each strength of a check means, and what may not be said."""
    rows = tuple(Row(((f"{w.mark} {w.word}",), (w.means,), (w.may_not,))) for w in wording.VERDICT_WORDS.values())
    columns = (
        Column("Verdict", "short", 21),
        Column("It means", share=45),
        Column("It does not allow to say", share=34),
    )
    strengths: list[Rich] = [
        rich(f"{word}: {wording.STRENGTH_MEANS[strength]}") for strength, word in wording.STRENGTH_WORDS.items()
    ]
    note = rich("Strength of a check: ", "; ".join(str(s[0]) for s in strengths), ".")
    yield Table("Verdicts", columns, rows, note)
