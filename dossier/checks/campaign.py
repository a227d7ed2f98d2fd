"""What a campaign of simulated motions did, in numbers and in words."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Final

import numpy as np
from numpy.typing import NDArray

from dossier.checks.suspicion import DIGITS, duration_text
from dossier.checks.trial import ABSOLUTE, RELATIVE, Trial
from dossier.checks.watch import NEIGHBOURHOOD
from dossier.model.case import NOMINAL, Case, Criterion, Scope
from dossier.model.dossier import Campaign
from dossier.model.finding import Finding
from dossier.model.region import Box

CONFIDENCE: Final = 0.95
"""Level of the confidence statement about independent draws, as is customary."""


@dataclass(frozen=True)
class Group:
    """Criteria that share their region and scope, and the motions that serve them."""

    criteria: tuple[Criterion, ...]
    region: Box
    over: Scope
    trial: Trial


def confidence_of(draws: int) -> str:
    """No violation in N independent draws bounds the violating share by 1 - (1 - confidence)^(1/N), rounded up."""
    if not draws:
        return ""
    share = 1 - (1 - CONFIDENCE) ** (1 / draws)
    percent = np.ceil(share * 1e4) / 100
    return f"with confidence {CONFIDENCE * 100:.0f} % fewer than {percent:g} % of motions so drawn violate it"


def rounded(value: float) -> Fraction:
    """A floating-point result with the digits that are printed."""
    return Fraction(f"{value:.{DIGITS}g}")


def summary_of(
    case: Case, identifier: str, groups: list[Group], falls: list[Trial], findings: tuple[Finding, ...],
    broken: list[tuple[Group, NDArray[np.bool_]]], seed: int,
) -> Campaign:  # fmt: skip
    """The campaign as the dossier reports it; `broken` are the motions that seem to violate a criterion, per group."""
    trials = [g.trial for g in groups] + falls
    violations, open_count = 0, 0
    for trial in trials:
        seen = np.zeros(trial.motions.endings.size, bool)
        for group, violating in broken:
            if group.trial is trial:
                seen |= violating
        violations += int(np.count_nonzero(seen))
        open_count += int(np.count_nonzero(~seen & ~trial.converged))
    refuted = next((f for f in findings if f.result == "refuted"), None)
    draws = [int(np.count_nonzero(g.trial.starts.drawn)) for g in groups]
    lost = any(g.trial.starts.lost for g in groups)
    clean = violations == 0 and open_count == 0 and draws and not lost
    return Campaign(
        identifier, _method(case), _plan(groups, falls), seed, sum(t.motions.endings.size for t in trials), violations,
        open_count, _horizon(case, trials), confidence_of(min(draws)) if clean else "", _extremes(case, groups, falls),
        "" if refuted is None else f"{refuted.subject}: {refuted.statement}",
    )  # fmt: skip


def _method(case: Case) -> str:
    if case.model.time == "sampled":
        return "iteration of the sampled model in double precision"
    return (
        f"Runge-Kutta pair of orders 5 and 4 (Dormand and Prince 1980) in double precision, step and error per motion, "
        f"relative error {RELATIVE:.0e} and {ABSOLUTE:.0e} of the region per step"
    )


def _plan(groups: list[Group], falls: list[Trial]) -> str:
    parts = []
    for group in groups:
        drawn = int(np.count_nonzero(group.trial.starts.drawn))
        corners = group.trial.starts.drawn.size - drawn
        over = "at the nominal parameters" if group.over == NOMINAL else "over tolerances"
        names = ", ".join(c.name for c in group.criteria)
        part = f"{names} {over}: {corners} corners, {drawn} uniform independent draws"
        if group.trial.starts.lost:
            part += f" ({group.trial.starts.lost} combinations left out: no equilibrium was found by continuation)"
        parts.append(part)
    parts += [f"{t.motions.endings.size} motions from the boundary of a proved set" for t in falls]
    return "; ".join(parts) + "; parameters constant and disturbances zero along each motion"


def _horizon(case: Case, trials: list[Trial]) -> str:
    longest = max(trials, key=lambda t: t.pace.horizon).pace
    horizon = duration_text(case, longest.horizon)
    if not longest.stable:
        return horizon
    dwell = duration_text(case, longest.dwell)
    return f"{horizon}, or until within {NEIGHBOURHOOD * 100:g} % of the region for {dwell}"


def _extremes(case: Case, groups: list[Group], falls: list[Trial]) -> dict[str, tuple[float, float]]:
    """Least and greatest offset of each state (SI), from the regions if any were simulated."""
    trials = [g.trial for g in groups] or falls
    found = {}
    for i, name in enumerate(case.model.state_names):
        least = min(float(t.recorder.least[i].min()) for t in trials)
        greatest = max(float(t.recorder.greatest[i].max()) for t in trials)
        if np.isfinite(least) and np.isfinite(greatest):
            found[name] = (float(rounded(least)), float(rounded(greatest)))
    return found
