"""The verdict on one criterion, with its value, reserve and reason; and the measured margins of a loop."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Final, Literal, get_args

from dossier.model.case import Scope
from dossier.model.finding import Enclosure, Strength

Verdict = Literal[
    "proved",
    "refuted",
    "contradicted",
    "no operating point",
    "supported",
    "not established",
    "not applicable",
    "not attempted",
]
VERDICTS: Final[tuple[Verdict, ...]] = get_args(Verdict)
"""In the order of a conclusion's counts."""

WEAKEST_FIRST: Final[tuple[Verdict, ...]] = (
    "refuted",
    "contradicted",
    "no operating point",
    "not established",
    "not attempted",
    "supported",
    "proved",
    "not applicable",
)
"""Order of the roll-up; ``not applicable`` does not count against a conclusion."""


@dataclass(frozen=True, slots=True)
class Outcome:
    """The judgement of one criterion.

    `identifier` is ``<operating point>.<criterion>``.  `because` is one printed sentence; `value` the
    quantity obtained, `bound` the limit it is compared with, `reserve` their relation (dimensionless,
    1 = the whole way), each an enclosure or None.  `sub_scope` names the largest part that is proved.
    """

    identifier: str
    claim: str
    over: Scope
    verdict: Verdict
    strength: Strength | None
    theorem: str
    because: str
    evidence: tuple[str, ...] = ()
    value: Enclosure | None = None
    bound: Enclosure | None = None
    reserve: Enclosure | None = None
    sub_scope: str = ""
    counter_example: Mapping[str, str] = field(default_factory=dict)
    contradiction: bool = False


@dataclass(frozen=True, slots=True)
class LoopMargins:
    """Nominal margins of one loop as enclosures; None where the quantity was not measured.

    Gain up and down in dB (an end None: no finite value in this model), phase in rad, delay in s,
    peak sensitivity as a ratio, each with the angular frequency in rad/s at which it occurs.
    """

    loop: str
    gain_up: Enclosure | None
    gain_up_at: Enclosure | None
    gain_down: Enclosure | None
    gain_down_at: Enclosure | None
    phase: Enclosure | None
    phase_at: Enclosure | None
    delay: Enclosure | None
    delay_at: Enclosure | None
    peak_sensitivity: Enclosure | None
    peak_sensitivity_at: Enclosure | None
    evidence: str


def roll_up(verdicts: tuple[Verdict, ...]) -> Verdict:
    """The weakest of `verdicts`; ``not applicable`` when there is nothing else."""
    for verdict in WEAKEST_FIRST:
        if verdict in verdicts:
            return verdict
    return "not applicable"
