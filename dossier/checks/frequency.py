"""Nominal margins of a loop (theorem T11): the closed loop is stable and no crossing is missed.

The claim lists intervals for the crossings; here everything else is derived again from the case, the
roots are recounted, and the margins are enclosed with outward rounding.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Final

from flint import arb

from dossier.checks.boundary import LoopOnBoundary, number_of, on_boundary
from dossier.checks.crossings import (
    Extreme,
    Measured,
    Place,
    Undecided,
    bounds,
    gain_margins,
    peak_sensitivity,
    phase_margins,
)
from dossier.checks.delays import whole_sample_delay
from dossier.checks.hurwitz import is_hurwitz
from dossier.checks.sturm import Recount, isolates, reduced
from dossier.model.ball import WORKING_BITS, Ball, enclose, precision
from dossier.model.case import NOMINAL, Case
from dossier.model.claim import SturmClaim
from dossier.model.equilibrium import Equilibrium
from dossier.model.finding import Enclosure, Finding, Premise, Strength, weakest
from dossier.model.linear_part import NoLinearPart
from dossier.model.loop import model_hash
from dossier.model.loop_polynomials import LoopPolynomials, decimal_step, loop_polynomials
from dossier.model.outcome import LoopMargins

PRINTED_DIGITS: Final = 18
"""Significant decimals of an enclosure's ends after outward rounding: more than is ever printed."""

STABLE: Final = "every root of the closed loop's characteristic polynomial lies strictly inside the stability region"
MEANT: Final = "the claim is about this loop: same model, equilibrium and polynomials"
COMPLETE: Final = {
    "gain": "the listed intervals hold every positive root of Im(c conj a), one each",
    "phase": "the listed intervals hold every positive root of |a|^2 - |c|^2, one each",
    "peak": "the listed intervals hold every positive root of d|S|^2/dW, one each",
}


def check_margins(case: Case, equilibrium: Equilibrium, claim: SturmClaim) -> tuple[Finding, LoopMargins | None]:
    """Judge `claim` and enclose the margins of the nominal loop it names at `equilibrium`.

    The finding is ``proved`` when the closed loop is proved stable, all three lists are complete and every
    quantity is enclosed; ``refuted`` when the closed loop is proved not to be stable (margins then have no
    meaning: None); else ``undecided`` with the reason in a premise.  In the margins a quantity is None
    unless it is proved by itself; an enclosure with both ends None has no finite value, one with one end
    None is proved on the other side only.  Facts: ``gain up``, ``gain down`` (dB), ``phase``, ``phase lag``,
    ``phase lead`` (rad), ``delay`` (s), ``peak sensitivity`` (1).
    """
    with precision(WORKING_BITS):
        premises, facts, margins = _judge(case, equilibrium, claim)
    result, strength = weakest(premises)
    statement = f"the margins of loop {claim.loop} at {equilibrium.identifier} lie in the stated enclosures"
    check = "exact" if strength == "exact" else "interval"
    return (
        Finding(
            claim.identifier, check, result, "enclosed", NOMINAL, "T11", statement, premises, facts,
            (claim.identifier,),
        ),
        margins,
    )  # fmt: skip


Judged = tuple[tuple[Premise, ...], Mapping[str, Enclosure], LoopMargins | None]


def _judge(case: Case, equilibrium: Equilibrium, claim: SturmClaim) -> Judged:
    polynomials = loop_polynomials(case, equilibrium, claim.loop)
    if isinstance(polynomials, NoLinearPart):
        return (Premise("stable", STABLE, "undecided", "enclosed", polynomials.reason),), {}, None
    strength: Strength = "exact" if polynomials.is_exact else "enclosed"
    meant = Premise("crossings", MEANT, "proved", strength, "; ".join(polynomials.remarks))
    difference = _difference(case, equilibrium, claim, polynomials)
    if difference:
        return (Premise("crossings", MEANT, "undecided", strength, difference),), {}, None
    stable = stability_premise(polynomials)
    if stable.result != "proved":
        return (stable, meant), {}, None
    return _measure(claim, polynomials, (stable, meant))


def _difference(case: Case, equilibrium: Equilibrium, claim: SturmClaim, own: LoopPolynomials) -> str:
    """Why the claim is not about this loop, empty if it is."""
    if claim.model_hash != model_hash(case):
        return "the claim was made for another model"
    if (claim.over, claim.theorem, claim.equilibrium) != (NOMINAL, "T11", equilibrium.identifier):
        return "the claim is about another equilibrium, scope or theorem"
    for stated, derived in ((claim.open_loop, own.open_loop), (claim.closed_loop, own.closed_loop)):
        if len(stated) != len(derived) or not all(map(_agree, stated, derived)):
            return "the polynomials of the claim are not those of the loop"
    return ""


def _agree(stated: Ball, derived: Ball) -> bool:
    """Equal where exact; overlapping where enclosed (the check goes on with its own)."""
    if stated.is_exact and derived.is_exact:
        return stated.middle == derived.middle
    return abs(stated.middle - derived.middle) <= stated.radius + derived.radius


def stability_premise(polynomials: LoopPolynomials) -> Premise:
    """The premise ``stable`` of theorem T11: proved, refuted or undecided by Routh's array."""
    strength: Strength = "exact" if polynomials.is_exact else "enclosed"
    stable = is_hurwitz([number_of(b) for b in polynomials.closed_loop])
    if stable:
        return Premise("stable", STABLE, "proved", strength)
    if stable is None:
        return Premise("stable", STABLE, "undecided", strength, "the enclosures do not decide Routh's array")
    return Premise("stable", STABLE, "refuted", strength, "the closed loop is not stable: it has no margins")


def _measure(claim: SturmClaim, polynomials: LoopPolynomials, premises: tuple[Premise, ...]) -> Judged:
    loop = on_boundary(polynomials.open_loop, polynomials.gain, polynomials.closed_loop)
    strength = premises[0].strength
    recounts = {
        "gain": isolates(reduced(loop.gain_crossing), claim.gain_crossings),
        "phase": isolates(reduced(loop.phase_crossing), claim.phase_crossings),
        "peak": isolates(reduced(loop.peak), claim.peak_candidates),
    }
    measured = _measured(loop, polynomials, claim, recounts)
    complete = tuple(
        _completeness(name, recount, [measured[q] for q in QUANTITIES_OF[name]], strength)
        for name, recount in recounts.items()
    )
    scale = Scale(None if polynomials.interval is None else enclose(polynomials.interval))
    facts = {name: _FORMS[name](value) for name, value in measured.items() if not isinstance(value, Undecided)}
    margins = _margins(claim, measured, facts, scale)
    return (*premises, *complete), facts, margins


QUANTITIES_OF: Final = {
    "gain": ("gain up", "gain down"),
    "phase": ("phase", "phase lag", "phase lead", "delay"),
    "peak": ("peak sensitivity",),
}


def _measured(
    loop: LoopOnBoundary, polynomials: LoopPolynomials, claim: SturmClaim, recounts: Mapping[str, Recount]
) -> dict[str, Measured]:
    """Every quantity whose list of crossings is complete; `Undecided` for the others."""
    result: dict[str, Measured] = {
        q: Undecided(recounts[name].reason) for name, quantities in QUANTITIES_OF.items() for q in quantities
    }
    if recounts["gain"].holds:
        gain = gain_margins(loop, claim.gain_crossings)
        result |= {"gain up": gain.up, "gain down": gain.down}
    if recounts["phase"].holds:
        phase = phase_margins(loop, claim.phase_crossings)
        result |= {"phase": phase.least, "phase lag": phase.lag, "phase lead": phase.lead, "delay": phase.delay}
        if polynomials.interval is not None:
            result["delay"] = whole_sample_delay(polynomials, phase.delay)
    if recounts["peak"].holds:
        result["peak sensitivity"] = peak_sensitivity(loop, claim.peak_candidates)
    return result


def _completeness(name: str, recount: Recount, measured: Sequence[Measured], strength: Strength) -> Premise:
    reason = recount.reason or next((m.reason for m in measured if isinstance(m, Undecided)), "")
    return Premise("crossings", COMPLETE[name], "undecided" if reason else "proved", strength, reason)


# --- from exact bounds to printed enclosures ------------------------------------------------------


def outward(lower: Fraction | None, upper: Fraction | None, unit: str) -> Enclosure:
    """The enclosure [lower, upper] widened to ends of `PRINTED_DIGITS` decimals."""
    return Enclosure(_rounded(lower, up=False), _rounded(upper, up=True), unit)


def _rounded(value: Fraction | None, *, up: bool) -> Fraction | None:
    if not value:
        return value
    step = decimal_step(abs(value), PRINTED_DIGITS)
    return -(-value // step) * step if up else value // step * step


def _decibels(factor: Fraction | None, *, up: bool) -> Fraction | None:
    if factor is None:
        return None
    return bounds(20 * enclose(Ball(factor)).log() / arb(10).log())[up]


def _plain(unit: str):
    def form(value: Extreme | None) -> Enclosure:
        return Enclosure(None, None, unit) if value is None else outward(value.lower, value.upper, unit)

    return form


def _gain_up(value: Extreme | None) -> Enclosure:
    if value is None:
        return Enclosure(None, None, "dB")
    return outward(_decibels(value.lower, up=False), _decibels(value.upper, up=True), "dB")


def _gain_down(value: Extreme | None) -> Enclosure:
    """The factor by which the gain may be divided, as a negative number of decibels."""
    if value is None:
        return Enclosure(None, None, "dB")
    least, most = _decibels(value.lower, up=False), _decibels(value.upper, up=True)
    return outward(None if most is None else -most, None if least is None else -least, "dB")


_FORMS: Final = {
    "gain up": _gain_up,
    "gain down": _gain_down,
    "phase": _plain("rad"),
    "phase lag": _plain("rad"),
    "phase lead": _plain("rad"),
    "delay": _plain("s"),
    "peak sensitivity": _plain("1"),
}


class Scale:
    """Angular frequency in rad/s of a place on the boundary: w, or 2 atan(w)/T for the sampling interval T."""

    def __init__(self, interval: arb | None) -> None:
        self.interval = interval

    def of(self, place: Place) -> Enclosure:
        """Enclosure of the frequency; an end None is infinite."""
        return outward(self._end(place.lower, up=False), self._end(place.upper, up=True), "rad/s")

    def _end(self, square: Fraction | None, *, up: bool) -> Fraction | None:
        if self.interval is None:
            return None if square is None else bounds(enclose(Ball(square)).sqrt())[up]
        angle = arb.pi() if square is None else 2 * enclose(Ball(square)).sqrt().atan()
        return bounds(angle / self.interval)[up]


def _margins(
    claim: SturmClaim, measured: Mapping[str, Measured], facts: Mapping[str, Enclosure], scale: Scale
) -> LoopMargins:
    def at(name: str) -> Enclosure | None:
        value = measured[name]
        return scale.of(value.place) if isinstance(value, Extreme) else None

    return LoopMargins(
        claim.loop,
        facts.get("gain up"), at("gain up"),
        facts.get("gain down"), at("gain down"),
        facts.get("phase"), at("phase"),
        facts.get("delay"), None if scale.interval is not None else at("delay"),
        facts.get("peak sensitivity"), at("peak sensitivity"),
        claim.identifier,
    )  # fmt: skip
