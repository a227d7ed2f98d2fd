"""Margins of one loop: rigorous enclosures from every crossing of the stability boundary.

The loop factor kappa brings a root of a + kappa c onto the boundary exactly where kappa = -a/c:
gain k = -1/L at the roots of Y, at w = 0 and at w = infinity; phase e^{-j phi} with phi = arg(-L) where
|L| = 1; a delay T with w T = arg(-L) mod 2 pi where |L| = 1; and |S| = |a|/|a + c| has its supremum at
w = 0, w = infinity or a root of its derivative.  The closed loop (kappa = 1) is proved stable and the
roots move continuously, so it stays stable up to the first crossing (H. Nyquist 1932; continuity of
the roots of a polynomial in its coefficients; for delays J. Hale and S. Verduyn Lunel 1993, from memory).
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction

from flint import acb, arb

from dossier.checks.boundary import LoopOnBoundary
from dossier.checks.sturm import common_part, has_sign_change, is_exact, is_zero, reduced, refine, roots_between
from dossier.model.ball import Ball, enclose, exact_value
from dossier.model.claim import Crossing
from dossier.model.linear_part import Number, sign_of


@dataclass(frozen=True, slots=True)
class Place:
    """Where on the boundary: W in [lower, upper], None for infinity."""

    lower: Fraction | None
    upper: Fraction | None

    def around(self, other: Place) -> Place:
        """The smallest place that holds both."""
        finite = [v for v in (self.lower, other.lower) if v is not None]
        upper = None if self.upper is None or other.upper is None else max(self.upper, other.upper)
        return Place(min(finite, default=None), upper)


ZERO_FREQUENCY = Place(Fraction(0), Fraction(0))
INFINITE_FREQUENCY = Place(None, None)


@dataclass(frozen=True, slots=True)
class Candidate:
    """A value in [lower, upper] (None: no bound) that a margin may take at `place`.

    `certain`: a crossing with such a value is proved to exist there.
    """

    lower: Fraction
    upper: Fraction | None
    place: Place
    certain: bool = True


@dataclass(frozen=True, slots=True)
class Extreme:
    """Least (or greatest) of some candidates, in [lower, upper]; `upper` None: not proved to be finite."""

    lower: Fraction
    upper: Fraction | None
    place: Place


@dataclass(frozen=True, slots=True)
class Undecided:
    """Why a margin could not be enclosed."""

    reason: str


NO_CROSSING = None
"""A margin that is proved to have no finite value."""

Measured = Extreme | None | Undecided


def least(candidates: Sequence[Candidate]) -> Extreme | None:
    """Enclosure of the least candidate; None where there is none."""
    if not candidates:
        return NO_CROSSING
    lower = min(c.lower for c in candidates)
    upper = min((c.upper for c in candidates if c.certain and c.upper is not None), default=None)
    return Extreme(lower, upper, _hull(c.place for c in candidates if upper is None or c.lower <= upper))


def greatest(candidates: Sequence[Candidate]) -> Extreme:
    """Enclosure of the greatest of at least one certain, bounded candidate."""
    lower = max(c.lower for c in candidates)
    upper = max(c.upper for c in candidates if c.upper is not None)
    return Extreme(lower, upper, _hull(c.place for c in candidates if c.upper is not None and c.upper >= lower))


def _hull(places: Iterable[Place]) -> Place:
    first, *others = places
    for place in others:
        first = first.around(place)
    return first


def bounds(value: arb) -> tuple[Fraction, Fraction]:
    """Exact end points of a finite ball."""
    return exact_value(value.lower()), exact_value(value.upper())


def _candidate(value: arb, place: Place) -> Candidate:
    lower, upper = bounds(value)
    return Candidate(lower, upper, place)


def _square_frequency(crossing: Crossing) -> tuple[arb, Place]:
    ball = enclose(Ball.from_bounds(crossing.lower, crossing.upper))
    return ball, Place(crossing.lower, crossing.upper)


# --- gain -----------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class GainMargins:
    """Factor by which the gain may rise, and factor by which it may be divided; each > 1."""

    up: Measured
    down: Measured


def gain_margins(loop: LoopOnBoundary, crossings: Sequence[Crossing]) -> GainMargins:
    """Both gain margins; `crossings` are proved to isolate every positive root of Y."""
    up: list[Candidate] = []
    down: list[Candidate] = []
    for opened, gain, place in _real_places(loop, crossings):
        if not _add_factor(opened, gain, place, up, down):
            undecided = Undecided("a real value of the loop cannot be told from -1")
            return GainMargins(undecided, undecided)
    return GainMargins(least(up), least(down))


def _real_places(loop: LoopOnBoundary, crossings: Sequence[Crossing]) -> list[tuple[acb, acb, Place]]:
    """Values of a and c wherever c conj(a) is real and neither is proved to vanish."""
    places = [
        (acb(loop.first[0]), acb(loop.first[1]), ZERO_FREQUENCY),
        (acb(loop.last[0]), acb(loop.last[1]), INFINITE_FREQUENCY),
    ]
    polynomial = reduced(loop.gain_crossing)
    vanishing = _vanishing(polynomial, loop.real)
    for crossing in crossings:
        finer = refine(polynomial, crossing)
        if not _holds_root(vanishing, finer):
            at, place = _square_frequency(finer)
            places.append((loop.opened.value(at), loop.gain.value(at), place))
    return places


def _vanishing(polynomial: Sequence[Number], real: Sequence[Number]) -> list[Number]:
    """Rational polynomial whose roots are those of Y at which X vanishes too: there a = 0 or c = 0, no crossing."""
    if not is_exact(polynomial) or not is_exact(real) or is_zero(real) or is_zero(polynomial):
        return []
    return common_part(polynomial, real)


def _holds_root(polynomial: Sequence[Number], interval: Crossing) -> bool:
    if len(polynomial) <= 1:
        return False
    if interval.lower == interval.upper:
        return has_sign_change(polynomial, interval)
    return roots_between(polynomial, interval.lower, interval.upper) > 0


def _add_factor(opened: acb, gain: acb, place: Place, up: list[Candidate], down: list[Candidate]) -> bool:
    """File k = -a/c, where c conj(a) is real, under `up` (k > 1) or `down` (1/k > 1); False where undecided.

    k <= 0 is not on the path from 1 through positive factors, c = 0 gives no crossing.
    """
    product = -(gain * opened.conjugate()).real
    for square, above, below in ((_square(gain), up, down), (_square(opened), down, up)):
        if not square > 0:
            continue
        factor = product / square
        if factor <= 0:
            return True
        if factor > 1:
            above.append(_candidate(factor, place))
            return True
        if factor < 1:
            below.append(_inverted(factor, place))
            return True
        return False
    return False


def _square(value: acb) -> arb:
    return value.real * value.real + value.imag * value.imag


def _inverted(factor: arb, place: Place) -> Candidate:
    """1/factor for a factor below 1; unbounded and uncertain where the factor is not proved positive."""
    if factor > 0:
        return _candidate(1 / factor, place)
    return Candidate(1 / bounds(factor)[1], None, place, certain=False)


# --- phase and delay ------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class PhaseMargins:
    """Least |arg(-L)| over |L| = 1, the same over lags (arg > 0) and leads (arg < 0) alone, and the delay in s."""

    least: Measured
    lag: Measured
    lead: Measured
    delay: Measured


def phase_margins(loop: LoopOnBoundary, crossings: Sequence[Crossing]) -> PhaseMargins:
    """Phase and delay margins; `crossings` are proved to isolate every positive root of |a|^2 - |c|^2."""
    if is_zero(loop.phase_crossing):
        return _all_undecided("the loop has gain one at every frequency")
    polynomial = reduced(loop.phase_crossing)
    lag = _half_turns(loop)
    lead = list(lag)
    delay: list[Candidate] = []
    for crossing in crossings:
        at, place = _square_frequency(refine(polynomial, crossing))
        angle = _angle(loop, at)
        if angle is None:
            return _all_undecided("the loop cannot be told from -1 where its gain is one")
        size, turn, sign = angle
        if sign >= 0:
            lag.append(_candidate(size, place))
        if sign <= 0:
            lead.append(_candidate(size, place))
        delay.append(_candidate(turn / at.sqrt(), place))
    return PhaseMargins(least([*lag, *lead]), least(lag), least(lead), _delay_margin(loop, delay))


def _all_undecided(reason: str) -> PhaseMargins:
    undecided = Undecided(reason)
    return PhaseMargins(undecided, undecided, undecided, undecided)


def _half_turns(loop: LoopOnBoundary) -> list[Candidate]:
    """phi = pi at w = 0 or w = infinity where |L| = 1 there; L = -1 would be a closed-loop root, so L = 1."""
    ends = ((loop.first, ZERO_FREQUENCY), (loop.last, INFINITE_FREQUENCY))
    return [_candidate(arb.pi(), place) for (a, c, _), place in ends if a * a == c * c]


def _angle(loop: LoopOnBoundary, at: arb) -> tuple[arb, arb, int] | None:
    """|phi|, phi mod 2 pi and the sign of phi = arg(-L); sign 0 where phi may be a half turn of either sense."""
    z = -(loop.gain.value(at) * loop.opened.value(at).conjugate())
    if z.imag > 0:
        return z.arg(), z.arg(), 1
    if z.imag < 0:
        return -z.arg(), z.arg() + 2 * arb.pi(), -1
    if z.real < 0:
        rest = (-z).arg()
        return arb.pi() - abs(rest), arb.pi() + rest, 0
    return None


def _delay_margin(loop: LoopOnBoundary, candidates: Sequence[Candidate]) -> Measured:
    """Valid for |L(infinity)| < 1; otherwise an arbitrarily small delay destabilises (a neutral equation)."""
    a, c, _ = loop.last
    sign = sign_of(a * a - c * c)
    if sign == 1:
        return least(candidates)
    if sign is None:
        return Undecided("the gain at infinite frequency cannot be told from one")
    return Extreme(Fraction(0), Fraction(0), INFINITE_FREQUENCY)


# --- peak sensitivity -----------------------------------------------------------------------------


def peak_sensitivity(loop: LoopOnBoundary, crossings: Sequence[Crossing]) -> Extreme | Undecided:
    """Supremum of |S|; `crossings` are proved to isolate every positive root of d|S|^2/dW."""
    polynomial = reduced(loop.peak)
    ends = ((loop.first, ZERO_FREQUENCY), (loop.last, INFINITE_FREQUENCY))
    values = [(acb(a), acb(total), place) for (a, _, total), place in ends]
    for crossing in crossings:
        at, place = _square_frequency(refine(polynomial, crossing))
        values.append((loop.opened.value(at), loop.closed.value(at), place))
    squares = [(_square(a), _square(total), place) for a, total, place in values]
    if not all(total > 0 for _, total, _ in squares):
        return Undecided("the closed loop cannot be told from zero on the boundary")
    peak = greatest([_candidate(a / total, place) for a, total, place in squares])
    if not peak.lower > 0:
        return Undecided("the sensitivity cannot be told from zero")
    lower, upper = (enclose(Ball(v)).sqrt() for v in (peak.lower, peak.upper or Fraction(0)))
    return Extreme(bounds(lower)[0], bounds(upper)[1], peak.place)
