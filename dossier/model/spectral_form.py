"""The quadratic form whose sign keeps all eigenvalues of the linear part in a region of the complex plane.

With A = L/D (L linear in the offsets y, D free of them) and V = y'Py:
half-plane Re < -a:  -(A'P + PA) - 2aP > 0         form  -D^-1 (grad V . L) - 2a V, times |D|
disc |z| < r:        r^2 P - A'PA > 0              by Schur's complement the form r (y'Py + w'Pw) + 2 w'PAy in
                     twice as many variables, times |D|; it stays linear in A
sector, damping > d: the half-plane inequality for A turned by the angle b with sin b = d in the complex
plane; for v = y + jw the Hermitian form v*(e^(jb) A'P + e^(-jb) PA)v is, divided by cos b,
y'Ry + w'Rw + 2 t (y'A'Pw - y'PAw) with R = A'P + PA and t = tan b (the sign of t follows that of w).
(A. M. Lyapunov 1892; for the regions: M. Chilali and P. Gahinet, IEEE Trans. Autom. Control 41, 1996.)
"""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from flint import fmpq_mpoly

from dossier.model.ball import Ball, from_arb, to_fraction
from dossier.model.case import NOMINAL, Case, Scope
from dossier.model.claim import MatrixCell, SpectralRegion
from dossier.model.course import shift_of
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import (
    ARITHMETIC,
    Expression,
    add,
    fold,
    mul,
    names,
    number,
    rebuild,
    simplify,
    sub,
    substitute,
    symbol,
)
from dossier.model.linear_part import NoLinearPart, active_branch, closed_matrix
from dossier.model.loop import jacobian
from dossier.model.polynomial import NotRational, Quotient, Ring, quotient_of, shifts, split_constants
from dossier.model.region import Box
from dossier.model.taylor import expand_functions


@dataclass(frozen=True)
class LinearForms:
    """Rows L_i and the denominator D over the ring: offsets, their partners, parameters, constants.

    Valid for parameters in `box`.  `constant_terms_vanish`: the right-hand side is proved zero at the equilibrium for
    every parameter value.  `local`: functions of parameters are enclosed over `box`, so a smaller box is sharper.
    """

    ring: Ring
    states: tuple[str, ...]
    box: Box
    balls: Mapping[str, Ball]
    rows: tuple[fmpq_mpoly, ...]
    denominator: fmpq_mpoly
    constant_terms_vanish: bool
    local: bool

    @property
    def parameters(self) -> tuple[str, ...]:
        """Names of the symbolic parameters."""
        return self.box.names


def partner(name: str) -> str:
    """Name of the second real variable w that goes with a state in the forms of disc and sector."""
    return f"partner of {name}"


def linear_forms(case: Case, equilibrium: Equilibrium, over: Scope, cell: Box | None = None) -> LinearForms | str:
    """The linear part with the spread parameters symbolic (tolerances) or as numbers and balls (nominal).

    Over tolerances it is valid on `cell`, by default the whole box of spreads; a reason where there is none.
    """
    if over == NOMINAL:
        return _nominal(case, equilibrium)
    free = tuple(p for p in case.model.parameters if p.has_spread)
    box = cell or Box(tuple(p.name for p in free), tuple(p.spread for p in free))
    try:
        return _over_tolerances(case, equilibrium, box)
    except ArithmeticError as error:
        return str(error)


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
    return LinearForms(ring, states, Box((), ()), balls, tuple(rows), ring.constant(Fraction(1)), True, False)


def _over_tolerances(case: Case, equilibrium: Equilibrium, box: Box) -> LinearForms | str:
    """Raises ArithmeticError where a constant or a Taylor polynomial has no finite enclosure on `box`."""
    course, states = equilibrium.course, case.model.state_names
    if course is not None and course.parameters != box:
        return "where the equilibrium moves is known for another part of the box"
    if course is None and not all(b.is_exact for b in equilibrium.state):
        return "the equilibrium is not known to be the same for every parameter combination"
    branch = active_branch(case, equilibrium, None if course is None else box)
    if isinstance(branch, NoLinearPart):
        return branch.reason
    fixed = {p.name: p.nominal for p in case.model.parameters if p.name not in box.names}
    exact = {n: number(b.middle) for n, b in fixed.items() if b.is_exact}
    moved = shifts(states, equilibrium.state, course)
    places = exact | dict(zip(states, rest_expressions(case, equilibrium, moved), strict=True))
    entries = tuple(simplify(substitute(e, places)) for row in jacobian(branch.equations, states) for e in row)
    split, balls = split_constants(entries, frozenset((*box.names, *moved)), fixed)
    balls = {**balls, **moved}
    rational, remainders = expand_functions(split, box, balls)
    balls = {**balls, **remainders}
    ring = Ring((*states, *(partner(s) for s in states), *box.names, *balls))
    one = ring.constant(Fraction(1))
    values = {n: Quotient(ring.gen(n), one) for n in (*box.names, *balls)}
    quotients = [quotient_of(e, ring, values) for e in rational]
    regular = [q for q in quotients if isinstance(q, Quotient)]
    if len(regular) < len(quotients):
        return next(q.reason for q in quotients if isinstance(q, NotRational))
    denominator = one
    for q in regular:
        denominator = denominator * (q.denominator / denominator.gcd(q.denominator))
    cleared = iter(q.numerator * (denominator / q.denominator) for q in regular)
    rows = tuple(sum((next(cleared) * ring.gen(s) for s in states), ring.constant(Fraction(0))) for _ in states)
    vanish = course is not None or all(
        vanishes_identically(sub(e, symbol(s)) if case.model.time == "sampled" else e, places)
        for e, s in zip(branch.equations, states, strict=True)
    )
    return LinearForms(
        ring, states, box, balls, rows, denominator, vanish, bool(remainders) or course is not None
    )  # fmt: skip


def rest_expressions(case: Case, equilibrium: Equilibrium, moved: Collection[str]) -> tuple[Expression, ...]:
    """The states at rest: numbers, or expressions in the parameters of the course and in the symbols of `moved`."""
    course = equilibrium.course
    if course is None:
        return tuple(number(b.middle) for b in equilibrium.state)
    places = []
    for state, centre, row in zip(case.model.state_names, course.centre, course.slopes, strict=True):
        terms = [number(centre)]
        for slope, (name, side) in zip(row, course.parameters.items(), strict=True):
            if slope:
                terms.append(mul(number(slope), sub(symbol(name), number(side.middle))))
        if shift_of(state) in moved:
            terms.append(symbol(shift_of(state)))
        places.append(add(*terms))
    return tuple(places)


def vanishes_identically(expression: Expression, values: Mapping[str, Expression]) -> bool:
    """`expression`, with `values` put in, is zero wherever it is defined; False proves nothing.

    Functions of parameters count as unknowns of their own, so an identity between them is not seen.
    """
    atoms: dict[Expression, str] = {}

    def visit(node: Expression, args: tuple[Expression, ...]) -> Expression:
        whole = node.op != "pow" or node.fraction.denominator == 1
        if node.op in ("number", "symbol") or (node.op in ARITHMETIC and whole):
            return rebuild(node, args)
        return symbol(atoms.setdefault(rebuild(node, args), f"atom {len(atoms)}"))

    plain = fold(simplify(substitute(expression, values)), visit)
    ring = Ring(tuple(sorted(names(plain))))
    one = ring.constant(Fraction(1))
    quotient = quotient_of(plain, ring, {n: Quotient(ring.gen(n), one) for n in ring.names})
    return isinstance(quotient, Quotient) and quotient.numerator.is_zero()


Entries = tuple[tuple[fmpq_mpoly, ...], ...]


def entries_of(forms: LinearForms, cell: MatrixCell) -> Entries:
    """P of a cell as polynomials in its parameters."""
    ring = forms.ring
    steps = [ring.gen(n) - ring.constant(side.middle) for n, side in cell.parameters.items()] if cell.slopes else []
    rows = []
    for i, row in enumerate(cell.matrix):
        entries = []
        for j, value in enumerate(row):
            entry = ring.constant(value)
            for slope, step in zip(cell.slopes, steps, strict=True):
                if slope[i][j]:
                    entry = entry + ring.constant(slope[i][j]) * step
            entries.append(entry)
        rows.append(tuple(entries))
    return tuple(rows)


def spectral_form(
    forms: LinearForms, cell: MatrixCell, region: SpectralRegion, level: Fraction, sign: int
) -> fmpq_mpoly:
    """The form that must be positive definite; `sign` is the proved sign of D.  For the sector, `level` is tan b."""
    ring, states = forms.ring, forms.states
    matrix = entries_of(forms, cell)
    y = [ring.gen(s) for s in states]
    w = [ring.gen(partner(s)) for s in states]
    if region == "disc":
        form = _bilinear(ring, matrix, y, y) + _bilinear(ring, matrix, w, w)
        form = form * ring.constant(level * sign) * forms.denominator
        return form + ring.constant(Fraction(2)) * _bilinear(ring, matrix, w, list(forms.rows))
    signed = ring.constant(Fraction(-2 * sign))
    form = signed * _bilinear(ring, matrix, y, list(forms.rows))
    if region == "half-plane":
        return form - ring.constant(2 * level * sign) * forms.denominator * _bilinear(ring, matrix, y, y)
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


def _bilinear(ring: Ring, matrix: Entries, left: Sequence[fmpq_mpoly], right: Sequence[fmpq_mpoly]) -> fmpq_mpoly:
    total = ring.constant(Fraction(0))
    for a, row in zip(left, matrix, strict=True):
        for value, b in zip(row, right, strict=True):
            if value:
                total = total + value * a * b
    return total
