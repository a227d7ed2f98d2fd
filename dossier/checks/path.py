"""Follow the equilibrium of the operating point along the straight line to one parameter combination, with proof.

The share s of the way is the only parameter: p = nominal + s (target - nominal).  Pieces of [0, 1] are proved one
after the other as in `dossier.checks.courses`, each joined to the one before at their common share.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

from dossier.checks.courses import Alone, RestFamily, alone_on, rest_family, same_on
from dossier.model.ball import Ball
from dossier.model.case import Case
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import add, mul, number, substitute, symbol
from dossier.model.region import Box, Interval

SHARE: Final = "share of the way"
"""Symbol of s; no project name has a space."""
SHORTEST: Final = Fraction(1, 512)
"""Shortest piece tried: a branch that needs shorter ones is next to a fold."""
GROWTH: Final = 2
"""A piece that was proved may be followed by one that is so much longer."""


@dataclass(frozen=True, slots=True)
class Way:
    """The proved pieces, from the nominal combination on; `reached` is the share at which they end."""

    family: RestFamily
    pieces: tuple[Alone, ...]
    reached: Fraction


def way_family(case: Case, target: Mapping[str, Fraction]) -> RestFamily:
    """The equations of rest on the line to `target`; a nominal value that carries pi begins at its middle."""
    family = rest_family(case)
    nominal = {p.name: p.nominal.middle for p in case.model.parameters}
    share = symbol(SHARE)
    places = {n: add(number(nominal[n]), mul(number(v - nominal[n]), share)) for n, v in target.items()}
    equations = tuple(substitute(e, places) for e in family.equations)
    return RestFamily(
        family.states, equations, family.constants, Box((SHARE,), (Interval(Fraction(0), Fraction(1)),)), family.reach
    )


def follow(case: Case, equilibrium: Equilibrium, target: Mapping[str, Fraction], until: Fraction = Fraction(1)) -> Way:
    """Pieces of the way to `target` up to the share `until`, as far as they can be proved."""
    family = way_family(case, target)
    pieces: list[Alone] = []
    at, length = Fraction(0), until
    state = tuple(b.middle for b in equilibrium.state)
    while at < until:
        length = min(length, until - at)
        cell = Box((SHARE,), (Interval(at, at + length),))
        piece = alone_on(family, cell, state)
        if piece is not None and _continues(case, equilibrium, pieces, piece):
            pieces.append(piece)
            at += length
            state = piece.course.at((at,))
            length *= GROWTH
            continue
        length /= 2
        if length < SHORTEST:
            break
    return Way(family, tuple(pieces), at)


def _continues(case: Case, equilibrium: Equilibrium, before: list[Alone], piece: Alone) -> bool:
    if before:
        return same_on(before[-1], piece) is True
    exact = all(p.nominal.is_exact for p in case.model.parameters if p.has_spread)
    return exact and piece.holds((Fraction(0),), equilibrium.state)


def place_at(case: Case, equilibrium: Equilibrium, target: Mapping[str, Fraction]) -> Equilibrium | None:
    """The same operating point at the exact combination `target`; None where its branch is not proved to lead there."""
    if equilibrium.fixed_for_all:
        return equilibrium
    way = follow(case, equilibrium, target)
    if way.reached < 1:
        return None
    last, end = way.pieces[-1], (Fraction(1),)
    point = Box((SHARE,), (Interval(Fraction(1), Fraction(1)),))
    sharp = alone_on(way.family, point, last.course.at(end))
    if sharp is None or not same_on(last, sharp):
        return None
    state: tuple[Ball, ...] = sharp.state_at(end)
    return Equilibrium(
        equilibrium.identifier, state, True, equilibrium.inside_domain, "undecided", (), remarks=equilibrium.remarks
    )
