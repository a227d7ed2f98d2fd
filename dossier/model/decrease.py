"""The polynomial whose sign decides the decrease of V, and its Bernstein form over a parameter box.

Continuous time: V' = g / D with g = sum_i (dV/dy_i) N_i.  Sampled: V(N/D) - V = g / D^d with
g = D^d V(N/D) - D^d V and d the degree of V.  N and D as in `dossier.model.polynomial.OffsetField`.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction
from itertools import product
from math import comb, prod

from flint import fmpq, fmpq_mpoly

from dossier.model.polynomial import Exponents, OffsetField, Ring
from dossier.model.region import Box


@dataclass(frozen=True)
class DecreaseForm:
    """`numerator` = g, divided by the denominator D to the power `denominator_power` it gives V' (or the step)."""

    numerator: fmpq_mpoly
    denominator_power: int


def function_in(ring: Ring, function: Mapping[Exponents, Fraction]) -> fmpq_mpoly:
    """V, given over the offsets, as a polynomial of `ring` (whose first names are the offsets)."""
    padding = len(ring.names)
    return ring.from_terms({(*e, *([0] * (padding - len(e)))): c for e, c in function.items()})


def decrease_form(field: OffsetField, function: Mapping[Exponents, Fraction]) -> DecreaseForm:
    """g and the power of D for V = `function` along `field`."""
    ring = field.ring
    v = function_in(ring, function)
    if not field.sampled:
        g = ring.constant(Fraction(0))
        for i, numerator in enumerate(field.numerators):
            g = g + v.derivative(i) * numerator
        return DecreaseForm(g, 1)
    degree = max(sum(e) for e in function)
    g = -(v * field.denominator**degree)
    for exponents, coefficient in function.items():
        term = ring.constant(coefficient) * field.denominator ** (degree - sum(exponents))
        for numerator, count in zip(field.numerators, exponents, strict=True):
            term = term * numerator**count
        g = g + term
    return DecreaseForm(g, degree)


def bernstein_coefficients(
    polynomial: fmpq_mpoly, ring: Ring, parameters: Box
) -> Iterator[tuple[Exponents, fmpq_mpoly]]:
    """Bernstein coefficients of `polynomial` over the box of the parameters named there.

    With p_j = l_j + (u_j - l_j) t_j and degree d_j in p_j, the coefficient of index b is
    sum_k prod_j C(b_j, k_j)/C(d_j, k_j) a_k, a_k being the coefficient of t^k (S. N. Bernstein 1912;
    any text on Bezier forms).  The Bernstein basis is non-negative and sums to 1 on the box, so a sign
    shared by all coefficients is the sign of `polynomial`.  For degree 1 they are the vertex values.
    """
    places = [ring.names.index(n) for n in parameters.names]
    scaled = _on_unit_box(polynomial, ring, parameters)
    degrees = _degrees(scaled, places)
    power_form: dict[Exponents, dict[Exponents, fmpq]] = {}
    for exponents, coefficient in scaled.to_dict().items():
        k = tuple(int(exponents[place]) for place in places)
        rest = tuple(0 if i in places else int(e) for i, e in enumerate(exponents))
        power_form.setdefault(k, {})[rest] = coefficient
    zero = ring.constant(Fraction(0))
    table = {
        k: ring.context.from_dict(power_form[k]) if k in power_form else zero
        for k in product(*(range(d + 1) for d in degrees))
    }
    # One parameter after the other: the weights of the double sum are products over the parameters.
    for axis, degree in enumerate(degrees):
        weights = [
            [ring.constant(Fraction(comb(b, a), comb(degree, a))) for a in range(b + 1)] for b in range(degree + 1)
        ]
        table = {
            index: _weighted(table, index, axis, weights[index[axis]]) for index in table
        }  # fmt: skip
    yield from table.items()


def _weighted(
    table: Mapping[Exponents, fmpq_mpoly], index: Exponents, axis: int, weights: list[fmpq_mpoly]
) -> fmpq_mpoly:
    """The sum of the entries up to `index` along one axis, each with its weight."""
    total = None
    for place, weight in enumerate(weights):
        part = table[(*index[:axis], place, *index[axis + 1 :])]
        if part:
            total = part * weight if total is None else total + part * weight
    return table[index] * 0 if total is None else total


def _on_unit_box(polynomial: fmpq_mpoly, ring: Ring, parameters: Box) -> fmpq_mpoly:
    """The polynomial over t in [0, 1]."""
    if not parameters.names:
        return polynomial
    images = list(ring.context.gens())
    for name, side in parameters.items():
        place = ring.names.index(name)
        images[place] = ring.constant(side.bounds[0]) + ring.constant(side.width) * ring.context.gen(place)
    return polynomial.compose(*images, ctx=ring.context)


def _degrees(polynomial: fmpq_mpoly, places: list[int]) -> list[int]:
    """Degrees in the generators at `places`.

    The zero polynomial has degree -1 in the library; it still has one coefficient, zero, which no strict sign passes.
    """
    return [max(0, int(polynomial.degrees()[place])) for place in places]


def bernstein_count(polynomial: fmpq_mpoly, ring: Ring, parameters: Box) -> int:
    """How many coefficients `bernstein_coefficients` yields."""
    if not any(side.is_point for side in parameters.intervals):
        # The substitution keeps every degree; the common case needs no algebra.
        scaled = polynomial
    else:
        scaled = _on_unit_box(polynomial, ring, parameters)
    return prod(d + 1 for d in _degrees(scaled, [ring.names.index(n) for n in parameters.names]))
