"""Polynomials and quotients of polynomials over Q, and the closed loop in offsets from an equilibrium.

Exact sparse polynomials are python-flint's ``fmpq_mpoly``.  `OffsetField` is the form in which
polynomial and rational closed loops are certified: x = x* + y, f(x* + y) = N(y)/D(y) with polynomial
N and D in the offsets y, the parameters that are kept symbolic, and *uncertain constants* (the
distance of an irrational equilibrium from its rational approximation, pi, exp of a parameter), each
enclosed by a ball.  The equation f(x*) = 0 is used symbolically: terms of N that are free of y are
dropped, as they are zero at the true equilibrium (THEOREM note "an equilibrium that is not rational").
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cache, reduce

from flint import Ordering, fmpq_mpoly, fmpq_mpoly_ctx

from dossier.model.ball import WORKING_BITS, Ball, enclose, evaluate, from_arb, precision, to_fmpq, to_fraction
from dossier.model.course import Course, shift_of
from dossier.model.expression import Expression, fold, names, nodes, number, rebuild, substitute, symbol
from dossier.model.region import Box
from dossier.model.remainders import Expansion, Refusal, expansions, is_function, valid_box
from dossier.model.taylor import expand_functions

Exponents = tuple[int, ...]


@cache
def _context(size: int) -> fmpq_mpoly_ctx:
    return fmpq_mpoly_ctx.get(tuple(f"g{i}" for i in range(size)), Ordering.degrevlex)


@dataclass(frozen=True)
class Ring:
    """Q[names]; `gens` maps a name to its polynomial."""

    names: tuple[str, ...]

    @property
    def context(self) -> fmpq_mpoly_ctx:
        """The flint context, one per number of generators."""
        return _context(len(self.names))

    def gen(self, name: str) -> fmpq_mpoly:
        """The polynomial `name`."""
        return self.context.gen(self.names.index(name))

    def constant(self, value: Fraction) -> fmpq_mpoly:
        """The constant polynomial `value`."""
        return self.context.constant(to_fmpq(value))

    def from_terms(self, terms: Mapping[Exponents, Fraction]) -> fmpq_mpoly:
        """Polynomial from exponent tuples over all names of the ring."""
        return self.context.from_dict({e: to_fmpq(c) for e, c in terms.items()})


def terms(polynomial: fmpq_mpoly) -> dict[Exponents, Fraction]:
    """Exponent tuples and coefficients."""
    return {tuple(int(k) for k in e): to_fraction(c) for e, c in polynomial.to_dict().items()}


@dataclass(frozen=True)
class NotRational:
    """Why an expression is no quotient of polynomials in the chosen variables."""

    reason: str
    expression: Expression


@dataclass(frozen=True)
class Quotient:
    """numerator / denominator with coprime polynomials; the pole conditions were taken from the text before."""

    numerator: fmpq_mpoly
    denominator: fmpq_mpoly


def _reduced(numerator: fmpq_mpoly, denominator: fmpq_mpoly) -> Quotient:
    if denominator.is_constant():
        return Quotient(numerator / denominator.leading_coefficient(), denominator / denominator.leading_coefficient())
    common = numerator.gcd(denominator)
    numerator, denominator = numerator / common, denominator / common
    lead = denominator.leading_coefficient()
    return Quotient(numerator / lead, denominator / lead)


Functions = Callable[[Expression, Quotient], Quotient | NotRational]
"""A function node and its first argument to what stands for it."""


def quotient_of(
    expression: Expression, ring: Ring, values: Mapping[str, Quotient], functions: Functions | None = None
) -> Quotient | NotRational:
    """`expression` as a quotient over `ring`; `values` gives each symbol, `functions` what is no arithmetic.

    Fails with a `NotRational` value for elementary functions, roots and kinks where there are no `functions`.
    """

    def visit(node: Expression, args: tuple[Quotient | NotRational, ...]) -> Quotient | NotRational:
        quotients = [a for a in args if isinstance(a, Quotient)]
        if len(quotients) < len(args):
            return next(a for a in args if isinstance(a, NotRational))
        if functions is not None and is_function(node):
            return functions(node, quotients[0])
        return _combine(node, quotients, ring, values)

    return fold(expression, visit)


def _combine(
    node: Expression, args: list[Quotient], ring: Ring, values: Mapping[str, Quotient]
) -> Quotient | NotRational:
    one = ring.constant(Fraction(1))
    if node.op == "number":
        return Quotient(ring.constant(node.fraction), one)
    if node.op == "symbol":
        return values[str(node.value)]
    if node.op == "neg":
        return Quotient(-args[0].numerator, args[0].denominator)
    if node.op == "add":
        return reduce(_sum, args)
    if node.op == "mul":
        return reduce(_product, args)
    if node.op == "div":
        return _product(args[0], _inverse(args[1])) if args[1].numerator else _pole(node)
    if node.op == "pow" and _whole_power(node):
        count = int(node.fraction)
        if count < 0 and not args[0].numerator:
            return _pole(node)
        base = _inverse(args[0]) if count < 0 else args[0]
        return Quotient(base.numerator ** abs(count), base.denominator ** abs(count))
    return NotRational(f"{node.op} of an expression that depends on the variables", node)


def _sum(a: Quotient, b: Quotient) -> Quotient:
    return _reduced(a.numerator * b.denominator + b.numerator * a.denominator, a.denominator * b.denominator)


def _product(a: Quotient, b: Quotient) -> Quotient:
    return _reduced(a.numerator * b.numerator, a.denominator * b.denominator)


def _inverse(a: Quotient) -> Quotient:
    return _reduced(a.denominator, a.numerator)


def _pole(node: Expression) -> NotRational:
    return NotRational("division by an expression that is identically zero", node)


def split_constants(
    equations: Iterable[Expression], variable: frozenset[str], known: Mapping[str, Ball]
) -> tuple[tuple[Expression, ...], dict[str, Ball]]:
    """Replace every largest non-rational sub-expression that is free of `variable` by a constant symbol.

    `known` encloses each symbol that is not variable.  Exact known symbols become numbers; a maximal
    sub-expression of known symbols, pi and elementary functions becomes ``constant k`` with a ball.
    Raises ArithmeticError where such a constant has no finite enclosure.
    """
    exact = {n: number(b.middle) for n, b in known.items() if b.is_exact}
    uncertain = {n: b for n, b in known.items() if not b.is_exact}
    balls: dict[str, Ball] = {}
    cache: dict[Expression, Expression] = {}

    def is_constant(node: Expression) -> bool:
        return not (names(node) & variable)

    def is_plain(node: Expression) -> bool:
        """Rational arithmetic of numbers only."""
        return not names(node) and fold(node, lambda n, a: all(a) and n.op in _RATIONAL_OPS and _whole_power(n))

    def constant_symbol(node: Expression) -> Expression:
        if node in cache:
            return cache[node]
        with precision(WORKING_BITS):
            ball = from_arb(evaluate(node, {n: enclose(b) for n, b in uncertain.items()}))
        if ball is None:
            raise ArithmeticError(f"the constant {node} has no finite enclosure")
        name = f"constant {len(balls)}"
        balls[name] = ball
        cache[node] = symbol(name)
        return cache[node]

    def convert(node: Expression) -> Expression:
        if is_constant(node):
            return node if is_plain(node) else constant_symbol(node)
        return rebuild(node, tuple(convert(a) for a in node.args))

    converted = tuple(convert(substitute(e, exact)) for e in equations)
    return converted, balls


_RATIONAL_OPS = ("number", "add", "mul", "div", "neg", "pow")


def _whole_power(node: Expression) -> bool:
    return node.op != "pow" or node.fraction.denominator == 1


@dataclass(frozen=True)
class OffsetField:
    """f(x* + y) = numerators / denominator, equation by equation, without the terms that vanish at y = 0.

    `ring.names` = offsets (the state names), then symbolic parameters, factors and uncertain constants.
    For a sampled model f is the offset of the next sample, x+ - x*.
    `denominator` carries no sign: a user must prove it non-zero where it needs it.
    `factors` (`dossier.model.remainders`) may take any value of their interval at every point; the field is then
    valid on the box it was expanded for only.
    """

    ring: Ring
    states: tuple[str, ...]
    parameters: tuple[str, ...]
    balls: Mapping[str, Ball]
    numerators: tuple[fmpq_mpoly, ...]
    denominator: fmpq_mpoly
    sampled: bool
    constant_terms_vanish: bool
    """The dropped terms were identically zero, so the equilibrium is exact for every parameter value."""
    factors: Box = field(default_factory=lambda: Box((), ()))


def offset_field(
    equations: tuple[Expression, ...],
    states: tuple[str, ...],
    equilibrium: tuple[Ball, ...],
    parameters: Mapping[str, Ball],
    symbolic: tuple[str, ...],
    *,
    sampled: bool,
    place: Box | None = None,
    order: int = 0,
    course: Course | None = None,
) -> OffsetField | NotRational:
    """The field in offsets from `equilibrium`, with the parameters `symbolic` kept as variables.

    With a `course` over these parameters the offsets are from each combination's own equilibrium.

    `parameters` encloses all others.  Returns `NotRational` where the equations are not quotients of
    polynomials in states and symbolic parameters; with a `place` (bounds of the states, absolute, and of the
    symbolic parameters) elementary functions are expanded to `order` there first.
    """
    variable = frozenset(states) | frozenset(symbolic)
    fixed = {n: b for n, b in parameters.items() if n not in symbolic}
    converted, balls = split_constants(equations, variable, fixed)
    shift = shifts(states, equilibrium, course)
    plans: dict[Expression, Expansion] = {}
    if place is not None:
        converted, more = _without_parameter_functions(converted, states, symbolic, place, balls)
        balls = {**balls, **more}
        bounds = balls | valid_box((*states, *symbolic), place)
        found = expansions(converted, dict(zip(states, equilibrium, strict=True)), bounds, order)
        if isinstance(found, Refusal):
            return NotRational(found.reason, converted[0])
        plans = found
    terms_of = _Terms(plans, len(states))
    balls |= terms_of.balls
    ring = Ring((*states, *symbolic, *terms_of.factors.names, *balls, *shift))
    terms_of.ring = ring
    one = ring.constant(Fraction(1))
    values = {n: Quotient(ring.gen(n), one) for n in (*symbolic, *balls)}
    for name, here in zip(states, places_at_rest(ring, states, equilibrium, course), strict=True):
        values[name] = Quotient(here + ring.gen(name), one)
    quotients: list[Quotient] = []
    for expression in converted:
        quotient = quotient_of(expression, ring, values, terms_of if plans else None)
        if isinstance(quotient, NotRational):
            return quotient
        quotients.append(quotient)
    if sampled:
        quotients = [
            _reduced(q.numerator - (values[s].numerator - ring.gen(s)) * q.denominator, q.denominator)
            for q, s in zip(quotients, states, strict=True)
        ]
    denominator = one
    for q in quotients:
        denominator = denominator * (q.denominator / denominator.gcd(q.denominator))
    cleared = [q.numerator * (denominator / q.denominator) for q in quotients]
    numerators, vanish = zip(*(_without_offset_free_terms(p, ring, len(states)) for p in cleared), strict=True)
    factors = range(len(states) + len(symbolic), len(states) + len(symbolic) + len(terms_of.factors.names))
    for p in cleared:
        if any(not any(e[: len(states)]) and any(e[i] for i in factors) for e in p.to_dict()):
            return NotRational("a remainder does not vanish at the equilibrium", converted[0])
    return OffsetField(
        ring, states, tuple(symbolic), {**balls, **shift}, numerators, denominator, sampled, all(vanish),
        terms_of.factors,
    )  # fmt: skip


def _without_parameter_functions(
    equations: tuple[Expression, ...], states: tuple[str, ...], symbolic: tuple[str, ...], place: Box,
    balls: Mapping[str, Ball],
) -> tuple[tuple[Expression, ...], dict[str, Ball]]:  # fmt: skip
    """Functions of the symbolic parameters alone as Taylor polynomials with enclosed remainders (`model.taylor`).

    Raises ArithmeticError where a function is not proved smooth enough over the parameters.
    """
    found: dict[Expression, None] = {}
    for equation in equations:
        for node in nodes(equation):
            if is_function(node) and not (names(node) & set(states)):
                found.setdefault(node)
    if not found or not symbolic:
        return equations, {}
    parameters = Box(symbolic, tuple(place[n] for n in symbolic))
    polynomials, more = expand_functions(tuple(found), parameters, balls)
    known = dict(zip(found, polynomials, strict=True))

    def convert(node: Expression) -> Expression:
        return known[node] if node in known else rebuild(node, tuple(convert(a) for a in node.args))

    return tuple(convert(e) for e in equations), more


def shifts(states: tuple[str, ...], equilibrium: tuple[Ball, ...], course: Course | None) -> dict[str, Ball]:
    """The balls of the symbols ``shift of <state>``: what is not known of the equilibrium's place."""
    radii = tuple(b.radius for b in equilibrium) if course is None else course.rest
    return {shift_of(s): Ball(Fraction(0), r) for s, r in zip(states, radii, strict=True) if r}


def places_at_rest(
    ring: Ring, states: tuple[str, ...], equilibrium: tuple[Ball, ...], course: Course | None
) -> list[fmpq_mpoly]:
    """The states at rest as polynomials in the parameters of the course and in the shifts."""
    known = shifts(states, equilibrium, course)
    places = []
    for i, name in enumerate(states):
        place = ring.constant(equilibrium[i].middle if course is None else course.centre[i])
        if course is not None:
            for slope, (parameter, side) in zip(course.slopes[i], course.parameters.items(), strict=True):
                if slope:
                    place = place + ring.constant(slope) * (ring.gen(parameter) - ring.constant(side.middle))
        places.append(place + ring.gen(shift_of(name)) if shift_of(name) in known else place)
    return places


class _Terms:
    """Function nodes as polynomials in d = u - u*; `factors` and `balls` are the variables they bring with them."""

    ring: Ring

    def __init__(self, plans: Mapping[Expression, Expansion], states: int) -> None:
        self._plans, self._states = plans, states
        self._labels = {node: f"{i}" for i, node in enumerate(plans)}
        sides = {f"factor {self._labels[n]}": p.factor for n, p in plans.items() if not p.branch}
        self.factors = Box(tuple(sides), tuple(sides.values()))
        self.balls = {
            self._value_name(n, k): b for n, p in plans.items() for k, b in enumerate(p.coefficients) if not b.is_exact
        }

    def _value_name(self, node: Expression, power: int) -> str:
        return f"value {self._labels[node]} {power}"

    def __call__(self, node: Expression, argument: Quotient) -> Quotient | NotRational:
        plan = self._plans[node]
        one = self.ring.constant(Fraction(1))
        if plan.branch:
            return Quotient(argument.numerator * plan.branch, argument.denominator)
        change = self._change(node, argument)
        if isinstance(change, NotRational):
            return change
        total, power = Quotient(one - one, one), Quotient(one, one)
        for k, ball in enumerate(plan.coefficients):
            value = self.ring.constant(ball.middle) if ball.is_exact else self.ring.gen(self._value_name(node, k))
            total = _sum(total, _product(Quotient(value, one), power))
            power = _product(power, change)
        rest = Quotient(self.ring.gen(f"factor {self._labels[node]}"), one)
        return _sum(total, _product(rest, power))

    def _change(self, node: Expression, argument: Quotient) -> Quotient | NotRational:
        """d = u - u*, where u* are the terms free of the offsets."""
        top, bottom = (self._at_rest(p) for p in (argument.numerator, argument.denominator))
        if argument.denominator.is_constant():
            if any(self._has_factor(e) for e in top.to_dict()):
                return NotRational("the argument of a function has a remainder at the equilibrium", node)
            return Quotient(argument.numerator - top, argument.denominator)
        if not (top.is_constant() and bottom.is_constant()) or bottom.is_zero():
            return NotRational("the argument of a function is a quotient that depends on parameters at rest", node)
        here = Quotient(-top / bottom.leading_coefficient(), self.ring.constant(Fraction(1)))
        return _sum(argument, here)

    def _at_rest(self, polynomial: fmpq_mpoly) -> fmpq_mpoly:
        kept = {e: c for e, c in polynomial.to_dict().items() if not any(e[: self._states])}
        return self.ring.context.from_dict(kept)

    def _has_factor(self, exponents: Exponents) -> bool:
        return any(exponents[self.ring.names.index(n)] for n in self.factors.names)


def _without_offset_free_terms(polynomial: fmpq_mpoly, ring: Ring, count: int) -> tuple[fmpq_mpoly, bool]:
    kept = {e: c for e, c in polynomial.to_dict().items() if any(e[:count])}
    return ring.context.from_dict(kept), len(kept) == len(polynomial.to_dict())


def collapse(polynomial: fmpq_mpoly, ring: Ring, keep: int, balls: Mapping[str, Ball]) -> dict[Exponents, Ball]:
    """Coefficients of `polynomial` as balls over the first `keep` names; the rest take values in `balls`.

    Raises ValueError where a name without a ball occurs in `polynomial`.
    """
    values = [balls.get(n) for n in ring.names[keep:]]
    sums: dict[Exponents, list[Fraction]] = {}
    for exponents, coefficient in terms(polynomial).items():
        middle, radius = _monomial_ball(coefficient, exponents[keep:], values)
        entry = sums.setdefault(exponents[:keep], [Fraction(0), Fraction(0)])
        entry[0] += middle
        entry[1] += radius
    return {e: Ball(m, r) for e, (m, r) in sums.items() if m or r}


def _monomial_ball(coefficient: Fraction, exponents: Exponents, values: list[Ball | None]) -> tuple[Fraction, Fraction]:
    """coefficient * product of balls: |prod (m+d) - prod m| <= prod (|m|+r) - prod |m|."""
    middle, reach, size = coefficient, abs(coefficient), abs(coefficient)
    for exponent, ball in zip(exponents, values, strict=True):
        if ball is None:
            if exponent:
                raise ValueError("a symbolic parameter is left in the polynomial")
            continue
        for _ in range(exponent):
            middle *= ball.middle
            size *= abs(ball.middle)
            reach *= abs(ball.middle) + ball.radius
    return middle, reach - size
