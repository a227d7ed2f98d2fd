"""Delay margin of a sampled loop: how many whole extra samples it tolerates, each proved by itself."""

from __future__ import annotations

from typing import Final

from flint import fmpq, fmpq_poly

from dossier.checks.boundary import Coefficients, add, multiply, number_of
from dossier.checks.crossings import INFINITE_FREQUENCY, ZERO_FREQUENCY, Extreme, Measured, Undecided
from dossier.checks.hurwitz import is_hurwitz
from dossier.model.loop_polynomials import LoopPolynomials

MOST_SAMPLES: Final = 40
"""Extra samples tried; each adds one state, and a loop that tolerates so many is sampled needlessly fast."""


def whole_sample_delay(polynomials: LoopPolynomials, crossing: Measured) -> Measured:
    """Largest number of whole extra samples m (all smaller ones included) with a stable loop, times the interval.

    With m more samples the closed loop is z^m a + c; in s it is (1 + s)^m a + (1 - s)^m c.  `crossing` is the
    result of the frequency path: no crossing and a gain below one at w = pi/T means no finite value.
    """
    if polynomials.interval is None:
        raise ValueError("a continuous loop has no sampling interval")
    if crossing is None:
        return None
    a, c = ([number_of(b) for b in reversed(p)] for p in (polynomials.open_loop, polynomials.gain))
    least, most = polynomials.interval.lower, polynomials.interval.upper
    place = ZERO_FREQUENCY.around(INFINITE_FREQUENCY)
    for m in range(1, MOST_SAMPLES + 1):
        stable = is_hurwitz(list(reversed(_delayed(a, c, m))))
        if stable is None:
            return Undecided(f"stability with {m} extra samples is not decided")
        if not stable:
            return Extreme((m - 1) * least, (m - 1) * most, place)
    return Extreme(MOST_SAMPLES * least, None, place)


def _delayed(opened: Coefficients, gain: Coefficients, samples: int) -> Coefficients:
    late, early = (_expanded(sign, samples) for sign in (1, -1))
    return add(multiply(late, opened), multiply(early, gain))


def _expanded(sign: int, power: int) -> Coefficients:
    """(1 + sign s)^power, lowest power first."""
    return [*(fmpq_poly([fmpq(1), fmpq(sign)]) ** power).coeffs()]
