"""All criteria of an operating point in one chart: required, obtained, and how much reserve is proved."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Final

from dossier.model.dossier import PointEvidence
from dossier.model.outcome import Outcome, Verdict
from dossier.report import numbers
from dossier.report.content.quantities import obtained, required
from dossier.report.plots.axes import TICK_SIZE
from dossier.report.svg import Canvas, Stroke, label_width, path_of
from dossier.report.wording import VERDICT_WORDS, claim_name

TOP: Final = 41.0
ROW: Final = 22.0
BELOW: Final = 16.0
MARK_X: Final = 8.0
NAME_X: Final = 20.0
CLAIM_X: Final = 62.0
REQUIRED_X: Final = 222.0
OBTAINED_X: Final = 318.0
SCALE: Final = (432.0, 590.0)
"""Layout in pixels: columns from the left, then the scale of the reserve."""

FULL: Final = 1.0
"""Reserve at the right end of the scale: the whole way between the limit and rest, or the limit again."""

SCALE_TICKS: Final = (0.0, 0.25, 0.5, 0.75, 1.0)

REGION_SCALE: Final = "proved scale of the region"


@dataclass(frozen=True, slots=True)
class Reserve:
    """One row: the proved reserve (0 is the limit itself), or None with the verdict in words."""

    outcome: Outcome
    share: Fraction | None


def reserves_of(point: PointEvidence) -> tuple[Reserve, ...]:
    """A row per criterion; a proved region's reserve is what its proved scale exceeds 1 by."""
    return tuple(Reserve(o, _share(point, o)) for o in point.outcomes)


def _share(point: PointEvidence, outcome: Outcome) -> Fraction | None:
    if outcome.verdict != "proved":
        return None
    if outcome.reserve is not None:
        return outcome.reserve.lower
    if outcome.claim != "attraction":
        return None
    scales = [
        f.facts[REGION_SCALE].lower
        for f in point.findings
        if f.subject == outcome.identifier and f.result == "proved" and f.is_rigorous and REGION_SCALE in f.facts
    ]
    best = max((s for s in scales if s is not None), default=None)
    return None if best is None else best - 1


def colour_of(verdict: Verdict) -> str:
    """The colour token of a verdict."""
    return "mid" if verdict in ("not applicable", "not attempted") else verdict.replace(" ", "-")


def draw_mark(canvas: Canvas, x: float, y: float, verdict: Verdict) -> None:
    """The verdict's mark as a shape: filled, half, hollow, triangle, crossed, dash."""
    token = colour_of(verdict)
    stroke = Stroke(token, 1.3)
    if verdict == "contradicted":
        canvas.path(path_of(((x - 4.4, y + 3.6), (x + 4.4, y + 3.6), (x, y - 4.2)), True), stroke, token)
    elif verdict == "not applicable":
        canvas.line(((x - 4, y), (x + 4, y)), stroke)
    else:
        dashed = Stroke(token, 1.3, "1.6 2.2") if verdict == "not attempted" else stroke
        canvas.circle(x, y, 4.0, token if verdict == "proved" else "none", dashed)
    if verdict in ("refuted", "no operating point"):
        canvas.cross(x, y, 2.8, stroke)
    if verdict == "supported":
        canvas.path(f"M{x:g} {y - 4:g}A4 4 0 0 0 {x:g} {y + 4:g}Z", None, token)


def draw_reserves(point: PointEvidence) -> Canvas:
    """The whole figure."""
    rows = reserves_of(point)
    bottom = TOP + ROW * len(rows)
    canvas = Canvas(bottom + BELOW)
    for x, title in ((NAME_X, "criterion"), (REQUIRED_X, "required"), (OBTAINED_X, "obtained")):
        canvas.text(x, 14, title, TICK_SIZE, fill="mid")
    canvas.text(SCALE[0], 14, "proved reserve / %", TICK_SIZE, fill="mid")
    for tick in SCALE_TICKS:
        x = _place(tick)
        canvas.line(((x, TOP - 10), (x, bottom)), Stroke("mid", 1.1) if tick == 0 else Stroke("hair", 0.8))
        canvas.text(x, TOP - 15, f"{100 * tick:g}", TICK_SIZE, fill="mid", place=0.5)
    for index, row in enumerate(rows):
        _draw_row(canvas, point, row, TOP + ROW * (index + 0.5))
    return canvas


def _place(share: float) -> float:
    return SCALE[0] + share / FULL * (SCALE[1] - SCALE[0])


def _draw_row(canvas: Canvas, point: PointEvidence, row: Reserve, y: float) -> None:
    outcome, base = row.outcome, y + 3.6
    name = outcome.identifier.split(".", 1)[-1]
    criterion = next((c for c in point.case.criteria if c.name == name), None)
    draw_mark(canvas, MARK_X, y, outcome.verdict)
    canvas.text(NAME_X, base, name, 10, weight=600)
    canvas.text(CLAIM_X, base, claim_name(outcome.claim), 10)
    if criterion is not None:
        _fitted(canvas, REQUIRED_X, base, required(criterion) or "yes", OBTAINED_X)
        _fitted(canvas, OBTAINED_X, base, _obtained(point, row), SCALE[0])
    token = colour_of(outcome.verdict)
    if row.share is None:
        canvas.text(SCALE[0] + 7, base, VERDICT_WORDS[outcome.verdict].word, TICK_SIZE, fill=token, halo=True)
        return
    share = float(row.share)
    x = _place(min(max(share, 0.0), FULL))
    canvas.line(((SCALE[0], y), (x, y)), Stroke(token, 2.2))
    if share > FULL:
        canvas.path(path_of(((x, y - 4.5), (x + 7, y), (x, y + 4.5)), True), None, token)
        canvas.text(x + 12, base, numbers.percent_below(row.share), TICK_SIZE, fill="ink")
        return
    canvas.circle(x, y, 3.6, token)
    canvas.text(x + 8, base, numbers.percent_below(row.share), TICK_SIZE, fill="ink", halo=True)


def _fitted(canvas: Canvas, x: float, y: float, text: str, end: float) -> None:
    """A text set smaller where it would reach the next column."""
    size = min(10.0, (end - x - 8) / max(label_width((text,)), 1e-6))
    canvas.text(x, y, text, size)


def _obtained(point: PointEvidence, row: Reserve) -> str:
    outcome = row.outcome
    criterion = next(c for c in point.case.criteria if outcome.identifier == f"{point.case.name}.{c.name}")
    text = obtained(outcome, criterion, point.case)
    if text:  # the column of the figure is narrow
        return text.replace(numbers.NO_FINITE_VALUE, "no finite value").replace("nominal only", "nominal")
    if row.share is not None and outcome.claim == "attraction":
        return f"{numbers.below(row.share + 1, 3)} × region"
    return ""


def describe_reserves(point: PointEvidence) -> tuple[str, str, str]:
    """Title, alternative text and caption of the figure."""
    rows = reserves_of(point)
    title = f"Criteria of {point.case.name}: required, obtained, reserve"
    numbered = [r for r in rows if r.share is not None]
    words = [f"{len(rows)} criteria, {sum(r.outcome.verdict == 'proved' for r in rows)} of them proved."]
    if numbered:
        least = min(numbered, key=lambda r: r.share or Fraction(0))
        share = numbers.percent_below(least.share or Fraction(0))
        words.append(f"The smallest proved reserve is {share}, of {least.outcome.identifier}.")
    unproved = [f"{r.outcome.identifier} {r.outcome.verdict}" for r in rows if r.outcome.verdict != "proved"]
    if unproved:
        words.append(f"Not proved: {', '.join(unproved)}.")
    caption = (
        f"{title}. Reserve: how much of the way from the limit to rest (along motions) or of the limit itself (values) "
        "is left, rounded down; for a region, what its proved scale exceeds 1 by. Verdict marks: filled proved, half "
        "supported by sampling, hollow not established, triangle contradicted by simulation, crossed refuted or no "
        f"operating point. Model {point.case.model.name} ({point.case.model.basis or 'no basis stated'})."
    )
    return title, " ".join(words), caption
