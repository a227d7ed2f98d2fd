"""Guesses where the loop crosses the stability boundary, as short rational intervals for the exact recount.

Roots are approximated in multiple-precision floating point (simultaneous iteration as in python-flint);
nothing here is believed.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Final, cast

import numpy as np
from flint import acb, fmpq_poly

from dossier.model.attempt import Attempt
from dossier.model.ball import exact_value, precision, to_fmpq
from dossier.model.case import NOMINAL, Case
from dossier.model.claim import Crossing, SturmClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.linear_part import NoLinearPart
from dossier.model.loop import model_hash
from dossier.model.loop_polynomials import LoopPolynomials, loop_polynomials

GUESS_BITS: Final = 256
"""Precision of the guesses: clusters of roots of such polynomials are separated well before."""

WIDEST: Final = Fraction(1, 8)
"""Half-width of an interval relative to its root, unless a neighbour is nearer."""

SHARE: Final = Fraction(1, 3)
"""Part of the distance to the nearest neighbour that an interval may reach out."""

ROUNDING: Final = Fraction(1, 8)
"""Interval ends are rounded to decimals within this part of the half-width, so that certificates stay short."""

SLOWEST: Final = 1e-9
"""Roots slower than this share of the fastest count as zero when a figure's range is chosen."""

AROUND: Final = 30.0
"""A figure reaches this factor beyond the slowest and fastest root: one and a half decades."""

Polynomial = list[Fraction]


def seek_crossings(case: Case, equilibrium: Equilibrium, loop: str) -> tuple[tuple[Attempt, ...], SturmClaim | None]:
    """Guess every crossing of the nominal loop opened at signal `loop`; None where it has no linear part."""
    subject, method = f"{case.identifier}.{loop}", "real roots in frequency"
    polynomials = loop_polynomials(case, equilibrium, loop)
    if isinstance(polynomials, NoLinearPart):
        return (Attempt(subject, method, "out of reach", polynomials.reason),), None
    with precision(GUESS_BITS):
        gain, phase, peak = (isolate(p) for p in crossing_polynomials(polynomials))
    claim = SturmClaim(
        claim_identifier(case, loop), model_hash(case), NOMINAL, "T11", equilibrium.identifier, loop,
        polynomials.open_loop, polynomials.closed_loop, gain, phase, peak,
    )  # fmt: skip
    work = {"states": len(polynomials.open_loop) - 1, "roots": len(gain) + len(phase) + len(peak)}
    return (Attempt(subject, method, "found", "; ".join(polynomials.remarks), work),), claim


def claim_identifier(case: Case, loop: str) -> str:
    """Id of the certificate of a loop's margins."""
    return f"{case.identifier}.M-{loop}"


def crossing_polynomials(polynomials: LoopPolynomials) -> tuple[Polynomial, Polynomial, Polynomial]:
    """Midpoints of Im(c conj a), |a|^2 - |c|^2 and the numerator of d|S|^2/dW in W = w^2, lowest power first."""
    a, c = ([b.middle for b in reversed(p)] for p in (polynomials.open_loop, polynomials.gain))
    (even_a, odd_a), (even_c, odd_c) = _split(a), _split(c)
    w = fmpq_poly([0, 1])
    real = even_c * even_a + w * odd_c * odd_a
    open_square, gain_square = even_a**2 + w * odd_a**2, even_c**2 + w * odd_c**2
    added = gain_square + 2 * real
    slope = open_square.derivative() * added - open_square * added.derivative()
    imaginary = odd_c * even_a - even_c * odd_a
    return _fractions(imaginary), _fractions(open_square - gain_square), _fractions(slope)


def _split(polynomial: Sequence[Fraction]) -> tuple[fmpq_poly, fmpq_poly]:
    """E and O of p(jw) = E(W) + jw O(W)."""
    parts = ([to_fmpq(v * (-1) ** i) for i, v in enumerate(polynomial[start::2])] for start in (0, 1))
    even, odd = (fmpq_poly(p) for p in parts)
    return even, odd


def _fractions(polynomial: fmpq_poly) -> Polynomial:
    return [Fraction(int(v.p), int(v.q)) for v in polynomial.coeffs()]


def isolate(polynomial: Polynomial) -> tuple[Crossing, ...]:
    """Disjoint rational intervals around the distinct positive roots, in order."""
    roots = _positive_roots(polynomial)
    result = []
    for i, root in enumerate(roots):
        gaps = [abs(root - other) for other in roots[max(0, i - 1) : i + 2] if other != root]
        reach = min([root * WIDEST, *(SHARE * g for g in gaps)])
        result.append(Crossing(_near(root - reach, reach), _near(root + reach, reach)))
    return tuple(result)


def _near(value: Fraction, reach: Fraction) -> Fraction:
    """A short decimal within `ROUNDING` of `reach` from `value`."""
    step = Fraction(1)
    while step > reach * ROUNDING:
        step /= 10
    while step * 10 <= reach * ROUNDING:
        step *= 10
    return round(value / step) * step


def _positive_roots(polynomial: Polynomial) -> list[Fraction]:
    """Distinct positive roots, approximated far below their distances."""
    p = fmpq_poly([to_fmpq(v) for v in polynomial])
    if p.degree() < 1:
        return []
    square_free = p / p.gcd(p.derivative())
    values = [
        root for root, _ in cast(list[tuple[acb, int]], square_free.complex_roots()) if root.imag == 0 and root.real > 0
    ]
    return sorted(exact_value(root.real.mid()) for root in values)


@dataclass(frozen=True, slots=True)
class Response:
    """Samples of L(jw) for a figure, in floating point: w in rad/s, real and imaginary part."""

    frequency: tuple[float, ...]
    real: tuple[float, ...]
    imaginary: tuple[float, ...]


def response(case: Case, equilibrium: Equilibrium, loop: str, points: int) -> Response | None:
    """L on `points` logarithmic frequencies around the loop's own; None where it has no linear part.

    Up to pi/T for a sampled model.
    """
    polynomials = loop_polynomials(case, equilibrium, loop)
    if isinstance(polynomials, NoLinearPart):
        return None
    a, c, total = (
        np.array([float(b.middle) for b in p])
        for p in (polynomials.open_loop, polynomials.gain, polynomials.closed_loop)
    )
    rates = np.abs(np.concatenate([np.roots(a), np.roots(total)]))
    rates = rates[rates > SLOWEST * rates.max(initial=1.0)]
    low, high = (rates.min() / AROUND, rates.max() * AROUND) if rates.size else (1 / AROUND, AROUND)
    place = np.geomspace(low, high, points)
    value = np.polyval(c, 1j * place) / np.polyval(a, 1j * place)
    interval = polynomials.interval
    frequency = place if interval is None else 2 * np.arctan(place) / float(interval.middle)
    return Response(*(tuple(float(v) for v in values) for values in (frequency, value.real, value.imag)))
