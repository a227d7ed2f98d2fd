"""Eigenvalues of the nominal linear part as certified discs, and the rates they give.

Roots of an exact characteristic polynomial are isolated with their multiplicities by python-flint
(`fmpz_poly.complex_roots`), so multiple and defective eigenvalues do no harm; those of ball polynomials are
enclosed one by one or in clusters (`dossier.checks.clusters`).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

from flint import acb, arb, fmpq, fmpq_poly

from dossier.checks.clusters import distinct_roots, root_discs
from dossier.model.ball import WORKING_BITS, evaluate, from_arb, precision
from dossier.model.ball import enclose as ball_to_arb
from dossier.model.case import Case
from dossier.model.characteristic import characteristic
from dossier.model.equilibrium import Eigenvalue, Equilibrium
from dossier.model.finding import Enclosure
from dossier.model.linear_part import NoLinearPart, Number, closed_matrix
from dossier.model.loop_polynomials import decimal_step

DIGITS: Final = 18
"""Significant decimals of printed enclosures after outward rounding."""


@dataclass(frozen=True, slots=True)
class Root:
    """An enclosure of one eigenvalue, or of a cluster, and how many it holds."""

    value: acb
    multiplicity: int


def roots(polynomial: Sequence[Number]) -> tuple[Root, ...]:
    """All roots, highest power first in; () where balls do not separate them."""
    if all(isinstance(c, fmpq) for c in polynomial):
        exact = fmpq_poly([c for c in reversed(polynomial) if isinstance(c, fmpq)])
        return tuple(Root(r, m) for r, m in distinct_roots(exact))
    return tuple(Root(d.enclosure, d.multiplicity) for d in root_discs(polynomial))


def eigenvalue_discs(case: Case, equilibrium: Equilibrium) -> tuple[Eigenvalue, ...]:
    """Certified discs of the linear part's eigenvalues (1/s, or multipliers), () where not isolated."""
    with precision(WORKING_BITS):
        matrix = closed_matrix(case, equilibrium)
        if isinstance(matrix, NoLinearPart):
            return ()
        discs = [_disc(r) for r in roots(characteristic(matrix))]
    return tuple(sorted(discs, key=lambda d: (-d.real, d.imaginary)))


def _disc(root: Root) -> Eigenvalue:
    real, imaginary = from_arb(arb(root.value.real)), from_arb(arb(root.value.imag))
    if real is None or imaginary is None:
        raise ArithmeticError("a root without finite enclosure")
    return Eigenvalue(real.middle, imaginary.middle, real.radius + imaginary.radius, root.multiplicity)


def spectral_values(case: Case, equilibrium: Equilibrium) -> dict[str, Enclosure]:
    """``decay rate`` (1/s), ``damping ratio`` (1) and, sampled, ``contraction`` (1), where enclosed.

    Sampled rates are those of s = ln(z)/T: -ln|z|/T, damping from ln z; an eigenvalue zero dies at once and
    bounds nothing.
    """
    with precision(WORKING_BITS):
        matrix = closed_matrix(case, equilibrium)
        if isinstance(matrix, NoLinearPart):
            return {}
        found = [r.value for r in roots(characteristic(matrix))]
        if len(found) == 0:
            return {}
        if case.model.time == "sampled":
            return _sampled(case, found)
        values = {"decay rate": _extreme([-r.real for r in found], min, "1/s")}
        values["damping ratio"] = _extreme([_damping(r) for r in found], min, "1")
        return {n: v for n, v in values.items() if v is not None}


def _sampled(case: Case, found: list[acb]) -> dict[str, Enclosure]:
    interval = _interval(case)
    moduli = [_modulus(r) for r in found]
    values = {"contraction": _extreme(moduli, max, "1")}
    alive = [(r, m) for r, m in zip(found, moduli, strict=True) if not m.contains(0)]
    if alive and interval is not None and len(alive) + sum(m.is_zero() for m in moduli) == len(moduli):
        values["decay rate"] = _extreme([-m.log() / interval for _, m in alive], min, "1/s")
        values["damping ratio"] = _extreme([_sampled_damping(r) for r, _ in alive], min, "1")
    return {n: v for n, v in values.items() if v is not None}


def _interval(case: Case) -> arb | None:
    formula = case.model.sample_interval
    if formula is None:
        return None
    return evaluate(formula, {p.name: ball_to_arb(p.nominal) for p in case.model.parameters})


def _modulus(root: acb) -> arb:
    return arb(abs(root))


def _damping(root: acb) -> arb:
    """-Re/|root|; plus or minus one for a real eigenvalue, not finite for one that may be zero."""
    real, imaginary = arb(root.real), arb(root.imag)
    if imaginary.is_zero() and not real.contains(0):
        return arb(1) if real < 0 else arb(-1)
    return -real / _modulus(root)


def _sampled_damping(root: acb) -> arb:
    return _damping(root.log())


def _extreme(values: list[arb], pick: Callable[..., Fraction], unit: str) -> Enclosure | None:
    """Enclosure of the least or greatest of `values`; None where one is not finite."""
    balls = [from_arb(v) for v in values]
    finite = [b for b in balls if b is not None]
    if len(finite) < len(balls):
        return None
    return outward(pick(b.lower for b in finite), pick(b.upper for b in finite), unit)


def outward(lower: Fraction, upper: Fraction, unit: str) -> Enclosure:
    """[lower, upper] widened to ends of `DIGITS` decimals."""
    return Enclosure(_rounded(lower, up=False), _rounded(upper, up=True), unit)


def _rounded(value: Fraction, *, up: bool) -> Fraction:
    if not value:
        return value
    step = decimal_step(abs(value), DIGITS)
    return -(-value // step) * step if up else value // step * step
