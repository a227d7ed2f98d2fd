"""Run a set of motions and confirm what they show by integrating the worst one again, more accurately."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from dossier.checks.branch import linear_part, newton
from dossier.checks.field import Columns, Flow, Formulas
from dossier.checks.motion import Ending, Motions, Observer, Work, integrate, iterate, never_stop
from dossier.checks.starts import Starts
from dossier.checks.watch import FAR, NEIGHBOURHOOD, Recorder, Watched
from dossier.model.case import Case

RELATIVE: Final = 1e-7
ABSOLUTE: Final = 1e-9
"""Error per step of a campaign: relative, and as a share of the region; far below what a drawing or limit shows."""

TIGHT: Final = 1e-3
"""Factor on both when a motion is integrated again to estimate its error."""

PROBE: Final = 1e-12
"""Relative change of the start of a sampled motion that stands in for rounding in all its steps."""

MARGIN: Final = 1_000.0
"""A violation counts when it exceeds the estimated integration error by this factor."""

TIME_CONSTANTS: Final = 60.0
DWELL: Final = 3.0
STILL: Final = 10.0
"""Horizon, and times to stay near or still, in time constants of the slowest mode (e^-7 is a thousandth)."""

STABLE: Final = 1e-9
"""A decay rate above this share of the fastest rate is told from zero; far above the error of differences."""

STEPS: Final = 4_000
"""Accepted and rejected steps one motion may take; a diverging or stiff model costs seconds at most."""

DEADBEAT: Final = 1.0
"""Decay per sample that is counted at most: a loop whose multipliers are all zero still needs samples to be seen."""

SAMPLES: Final = 20_000
"""Sampling instants one motion may take."""


@dataclass(frozen=True, slots=True)
class Pace:
    """How long to simulate, from the linear part: rates in 1/s, or per sample for sampled models."""

    slowest: float
    fastest: float
    stable: bool

    @property
    def horizon(self) -> float:
        """Time after which a motion is given up."""
        return TIME_CONSTANTS / self.slowest

    @property
    def dwell(self) -> float:
        """How long a motion must stay near to count as converged."""
        return DWELL / self.slowest if self.stable else np.inf

    @property
    def rest(self) -> float:
        """How long a motion must stay still to count as resting."""
        return STILL / self.slowest


def pace_of(flow: Flow, scale: Columns) -> Pace:
    """Pace from the eigenvalues at the equilibrium of the first motion of `flow`."""
    matrix = linear_part(flow.select(np.zeros(1, np.intp)), scale)
    if not np.isfinite(matrix).all():
        return Pace(1.0, 1.0, False)
    values = np.linalg.eigvals(matrix)
    if flow.sampled:
        moduli = np.abs(values)
        with np.errstate(divide="ignore"):
            rates = np.minimum(-np.log(moduli), DEADBEAT)
        fastest = 1.0
    else:
        rates, fastest = -values.real, float(np.max(np.abs(values)))
    least = float(rates.min())
    if least > STABLE * fastest:
        return Pace(least, max(fastest, least), True)
    size = float(np.max(np.abs(rates[np.isfinite(rates)]), initial=0.0)) or fastest or 1.0
    return Pace(size, max(fastest, size), False)


@dataclass(frozen=True)
class Trial:
    """Motions that were run, with everything recorded about them."""

    starts: Starts
    flow: Flow
    watched: Watched
    recorder: Recorder
    motions: Motions
    pace: Pace
    scale: Columns
    rests_elsewhere: NDArray[np.bool_]

    @property
    def converged(self) -> NDArray[np.bool_]:
        """Motions that came and stayed near the equilibrium."""
        return self.motions.endings == Ending.CONVERGED

    @property
    def diverged(self) -> NDArray[np.bool_]:
        """Motions that escape faster and faster, or were far away where no further step could be made."""
        endings = self.motions.endings
        return (endings == Ending.DIVERGED) | ((endings == Ending.SINGULAR) & (self.recorder.distance > FAR))

    @property
    def left_domain(self) -> NDArray[np.bool_]:
        """Motions that left the domain of the model."""
        return self.motions.endings == Ending.LEFT_DOMAIN


RecorderMaker = Callable[[Flow, Pace], Recorder]


def run_trial(
    case: Case, field: Formulas, starts: Starts, watched: Watched, scale: Columns, make: RecorderMaker | None = None
) -> Trial:
    """Simulate all `starts`, with the recorder that `make` gives (by default the plain one)."""
    flow = starts.flow(field, case.model.time == "sampled")
    pace = pace_of(flow, scale)
    recorder = make(flow, pace) if make else Recorder(watched, flow, scale, pace.dwell, pace.rest)
    horizon = np.full(starts.offsets.shape[1], pace.horizon)
    motions = _run(flow, starts.offsets, recorder, horizon, pace, scale, 1.0)
    elsewhere = motions.endings == Ending.RESTS
    if elsewhere.any():
        elsewhere[elsewhere] = _equilibria_near(field, starts, motions, elsewhere, scale, flow.sampled)
    return Trial(starts, flow, watched, recorder, motions, pace, scale, elsewhere)


def _run(
    flow: Flow, offsets: Columns, observe: Observer, horizon: Columns, pace: Pace, scale: Columns, tighter: float
) -> Motions:
    if flow.sampled:
        samples = np.minimum(np.round(horizon), SAMPLES).astype(np.intp)
        return iterate(flow.select, offsets, observe, samples)
    first = 0.01 / pace.fastest
    steps = int(STEPS / tighter**0.2)
    return integrate(
        flow.select, offsets, observe, Work(horizon, RELATIVE * tighter, ABSOLUTE * tighter * scale, steps, first)
    )


def _equilibria_near(
    field: Formulas, starts: Starts, motions: Motions, resting: NDArray[np.bool_], scale: Columns, sampled: bool
) -> NDArray[np.bool_]:
    """Which resting motions lie at another equilibrium, by Newton's method from there."""
    places = starts.centres[:, resting] + motions.offsets[:, resting]
    found, good = newton(field, places, starts.parameters[:, resting], scale, sampled)
    near = np.max(np.abs(found - places) / scale[:, None], axis=0) < NEIGHBOURHOOD
    apart = np.max(np.abs(found - starts.centres[:, resting]) / scale[:, None], axis=0) > NEIGHBOURHOOD
    return good & near & apart


@dataclass(frozen=True, slots=True)
class Confirmation:
    """A value seen again more accurately: the value, and the estimated error of the campaign's own motion."""

    value: float
    error: float

    def exceeds(self, bound: float, size: float) -> float:
        """Distance beyond `bound` over the estimated error (not below rounding of `size`); infinite never."""
        floor = PROBE * max(size, abs(self.value), abs(bound))
        return abs(self.value - bound) / max(self.error, floor)


def confirm(trial: Trial, column: int, time: float, read: Callable[[Flow, Columns], float]) -> Confirmation:
    """Value of `read` on one motion at `time`, from a motion a thousand times more accurate; nan where it fails."""
    one = trial.starts.only(column)
    flow = Flow(trial.flow.field, one.centres, one.parameters, trial.flow.sampled)
    horizon = np.array([time])
    values = []
    for tighter in (1.0, TIGHT):
        start = one.offsets
        if flow.sampled and tighter == 1.0:
            start = start * (1 + PROBE) + PROBE * trial.scale[:, None]
        motion = _run(flow, start, never_stop, horizon, trial.pace, trial.scale, tighter)
        reached = motion.endings[0] == Ending.HORIZON
        values.append(read(flow, motion.offsets) if reached else float("nan"))
    return Confirmation(values[1], abs(values[1] - values[0]))
