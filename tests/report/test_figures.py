"""Figures: what they show, where they put it, and that they are the same bytes every time."""

from __future__ import annotations

import math
import re
from dataclasses import replace
from fractions import Fraction as F
from itertools import pairwise
from xml.etree import ElementTree

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st
from loop_cases import equilibrium_at, loop_case

from dossier.model.ball import Ball
from dossier.model.case import Criterion, Quantity
from dossier.model.claim import LyapunovClaim
from dossier.model.dossier import (
    Document,
    Evidence,
    FigureData,
    PointEvidence,
    Provenance,
    Trajectory,
)
from dossier.model.equilibrium import Eigenvalue
from dossier.model.finding import Enclosure, Finding
from dossier.model.outcome import LoopMargins, Outcome
from dossier.model.region import UNBOUNDED, Box, Interval
from dossier.report.figures import draw_figures
from dossier.report.plots.axes import Axes, shown_unit, ticks
from dossier.report.plots.loops import Loop, decibels, phases
from dossier.report.plots.plane import draw_plane, plane_of
from dossier.report.plots.reserves import reserves_of
from dossier.report.plots.sets import ProvedSet, ellipse, proved_sets, section
from dossier.report.plots.spectrum import demands_of
from dossier.report.plots.streamlines import directions
from dossier.report.svg import COLOURS, Canvas, Sign, Stroke, label_width, text_width, thin
from dossier.report.units import DEGREE, PrintedUnit

SVG = "{http://www.w3.org/2000/svg}"


def quantity(value, unit="1"):
    return Quantity(F(str(value)), 0, unit, f"{value} {unit}")


def interval(low, high):
    return Interval(F(str(low)), F(str(high)))


def chain(states=3):
    """A stable chain x0' = x1, ... with a region, a limit on x0 and a domain."""
    names = [f"x{i}" for i in range(states)]
    equations = dict(pairwise(names))
    equations[names[-1]] = " - ".join(["-x0", *(f"3*{n}" for n in names[1:])])
    case = loop_case(equations, {"u": "-x0"})
    sides = tuple(case.model.state_names)
    return replace(
        case, region=Box(sides, (interval(-1, 1),) * states),
        limits=Box(sides, (interval(-2, 2), *(UNBOUNDED,) * (states - 1))),
        model=replace(case.model, domain=Box(sides, (interval("-2.5", "2.5"), *(UNBOUNDED,) * (states - 1)))),
        criteria=(
            Criterion("C1", "attraction", "nominal"),
            Criterion("C2", "decay_rate", "nominal", at_least=quantity("0.1", "1/s")),
            Criterion("C3", "phase_margin", "nominal", loop="u", at_least=Quantity(F(1, 6), 1, "deg", "30 deg")),
            Criterion("C4", "damping_ratio", "nominal", at_least=quantity("0.2")),
        ),
    )  # fmt: skip


def third_order(omega):
    return 3 / (1j * omega + 1) ** 3


OMEGAS = [float(w) for w in np.geomspace(0.01, 100, 200)]
RESPONSE = tuple((w, third_order(w).real, third_order(w).imag) for w in OMEGAS)
CROSSOVER = math.sqrt(3 ** (2 / 3) - 1)
PHASE = math.pi - 3 * math.atan(CROSSOVER)
"""Of 3/(s + 1)^3: |L| = 1 where (1 + w^2)^3 = 9 (closed form)."""


def enclosed(value, unit):
    return Enclosure(F(value) - F(1, 10**9), F(value) + F(1, 10**9), unit)


FUNCTION = {(2, 0, 0): F(2), (1, 1, 0): F(1), (0, 2, 0): F(3), (0, 1, 1): F(1, 2), (0, 0, 2): F(1)}


def point(states=3, function=None):
    case = chain(states)
    function = function or {tuple(e[:states]): c for e, c in FUNCTION.items() if not any(e[states:])}
    chosen = replace(
        equilibrium_at(*[0] * states),
        eigenvalues=(
            Eigenvalue(F(-3, 10), F(7, 10), F(1, 10**9)),
            Eigenvalue(F(-3, 10), F(-7, 10), F(1, 10**9)),
            Eigenvalue(F(-9), F(0), F(1, 10**9)),
        )[-states:],
    )
    other = replace(
        equilibrium_at(F(9, 5), *[0] * (states - 1)), identifier="point.E2", chosen=False, stability="unstable"
    )
    claim = LyapunovClaim("point.V2", "", "nominal", "T2", "point.E1", "quadratic", function, F(8), Box((), ()), 0, ())
    proof = Finding("point.V2", "exact", "proved", "exact", "nominal", "T2", "V falls", evidence=("point.V2",))
    scale = {"proved scale of the region": Enclosure(F(5, 4), F(5, 4), "1")}
    region = Finding("point.C1", "exact", "proved", "exact", "nominal", "T2", "attracted", (), scale, ("point.V2",))
    grid = [(0.3 * i, 0.3 * j) for j in range(-8, 9) for i in range(-9, 10)]
    motion = Trajectory((0.0, 1.0, 2.0), tuple((c,) * states for c in (1.0, 0.4, 0.0)))
    data = FigureData(
        ("x0", "x1"), (motion,), tuple((x, y, y, -x - y) for x, y in grid), (("u", RESPONSE),)
    )  # fmt: skip
    margins = LoopMargins(
        "u", enclosed(20 * math.log10(8 / 3), "dB"), enclosed(math.sqrt(3), "rad/s"), Enclosure(None, None, "dB"), None,
        enclosed(PHASE, "rad"), enclosed(CROSSOVER, "rad/s"), enclosed(PHASE / CROSSOVER, "s"),
        enclosed(CROSSOVER, "rad/s"), enclosed(2.2, "1"), enclosed(1.3, "rad/s"), "point.S-u",
    )  # fmt: skip
    outcomes = (
        Outcome("point.C1", "attraction", "nominal", "proved", "exact", "T2", "", ("point.V2",)),
        Outcome("point.C2", "decay_rate", "nominal", "proved", "exact", "T1", "", (), enclosed(0.3, "1/s"),
                Enclosure(F(1, 10), None, "1/s"), Enclosure(F(2), F(2), "1")),
        Outcome("point.C3", "phase_margin", "nominal", "refuted", "enclosed", "T11", ""),
        Outcome("point.C4", "damping_ratio", "nominal", "not established", None, "", ""),
    )  # fmt: skip
    return PointEvidence(
        case, "", (chosen, other), True, (), (claim,), (proof, region), (), outcomes, (margins,), None, data
    )


def evidence(*points):
    document = Document("SD-1", "Chain", "A", "2026-11-30", "Test bench", "Tarn Lane Automation", "", (), ())
    return Evidence(document, (), points, Provenance("0", "", "", "quick", ()))


def figures(*points):
    return {f.name: f for f in draw_figures(evidence(*points))}


def texts(svg):
    return [t.text.replace("\u00a0", " ") for t in ElementTree.fromstring(svg).iter(f"{SVG}text")]


def test_a_point_has_a_plane_its_eigenvalues_its_loop_and_its_reserves():
    drawn = figures(point())
    assert list(drawn) == ["point-plane", "point-eigenvalues", "point-loop-u", "point-reserves"]
    assert [f.kind for f in drawn.values()] == ["plane", "eigenvalues", "loop", "reserves"]
    assert all(f.operating_point == "point" for f in drawn.values())


def test_a_point_without_equilibrium_or_data_has_only_its_criteria():
    bare = replace(point(), equilibria=(), figure=None)
    assert list(figures(bare)) == ["point-reserves"]
    assert figures(replace(bare, outcomes=())) == {}


def test_the_same_evidence_gives_the_same_bytes():
    assert draw_figures(evidence(point())) == draw_figures(evidence(point()))


@pytest.mark.parametrize("name", ["point-plane", "point-eigenvalues", "point-loop-u", "point-reserves"])
def test_paper_gets_literal_colours_and_the_screen_gets_custom_properties(name):
    figure = figures(point())[name]
    assert "var(" not in figure.svg_print
    values = re.findall(r'(?:fill|stroke)="([^"]*)"', figure.svg_print)
    assert set(values) <= {"none", *COLOURS.values()}
    themed = re.findall(r'(?:fill|stroke)="([^"]*)"', figure.svg_screen)
    assert set(themed) <= {"none", *(f"var(--{k},{v})" for k, v in COLOURS.items())}


@pytest.mark.parametrize("name", ["point-plane", "point-eigenvalues", "point-loop-u", "point-reserves"])
def test_a_figure_is_plain_svg_with_words_of_its_own(name):
    figure = figures(point())[name]
    for svg in (figure.svg_print, figure.svg_screen):
        assert not re.search(r'text-anchor|style=|\bid=|class="(?!figure")', svg)
        geometry = re.findall(r' (?:x|y|r|cx|cy|width|height|stroke-width|font-size)="([^"]*)"', svg)
        assert geometry and not any(re.search(r"\.\d{3,}", v) for v in geometry)
    root = ElementTree.fromstring(figure.svg_print)
    assert root.find(f"{SVG}title").text == figure.alternative
    assert ElementTree.fromstring(figure.svg_screen).get("aria-label") == figure.alternative
    assert ElementTree.fromstring(figure.svg_screen).find(f"{SVG}title") is None
    assert figure.width_mm == pytest.approx(169.3, abs=0.1)
    assert figure.caption.startswith(figure.title)


@pytest.mark.parametrize("name", ["point-plane", "point-eigenvalues", "point-loop-u", "point-reserves"])
def test_every_label_stays_inside_the_figure(name):
    figure = figures(point())[name]
    root = ElementTree.fromstring(figure.svg_print)
    for label in root.iter(f"{SVG}text"):
        size, x = float(label.get("font-size")), float(label.get("x"))
        weight = 600 if label.get("font-weight") == "600" else 400
        assert x >= 0
        assert x + size * text_width(label.text, weight) <= float(root.get("width"))
        assert size >= 9.4 * 0.7
        assert float(label.get("y")) <= float(root.get("height"))


def test_section_and_projection_of_an_ellipsoid_have_the_extents_of_the_closed_forms():
    claim = point().claims[0]
    matrix = np.array([[2, 0.5, 0], [0.5, 3, 0.25], [0, 0.25, 1]])
    for project in (False, True):
        outline = np.array(ellipse(claim, (0, 1), 3, project=project))
        shape = np.linalg.inv(matrix)[:2, :2] if project else np.linalg.inv(matrix[:2, :2])
        assert outline.max(axis=0) == pytest.approx(np.sqrt(8 * np.diag(shape)), rel=1e-3)


def test_the_contour_of_another_function_lies_on_its_level():
    quartic = {(2, 0): F(1), (0, 2): F(2), (4, 0): F(1, 5)}
    planar = point(2, quartic)
    (outline,) = section(proved_sets(planar)[0], (0, 1), 2, ((-4, 4), (-4, 4)))
    values = [x**2 + 2 * y**2 + x**4 / 5 for x, y in outline]
    assert values == pytest.approx([8] * len(values), rel=2e-3)


def test_only_proved_sets_about_the_chosen_equilibrium_are_drawn():
    proved = point()
    assert [s.evidence for s in proved_sets(proved)] == [("point.V2",)]
    assert proved_sets(replace(proved, findings=())) == ()
    weak = replace(proved.findings[0], strength="floating")
    assert proved_sets(replace(proved, findings=(weak,))) == ()
    elsewhere = replace(proved.claims[0], equilibrium="point.E2")
    assert proved_sets(replace(proved, claims=(elsewhere,))) == ()


def test_equal_sets_are_drawn_once_with_all_their_evidence():
    proved = point()
    twin = replace(proved.claims[0], identifier="point.V3")
    finding = replace(proved.findings[0], subject="point.V3")
    both = replace(proved, claims=(*proved.claims, twin), findings=(*proved.findings, finding))
    assert proved_sets(both) == (ProvedSet(proved.claims[0], ("point.V2", "point.V3")),)


def test_the_plane_names_what_it_shows():
    figure = figures(point())["point-plane"]
    shown = " ".join(texts(figure.svg_print))
    for words in ("region of starts", "limit", "domain edge", "proved set V2", "projection", "E1", "E2",
                  "unstable equilibrium", "stable equilibrium", "simulated motion", "flow"):  # fmt: skip
        assert words in shown
    assert "lies wholly inside" in figure.alternative and "1.25" in figure.alternative
    assert "point.V2" in figure.caption and "nominal parameters" in figure.caption


def test_nothing_is_called_proved_where_nothing_is():
    figure = figures(replace(point(), findings=()))["point-plane"]
    assert "proved set" not in " ".join(texts(figure.svg_print))
    assert "No attractive set was proved" in figure.alternative


def test_a_planar_model_has_no_projection():
    figure = figures(point(2))["point-plane"]
    assert "projection" not in " ".join(texts(figure.svg_print))
    assert figure.title.startswith("Phase plane")


def test_offsets_are_marked_as_such_where_the_equilibrium_is_not_zero():
    moved = point()
    chosen = replace(moved.chosen, state=(Ball(F(1, 3), F(1, 10**9)), Ball(F(0)), Ball(F(0))))
    plane = plane_of(Canvas(330), moved, moved.figure, chosen)
    assert plane.signs[0].startswith(r"\Delta") and not plane.signs[1].startswith(r"\Delta")
    assert draw_plane(moved, moved.figure, chosen).parts


def test_streamlines_follow_the_field():
    axes = Axes(Canvas(300), 0, 0, 100, 100, (-1, 1), (-1, 1))
    grid = [(0.25 * i, 0.25 * j) for i in range(-4, 5) for j in range(-4, 5)]
    field = directions([(x, y, -y, x) for x, y in grid], axes, (1.0, 1.0))
    for x, y in ((0.31, 0.17), (-0.6, 0.4), (0.0, -0.8)):
        u, v = field.at(axes.x(x), axes.y(y))
        length = math.hypot(x, y)
        assert (u, v) == pytest.approx((-y / length, -x / length), abs=0.06)
    assert field.at(-5, 5) is None


def test_phase_and_magnitude_are_those_of_the_transfer_function():
    for sample in RESPONSE[::20]:
        assert decibels(sample) == pytest.approx(20 * math.log10(abs(third_order(sample[0]))))
    found = phases(RESPONSE, CROSSOVER)
    expected = [-3 * math.degrees(math.atan(w)) for w in OMEGAS]
    assert found == pytest.approx(expected, abs=1e-9)


def test_margins_are_printed_towards_zero_at_the_loop():
    loop = figures(point())["point-loop-u"]
    shown = texts(loop.svg_print)
    assert "8.51 dB" in shown  # 20 log10(8/3) = 8.5194 dB
    assert f"{math.floor(math.degrees(PHASE) * 10) / 10}°" in shown
    assert "refuted" in loop.alternative and "point.S-u" in loop.caption


def test_a_loop_knows_what_is_asked_of_it():
    criterion = Criterion("C1", "phase_margin", "nominal", loop="u")
    loop = Loop("u", RESPONSE, None, (criterion,))
    assert loop.asked("phase_margin") is criterion
    assert loop.asked("peak_sensitivity") is None


def test_the_strictest_demand_on_the_eigenvalues_is_drawn():
    case = chain()
    stricter = Criterion("C9", "exponential_stability", "nominal", at_least=quantity("0.7", "1/s"))
    demands = demands_of(replace(case, criteria=(*case.criteria, stricter)))
    assert demands.rate == (0.7, stricter)
    assert demands.damping[0] == 0.2
    assert demands.interval is None


def test_a_sampled_model_gets_the_unit_circle_and_its_interval():
    case = loop_case({"x": "x/2", "y": "y/3"}, {}, {"T": "1/50"}, "T")
    assert demands_of(case).interval == pytest.approx(0.02)
    chosen = replace(
        equilibrium_at(0, 0), eigenvalues=(Eigenvalue(F(1, 2), F(0), F(0)), Eigenvalue(F(1, 3), F(0), F(0)))
    )
    sampled = replace(point(2), case=case, equilibria=(chosen,), figure=None, outcomes=(), claims=())
    figure = figures(sampled)["point-eigenvalues"]
    assert "unit circle" in texts(figure.svg_print)
    assert "multipliers" in figure.alternative


def test_reserves_come_from_the_outcomes_and_the_proved_scale():
    shares = [r.share for r in reserves_of(point())]
    assert shares == [F(1, 4), F(2), None, None]
    shown = texts(figures(point())["point-reserves"].svg_print)
    assert "refuted" in shown and "not established" in shown
    assert "smallest proved reserve" in figures(point())["point-reserves"].alternative


def test_an_unproved_criterion_never_shows_a_reserve():
    outcomes = tuple(replace(o, verdict="supported") for o in point().outcomes)
    assert [r.share for r in reserves_of(replace(point(), outcomes=outcomes))] == [None] * 4


@pytest.mark.parametrize(
    ("unit", "reach", "text", "factor"),
    [
        (PrintedUnit("m"), 2e-3, "mm", 1e-3),
        (PrintedUnit("m/s"), 0.05, "mm/s", 1e-3),
        (PrintedUnit("N"), 15000, "kN", 1e3),
        (PrintedUnit("m"), 1.5, "m", 1.0),
        (DEGREE, 1.0, "°", math.pi / 180),
        (PrintedUnit("1"), 0.4, "", 1.0),
    ],
)  # fmt: skip
def test_axes_use_the_declared_unit_with_a_prefix_where_that_reads_better(unit, reach, text, factor):
    shown = shown_unit(unit, reach)
    assert (shown.unit, shown.power) == (text, 0)
    assert shown.factor == pytest.approx(factor)


def test_a_unit_that_takes_no_prefix_gets_a_power_of_ten():
    shown = shown_unit(PrintedUnit("m^2"), 2e-6)
    assert (shown.unit, shown.power) == ("m²", -6)
    assert shown.label("A")[1] == " / 10"


@given(
    st.floats(-1e6, 1e6), st.floats(1e-6, 1e6), st.integers(2, 9)
)  # fmt: skip
def test_ticks_are_evenly_spaced_inside_the_range(low, width, about):
    high = low + max(width, abs(low) * 1e-6)
    values = ticks(low, high, about)
    step = (high - low) / about
    assert all(low - 0.01 * step <= v <= high + 0.01 * step for v in values)
    gaps = np.diff(values)
    assert len(values) < 2 or np.allclose(gaps, gaps[0], rtol=1e-3)
    assert about / 2.6 <= (high - low) / (gaps[0] if len(gaps) else step) <= about * 2.6


@example([(43.0, 0.0), (137.0, 167.0), (137.0, 166.0)])
@given(st.lists(st.tuples(st.floats(0, 640), st.floats(0, 300)), min_size=2, max_size=40))
def test_thinning_moves_no_line_further_than_allowed(points):
    kept = thin(points, 0.5)
    assert kept[0] == points[0] and kept[-1] == points[-1]
    assert set(kept) <= set(points)
    for x, y in points:
        assert min(_distance((x, y), a, b) for a, b in pairwise(kept)) <= 0.5 + 1e-9


def _distance(p, a, b):
    (x, y), (u, v), (s, t) = p, a, b
    length = (s - u) ** 2 + (t - v) ** 2
    along = 0.0 if length == 0 else min(1, max(0, ((x - u) * (s - u) + (y - v) * (t - v)) / length))
    return math.hypot(u + along * (s - u) - x, v + along * (t - v) - y)


def test_text_is_measured_from_the_font_and_labels_add_up():
    assert text_width("iiii") < text_width("mmmm")
    assert text_width("ab") == pytest.approx(text_width("a") + text_width("b"))
    assert label_width(("a", Sign("x"), "b")) > text_width("ab")


def test_a_label_ends_where_it_is_told_to():
    canvas = Canvas(20)
    canvas.text(100, 10, "limit", 10, place=1)
    (label,) = ElementTree.fromstring(canvas.render("", "print")).iter(f"{SVG}text")
    assert float(label.get("x")) + 10 * text_width("limit") == pytest.approx(100, abs=0.01)


def test_markup_in_words_is_escaped():
    canvas = Canvas(20)
    canvas.text(0, 10, "a < b & c", 10)
    canvas.line(((0, 0), (5, 5)), Stroke())
    for paper in ("print", "screen"):
        root = ElementTree.fromstring(canvas.render('V < 1 & "w"', paper))
        assert next(root.iter(f"{SVG}text")).text == "a < b & c"
