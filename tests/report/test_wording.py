"""The words: every verdict and claim has them, and forbidden ones do not occur."""

from __future__ import annotations

import re

import pytest

from dossier.model.case import Criterion
from dossier.model.outcome import VERDICTS
from dossier.report import guide, wording


def test_every_verdict_has_its_own_mark_and_word() -> None:
    assert set(wording.VERDICT_WORDS) == set(VERDICTS)
    assert len({w.mark for w in wording.VERDICT_WORDS.values()}) == len(VERDICTS)
    assert len({w.word for w in wording.VERDICT_WORDS.values()}) == len(VERDICTS)


@pytest.mark.parametrize("claim", sorted(wording.CLAIM_NAMES))
def test_every_claim_has_a_sentence_without_gaps(claim: str) -> None:
    text = wording.property_of(Criterion("C1", claim, "nominal", of_written="e", loop="u"), "at least 5", "1 mm", "2 s")
    assert "{" not in text
    assert text == text.strip()
    assert len(text.split()) > 5


def test_the_scope_tolerances_says_interior_included() -> None:
    assert "interior included" in wording.scope_words("tolerances")


def test_the_fixed_cautions_say_what_a_dossier_is_not() -> None:
    text = " ".join(wording.CAUTIONS)
    for words in (
        "does not certify a machine",
        "ISO 12100",
        "licensed engineer",
        "lapses when any listed input changes",
    ):
        assert words in text


def test_no_fixed_text_calls_a_machine_safe_or_certified() -> None:
    fixed = [*wording.CAUTIONS, *guide.READING_GUIDE, *(w.means for w in wording.VERDICT_WORDS.values())]
    for text in fixed:
        assert not re.search(r"machine is (safe|stable|certified)|guaranteed|certified set", text)


def test_the_reading_guide_has_twelve_lines() -> None:
    assert len(guide.READING_GUIDE) == 12


def test_the_glossary_is_in_alphabetical_order() -> None:
    terms = [term.lower() for term, _ in guide.GLOSSARY]
    assert terms == sorted(terms)
