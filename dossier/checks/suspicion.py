"""What a simulated motion seems to violate, confirmed by a more accurate motion and put into words."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from dossier.checks.field import Columns, Flow
from dossier.checks.trial import MARGIN, Trial, confirm
from dossier.checks.watch import NEIGHBOURHOOD, ROUNDING, FallRecorder, Row
from dossier.model.case import Case, Criterion, value_of

TRIED: Final = 3
"""Worst motions that are integrated again before a suspicion is dropped."""

DIGITS: Final = 6
"""Significant digits of printed floating-point values."""


@dataclass(frozen=True, slots=True)
class Violation:
    """A violation that was confirmed, in words, with its margin over the estimated error."""

    statement: str
    counter_example: Mapping[str, str]


def rows_of(trial: Trial, criterion: Criterion) -> list[int]:
    """Watched rows that a motion must keep within their bounds for `criterion`."""
    rows = trial.watched.rows
    if criterion.claim == "excursion":
        return [trial.watched.place(criterion.name, "quantity")]
    kinds = ("domain",) if criterion.claim == "attraction" else ("domain", "state", "signal")
    return [i for i, row in enumerate(rows) if row.kind in kinds]


def largest_excess(trial: Trial, chosen: list[int]) -> tuple[Columns, Columns, NDArray[np.intp]]:
    """Largest excess per motion as a share of the bound's size, when it occurred, and on which row."""
    recorder, rows = trial.recorder, [trial.watched.rows[i] for i in chosen]
    size = np.array([r.size for r in rows])[:, None]
    above = (recorder.greatest[chosen] - np.array([r.upper for r in rows])[:, None]) / size
    below = (np.array([r.lower for r in rows])[:, None] - recorder.least[chosen]) / size
    larger = np.maximum(above, below)
    row = np.argmax(larger, axis=0)
    columns = np.arange(row.size)
    high = above[row, columns] >= below[row, columns]
    at = np.where(high, recorder.greatest_at[chosen][row, columns], recorder.least_at[chosen][row, columns])
    return larger[row, columns], at, np.asarray(chosen)[row]


def not_attracted(trial: Trial, criterion: Criterion) -> NDArray[np.bool_]:
    """Motions that went away beyond measure or came to rest elsewhere, where the criterion forbids it."""
    if criterion.claim == "attraction":
        return trial.diverged | trial.rests_elsewhere
    return np.zeros(trial.motions.endings.size, bool)


def worst_confirmed(
    case: Case, trial: Trial, criterion: Criterion, violating: NDArray[np.bool_],
    found: tuple[Columns, Columns, NDArray[np.intp]],
) -> Violation | None:  # fmt: skip
    """The worst motion whose violation a more accurate motion confirms, or None.

    Worst is the largest excess over a bound; among motions that leave the domain or go away, the earliest.
    """
    excess, at, row = found
    domain = np.array([r.kind == "domain" for r in trial.watched.rows])[row]
    severity = np.where(domain, 0.0, np.maximum(np.nan_to_num(excess, nan=0.0), 0.0))
    order = np.lexsort((at, -severity, ~violating))
    for column in order[: min(TRIED, int(np.count_nonzero(violating)))]:
        if excess[column] > ROUNDING:
            violation = _confirm_row(case, trial, criterion, int(column), int(row[column]), float(at[column]))
        else:
            violation = _confirm_away(case, trial, criterion, int(column))
        if violation is not None:
            return violation
    return None


def _confirm_row(
    case: Case, trial: Trial, criterion: Criterion, column: int, row: int, time: float
) -> Violation | None:
    def read(flow: Flow, offsets: Columns) -> float:
        return float(trial.watched.values(flow, np.zeros(1, np.intp), offsets)[row, 0])

    seen = confirm(trial, column, time, read)
    what = trial.watched.rows[row]
    bound = what.upper if seen.value > what.upper else what.lower
    if what.lower <= seen.value <= what.upper or not np.isfinite(bound):
        return None
    margin = seen.exceeds(bound, what.size)
    if not margin > MARGIN:
        return None
    event = _event(case, criterion, what, seen.value, bound)
    statement = f"a simulated motion violates it: {event} at {time_text(case, time)}"
    return Violation(statement, _counter_example(case, trial, column, time_text(case, time), event, margin))


def _confirm_away(case: Case, trial: Trial, criterion: Criterion, column: int) -> Violation | None:
    """Confirm that a motion diverged or rests elsewhere, by its distance in units of the region."""

    def read(flow: Flow, offsets: Columns) -> float:
        return float(np.max(np.abs(offsets[:, 0]) / trial.scale))

    away = bool(trial.diverged[column])
    time = float(trial.recorder.far_at[column] if away else trial.motions.times[column])
    seen = confirm(trial, column, time, read)
    margin = seen.exceeds(NEIGHBOURHOOD, 1.0)
    if not (seen.value > NEIGHBOURHOOD and margin > MARGIN):
        return None
    if away:
        last = trial.recorder.distance[column]
        event = f"the motion escapes: {seen.value:.3g} regions away, faster and faster, last seen at {last:.1e}"
    else:
        event = f"the motion comes to rest elsewhere, at {_state_text(case, trial.motions.offsets[:, column])}"
    statement = f"a simulated motion violates it: {event}"
    return Violation(statement, _counter_example(case, trial, column, time_text(case, time), event, margin))


def _event(case: Case, criterion: Criterion, row: Row, value: float, bound: float) -> str:
    side = "above" if value > bound else "below"
    if row.kind == "quantity":
        return f"{criterion.of_written} is {value:.6g} (SI), {side} its bound {bound:.6g}"
    if row.kind == "signal":
        signal = next(s for s in case.model.signals if s.name == row.name)
        scale, unit = float(value_of(signal.scale).middle), signal.unit
        return f"{row.name} is {_with_unit(value / scale, unit)}, {side} its limit {_with_unit(bound / scale, unit)}"
    state = next(s for s in case.model.states if s.name == row.name)
    scale = float(value_of(state.scale).middle)
    here, there = _with_unit(value / scale, state.unit), _with_unit(bound / scale, state.unit)
    if row.kind == "domain":
        return f"{row.name} leaves the domain: {here}, {side} {there}"
    return f"{row.name} is {here} from the equilibrium, {side} its limit {there}"


def _with_unit(value: float, unit: str) -> str:
    number = f"{value:.{DIGITS}g}"
    return number if unit == "1" else f"{number} {unit}"


def time_text(case: Case, time: float) -> str:
    """A simulated time in words; sampled models count samples."""
    if case.model.time == "sampled":
        return f"sample {time:.0f}"
    return f"{time:.4g} s"


def duration_text(case: Case, time: float) -> str:
    """A length of simulated time in words."""
    return f"{time:.0f} samples" if case.model.time == "sampled" else time_text(case, time)


def _state_text(case: Case, offsets: Columns) -> str:
    parts = []
    for state, offset in zip(case.model.states, offsets, strict=True):
        parts.append(f"{state.name} = {_with_unit(offset / float(value_of(state.scale).middle), state.unit)}")
    return "offset " + ", ".join(parts)


def _combination(case: Case, trial: Trial, column: int, nominal: Columns) -> str:
    parts = []
    for i, parameter in enumerate(case.model.parameters):
        value = trial.starts.parameters[i, column]
        if value != nominal[i]:
            scale = float(value_of(parameter.scale).middle)
            parts.append(f"{parameter.name} = {_with_unit(value / scale, parameter.unit)}")
    return ", ".join(parts) or "nominal"


def _counter_example(case: Case, trial: Trial, column: int, time: str, event: str, margin: float) -> dict[str, str]:
    nominal = np.array([float(p.nominal.middle) for p in case.model.parameters])
    return {
        "combination": _combination(case, trial, column, nominal),
        "start": _state_text(case, trial.starts.offsets[:, column]),
        "time": time,
        "event": event,
        "margin": f"{margin:.1e} times the estimated integration error",
    }


def confirm_rise(case: Case, trial: Trial, recorder: FallRecorder, column: int) -> dict[str, str] | None:
    """The counter-example, if a more accurate motion confirms the largest rise of V along motion `column`."""

    def read(flow: Flow, offsets: Columns) -> float:
        return float(recorder.fall(offsets)[0])

    before, after = float(recorder.rise_from[column]), float(recorder.rise_to[column])
    first, second = confirm(trial, column, before, read), confirm(trial, column, after, read)
    rise, error = second.value - first.value, max(first.error + second.error, np.finfo(float).eps)
    if not (rise > 0 and rise / error > MARGIN):
        return None
    event = f"V rises by {rise:.3g} of its level from {time_text(case, before)} to {time_text(case, after)}"
    return _counter_example(case, trial, column, time_text(case, after), event, rise / error)
