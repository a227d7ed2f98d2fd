"""Floating-point data for the figures of one operating point: motions, flow in a plane, frequency responses.

For looking at, never evidence.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np
from flint import arb, fmpq

from dossier.checks.branch import linear_part
from dossier.checks.field import Columns, Flow, Formulas, compile_field
from dossier.checks.motion import Codes, Index
from dossier.checks.starts import Starts, boundary_points, nominal_point, scale_of
from dossier.checks.trial import Pace, RecorderMaker, run_trial
from dossier.checks.watch import Recorder, watch
from dossier.model.case import Case
from dossier.model.claim import CoverClaim, LyapunovClaim
from dossier.model.dossier import FigureData, Trajectory
from dossier.model.equilibrium import Equilibrium
from dossier.model.linear_part import LinearLoop, linear_loop

CORNER_MOTIONS: Final = 4
BOUNDARY_MOTIONS: Final = 8
POINTS: Final = 480
"""Motions drawn, from corners of the region and from the boundary of a proved set, and points kept of each.

Long motions are cut short, not thinned: a spiral of many turns would become a polygon.
"""

GRID: Final = (49, 37)
"""Flow samples across and up: enough to draw smooth streamlines by interpolation."""

FARTHEST: Final = 4.0
"""Motions are followed out to this many times the reach of region and set; farther, they leave the picture."""

NEAR: Final = 1.6
"""Limits and edges of the domain are shown where they lie within this many times the reach of the motions."""

AROUND: Final = 1.15
"""The plane shown reaches this much further than everything that must be seen in it."""

FREQUENCIES: Final = 400
"""Points of a frequency response, evenly spaced in the logarithm."""

DECADES: Final = 1.5
"""Shown beyond the slowest and the fastest rate of the loop."""

SEED: Final = 1
"""The directions of the motions drawn are picked at random, always the same ones."""


def figure_data(
    case: Case, equilibrium: Equilibrium, claims: Sequence[LyapunovClaim | CoverClaim]
) -> FigureData | None:
    """Data of the figures at the nominal parameters; None for a model with a single state."""
    if len(case.model.states) == 1:
        return None
    field = compile_field(case)
    scale = scale_of(case, case.region)
    centre, nominal = nominal_point(case, equilibrium)
    flow = Flow(field, centre[:, None], nominal[:, None], case.model.time == "sampled")
    plane = choose_plane(case, flow, scale)
    offsets, drawn = _starts(case, claims, scale)
    trajectories = _trajectories(case, equilibrium, field, offsets, scale)
    window = _window(case, plane, centre, drawn, _seen(trajectories))
    responses = tuple(_responses(case, equilibrium))
    return FigureData((case.model.state_names[plane[0]], case.model.state_names[plane[1]]), trajectories,
                      _flow(flow, plane, window), responses)  # fmt: skip


def choose_plane(case: Case, flow: Flow, scale: Columns) -> tuple[int, int]:
    """The two states most telling: one with limits, and the one that drives it most strongly.

    Strength is the entry of the linear part per region of the other state; two states are taken as they come.
    """
    names = case.model.state_names
    if len(names) == 2:  # noqa: PLR2004 - a plane
        return 0, 1
    limited = [i for i, n in enumerate(names) if case.limits[n].lower is not None or case.limits[n].upper is not None]
    first = limited[0] if limited else 0
    matrix = np.abs(linear_part(flow.select(np.zeros(1, np.intp)), scale))
    coupling = np.where(np.arange(len(names)) == first, -1.0, np.nan_to_num(matrix[first]))
    return first, int(np.argmax(coupling))


def _starts(case: Case, claims: Sequence[LyapunovClaim | CoverClaim], scale: Columns) -> tuple[Columns, Columns]:
    """Starts of the motions, and everything whose extent the plane must show (columns of offsets)."""
    columns: list[Columns] = []
    extent: list[Columns] = []
    if case.region.is_bounded:
        corners = np.array([[float(v) for v in c] for c in case.region.corners()]).T
        step = max(1, corners.shape[1] // CORNER_MOTIONS)
        columns.append(corners[:, ::step][:, :CORNER_MOTIONS])
        extent.append(corners)
    if claims:
        random = np.random.default_rng(SEED)
        claim = claims[0]
        edge = boundary_points(claim.function, float(claim.level), scale, 100 * BOUNDARY_MOTIONS, random)
        columns.append(edge[:, :BOUNDARY_MOTIONS])
        extent.append(edge)
    if not columns:
        columns.append(scale[:, None] * np.array([[1.0, -1.0]]))
    chosen = np.concatenate(columns, axis=1)
    return chosen, np.concatenate([*extent, chosen], axis=1)


class _Tracer(Recorder):
    """A recorder that also keeps every sight of every motion."""

    def __init__(self, *arguments: object) -> None:
        super().__init__(*arguments)  # type: ignore[arg-type]
        self.sights: list[tuple[Index, Columns, Columns]] = []

    def __call__(self, index: Index, times: Columns, offsets: Columns) -> Codes:
        self.sights.append((index.copy(), times.copy(), offsets.copy()))
        return super().__call__(index, times, offsets)


def _trajectories(
    case: Case, equilibrium: Equilibrium, field: Formulas, offsets: Columns, scale: Columns
) -> tuple[Trajectory, ...]:
    centre, nominal = nominal_point(case, equilibrium)
    count = offsets.shape[1]
    starts = Starts(
        offsets, np.repeat(nominal[:, None], count, 1), np.repeat(centre[:, None], count, 1), np.zeros(count, bool)
    )
    watched = watch(case, ())

    def trace(flow: Flow, pace: Pace) -> Recorder:
        return _Tracer(watched, flow, scale, pace.dwell, pace.rest)

    maker: RecorderMaker = trace
    trial = run_trial(case, field, starts, watched, scale, maker)
    assert isinstance(trial.recorder, _Tracer)
    interval = sample_interval(case)
    found = []
    for motion in range(count):
        times, points = _path(trial.recorder.sights, motion)
        keep = range(min(POINTS, len(times)))
        found.append(
            Trajectory(
                tuple(float(times[i]) * interval for i in keep),
                tuple(tuple(float(v) for v in points[i]) for i in keep),
            )
        )
    return tuple(found)


def _path(sights: list[tuple[Index, Columns, Columns]], motion: int) -> tuple[list[float], list[Columns]]:
    times, points = [], []
    for index, when, where in sights:
        place = np.flatnonzero(index == motion)
        if place.size:
            times.append(float(when[place[0]]))
            points.append(where[:, place[0]])
    return times, points


def sample_interval(case: Case) -> float:
    """Seconds per unit of simulated time: 1, or the sample interval at the nominal parameters."""
    if case.model.sample_interval is None:
        return 1.0
    names = tuple(p.name for p in case.model.parameters)
    values = np.array([[float(p.nominal.middle)] for p in case.model.parameters]).reshape(-1, 1)
    return float(Formulas((case.model.sample_interval,), names)(values)[0, 0])


def _seen(trajectories: tuple[Trajectory, ...]) -> Columns:
    return np.array([offsets for t in trajectories for offsets in t.offsets]).T


def _window(
    case: Case, plane: tuple[int, int], centre: Columns, drawn: Columns, moved: Columns
) -> list[tuple[float, float]]:
    """Range of offsets to show of each of the two states.

    Everything in `drawn`, the motions unless they go far away, and limits and domain where they are near.
    """
    sides = []
    for i in plane:
        name = case.model.state_names[i]
        least, sizes = float(np.max(np.abs(drawn[i]))), np.abs(moved[i])
        reach = float(np.max(sizes[sizes <= FARTHEST * least], initial=least))
        edges = [(e, 0.0) for e in (case.limits[name].lower, case.limits[name].upper)]
        edges += [(e, float(centre[i])) for e in (case.model.domain[name].lower, case.model.domain[name].upper)]
        near = [abs(float(e) - shift) for e, shift in edges if e is not None]
        reach = max([reach, *(d for d in near if d <= NEAR * reach)])
        sides.append((-AROUND * reach, AROUND * reach))
    return sides


def _flow(
    flow: Flow, plane: tuple[int, int], window: list[tuple[float, float]]
) -> tuple[tuple[float, float, float, float], ...]:
    """Directions on a grid in the plane through the equilibrium; for sampled models the step to the next sample."""
    across, up = (np.linspace(*side, size) for side, size in zip(window, GRID, strict=True))
    x, y = (g.ravel() for g in np.meshgrid(across, up))
    offsets = np.zeros((flow.centres.shape[0], x.size))
    offsets[plane[0]], offsets[plane[1]] = x, y
    rates = flow.select(np.zeros(x.size, np.intp))(offsets)
    if flow.sampled:
        rates = rates - offsets
    dx, dy = rates[plane[0]], rates[plane[1]]
    usable = np.isfinite(dx) & np.isfinite(dy)
    return tuple(
        (float(a), float(b), float(c), float(d)) for a, b, c, d in zip(x[usable], y[usable], dx[usable], dy[usable],
                                                                       strict=True)
    )  # fmt: skip


def _responses(case: Case, equilibrium: Equilibrium):
    for loop in dict.fromkeys(c.loop for c in case.criteria if c.loop):
        linear = linear_loop(case, equilibrium, loop)
        if isinstance(linear, LinearLoop):
            yield loop, frequency_response(linear, sample_interval(case) if case.model.time == "sampled" else None)


def _number(value: fmpq | arb) -> float:
    return float(value.mid()) if isinstance(value, arb) else int(value.p) / int(value.q)


def frequency_response(linear: LinearLoop, interval: float | None) -> tuple[tuple[float, float, float], ...]:
    """(angular frequency in rad/s, Re L, Im L) of L = -k (z I - A)^-1 b, z = j w or exp(j w T)."""
    matrix = np.array([[_number(v) for v in row] for row in linear.matrix])
    feed = np.array([_number(v) for v in linear.input])
    back = np.array([_number(v) for v in linear.feedback])
    closed = np.linalg.eigvals(matrix + np.outer(feed, back))
    rates = np.abs(np.concatenate((np.linalg.eigvals(matrix), closed)))
    if interval is not None:
        omegas = np.geomspace(np.pi / interval * 10 ** (-2 * DECADES), np.pi / interval, FREQUENCIES)
        places = np.exp(1j * omegas * interval)
    else:
        rates = rates[rates > 1e-9 * rates.max()] if rates.max() > 0 else np.ones(1)
        omegas = np.geomspace(rates.min() * 10**-DECADES, rates.max() * 10**DECADES, FREQUENCIES)
        places = 1j * omegas
    found = []
    for omega, place in zip(omegas, places, strict=True):
        system = place * np.eye(len(feed)) - matrix
        if np.linalg.cond(system) < 1 / np.finfo(float).eps:
            value = -back @ np.linalg.solve(system, feed)
            found.append((float(omega), float(value.real), float(value.imag)))
    return tuple(found)
