"""Prove where the equilibrium of the operating point lies when parameters move over a part of their box.

On a cell Q with middle m the equilibrium is written x = c + S (p - m) + d, with a rational c near the equilibrium of
m and S near its derivative.  Krawczyk's operator for d, with p anywhere in Q, proves for every p that exactly one d
lies in |d_i| < R_i, and encloses it:
  K = -Y G(0, Q) + (I - Y A)(D - 0),  G(d, p) = f(c + S (p - m) + d, p),  A the slopes of G in d over D x Q,
  G(0, Q) from the mean value form G(0, m) + B (Q - m), B the slopes of G(0, .) in p over Q.
S makes B small, so that the enclosure of d shrinks with the square of the cell.  (R. Krawczyk 1969; A. Neumaier,
Interval Methods for Systems of Equations, 1990, sections 5.1 and 5.5; the sheared form is derived here.)
The solution is continuous in p, since it is unique in a neighbourhood and f is Lipschitz there.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

from flint import arb, arb_mat

from dossier.checks.slopes import approximate_inverse, newton_step, value_and_slopes
from dossier.checks.solutions import rest_equations, simplest_between, vanishes
from dossier.model.affine import spread_box
from dossier.model.ball import Ball, enclose, evaluate, exact_value, from_arb, precision, to_fmpq
from dossier.model.case import Case
from dossier.model.course import Course
from dossier.model.expression import Expression, add, mul, number, simplify, sub, substitute, symbol
from dossier.model.region import Box, Interval

COURSE_BITS: Final = 160
"""Working precision: far above the enclosures, which end at about 2^-60 of the reach."""
CENTRE_BITS: Final = 56
"""Binary digits of a centre below the reach of its state: short rationals, errors far below any margin."""
SLOPE_BITS: Final = 24
"""The same for slopes over the width of the cell: what they miss joins the rest."""
REST_BITS: Final = 10
"""Significant binary digits of the enclosed rest, rounded up."""
EXACT_BITS: Final = 40
"""A coordinate whose rest is below 2^-40 of its reach and that does not move may be a simple number: worth a proof."""
NEWTON_STEPS: Final = 8
"""Newton steps from the given point to the equilibrium of the middle combination."""
HALVINGS: Final = (0, 1, 2, 3, 4, 6, 8, 11, 14, 18, 22, 26)
"""Radii tried are the reach divided by these powers of two: the largest that works leaves most room to join cells."""
CONTRACTIONS: Final = 16
"""Further applications of the operator to its own image: they gain digits quadratically, until the cell's own width
or the rounding of the centre is left."""
WORTH_GOING_ON: Final = Fraction(9, 10)
"""An application that shrinks no radius below this share of what it was is the last."""
DEFAULT_REACH: Final = Fraction(1)
"""Typical size of a state that neither region, search box nor domain bounds."""


@dataclass(frozen=True)
class RestFamily:
    """The equations of rest with the parameters of the spreads symbolic; `reach` is a typical size per state."""

    states: tuple[str, ...]
    equations: tuple[Expression, ...]
    constants: Mapping[str, Ball]
    whole: Box
    reach: tuple[Fraction, ...]


def rest_family(case: Case) -> RestFamily:
    """The equations of rest of `case` over its box of spreads."""
    whole = spread_box(case)
    known = {p.name: p.nominal for p in case.model.parameters if p.name not in whole.names}
    exact = {n: number(b.middle) for n, b in known.items() if b.is_exact}
    return RestFamily(
        case.model.state_names,
        tuple(substitute(e, exact) for e in rest_equations(case)),
        {n: b for n, b in known.items() if not b.is_exact},
        whole,
        tuple(_reach(case, n) for n in case.model.state_names),
    )


def _reach(case: Case, state: str) -> Fraction:
    for box in (case.region, case.search, case.model.domain):
        side = box[state]
        if side.is_bounded and not side.is_point:
            return side.width / 2
    return DEFAULT_REACH


@dataclass(frozen=True, slots=True)
class Alone:
    """A course and the radii about its plane within which, for every combination, there is no other equilibrium."""

    course: Course
    radii: tuple[Fraction, ...]

    def holds(self, values: tuple[Fraction, ...], state: Sequence[Ball]) -> bool:
        """The point in `state` lies within the radii at the combination `values` of the cell."""
        return all(
            abs(b.middle - c) + b.radius <= r for b, c, r in zip(state, self.course.at(values), self.radii, strict=True)
        )

    def state_at(self, values: tuple[Fraction, ...]) -> tuple[Ball, ...]:
        """The enclosure of the equilibrium at one combination of the cell."""
        return tuple(Ball(c, r) for c, r in zip(self.course.at(values), self.course.rest, strict=True))


def alone_on(family: RestFamily, cell: Box, start: Sequence[Fraction]) -> Alone | None:
    """The equilibrium near `start` (at the middle of the cell) for every combination of `cell`; None if not proved."""
    with precision(COURSE_BITS):
        found = _alone_on(family, cell, start)
        if found is None:
            return None
        return _with_exact_coordinates(family, found) or found


def _alone_on(family: RestFamily, cell: Box, start: Sequence[Fraction]) -> Alone | None:
    middle = tuple(i.middle for i in cell.intervals)
    centre = _centre(family, middle, cell.names, start)
    slopes = None if centre is None else _slopes(family, cell, middle, centre)
    if centre is None or slopes is None:
        return None
    sheared = _Sheared(family, cell, centre, slopes)
    for halvings in HALVINGS:
        radii = tuple(r / 2**halvings for r in family.reach)
        rest = sheared.image(radii)
        if rest is not None and all(a < b for a, b in zip(rest, radii, strict=True)):
            rest = _contracted(sheared, rest)
            return Alone(Course(cell, centre, slopes, tuple(map(_short_above, rest))), radii)
    return None


def _contracted(sheared: _Sheared, rest: tuple[Fraction, ...]) -> tuple[Fraction, ...]:
    """The operator applied to its own image until that gains no more: every application keeps the solutions."""
    for _ in range(CONTRACTIONS):
        image = sheared.image(rest)
        if image is None:
            break
        better = tuple(map(min, rest, image))
        gain = max((b / a for a, b in zip(rest, better, strict=True) if a), default=Fraction(1))
        rest = better
        if gain > WORTH_GOING_ON:
            break
    return rest


def _centre(
    family: RestFamily, middle: Sequence[Fraction], names: Sequence[str], start: Sequence[Fraction]
) -> tuple[Fraction, ...] | None:
    at = {n: number(v) for n, v in zip(names, middle, strict=True)}
    equations = [substitute(e, at) for e in family.equations]
    guess = tuple(start)
    for _ in range(NEWTON_STEPS):
        step = newton_step(equations, family.states, family.constants, guess)
        if step is None:
            return None
        guess = tuple(_rounded(v, r / 2**CENTRE_BITS) for v, r in zip(step, family.reach, strict=True))
    return guess


def _rounded(value: Fraction, step: Fraction) -> Fraction:
    """The nearest multiple of a power of two at or below `step` > 0."""
    unit = Fraction(2) ** (step.numerator.bit_length() - step.denominator.bit_length() - 1)
    return round(value / unit) * unit


def _short_above(value: Fraction) -> Fraction:
    if value == 0:
        return value
    unit = Fraction(2) ** (value.numerator.bit_length() - value.denominator.bit_length() - REST_BITS)
    return -(-value // unit) * unit


def _slopes(
    family: RestFamily, cell: Box, middle: Sequence[Fraction], centre: Sequence[Fraction]
) -> tuple[tuple[Fraction, ...], ...] | None:
    """dx*/dp at the middle, rounded: a guess that only affects sharpness."""
    names = (*family.states, *cell.names)
    environment = {n: enclose(b).mid() for n, b in family.constants.items()}
    environment |= {n: arb(to_fmpq(v)).mid() for n, v in zip(names, (*centre, *middle), strict=True)}
    rows = [value_and_slopes(e, names, environment)[1] for e in family.equations]
    if not all(s.is_finite() for row in rows for s in row):
        return None
    size, free = len(family.states), len(cell.names)
    a = arb_mat(size, size, [s.mid() for row in rows for s in row[:size]])
    b = arb_mat(size, free, [s.mid() for row in rows for s in row[size:]])
    try:
        solved = a.solve(b)
    except ZeroDivisionError:
        return None
    result = []
    for i, reach in enumerate(family.reach):
        row = []
        for j, side in enumerate(cell.intervals):
            ball = from_arb(-solved[i, j])
            if ball is None:
                return None
            row.append(_rounded(ball.middle, reach / side.width / 2**SLOPE_BITS) if side.width else Fraction(0))
        result.append(tuple(row))
    return tuple(result)


def _distance(state: str) -> str:
    return f"distance of {state}"


def _movement(family: RestFamily, cell: Box, slopes: Sequence[Sequence[Fraction]], name: str) -> Fraction:
    """How far the parameter `name` alone moves the equilibrium on the cell, in shares of the reach."""
    j = cell.names.index(name)
    return max(abs(row[j]) * cell.intervals[j].width / r for row, r in zip(slopes, family.reach, strict=True))


class _Sheared:
    """G(d, p) on a cell, and Krawczyk's operator for it."""

    def __init__(
        self, family: RestFamily, cell: Box, centre: Sequence[Fraction], slopes: Sequence[Sequence[Fraction]]
    ) -> None:
        places: dict[str, Expression] = {}
        for state, c, row in zip(family.states, centre, slopes, strict=True):
            terms = [number(c), symbol(_distance(state))]
            for slope, (name, side) in zip(row, cell.items(), strict=True):
                if slope:
                    terms.append(mul(number(slope), sub(symbol(name), number(side.middle))))
            places[state] = add(*terms)
        self.equations = tuple(substitute(e, places) for e in family.equations)
        self.distances = tuple(_distance(s) for s in family.states)
        self.cell = cell
        self.known = {n: enclose(b) for n, b in family.constants.items()}
        self.sides = {n: enclose(Ball.from_bounds(*i.bounds)) for n, i in cell.items()}
        self.order = sorted(cell.names, key=lambda n: _movement(family, cell, slopes, n))
        self.residual = self._residual()

    def _residual(self) -> list[arb] | None:
        """G(0, Q) by the mean value form, one parameter after the other, those behind it still at their middle.

        (E. Hansen's arrangement, in Neumaier 1990, section 2.3.)  Parameters that move the equilibrium little go first:
        a factor such as a mass in front of a whole equation then meets an equation that still vanishes.
        """
        zero = {d: arb(0) for d in self.distances}
        environment = {**self.known, **zero, **{n: arb(to_fmpq(i.middle)) for n, i in self.cell.items()}}
        result = [evaluate(equation, environment) for equation in self.equations]
        for name in self.order:
            step = self.sides[name] - environment[name]
            environment[name] = self.sides[name]
            for i, equation in enumerate(self.equations):
                whole, (slope,) = value_and_slopes(equation, (name,), environment)
                if not (whole.is_finite() and slope.is_finite()):
                    return None
                result[i] = result[i] + slope * step
        return result if all(r.is_finite() for r in result) else None

    def image(self, radii: Sequence[Fraction]) -> tuple[Fraction, ...] | None:
        """Radii of a box that holds every d in the box of `radii` with G(d, p) = 0 for some p; None if undefined."""
        if self.residual is None:
            return None
        reach = {d: enclose(Ball(Fraction(0), r)) for d, r in zip(self.distances, radii, strict=True)}
        slopes: list[arb] = []
        for equation in self.equations:
            value, row = value_and_slopes(equation, self.distances, {**self.known, **self.sides, **reach})
            if not (value.is_finite() and all(s.is_finite() for s in row)):
                return None
            slopes.extend(row)
        n = len(self.distances)
        a = arb_mat(n, n, slopes)
        inverse = approximate_inverse(a)
        if inverse is None:
            return None
        step, rest = inverse * arb_mat(n, 1, self.residual), inverse * a
        result = []
        for i in range(n):
            total = abs(step[i, 0])
            for j, radius in enumerate(radii):
                total = total + abs(arb(1 if i == j else 0) - rest[i, j]) * arb(to_fmpq(radius))
            if not total.is_finite():
                return None
            result.append(exact_value(arb(total.upper()).mid()))
        return tuple(result)


def _with_exact_coordinates(family: RestFamily, alone: Alone) -> Alone | None:
    """The same with every coordinate that is proved to be one rational number for all combinations.

    Put in, such numbers make some equations vanish identically; the others must prove the other coordinates as
    before.  The point so found lies within the radii, hence it is the same equilibrium.  About the new plane the radii
    are smaller by how far it lies from the old one.
    """
    course = alone.course
    fixed: dict[str, Fraction] = {}
    for i, state in enumerate(family.states):
        rest, row = course.rest[i], course.slopes[i]
        if rest * 2**EXACT_BITS < family.reach[i] and not any(row):
            fixed[state] = simplest_between(course.centre[i] - rest, course.centre[i] + rest)
    if not fixed:
        return None
    numbers = {n: number(v) for n, v in fixed.items()}
    left = [e for e in (simplify(substitute(e, numbers)) for e in family.equations) if not vanishes(e)]
    free = [i for i, s in enumerate(family.states) if s not in fixed]
    if len(left) != len(free):
        return None
    smaller = RestFamily(
        tuple(family.states[i] for i in free), tuple(left), family.constants, family.whole,
        tuple(family.reach[i] for i in free),
    )  # fmt: skip
    found = _alone_on(smaller, course.parameters, [course.centre[i] for i in free]) if free else None
    if free and found is None:
        return None
    centre, slopes, rest = list(course.centre), list(course.slopes), list(course.rest)
    for i, state in enumerate(family.states):
        if state in fixed:
            centre[i], slopes[i], rest[i] = fixed[state], (Fraction(0),) * len(course.parameters.names), Fraction(0)
    for k, i in enumerate(free):
        assert found is not None
        centre[i], slopes[i], rest[i] = found.course.centre[k], found.course.slopes[k], found.course.rest[k]
    exact = Course(course.parameters, tuple(centre), tuple(slopes), tuple(rest))
    gaps = _gaps(exact, course)
    if any(g + r > radius for g, r, radius in zip(gaps, exact.rest, alone.radii, strict=True)):
        return None
    return Alone(exact, tuple(radius - g for g, radius in zip(gaps, alone.radii, strict=True)))


def _gaps(one: Course, other: Course) -> list[Fraction]:
    """How far the planes of two courses over one cell are apart at most, per state."""
    widths = [i.width / 2 for i in one.parameters.intervals]
    gaps = []
    for i, (a, b) in enumerate(zip(one.centre, other.centre, strict=True)):
        turns = zip(one.slopes[i], other.slopes[i], widths, strict=True)
        gaps.append(abs(a - b) + sum((abs(s - t) * w for s, t, w in turns), Fraction(0)))
    return gaps


def common(one: Box, other: Box) -> Box | None:
    """The intersection of two boxes over the same names; None where they do not touch."""
    sides = []
    for a, b in zip(one.intervals, other.intervals, strict=True):
        low, high = max(a.bounds[0], b.bounds[0]), min(a.bounds[1], b.bounds[1])
        if low > high:
            return None
        sides.append(Interval(low, high))
    return Box(one.names, tuple(sides))


def same_on(one: Alone, other: Alone) -> bool | None:
    """Both follow the same equilibrium where their cells touch; None where they do not touch.

    Both are continuous there; if they agree at one combination, by uniqueness they agree in a neighbourhood, hence on
    the whole connected intersection.
    """
    shared = common(one.course.parameters, other.course.parameters)
    if shared is None:
        return None
    values = tuple(i.middle for i in shared.intervals)
    return one.holds(values, other.state_at(values)) or other.holds(values, one.state_at(values))
