"""Every name of a formula is known and every term has the dimension of its neighbours."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Final

from dossier.model.expression import SATURATION, Expression, nodes
from dossier.project.faults import Ledger, listed, suggestion
from dossier.project.formulas import Formula, FormulaError, parse
from dossier.project.located import Text
from dossier.project.units import PLAIN, Dimension

TRANSCENDENTAL: Final = ("sin", "cos", "tan", "asin", "acos", "atan", "exp", "log", "tanh")


@dataclass(frozen=True, slots=True)
class Scope:
    """The names a formula may use, each with its dimension (None: declared, but its unit is faulty)."""

    dimensions: Mapping[str, Dimension | None]
    elsewhere: Mapping[str, str] = field(default_factory=dict)
    """Names that exist but may not be used here, each with the reason."""
    open: bool = False
    """A table of names could not be read, so that an unknown name is no fault."""


@dataclass(frozen=True, slots=True)
class Checked:
    """A formula without fault and its dimension; None fits anything (0) or is unknown (a faulty unit)."""

    formula: Formula
    dimension: Dimension | None

    @property
    def expression(self) -> Expression:
        """The tree as written."""
        return self.formula.expression


def check_formula(text: Text, scope: Scope, ledger: Ledger) -> Checked | None:
    """The formula `text` states; None where it has a fault, which is then in `ledger`."""
    if text.is_absent:
        return None
    try:
        formula = parse(str(text))
    except FormulaError as error:
        offending = str(text)[error.offset : error.offset + error.length] or str(text)
        ledger.fault(
            text, error.message, text=offending, expected=error.expected, hint=error.hint, offset=error.offset
        )  # fmt: skip
        return None
    before = len(ledger.faults)
    for node in nodes(formula.expression):
        if node.op == "symbol" and node.value not in scope.dimensions and not scope.open:
            _report_unknown(text, formula, node, scope, ledger)
    dimension = _Checker(text, formula, scope.dimensions, ledger).dimension()
    return None if len(ledger.faults) > before else Checked(formula, dimension)


def require_dimension(text: Text, checked: Checked, wanted: Dimension | None, ledger: Ledger, why: str) -> None:
    """Report every term of a formula whose dimension is not `wanted`; the terms agree, so the whole is shown."""
    found = checked.dimension
    if found is None or wanted is None or found == wanted:
        return
    ledger.fault(
        text, f"the formula has the dimension {found}", expected=f"{wanted}, {why}",
        hint="check each factor against its unit",
    )  # fmt: skip


def _report_unknown(text: Text, formula: Formula, node: Expression, scope: Scope, ledger: Ledger) -> None:
    name = str(node.value)
    reason = scope.elsewhere.get(name, "")
    message = f"{name} may not be used here" if reason else f"{name} is not defined"
    known = list(scope.dimensions)
    ledger.fault(
        text, message, text=name, expected="one of " + listed(known) if known else "a number",
        hint=reason or suggestion(name, known), offset=formula.excerpt(node)[0],
    )  # fmt: skip


class _Checker:
    """Dimensions of the distinct nodes of a formula, arguments first; None stands for 0 and for broken names."""

    def __init__(
        self, text: Text, formula: Formula, dimensions: Mapping[str, Dimension | None], ledger: Ledger
    ) -> None:
        self.text, self.formula, self.dimensions, self.ledger = text, formula, dimensions, ledger

    def dimension(self) -> Dimension | None:
        """The dimension of the whole; every mismatch below it is reported where it stands."""
        found: dict[Expression, Dimension | None] = {}
        for node in nodes(self.formula.expression):
            found[node] = self._visit(node, [found[a] for a in node.args])
        return found[self.formula.expression]

    def _visit(self, node: Expression, args: list[Dimension | None]) -> Dimension | None:
        if node.op == "symbol":
            return self.dimensions.get(str(node.value))
        if node.op in ("number", "pi"):
            return None if node.value == 0 else PLAIN
        if node.op in ("add", SATURATION):
            return self._same(node, args)
        if node.op in TRANSCENDENTAL:
            return self._plain(node, args[0])
        return _combined(node, args)

    def _same(self, node: Expression, args: list[Dimension | None]) -> Dimension | None:
        pairs = [(a, d) for a, d in zip(node.args, args, strict=True) if d is not None]
        if not pairs:
            return None
        first, wanted = next(((a, d) for a, d in pairs if not _is_literal(a)), pairs[0])
        for argument, found in pairs:
            if found != wanted:
                what = "arguments of sat have" if node.op == SATURATION else "terms of a sum have"
                hint = f"the unit of {self._source(argument).lstrip('-+ ')} does not fit that of {self._source(first)}"
                if _is_literal(argument):
                    hint = f"a number has no unit in a formula: declare a parameter in {wanted}"
                self._report(
                    argument, f"{what} different dimensions, {found} and {wanted}",
                    f"{wanted}, as in {self._source(first)}", hint,
                )  # fmt: skip
        return wanted

    def _plain(self, node: Expression, found: Dimension | None) -> Dimension:
        if found not in (None, PLAIN):
            self._report(
                node.args[0], f"the argument of {node.op} has the dimension {found}", "a dimensionless argument",
                "divide it by a parameter of the same dimension",
            )  # fmt: skip
        return PLAIN

    def _source(self, node: Expression) -> str:
        return self.formula.excerpt(node)[1]

    def _report(self, node: Expression, message: str, expected: str, hint: str) -> None:
        offset, source = self.formula.excerpt(node)
        self.ledger.fault(self.text, message, text=source, expected=expected, hint=hint, offset=offset)


def _is_literal(node: Expression) -> bool:
    return not any(n.op == "symbol" for n in nodes(node))


def _combined(node: Expression, args: list[Dimension | None]) -> Dimension | None:
    known = [a for a in args if a is not None]
    if len(known) < len(args):
        return None
    if node.op == "mul":
        product = PLAIN
        for factor in known:
            product = product * factor
        return product
    if node.op == "div":
        return known[0] / known[1]
    if node.op == "pow":
        return known[0] ** node.fraction
    if node.op == "sqrt":
        return known[0] ** Fraction(1, 2)
    return known[0]


def names_of(expressions: Iterable[Expression]) -> frozenset[str]:
    """Every name that occurs in `expressions`."""
    return frozenset(str(n.value) for e in expressions for n in nodes(e) if n.op == "symbol")
