"""Outlines read from the typesetter's SVG."""

from __future__ import annotations

import pytest

from dossier.report import outlines

ATTRIBUTES = 'xmlns="http://www.w3.org/2000/svg" viewBox="0 0 9 9" width="1em" height="1em"'


def test_a_path_becomes_moves_lines_and_cubics() -> None:
    steps = outlines.read_path("M0 0 L10 0 H20 V5 Q30 5 30 15 C1 2 3 4 5 6 Z")
    assert [s[0] for s in steps] == ["M", "L", "L", "L", "C", "C", "Z"]
    assert steps[2][1] == (20, 0)
    assert steps[3][1] == (20, 5)


def test_a_quadratic_curve_keeps_its_middle() -> None:
    """At the middle a quadratic is (start + 2 control + end)/4, a cubic (s + 3 a + 3 b + e)/8."""
    (_, start), (_, curve) = outlines.read_path("M0 0 Q6 12 12 0")
    middle = [(s + 3 * a + 3 * b + e) / 8 for s, a, b, e in zip(start, curve[:2], curve[2:4], curve[4:], strict=True)]
    assert middle == pytest.approx([6, 6])


def test_points_after_a_move_are_lines() -> None:
    assert [s[0] for s in outlines.read_path("M0 0 1 1 2 2")] == ["M", "L", "L"]


def test_an_unknown_command_is_refused() -> None:
    with pytest.raises(ValueError, match="unknown path command 'A'"):
        outlines.read_path("M0 0 A1 1 0 0 0 2 2")


def test_an_unknown_element_is_refused() -> None:
    svg = f'<svg {ATTRIBUTES}><g><circle r="1"/></g></svg>'
    with pytest.raises(ValueError, match="unknown element 'circle'"):
        outlines.read_drawing(svg)


def test_transformations_apply_from_the_inside_out() -> None:
    """Scaling inside a translation: the point (1, 1) is scaled first."""
    svg = (
        f'<svg {ATTRIBUTES} style="vertical-align: -0.25em">'
        '<g transform="translate(10, 20)"><g transform="scale(2)"><path d="M1 1 L2 2 Z"/></g></g></svg>'
    )
    drawing = outlines.read_drawing(svg)
    assert drawing.shift == -0.25
    assert outlines.flat_path(drawing).startswith("M12 22L14 24")


def test_a_rectangle_becomes_its_four_corners() -> None:
    svg = f'<svg {ATTRIBUTES}><g><rect x="1" y="2" width="3" height="4"/></g></svg>'
    assert outlines.flat_path(outlines.read_drawing(svg)) == "M1 2L4 2L4 6L1 6Z"
