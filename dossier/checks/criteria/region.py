"""Criteria about whole regions of starts: attraction, limits kept, excursion (theorems T2, T3, T7, T9)."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from dossier.checks.boxes import range_over
from dossier.checks.candidate import holds_region
from dossier.checks.cells import merged
from dossier.checks.combination import OUTSIDE, count_of, words_of
from dossier.checks.criteria.common import (
    conclude,
    open_question,
    refute,
    refute_by_end,
    stated_bounds,
    tightest_bounds,
)
from dossier.checks.knowledge import Knowledge
from dossier.checks.linear import routh_claim_id
from dossier.checks.lyapunov import Ellipsoid, ellipsoid, parameter_box
from dossier.checks.sets import RANGE_PIECES, bound_over_set, covered_scale, covers
from dossier.model.case import NOMINAL, Criterion
from dossier.model.claim import CellsClaim, CoverClaim, LyapunovClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.expression import Expression, symbol
from dossier.model.figures import figure, span
from dossier.model.finding import Enclosure, Finding, Premise, Strength
from dossier.model.loop import inline_signals
from dossier.model.region import Box, Interval

SetClaim = LyapunovClaim | CoverClaim


def region_of(knowledge: Knowledge, criterion: Criterion) -> Box:
    """The criterion's own region of starts, else the operating point's."""
    return knowledge.case.region if criterion.region is None else criterion.region


def establish_region(knowledge: Knowledge, criterion: Criterion) -> tuple[Finding, ...]:
    """Findings for ``attraction``, ``limits_kept`` and ``excursion``."""
    equilibrium = knowledge.chosen
    if equilibrium is None:
        return (open_question(knowledge, criterion, knowledge.why_no_equilibrium),)
    region = region_of(knowledge, criterion)
    if not region.is_bounded:
        missing = ", ".join(n for n, i in region.items() if not i.is_bounded)
        return (open_question(knowledge, criterion, f"the region of starts does not bound {missing}"),)
    found = [*refute_by_end(knowledge, criterion), *_refutations(knowledge, criterion, equilibrium, region)]
    for claim, finding in knowledge.sets(criterion.over):
        shape = ellipsoid(claim, len(knowledge.case.model.states))
        if shape is not None:
            found.append(_by_set(knowledge, criterion, region, claim, finding, shape))
    found += [_by_cells(knowledge, criterion, region, claim, finding) for claim, finding in knowledge.cells()]
    found += _by_candidate(knowledge, criterion, equilibrium, region)
    return tuple(found) or (
        open_question(knowledge, criterion, "no set was proved attractive for the scope asked for"),
    )


def _by_set(
    knowledge: Knowledge,
    criterion: Criterion,
    region: Box,
    claim: SetClaim,
    finding: Finding,
    shape: Ellipsoid,
) -> Finding:
    equilibrium = knowledge.rest_of(claim, criterion.over)
    scale = covered_scale(shape, region)
    facts = {"proved scale of the region": Enclosure(scale, scale, "1")}
    premises = [
        knowledge.place,
        Premise(
            "a", "every start of the region lies in the proved set", "proved" if covers(shape, region) else "undecided",
            "exact", f"the region fits at scale {figure(scale)}", claim.identifier,
        ),
        *finding.premises,
    ]  # fmt: skip
    theorem = finding.theorem
    statement = "every motion from the region stays in the set, exists for all time and converges"
    if equilibrium is None:
        statement = "it is not proved where the equilibrium lies"
        premises.append(Premise("moved", statement, "undecided", "enclosed", evidence=claim.identifier))
    elif criterion.claim == "limits_kept":
        theorem, statement = "T9", "no motion from the region leaves the limits"
        premises.extend(_limit_premises(knowledge, criterion, equilibrium, claim, shape))
    elif criterion.claim == "excursion":
        theorem = "T9"
        statement = f"the quantity {criterion.of_written} stays within its bounds along every motion from the region"
        premise, more = _excursion(knowledge, criterion, equilibrium, claim, shape)
        premises.append(premise)
        facts.update(more)
    return conclude(knowledge, criterion, theorem, statement, tuple(premises), (claim.identifier,), facts)


def _by_candidate(
    knowledge: Knowledge, criterion: Criterion, equilibrium: Equilibrium, region: Box
) -> Iterator[Finding]:
    """By the engineer's own V, which may be any formula: its set lies in a box, which bounds what is asked."""
    case, known = knowledge.case, knowledge.candidate()
    if known is None or case.candidate is None or criterion.over != NOMINAL:
        return
    claim, finding = known
    if claim.around is None:
        return
    inside = holds_region(case, case.candidate, claim.around, region)
    premises = [
        knowledge.place,
        Premise(
            "a", "every start of the region lies in the proved set", "proved" if inside else "undecided", "enclosed",
            evidence=claim.identifier,
        ),
        *finding.premises,
    ]  # fmt: skip
    sides = [
        Interval(b.lower + i.bounds[0], b.upper + i.bounds[1])
        for b, i in zip(equilibrium.state, claim.around.intervals, strict=True)
    ]
    parameters = parameter_box(case, NOMINAL)
    place = Box((*case.model.state_names, *parameters.names), (*sides, *parameters.intervals))
    theorem, facts = finding.theorem, dict[str, Enclosure]()
    statement = "every motion from the region stays in the set, exists for all time and converges"
    if criterion.claim == "limits_kept":
        theorem, statement = "T9", "no motion from the region leaves the limits"
        for name, limit in case.limits.items():
            if limit != Interval(None, None):
                kept = limit.contains(claim.around[name])
                text = f"{name} stays within its limits on the set"
                premises.append(_bounded(f"limit {name}", text, kept, claim.identifier))
        for signal in case.model.signals:
            if signal.limits != Interval(None, None):
                ball = range_over(inline_signals(symbol(signal.name), case.model), place, RANGE_PIECES)
                kept = ball is not None and signal.limits.contains(Interval(ball.lower, ball.upper))
                text = f"the signal {signal.name} stays within its limits on the set"
                premises.append(_bounded(f"limit {signal.name}", text, kept, claim.identifier))
    elif criterion.claim == "excursion":
        theorem = "T9"
        statement = f"the quantity {criterion.of_written} stays within its bounds along every motion from the region"
        ball = range_over(quantity_of(knowledge, criterion), place, RANGE_PIECES)
        lower, upper = stated_bounds(criterion)
        kept = ball is not None and (lower is None or ball.lower >= lower) and (upper is None or ball.upper <= upper)
        premises.append(_bounded("bound", "the quantity stays within the stated bounds", kept, claim.identifier))
        if ball is not None:
            facts["bound"] = Enclosure(ball.lower, ball.upper, "SI")
    yield conclude(knowledge, criterion, theorem, statement, tuple(premises), (claim.identifier,), facts)


def _bounded(label: str, statement: str, shown: bool, evidence: str) -> Premise:
    return Premise(label, statement, "proved" if shown else "undecided", "enclosed", "", evidence)


def _by_cells(knowledge: Knowledge, criterion: Criterion, region: Box, claim: CellsClaim, finding: Finding) -> Finding:
    """The same criterion on every cell; what holds on each holds for every combination."""
    size = len(knowledge.case.model.states)
    shapes = [(cell, shape) for cell in claim.cells if (shape := ellipsoid(cell, size)) is not None]
    parts = [_by_set(knowledge, criterion, region, cell, finding, shape) for cell, shape in shapes]
    own = len(finding.premises)
    premises = [knowledge.place, *finding.premises]
    premises += merged([(p.premises[1], *p.premises[2 + own :]) for p in parts], claim.identifier)
    facts: dict[str, Enclosure] = {}
    for name in parts[0].facts:
        known = [p.facts[name] for p in parts if name in p.facts]
        lowers = [e.lower for e in known if e.lower is not None]
        uppers = [e.upper for e in known if e.upper is not None]
        scale = name == "proved scale of the region"
        facts[name] = Enclosure(min(lowers), min(uppers) if scale else max(uppers), known[0].unit)
    return conclude(
        knowledge, criterion, parts[0].theorem, parts[0].statement, tuple(premises), (claim.identifier,), facts
    )


def _excursion(
    knowledge: Knowledge, criterion: Criterion, equilibrium: Equilibrium, claim: SetClaim, shape: Ellipsoid
) -> tuple[Premise, dict[str, Enclosure]]:
    quantity = quantity_of(knowledge, criterion)
    bound = bound_over_set(knowledge.case, equilibrium, shape, quantity, criterion.over, _cell(claim, criterion))
    if bound is None:
        return Premise(
            "bound", "the quantity has a finite bound on the set", "undecided", "enclosed", evidence=claim.identifier
        ), {}
    lower, upper = stated_bounds(criterion)
    kept = (lower is None or bound.over_set.lower >= lower) and (upper is None or bound.over_set.upper <= upper)
    facts = {
        "bound": Enclosure(bound.over_set.lower, bound.over_set.upper, "SI"),
        "equilibrium value": Enclosure(bound.at_equilibrium.lower, bound.at_equilibrium.upper, "SI"),
    }
    detail = f"in {span(bound.over_set.lower, bound.over_set.upper)} (SI)"
    strength: Strength = "exact" if bound.exact and bound.at_equilibrium.is_exact else "enclosed"
    premise = Premise(
        "bound", f"the quantity {criterion.of_written} stays within the stated bounds on the set",
        "proved" if kept else "undecided", strength, detail, claim.identifier,
    )  # fmt: skip
    return premise, facts


def _cell(claim: SetClaim, criterion: Criterion) -> Box | None:
    """The combinations a set is about, where that is a matter of the criterion."""
    return claim.parameters if isinstance(claim, LyapunovClaim) and criterion.over != NOMINAL else None


def quantity_of(knowledge: Knowledge, criterion: Criterion) -> Expression:
    """The formula `of`, over states and parameters only.  Raises ValueError where the criterion has none."""
    if criterion.of is None:
        raise ValueError(f"{criterion.name} names no quantity")
    return inline_signals(criterion.of, knowledge.case.model)


def _limit_premises(
    knowledge: Knowledge, criterion: Criterion, equilibrium: Equilibrium, claim: SetClaim, shape: Ellipsoid
) -> Iterator[Premise]:
    """State limits are offsets; signal limits are absolute."""
    case = knowledge.case
    for (name, side), width in zip(case.limits.items(), shape.half_widths, strict=True):
        if side != Interval(None, None):
            kept = side.contains(Interval(-width, width))
            yield Premise(
                f"limit {name}", f"{name} stays within its limits on the set", "proved" if kept else "undecided",
                "exact", f"at most {figure(width)} from the equilibrium (SI)", claim.identifier,
            )  # fmt: skip
    for signal in case.model.signals:
        if signal.limits == Interval(None, None):
            continue
        formula = inline_signals(symbol(signal.name), case.model)
        bound = bound_over_set(case, equilibrium, shape, formula, criterion.over, _cell(claim, criterion))
        kept = bound is not None and signal.limits.contains(Interval(bound.over_set.lower, bound.over_set.upper))
        detail = "" if bound is None else f"in {span(bound.over_set.lower, bound.over_set.upper)} (SI)"
        yield Premise(
            f"limit {signal.name}", f"the signal {signal.name} stays within its limits on the set",
            "proved" if kept else "undecided", "exact" if bound is not None and bound.exact else "enclosed",
            detail, claim.identifier,
        )  # fmt: skip


def _refutations(
    knowledge: Knowledge, criterion: Criterion, equilibrium: Equilibrium, region: Box
) -> Iterator[Finding]:
    if criterion.claim == "attraction":
        yield from _not_attractive(knowledge, criterion, equilibrium, region)
    if criterion.claim in ("attraction", "limits_kept"):
        yield from _starts_outside(knowledge, criterion, equilibrium, region)
    if criterion.claim == "excursion":
        yield from _starts_beyond(knowledge, criterion, equilibrium, region)


def _not_attractive(
    knowledge: Knowledge, criterion: Criterion, equilibrium: Equilibrium, region: Box
) -> Iterator[Finding]:
    """Instability of the point, or another equilibrium among the starts, at the nominal combination."""
    if knowledge.place.result != "proved":
        return
    if equilibrium.stability == "unstable":
        unstable = routh_claim_id(equilibrium)
        yield refute(
            knowledge, criterion, "T8", "the point is unstable: an eigenvalue lies outside the stability region",
            _strength(equilibrium), (unstable,), {"combination": "nominal", "equilibrium": equilibrium.identifier},
        )  # fmt: skip
    if criterion.over != NOMINAL:
        for claim, finding in knowledge.combinations():
            if count_of(finding, OUTSIDE):
                where = words_of(knowledge.case, claim)
                yield refute(
                    knowledge, criterion, "T8", f"the point is unstable at {where}", finding.strength,
                    (claim.identifier,), {"combination": where, "equilibrium": equilibrium.identifier},
                )  # fmt: skip
    for other in knowledge.equilibria:
        if other is not equilibrium and _lies_in(other, equilibrium, region):
            yield refute(
                knowledge, criterion, "E", f"equilibrium {other.identifier} lies in the region and stays there",
                "enclosed", (f"{knowledge.case.name}.R1",),
                {"combination": "nominal", "start": other.identifier, "event": "the motion rests there for all time"},
            )  # fmt: skip


def _strength(equilibrium: Equilibrium) -> Strength:
    return "exact" if all(b.is_exact for b in equilibrium.state) else "enclosed"


def _lies_in(other: Equilibrium, centre: Equilibrium, region: Box) -> bool:
    """Another equilibrium, apart from the centre, whatever the exact places in their balls."""
    offsets = [Interval(a.lower - b.upper, a.upper - b.lower) for a, b in zip(other.state, centre.state, strict=True)]
    apart = any(o.lower is not None and o.upper is not None and (o.lower > 0 or o.upper < 0) for o in offsets)
    return apart and all(side.contains(o) for side, o in zip(region.intervals, offsets, strict=True))


def _starts_outside(
    knowledge: Knowledge, criterion: Criterion, equilibrium: Equilibrium, region: Box
) -> Iterator[Finding]:
    """Some start lies outside the domain (or the limits): the motion has left at time zero."""
    sides = list(zip(knowledge.case.model.domain.items(), equilibrium.state, region.intervals, strict=True))
    outside = [
        n for (n, side), ball, offsets in sides if _sticks_out(offsets, _offset_side(side, ball.lower, ball.upper))
    ]
    where = "the domain"
    if not outside and criterion.claim == "limits_kept":
        pairs = zip(knowledge.case.limits.items(), region.intervals, strict=True)
        outside = [n for (n, side), offsets in pairs if _sticks_out(offsets, side)]
        where = "the limits"
    if outside:
        yield refute(
            knowledge, criterion, "T9", f"the region itself holds starts outside {where} in {', '.join(outside)}",
            "exact", (), {"combination": "nominal", "time": "0 s", "event": f"start outside {where}"},
        )  # fmt: skip


def _offset_side(side: Interval, lower: Fraction, upper: Fraction) -> Interval:
    """`side` as offsets from an equilibrium in [lower, upper], widened so that what sticks out certainly does."""
    return Interval(
        None if side.lower is None else side.lower - upper, None if side.upper is None else side.upper - lower
    )


def _sticks_out(offsets: Interval, side: Interval) -> bool:
    return (side.lower is not None and offsets.lower is not None and offsets.lower < side.lower) or (
        side.upper is not None and offsets.upper is not None and offsets.upper > side.upper
    )


def _starts_beyond(
    knowledge: Knowledge, criterion: Criterion, equilibrium: Equilibrium, region: Box
) -> Iterator[Finding]:
    """A corner of the region where the quantity already violates its bound."""
    quantity = quantity_of(knowledge, criterion)
    parameters = parameter_box(knowledge.case, NOMINAL)
    lower, upper = tightest_bounds(criterion)
    for corner in region.corners():
        sides = tuple(Interval(b.lower + c, b.upper + c) for b, c in zip(equilibrium.state, corner, strict=True))
        place = Box((*region.names, *parameters.names), (*sides, *parameters.intervals))
        value = range_over(quantity, place, 1)
        if value is None:
            continue
        if (lower is not None and value.upper < lower) or (upper is not None and value.lower > upper):
            start = ", ".join(f"{n} = {figure(c)}" for n, c in zip(region.names, corner, strict=True))
            what = f"the quantity {criterion.of_written} violates its bound at a start of the region"
            yield refute(
                knowledge, criterion, "T9", what, "enclosed", (),
                {"combination": "nominal", "start": start, "time": "0 s"},
            )  # fmt: skip
            return
