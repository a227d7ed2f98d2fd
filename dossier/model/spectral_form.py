"""The quadratic form whose sign keeps all eigenvalues of the linear part in a region of the complex plane.

With A = L/D (L linear in the offsets y, D free of them) and V = y'Py:
half-plane Re < -a:  -(A'P + PA) - 2aP > 0        form  -D^-1 (grad V . L) - 2a V, times |D|
disc |z| < r:        r^2 P - A'PA > 0              form  r^2 V - V(L/D), times D^2
sector, damping > d: the half-plane inequality for A turned by the angle b with sin b = d in the complex
plane; for v = y + jw the Hermitian form v*(e^(jb) A'P + e^(-jb) PA)v is, divided by cos b,
y'Ry + w'Rw + 2 t (y'A'Pw - y'PAw) with R = A'P + PA and t = tan b (the sign of t follows that of w).
(A. M. Lyapunov 1892; for the regions: M. Chilali and P. Gahinet, IEEE Trans. Autom. Control 41, 1996.)
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from flint import fmpq_mpoly

from dossier.model.ball import Ball, from_arb, to_fraction
from dossier.model.case import NOMINAL, Case, Scope
from dossier.model.claim import Matrix, SpectralRegion
from dossier.model.equilibrium import Equilibrium
from dossier.model.linear_part import NoLinearPart, closed_matrix
from dossier.model.loop import vector_field
from dossier.model.polynomial import NotRational, Ring, offset_field


@dataclass(frozen=True)
class LinearForms:
    """Rows L_i and the denominator D over the ring: offsets, their partners (sector), parameters, constants."""

    ring: Ring
    states: tuple[str, ...]
    parameters: tuple[str, ...]
    balls: Mapping[str, Ball]
    rows: tuple[fmpq_mpoly, ...]
    denominator: fmpq_mpoly
    constant_terms_vanish: bool


def partner(name: str) -> str:
    """Name of the second real variable that goes with a state in the sector form."""
    return f"partner of {name}"


def linear_forms(case: Case, equilibrium: Equilibrium, over: Scope) -> LinearForms | str:
    """The linear part with the spread parameters symbolic (tolerances) or as numbers and balls (nominal)."""
    return _nominal(case, equilibrium) if over == NOMINAL else _over_tolerances(case, equilibrium)


def _nominal(case: Case, equilibrium: Equilibrium) -> LinearForms | str:
    matrix = closed_matrix(case, equilibrium)
    if isinstance(matrix, NoLinearPart):
        return matrix.reason
    states = case.model.state_names
    balls: dict[str, Ball] = {}
    entries: list[list[Fraction | str]] = []
    for i, row in enumerate(matrix):
        entries.append([])
        for j, value in enumerate(row):
            if hasattr(value, "p"):
                entries[-1].append(to_fraction(value))  # type: ignore[arg-type]
                continue
            ball = from_arb(value)  # type: ignore[arg-type]
            if ball is None:
                return f"entry ({i + 1}, {j + 1}) of the linear part has no finite enclosure"
            balls[f"entry {i} {j}"] = ball
            entries[-1].append(f"entry {i} {j}")
    ring = Ring((*states, *(partner(s) for s in states), *balls))
    rows = []
    for row in entries:
        total = ring.constant(Fraction(0))
        for name, entry in zip(states, row, strict=True):
            factor = ring.gen(entry) if isinstance(entry, str) else ring.constant(entry)
            total = total + factor * ring.gen(name)
        rows.append(total)
    return LinearForms(ring, states, (), balls, tuple(rows), ring.constant(Fraction(1)), True)


def _over_tolerances(case: Case, equilibrium: Equilibrium) -> LinearForms | str:
    free = tuple(p.name for p in case.model.parameters if not p.spread.is_point)
    loop = vector_field(case)
    known = {p.name: p.nominal for p in case.model.parameters}
    try:
        field = offset_field(loop.equations, loop.states, equilibrium.state, known, free, sampled=loop.sampled)
    except ArithmeticError as error:
        return str(error)
    if isinstance(field, NotRational):
        return f"the linear part is no quotient of polynomials in the parameters: {field.reason}"
    size = len(field.states)
    names = field.ring.names
    ring = Ring((*field.states, *(partner(s) for s in field.states), *names[size:]))

    def carried(polynomial: fmpq_mpoly, degree: int) -> fmpq_mpoly:
        """Terms of that degree in the offsets, over the larger ring."""
        kept = {
            (*e[:size], *([0] * size), *e[size:]): c
            for e, c in polynomial.to_dict().items()
            if sum(e[:size]) == degree
        }
        return ring.context.from_dict(kept)

    rows = tuple(carried(p, 1) for p in field.numerators)
    return LinearForms(
        ring, field.states, free, field.balls, rows, carried(field.denominator, 0), field.constant_terms_vanish
    )


def spectral_form(
    forms: LinearForms, matrix: Matrix, region: SpectralRegion, level: Fraction, sign: int
) -> fmpq_mpoly:
    """The form that must be positive definite; `sign` is the proved sign of D.  For the sector, `level` is tan b."""
    ring, states = forms.ring, forms.states
    y = [ring.gen(s) for s in states]
    if region == "disc":
        form = _bilinear(ring, matrix, y, y) * ring.constant(level**2) * forms.denominator**2
        return form - _bilinear(ring, matrix, list(forms.rows), list(forms.rows))
    signed = ring.constant(Fraction(-2 * sign))
    form = signed * _bilinear(ring, matrix, y, list(forms.rows))
    if region == "half-plane":
        return form - ring.constant(2 * level * sign) * forms.denominator * _bilinear(ring, matrix, y, y)
    w = [ring.gen(partner(s)) for s in states]
    turned = [_turned(forms, row) for row in forms.rows]
    form = form + signed * _bilinear(ring, matrix, w, turned)
    cross = _bilinear(ring, matrix, list(forms.rows), w) - _bilinear(ring, matrix, y, turned)
    return form + ring.constant(-2 * level * sign) * cross


def _turned(forms: LinearForms, row: fmpq_mpoly) -> fmpq_mpoly:
    """A row with the offsets replaced by their partners."""
    images = list(forms.ring.context.gens())
    for state in forms.states:
        images[forms.ring.names.index(state)] = forms.ring.gen(partner(state))
    return row.compose(*images, ctx=forms.ring.context)


def _bilinear(ring: Ring, matrix: Matrix, left: Sequence[fmpq_mpoly], right: Sequence[fmpq_mpoly]) -> fmpq_mpoly:
    total = ring.constant(Fraction(0))
    for a, row in zip(left, matrix, strict=True):
        for value, b in zip(row, right, strict=True):
            if value:
                total = total + ring.constant(value) * a * b
    return total
