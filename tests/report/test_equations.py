"""Equations for the screen, for paper, and for a PDF writer that lacks the hook."""

from __future__ import annotations

import re
from xml.etree import ElementTree

import pytest

from dossier.report.equations import FORMULA_MARK, FlatMath, PaperMath, ScreenMath, typeset
from dossier.report.rich import Formula

FORMULA = Formula(r"\dot{x} = \frac{k_1\,x}{m}", 'rate of x equals "k 1" x over m')


def test_an_unknown_command_is_an_error_that_names_the_formula() -> None:
    with pytest.raises(ValueError, match=r"cannot typeset '\\\\nosuch"):
        typeset(r"\nosuchcommand{x}")


def test_the_screen_refers_to_shared_outlines() -> None:
    math = ScreenMath()
    first, second = math(FORMULA), math(FORMULA)
    assert first == second
    used = set(re.findall(r'href="#(g[0-9a-f]+)"', first))
    defined = set(re.findall(r'id="(g[0-9a-f]+)"', math.definitions()))
    assert used == defined
    assert "&#34;k 1&#34;" in first
    ElementTree.fromstring(first)


def test_paper_refers_to_an_image_that_it_keeps() -> None:
    math = PaperMath()
    markup = math(FORMULA)
    (key,) = math.images
    assert f'src="{key}"' in markup
    assert f'alt="{FORMULA_MARK}rate of x' in markup


def test_the_same_formula_with_other_words_is_another_image() -> None:
    assert typeset("x", "one").key != typeset("x", "two").key


def test_a_flat_equation_carries_its_own_outlines() -> None:
    root = ElementTree.fromstring(FlatMath()(FORMULA))
    path = root.find("{http://www.w3.org/2000/svg}path")
    assert path is not None
    assert len(path.get("d", "")) > 100
    assert "href" not in FlatMath()(FORMULA)
