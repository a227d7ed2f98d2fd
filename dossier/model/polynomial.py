"""Polynomials and quotients of polynomials over Q, and the closed loop in offsets from an equilibrium.

Exact sparse polynomials are python-flint's ``fmpq_mpoly``.  `OffsetField` is the form in which
polynomial and rational closed loops are certified: x = x* + y, f(x* + y) = N(y)/D(y) with polynomial
N and D in the offsets y, the parameters that are kept symbolic, and *uncertain constants* (the
distance of an irrational equilibrium from its rational approximation, pi, exp of a parameter), each
enclosed by a ball.  The equation f(x*) = 0 is used symbolically: terms of N that are free of y are
dropped, as they are zero at the true equilibrium (THEOREM note "an equilibrium that is not rational").
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import reduce

from flint import Ordering, fmpq_mpoly, fmpq_mpoly_ctx

from dossier.model.ball import WORKING_BITS, Ball, enclose, evaluate, from_arb, precision, to_fmpq, to_fraction
from dossier.model.expression import Expression, fold, names, number, rebuild, substitute, symbol

Exponents = tuple[int, ...]


@dataclass(frozen=True)
class Ring:
    """Q[names]; `gens` maps a name to its polynomial."""

    names: tuple[str, ...]

    @property
    def context(self) -> fmpq_mpoly_ctx:
        """The flint context (cached by flint itself)."""
        return fmpq_mpoly_ctx.get(tuple(f"g{i}" for i in range(len(self.names))), Ordering.degrevlex)

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


def quotient_of(expression: Expression, ring: Ring, values: Mapping[str, Quotient]) -> Quotient | NotRational:
    """`expression` as a quotient over `ring`; `values` gives each symbol.

    Fails with a `NotRational` value for elementary functions, roots and kinks of anything.
    """

    def visit(node: Expression, args: tuple[Quotient | NotRational, ...]) -> Quotient | NotRational:
        quotients = [a for a in args if isinstance(a, Quotient)]
        if len(quotients) < len(args):
            return next(a for a in args if isinstance(a, NotRational))
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

    `ring.names` = offsets (the state names), then symbolic parameters, then uncertain constants.
    For a sampled model f is the offset of the next sample, x+ - x*.
    `denominator` carries no sign: a user must prove it non-zero where it needs it.
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


def offset_field(
    equations: tuple[Expression, ...],
    states: tuple[str, ...],
    equilibrium: tuple[Ball, ...],
    parameters: Mapping[str, Ball],
    symbolic: tuple[str, ...],
    *,
    sampled: bool,
) -> OffsetField | NotRational:
    """The field in offsets from `equilibrium`, with the parameters `symbolic` kept as variables.

    `parameters` encloses all others.  Returns `NotRational` where the equations are not quotients of
    polynomials in states and symbolic parameters.
    """
    variable = frozenset(states) | frozenset(symbolic)
    fixed = {n: b for n, b in parameters.items() if n not in symbolic}
    converted, balls = split_constants(equations, variable, fixed)
    shift = {f"shift of {s}": Ball(Fraction(0), b.radius) for s, b in zip(states, equilibrium, strict=True) if b.radius}
    ring = Ring((*states, *symbolic, *balls, *shift))
    one = ring.constant(Fraction(1))
    values = {n: Quotient(ring.gen(n), one) for n in (*symbolic, *balls)}
    for name, ball in zip(states, equilibrium, strict=True):
        place = ring.constant(ball.middle) + ring.gen(name)
        if ball.radius:
            place = place + ring.gen(f"shift of {name}")
        values[name] = Quotient(place, one)
    quotients: list[Quotient] = []
    for expression in converted:
        quotient = quotient_of(expression, ring, values)
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
    return OffsetField(ring, states, tuple(symbolic), {**balls, **shift}, numerators, denominator, sampled, all(vanish))


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
