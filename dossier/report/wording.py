"""The words of the dossier: verdicts and their marks, names and properties of claims, fixed cautions."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final

from dossier.model.case import TOLERANCES, Criterion, Scope
from dossier.model.finding import Result, Strength
from dossier.model.outcome import Verdict
from dossier.report import numbers


@dataclass(frozen=True, slots=True)
class VerdictWord:
    """How a verdict is shown: a mark (never colour alone), a word, and what it allows to say."""

    mark: str
    word: str
    means: str
    may_not: str


VERDICT_WORDS: Final[Mapping[Verdict, VerdictWord]] = {
    "proved": VerdictWord(
        "●", "proved",
        "Every premise of a named theorem was established in exact or interval arithmetic, for the stated model, set "
        "and parameters.",
        "“the machine is stable”, “safe”, “guaranteed”; anything outside the stated sets",
    ),
    "supported": VerdictWord(
        "◐", "supported by sampling",
        "No violation occurred in the stated number of sampled motions. Not a proof: a violation between samples is "
        "not excluded.",
        "“verified”, “shown”, “for all”; a probability about the machine",
    ),
    "not established": VerdictWord(
        "○", "not established",
        "Neither a certificate nor a counter-example was found. Nothing may be concluded.",
        "“unstable”, “probably stable”, “almost proved”, “failed”",
    ),
    "contradicted": VerdictWord(
        "▴", "contradicted by simulation",
        "A floating-point motion violates it by far more than its estimated error, not yet enclosed. Treat as not met.",
        "“refuted”",
    ),
    "refuted": VerdictWord(
        "⊗", "refuted",
        "False for the stated model at the stated values: a counter-example was verified rigorously.",
        "“the machine will fail”; false at other values",
    ),
    "no operating point": VerdictWord(
        "∅", "no operating point",
        "Proved: the model has no equilibrium where one is needed, so the criterion has no subject.",
        "“the analysis failed”",
    ),
    "not applicable": VerdictWord(
        "–", "not applicable", "The criterion has no meaning here; the reason is given.", "anything about the criterion"
    ),
    "not attempted": VerdictWord(
        "□", "not attempted", "Outside this issue; the reason is given.", "anything about the criterion"
    ),
}  # fmt: skip

RESULT_WORDS: Final[Mapping[Result, tuple[str, str]]] = {
    "proved": ("●", "proved"),
    "refuted": ("⊗", "refuted"),
    "undecided": ("○", "undecided"),
    "not run": ("□", "not run"),
}

STRENGTH_WORDS: Final[Mapping[Strength, str]] = {
    "exact": "exact",
    "enclosed": "enclosed",
    "floating": "floating",
    "sampled": "sampled",
}
STRENGTH_MEANS: Final[Mapping[Strength, str]] = {
    "exact": "rational arithmetic, no rounding",
    "enclosed": "interval or ball arithmetic, every rounding outward",
    "floating": "double precision, not rigorous",
    "sampled": "motions drawn by a plan, not rigorous",
}

CHECK_WORDS: Final = {
    "exact": "exact check of the certificate",
    "interval": "second witness in interval or ball arithmetic",
    "simulation": "simulation campaign",
}

ENDING_WORDS: Final = {
    "found": "a candidate was found",
    "no candidate": "no candidate",
    "infeasible": "reported infeasible by the solver at this setting",
    "numerical failure": "numerical failure",
    "budget spent": "work budget spent",
    "internal fault": "fault of the program",
    "out of reach": "out of this method’s reach",
}

CLAIM_NAMES: Final = {
    "existence": "An equilibrium exists",
    "equilibria_listed": "All equilibria listed",
    "equilibrium_value": "Equilibrium value",
    "asymptotic_stability": "Asymptotic stability",
    "exponential_stability": "Exponential stability",
    "attraction": "Attraction from the region",
    "global_attraction": "Attraction from everywhere",
    "limits_kept": "Limits kept",
    "excursion": "Excursion",
    "decay_rate": "Decay rate",
    "damping_ratio": "Damping ratio",
    "contraction": "Contraction per sample",
    "settling_time": "Settling time",
    "gain_margin": "Gain margin",
    "phase_margin": "Phase margin",
    "delay_margin": "Delay margin",
    "peak_sensitivity": "Peak sensitivity",
    "parameter_margin": "Parameter margin",
    "invariance": "Invariance",
    "ultimate_bound": "Ultimate bound",
}

_PROPERTIES: Final = {
    "existence": "the model has an equilibrium in the search box",
    "equilibria_listed": "the list of equilibria in the search box is complete and each is classified",
    "equilibrium_value": "{of} at the equilibrium is {bounds}",
    "asymptotic_stability": "the operating point is asymptotically stable (locally)",
    "exponential_stability": "every eigenvalue of the linear part lies strictly inside the stability region{rate}",
    "attraction": "every motion that starts in the region exists for all time, stays in the domain and converges to "
    "the operating point, which is stable",
    "global_attraction": "every motion converges to the operating point, which is stable",
    "limits_kept": "no motion that starts in the region leaves the limits, the domain or the limits of a signal",
    "excursion": "along every motion that starts in the region, {of} is {bounds}",
    "decay_rate": "the decay rate of the linear part is {bounds}",
    "damping_ratio": "the least damping ratio of the modes of the linear part is {bounds}",
    "contraction": "the largest modulus of the multipliers of the linear part is {bounds}",
    "settling_time": "along every motion that starts in the region, {of} is within {to} of its equilibrium value at "
    "every time after {within}",
    "gain_margin": "the gain of loop {loop} may rise and fall by a factor that is {bounds}, both ways",
    "phase_margin": "the phase margin of loop {loop} is {bounds}",
    "delay_margin": "the delay margin of loop {loop} is {bounds}",
    "peak_sensitivity": "the peak of the sensitivity of loop {loop} over all frequencies is {bounds}",
    "parameter_margin": "{of} may move by {bounds}, both ways, before the linear part loses stability",
    "invariance": "under the disturbances no motion that starts in the region leaves the limits",
    "ultimate_bound": "motions from the region end up with {of} {bounds}, for good",
}

REGION_CLAIMS: Final = frozenset(
    {"attraction", "limits_kept", "excursion", "settling_time", "invariance", "ultimate_bound"}
)
"""Claims about every start of a region."""


def claim_name(claim: str) -> str:
    """A claim's short name."""
    return CLAIM_NAMES.get(claim, claim.replace("_", " "))


def property_of(criterion: Criterion, bounds: str, to: str, within: str) -> str:
    """What the criterion asks, as a clause; `bounds`, `to` and `within` are its printed quantities."""
    template = _PROPERTIES.get(criterion.claim, criterion.claim.replace("_", " "))
    rate = f", with a rate that is {bounds}" if bounds else ""
    return template.format(
        of=criterion.of_written or "the quantity", bounds=bounds, loop=criterion.loop, to=to, within=within, rate=rate
    )


def counted(count: int, noun: str, nouns: str = "") -> str:
    """A count with its noun, in the plural where it is not one."""
    return f"{numbers.count(count)} {noun if count == 1 else nouns or noun + 's'}"


def scope_words(over: Scope) -> str:
    """The parameter values a verdict speaks of."""
    if over == TOLERANCES:
        return "for every combination in the box of parameter spreads, interior included"
    return "at the nominal parameter values"


def scope_short(over: Scope) -> str:
    """The same in one or two words."""
    return "tolerances" if over == TOLERANCES else "nominal"


COVER_CAUTION: Final = (
    "This dossier concerns mathematical models. It does not certify a machine and does not replace its risk assessment."
)

CAUTIONS: Final = (
    "This dossier concerns mathematical models. It does not certify a machine, does not replace the risk assessment "
    "(ISO 12100), the validation of safety functions (ISO 13849-2, IEC 62061), type standards, national law or the "
    "judgement of a competent and, where required, licensed engineer.",
    "Values taken from standards are as entered by the project and must be checked against the current edition.",
    "A verdict lapses when any listed input changes.",
)

MARGIN_CAUTION: Final = (
    "Margins are linear and local, at the nominal parameters, with one loop broken and all others closed: simultaneous "
    "changes in several loops are not covered. They are no certificate, and a certificate is no margin."
)
SAMPLING_CAUTION: Final = (
    "Sampled results are not proofs. A campaign can only refute; where it finds no violation, one between the samples "
    "is not excluded."
)
CERTIFICATE_CAUTION: Final = (
    "Certificates hold for the listed sets and models only. The first digits are printed; the exact numbers are in the "
    "files."
)
LINEAR_CAUTION: Final = "The linear part speaks of motions near the equilibrium only; no amplitude is bounded by it."
ATTEMPT_CAUTION: Final = (
    "A search that found nothing says nothing about the criterion: it neither supports it nor speaks against it."
)
SAMPLED_MODEL_CAUTION: Final = (
    "This model is sampled: statements hold at the sampling instants, and between samples nothing is claimed."
)

ROLE_STATEMENTS: Final = {
    "prepared": "The project file describes the machine, its control release and its use as I know them.",
    "checked": "I have compared the inputs of sections 2 to 4 with the sources named and found them as stated, except "
    "as noted under conditions.",
    "independently reviewed": "I am not involved in this design. I re-ran / did not re-run the checks (strike "
    "out one).",
    "approved": "I accept the open criteria, the limitations and the assumptions listed.",
    "accepted": "I accept the dossier for the machine and the use named.",
}
"""Fixed text per role; what a signature means is never left open."""


def role_statement(role: str) -> str:
    """The fixed statement of a role, empty for a role of the project's own."""
    return ROLE_STATEMENTS.get(role.replace("_", " "), "")
