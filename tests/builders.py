"""Cases with a search box, a region and a stated or guessed point, from formulas as text."""

from collections.abc import Mapping, Sequence
from dataclasses import replace
from fractions import Fraction

from loop_cases import formula, loop_case

from dossier.model.ball import Ball
from dossier.model.case import Case
from dossier.model.expression import Expression
from dossier.model.region import Box, Interval

Side = tuple[object, object]
"""Two ends, each as `Fraction` reads it; None is unbounded."""


def box(names: Sequence[str], sides: Mapping[str, Side] | None) -> Box:
    """A box over `names`; a name without a side is unbounded."""
    return Box.from_mapping(tuple(names), {n: Interval(*map(_end, side)) for n, side in (sides or {}).items()})


def _end(value) -> Fraction | None:
    return None if value is None else Fraction(value)


def make_case(
    equations: Mapping[str, str | Expression],
    parameters: Mapping[str, str | int | Ball] | None = None,
    search: Mapping[str, Side] | None = None,
    region: Mapping[str, Side] | None = None,
    near: Sequence | None = None,
    fixed: Sequence | None = None,
    sampled: bool = False,
    domain: Mapping[str, Side] | None = None,
    spread: Mapping[str, Side] | None = None,
    none_expected: bool = False,
) -> Case:
    """A case named ``point``; sampled with 1 s.  `spread` widens parameters to tolerances around their nominal."""
    values = {n: v if isinstance(v, Ball) else str(v) for n, v in (parameters or {}).items()}
    case = loop_case(dict.fromkeys(equations, "0"), {}, values, "1" if sampled else "")
    names = case.model.state_names
    parts = tuple(
        replace(p, kind="tolerance", spread=Interval(*map(_end, spread[p.name]))) if p.name in (spread or {}) else p
        for p in case.model.parameters
    )
    expressions = tuple(formula(e) if isinstance(e, str) else e for e in equations.values())
    return replace(
        case,
        model=replace(case.model, domain=box(names, domain), parameters=parts, equations=expressions),
        fixed=None if fixed is None else tuple(map(Fraction, fixed)),
        near=None if near is None else tuple(map(Fraction, near)),
        search=box(names, search),
        region=box(names, region),
        none_expected=none_expected,
    )
