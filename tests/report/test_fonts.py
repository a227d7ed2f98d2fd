"""The shipped fonts: complete, licensed, and declared one file per style."""

from __future__ import annotations

from collections import Counter

import pytest
from fontTools.ttLib import TTFont

from dossier.report import fonts, locate, wording

LETTERS = "ABCXYZabcxyzäöüßéñ0123456789.,;:()[]/%°±−×·≤≥≈…–“”’"


def test_no_style_is_split_over_several_files() -> None:
    """A split style prints wrong glyphs: the PDF writer keys fonts by their description."""
    styles = Counter((f.family, f.weight, f.style) for f in fonts.FACES)
    assert max(styles.values()) == 1
    assert "unicode-range" not in fonts.face_rules(embed=False)


@pytest.mark.parametrize("face", [f for f in fonts.FACES if f.family != "STIX Two Math"], ids=lambda f: f.file)
def test_text_faces_have_the_letters_and_signs_of_the_texts(face: fonts.Face) -> None:
    cmap = TTFont(locate.font(face.file)).getBestCmap()
    assert [c for c in LETTERS if ord(c) not in cmap] == []


def test_the_mathematical_face_has_marks_and_raised_digits() -> None:
    cmap = TTFont(locate.font("STIXTwoMath-Signs.woff")).getBestCmap()
    signs = "".join(w.mark for w in wording.VERDICT_WORDS.values()) + "⁰¹²³⁴⁵⁶⁷⁸⁹⁻∈∀→∞αβγδθλμπρστφψωΔΩ"
    assert [c for c in signs if ord(c) not in cmap] == []


def test_every_family_has_its_licence_beside_it() -> None:
    folder = locate.templates() / "fonts"
    for name in ("OFL-IBMPlex.txt", "OFL-STIXTwoMath.txt"):
        assert "SIL OPEN FONT LICENSE" in (folder / name).read_text(encoding="utf-8").upper()


def test_a_font_is_opened_to_the_same_bytes_each_time() -> None:
    first = fonts.opened("font:STIXTwoMath-Signs.woff")
    assert first[:4] == b"\x00\x01\x00\x00"
    assert first == fonts.opened("font:STIXTwoMath-Signs.woff")


@pytest.mark.parametrize("address", ["file:///etc/passwd", "font:../LICENSE", "https://example.org/a.woff", "font:"])
def test_nothing_but_a_shipped_font_is_opened(address: str) -> None:
    with pytest.raises(ValueError, match="not a shipped font"):
        fonts.opened(address)


def test_embedded_rules_fetch_nothing() -> None:
    rules = fonts.face_rules(embed=True)
    assert rules.count("src:url(data:font/woff;base64,") == len(fonts.FACES)
