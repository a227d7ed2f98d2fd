"""The engineer's own Lyapunov function: a formula in the states as plain numbers, and a level.

The states stand for their offsets from the equilibrium, as numbers in their declared units, so that coefficients need
no units; the formula is turned into one over SI offsets.
"""

from __future__ import annotations

from fractions import Fraction

from flint import arb

from dossier.model.ball import WORKING_BITS, evaluate, precision
from dossier.model.case import Candidate
from dossier.model.expression import PI, Expression, div, mul, names, number, power, substitute, symbol
from dossier.project.dimensions import Scope, check_formula
from dossier.project.faults import Ledger
from dossier.project.models import ModelReading
from dossier.project.quantities import Meaning, read_quantity, scale_of
from dossier.project.schema import CandidateEntry
from dossier.project.units import Unit, parse_unit


def read_candidate(entry: CandidateEntry | None, reading: ModelReading, ledger: Ledger) -> Candidate | None:
    """The candidate of an operating point; None where there is none, or where it has a fault."""
    if entry is None:
        return None
    before = len(ledger.faults)
    states = reading.state_names
    others = {n: "V is a function of the states" for n in reading.scope.dimensions if n not in states}
    scope = Scope(dict.fromkeys(states), others, reading.scope.open)
    checked = check_formula(entry.function, scope, ledger)
    level = read_quantity(entry.level, Meaning(parse_unit("1")), ledger)
    if level is not None and level.factor <= 0:
        ledger.fault(
            entry.level, "the level is not positive", expected="a positive number",
            hint="the set is where V is at most the level, around the equilibrium",
        )  # fmt: skip
    if checked is not None and _is_nonzero_at_rest(checked.expression, states):
        ledger.fault(
            entry.function, "the function is not zero at the equilibrium", expected="V = 0 where all offsets are 0",
            hint="the states stand for offsets from the equilibrium; subtract the constant",
        )  # fmt: skip
    units = [reading.units[n] for n in states]
    if len(ledger.faults) > before or checked is None or level is None or any(u is None for u in units):
        return None
    if names(checked.expression) - set(states):
        return None
    places = {n: _in_units(n, u) for n, u in zip(states, units, strict=True) if u is not None}
    return Candidate(substitute(checked.expression, places), level.factor, str(entry.function))


def _is_nonzero_at_rest(function: Expression, states: tuple[str, ...]) -> bool:
    """Proved; False too where a name is unknown, which happens only beside a table that could not be read."""
    if names(function) - set(states):
        return False
    with precision(WORKING_BITS):
        value = evaluate(function, dict.fromkeys(states, arb(0)))
    return bool(value.is_finite() and (value > 0 or value < 0))


def _in_units(state: str, unit: Unit) -> Expression:
    """The SI offset of a state over one of its units."""
    scale = scale_of(unit)
    offset = symbol(state)
    if scale.factor != 1:
        offset = mul(number(Fraction(1) / scale.factor), offset)
    return div(offset, power(PI, scale.pi_power)) if scale.pi_power else offset
