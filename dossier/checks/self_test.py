"""Start-up self-test: does this machine compute as the proofs assume?

Every bound in `dossier.checks.intervals` and `dossier.checks.elementary` rests on IEEE 754 double precision,
rounding to nearest, with subnormal numbers; a library compiled for speed can switch that off for the process.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from fractions import Fraction
from typing import Final

import numpy as np
from flint import arb

from dossier.checks import elementary as el
from dossier.checks.branch_and_bound import cover
from dossier.checks.intervals import Array, Span
from dossier.checks.newton import System
from dossier.model.ball import precision
from dossier.model.expression import add, number, power, symbol
from dossier.model.region import Box, Interval

Entry = tuple[str, str, str, bool]
"""Name, known result, result found, agreement."""

POINTS: Final = 64
"""Points per function and range; about a millisecond each."""
REFERENCE_BITS: Final = 120
"""Precision of the reference values: twice that of the doubles under test."""
GOLDEN: Final = (math.sqrt(5) - 1) / 2
"""Multiples modulo 1 spread evenly over a range, the same on every machine."""

_RANGES: Final[dict[str, tuple[tuple[float, float], ...]]] = {
    "sin": ((-4.0, 4.0), (-9.0e5, 9.0e5)),
    "cos": ((-4.0, 4.0), (-9.0e5, 9.0e5)),
    "tan": ((-1.5, 1.5), (-100.0, 100.0)),
    "exp": ((-2.0, 2.0), (-690.0, 700.0)),
    "log": ((0.5, 2.0), (1e-300, 1e300)),
    "tanh": ((-0.2, 0.2), (-25.0, 25.0)),
    "atan": ((-1.5, 1.5), (-1e6, 1e6)),
    "asin": ((-1.0, 1.0),),
    "acos": ((-1.0, 1.0),),
}


def self_test() -> tuple[Entry, ...]:
    """All tests; evidence from a machine that fails one of them is worthless."""
    return (*_arithmetic(), *(_function(name, ranges) for name, ranges in _RANGES.items()), *_proofs())


def _entry(name: str, known: object, found: object) -> Entry:
    return name, str(known), str(found), known == found


def _arithmetic() -> tuple[Entry, ...]:
    unit = np.full(4, 2.0**-53)
    one = np.ones(4)
    smallest = np.full(4, 2.0**-1022)
    near, tie, above = one + unit * 0.75, one + unit, one + unit * 1.25
    total = one + unit * 2.0**-7
    return (
        _entry("half of the least normal number is kept", 2.0**-1023, float((smallest * 0.5)[0])),
        _entry("sums round to nearest", (1.0, 1.0, 1 + 2.0**-52), (near[0].item(), tie[0].item(), above[0].item())),
        _entry("differences round to nearest", (-1.0, -1.0), ((-one - unit)[0].item(), (unit * 0.4 - one)[0].item())),
        _entry("0.1 + 0.2", "0.30000000000000004", repr(float((one * 0.1 + 0.2)[0]))),
        _entry("the rounding error of a sum is exact", 2.0**-60, float((unit * 2.0**-7 - (total - one))[0])),
        _entry("one third is the nearest double", True, _is_nearest(float((one / 3)[0]), lambda v: 3 * v - 1)),
        _entry(
            "the root of 2 is the nearest double", True, _is_nearest(float(np.sqrt(one * 2)[0]), lambda v: v * v - 2)
        ),
    )


def _is_nearest(value: float, residual: Callable[[Fraction], Fraction]) -> bool:
    """The increasing `residual` changes sign within half a gap of `value` on both sides."""
    exact = Fraction(value)
    half_up = (Fraction(math.nextafter(value, math.inf)) - exact) / 2
    half_down = (exact - Fraction(math.nextafter(value, -math.inf))) / 2
    return residual(exact - half_down) <= 0 <= residual(exact + half_up)


def _function(name: str, ranges: tuple[tuple[float, float], ...]) -> Entry:
    share = np.modf(GOLDEN * np.arange(1, POINTS + 1))[0]
    x = np.concatenate([lower + (upper - lower) * share for lower, upper in ranges])
    known, found = f"{len(x)} of {len(x)} values enclosed", f"{_enclosed(name, x)} of {len(x)} values enclosed"
    return _entry(name, known, found)


def _enclosed(name: str, x: Array) -> int:
    result = getattr(el, name)(Span(x, x))
    with precision(REFERENCE_BITS):
        exact = [getattr(arb(v), name)() for v in x.tolist()]
        return sum(
            bool(arb(lo) <= value and value <= arb(hi))
            for value, lo, hi in zip(exact, result.lo.tolist(), result.hi.tolist(), strict=True)
        )


def _proofs() -> tuple[Entry, ...]:
    """One known list and one known refutation: x^2 - 2 has one zero in [0, 2], x^2 + 1 none in [-2, 2]."""
    return (
        _entry("zeros of x^2 - 2 in [0, 2]", (1, 0), _count(-2, 0)),
        _entry("zeros of x^2 + 1 in [-2, 2]", (0, 0), _count(1, -2)),
    )


def _count(constant: int, lower: int) -> tuple[int, int]:
    equation = add(power(symbol("x"), 2), number(constant))
    box = Box(("x",), (Interval(Fraction(lower), Fraction(2)),))
    found = cover(System((equation,), ("x",), {}, box), (), 1_000)
    return len(found.zeros), len(found.undecided)
