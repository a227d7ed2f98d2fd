"""Every claim the searches can offer about one operating point, none of them believed.

Searches are handed the checks as callbacks, so that what would be refused is replaced by something more modest.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import replace
from fractions import Fraction
from typing import Final

from dossier.checks.assess import locate
from dossier.checks.candidate import check_candidate
from dossier.checks.combination import check_combination
from dossier.checks.courses import alone_on, rest_family
from dossier.checks.cover import check_cover
from dossier.checks.criteria.linear import region_and_level
from dossier.checks.equilibria import Unbounded, enclose_equilibria
from dossier.checks.linear import classify, routh_claim
from dossier.checks.lyapunov import check_lyapunov, ellipsoid, set_premises
from dossier.checks.movement import Movement, check_absence, check_branch, check_end
from dossier.checks.sets import covers
from dossier.checks.spectral import cell_holds, check_matrix, widened
from dossier.checks.spectrum import spectral_values
from dossier.model.affine import spread_box
from dossier.model.attempt import Attempt
from dossier.model.case import NOMINAL, Case, Criterion, with_spreads
from dossier.model.claim import CellsClaim, Claim, CoverClaim, EndClaim, LyapunovClaim, RootsClaim, SpectralRegion
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import Expression
from dossier.model.finding import Enclosure
from dossier.model.loop import model_hash
from dossier.model.region import Box
from dossier.search.branch import seek_branch, seek_end
from dossier.search.candidate import given_scopes, quadratic_terms, seek_given
from dossier.search.cells import seek_cells
from dossier.search.cover import seek_cover_candidate
from dossier.search.effort import Effort
from dossier.search.equilibria import seed_equilibria
from dossier.search.frequency import seek_crossings
from dossier.search.goal import Goal
from dossier.search.goals import (
    ABOUT_SPECTRUM,
    SetTask,
    SpectralTask,
    effective_scope,
    loops,
    set_tasks,
    spectral_tasks,
    stronger_levels,
)
from dossier.search.kinks import cells_of_case, kink_slabs, of_case, verified_for, without_kinks
from dossier.search.linearisation import seek_matrix
from dossier.search.offsets import half_width
from dossier.search.quadratic import prove_given, seek_quadratic
from dossier.search.worst import seek_worst

END_BOXES: Final = 20_000
"""Boxes per face or box in which a branch is shown to end: a case that needs more is next to a fold."""

WIDER: Final = tuple(Fraction(v) for v in ("4", "3", "2.5", "2", "1.75", "1.5", "1.25", "1.1"))
"""Factors by which spreads are widened to show a reserve, the widest first."""

FEW_CELLS: Final = 8
"""Cells that a stronger level than the one asked for may cost where the equilibrium moves."""

Progress = Callable[[str, str], None]
"""Called with the operating point and the stage that begins."""

Sets = tuple[LyapunovClaim | CoverClaim | CellsClaim, ...]
Roots = RootsClaim | Unbounded
Found = tuple[tuple[Claim, ...], tuple[Attempt, ...]]


def find_roots(case: Case, effort: Effort) -> Roots:
    """Boxes around every equilibrium in the search box of `case`, or why there are none."""
    return enclose_equilibria(case, seed_equilibria(case, effort), effort.boxes)


def find_claims(case: Case, effort: Effort, progress: Progress, roots: Roots) -> Found:
    """Every claim the searches can offer for `case`, none of them believed, and what was tried."""
    listed = roots if isinstance(roots, RootsClaim) else None
    equilibria, _, _ = locate(case, listed, listed is not None and listed.complete, effort.boxes)
    claims: list[Claim] = [] if listed is None else [listed]
    attempts: list[Attempt] = []
    if not isinstance(roots, RootsClaim):
        attempts.append(Attempt(case.name, "interval branch and bound for equilibria", "out of reach", roots.reason))
    counts = [(e, routh_claim(case, e)) for e in equilibria]
    claims += [c for _, c in counts if not isinstance(c, str)]
    chosen = next((e for e in equilibria if e.chosen), None)
    if chosen is None:
        return tuple(claims), tuple(attempts)
    attempts_there, moved, movement = follow_equilibrium(case, chosen, effort, progress)
    attempts += attempts_there
    claims += moved
    if any(isinstance(c, EndClaim) for c in moved):
        # Whatever is asked over tolerances is refuted by that; the rest is about the nominal combination.
        case = replace(case, criteria=tuple(c for c in case.criteria if effective_scope(case, c.over) == NOMINAL))
    searches = [_spectral_claims(case, chosen, movement, effort), _margin_claims(case, chosen)]
    if case.candidate is not None:
        searches.append(_given_claims(case, chosen, movement, effort))
    unstable = any(e is chosen and classify(c) == "unstable" for e, c in counts)
    if unstable:
        why = "the linear part is unstable: no certificate exists"
        attempts.append(Attempt(case.name, "Lyapunov certificates", "infeasible", why))
    else:
        progress(case.name, "certificates")
        searches.append(_set_claims(case, chosen, movement, effort))
    for found, tried in searches:
        claims += found
        attempts += tried
    return tuple(claims), tuple(attempts)


def follow_equilibrium(
    case: Case, chosen: Equilibrium, effort: Effort, progress: Progress
) -> tuple[tuple[Attempt, ...], tuple[Claim, ...], Movement]:
    """Where the equilibrium lies over the tolerances, where a criterion is about them and it moves."""
    asked = any(effective_scope(case, c.over) != NOMINAL for c in case.criteria)
    if chosen.fixed_for_all or not asked:
        return (), (), Movement(chosen)
    progress(case.name, "branch")
    tried, ends = seek_end(
        case, chosen, lambda end: check_end(case, chosen, end, END_BOXES).result == "proved",
        lambda absence: check_absence(case, absence, END_BOXES).result == "proved",
    )  # fmt: skip
    if ends:
        return tried, ends, Movement(chosen)
    family = rest_family(case)
    more, claim = seek_branch(
        case, chosen, effort, lambda cell, middle: alone_on(family, cell, middle) is not None,
        lambda claim: check_branch(case, chosen, claim)[0].result == "proved",
    )  # fmt: skip
    if claim is None:
        return (*tried, *more), (), Movement(chosen)
    _, movement = check_branch(case, chosen, claim)
    return (*tried, *more), (claim,), movement or Movement(chosen)


def _wanted(case: Case) -> Iterator[tuple[Criterion, SpectralRegion, Fraction]]:
    for criterion in case.criteria:
        if criterion.claim in ABOUT_SPECTRUM:
            wanted = region_and_level(criterion, sampled=case.model.time == "sampled")
            if wanted is not None:
                yield criterion, *wanted


def _spectral_claims(case: Case, chosen: Equilibrium, movement: Movement, effort: Effort) -> Found:
    """A Lyapunov inequality per task, then the same for more than was asked, so that the reserve shows."""
    claims: list[Claim] = []
    attempts: list[Attempt] = []
    nominal = spectral_values(case, chosen)
    at_worst: dict[SpectralRegion, Mapping[str, Enclosure]] = {}
    for task in spectral_tasks(case, _wanted(case)):
        if task.over != NOMINAL and task.region not in at_worst:
            tried, worst = seek_worst(case, chosen, task.region, effort, task.worst_suffix)
            attempts += tried
            claims += [] if worst is None else [worst]
            at_worst[task.region] = nominal if worst is None else check_combination(case, chosen, worst).facts
        values = nominal if task.over == NOMINAL else at_worst[task.region]
        tried, claim = seek_matrix(
            case, chosen, task.over, task.region, task.level, effort, task.suffix, cell_holds, movement.on
        )
        attempts += tried
        if claim is None:
            continue
        few = 1 if chosen.fixed_for_all else min(FEW_CELLS, effort.cells)
        for level in stronger_levels(task, values):
            more, better = seek_matrix(
                case,
                chosen,
                task.over,
                task.region,
                level,
                replace(effort, cells=few),
                task.suffix,
                cell_holds,
                movement.on,
            )
            if better is not None:
                claim = better
                attempts += more
                break
        claims.append(claim)
        if task.over != NOMINAL and chosen.fixed_for_all:
            wider, more = _tolerance_reserve(case, chosen, task, effort)
            attempts += more
            claims += wider
    return tuple(claims), tuple(attempts)


def _tolerance_reserve(case: Case, chosen: Equilibrium, task: SpectralTask, effort: Effort) -> Found:
    """The same statement, at the level asked for, for spreads widened as far as one or a few cells reach."""
    for scale in WIDER:
        box = widened(spread_box(case), scale)
        wide = with_spreads(case, box)
        _, claim = seek_matrix(
            wide, chosen, task.over, task.region, task.level, replace(effort, cells=min(FEW_CELLS, effort.cells)),
            f"{task.suffix}-wide", cell_holds,
        )  # fmt: skip
        if claim is not None:
            claim = replace(claim, model_hash=model_hash(case))
            if check_matrix(case, chosen, claim).result == "proved":
                said = f"proved for spreads {float(scale):.4g} times as wide"
                attempt = Attempt(claim.identifier, "tolerance reserve", "found", said, {"cells": len(claim.cells)})
                return (claim,), (attempt,)
    return (), ()


def _margin_claims(case: Case, chosen: Equilibrium) -> Found:
    claims: list[Claim] = []
    attempts: list[Attempt] = []
    for loop in loops(case):
        tried, claim = seek_crossings(case, chosen, loop)
        attempts += tried
        claims += [] if claim is None else [claim]
    return tuple(claims), tuple(attempts)


def _given_claims(case: Case, chosen: Equilibrium, movement: Movement, effort: Effort) -> Found:
    """The engineer's own V at its own level: by Gram matrices where it is a quadratic form, else by intervals."""
    attempts: list[Attempt] = []
    function, candidate = quadratic_terms(case), case.candidate
    if candidate is not None and function is not None:
        for over in given_scopes(case):
            place = movement.on(Box((), ()) if over == NOMINAL else spread_box(case))
            if place is None:
                continue
            tried, claim = prove_given(
                case, place, over, function, candidate.level, effort, "V-given",
                lambda claim: check_lyapunov(case, chosen, claim, movement.on).result == "proved",
            )  # fmt: skip
            attempts.append(tried)
            if claim is not None:
                return (claim,), tuple(attempts)
    sizes = tuple(half_width(case, case.region, n) for n in case.model.state_names)
    more, given = seek_given(
        case, chosen, sizes, lambda claim: check_candidate(case, chosen, claim, effort.boxes).result != "undecided"
    )
    return () if given is None else (given,), (*attempts, *more)


def _set_claims(case: Case, chosen: Equilibrium, movement: Movement, effort: Effort) -> Found:
    """Sets for all criteria about regions; attraction alone is sought only where the whole goal was missed."""
    claims: list[Claim] = []
    attempts: list[Attempt] = []
    missed = False
    for task in set_tasks(case, chosen):
        if task.suffix.endswith("-free") and not missed:
            continue
        tried, found = _seek_set(case, chosen, movement, task, effort)
        missed = not any(_serves(case, c, task.goal.region) for c in found)
        attempts += tried
        claims += found
    return tuple(claims), tuple(attempts)


def _seek_set(
    case: Case, chosen: Equilibrium, movement: Movement, task: SetTask, effort: Effort
) -> tuple[tuple[Attempt, ...], Sets]:
    """A set by exact Gram matrices; where it misses the region, then cell by cell, or by intervals.

    A loop with kinks is first sought as if it had none, inside the slabs where that is true.
    """
    smooth = without_kinks(case, chosen)
    tried: tuple[Attempt, ...] = ()
    found: Sets = ()
    for loop, distances in (smooth,) if smooth is not None else ():
        tried, found = _seek_gram(case, loop, distances, chosen, movement, task, effort)
    if not found:
        more, found = _seek_gram(case, case, (), chosen, movement, task, effort)
        tried = (*tried, *more)
    if task.over != NOMINAL or any(_serves(case, c, task.goal.region) for c in found):
        return tried, found
    suffix = f"{task.suffix}-boxes" if found else task.suffix
    more, cover = seek_cover_candidate(
        case, chosen, task.goal, effort, suffix,
        lambda claim: check_cover(case, chosen, claim, effort.boxes).result == "proved",
    )  # fmt: skip
    return (*tried, *more), (*found, *(() if cover is None else (cover,)))


def _seek_gram(
    case: Case, loop: Case, distances: tuple[Expression, ...], chosen: Equilibrium, movement: Movement, task: SetTask,
    effort: Effort,
) -> tuple[tuple[Attempt, ...], Sets]:  # fmt: skip
    """Sets by Gram matrices for `loop`, which is `case` where all `distances` are positive."""

    def goal_at(rest: Equilibrium, cell: Box | None) -> Goal:
        goal = task.goal_at(case, rest, cell)
        return replace(goal, slabs=(*goal.slabs, *kink_slabs(case, rest, distances, task.over, cell)))

    tried: tuple[Attempt, ...] = ()
    found: tuple[LyapunovClaim, ...] = ()
    whole = Box((), ()) if task.over == NOMINAL else spread_box(case)
    place = movement.on(whole)
    if place is not None:
        tried, found = seek_quadratic(
            loop, place, task.over, goal_at(place, whole), effort, task.suffix,
            verified_for(case, lambda claim: check_lyapunov(case, chosen, claim, movement.on).result == "proved"),
        )  # fmt: skip
        found = tuple(of_case(case, c) for c in found)
    if task.over == NOMINAL or any(_serves(case, c, task.goal.region) for c in found):
        return tried, found
    more, cells = seek_cells(
        loop, chosen, movement.on, goal_at, effort, f"{task.suffix}-cells",
        verified_for(
            case,
            lambda claim: all(
                p.result == "proved" for p in set_premises(case, chosen, claim, movement.on, of_cell=True)
            ),
        ),
    )  # fmt: skip
    return (*tried, *more), (*found, *(() if cells is None else (cells_of_case(case, cells),)))


def _serves(case: Case, claim: LyapunovClaim | CoverClaim | CellsClaim, region: Box) -> bool:
    """Its set, or that of each of its cells, covers `region`."""
    sets = claim.cells if isinstance(claim, CellsClaim) else (claim,)
    return all(_covers(case, c, region) for c in sets)


def _covers(case: Case, claim: LyapunovClaim | CoverClaim, region: Box) -> bool:
    shape = ellipsoid(claim, len(case.model.states))
    return shape is not None and region.is_bounded and covers(shape, region)
