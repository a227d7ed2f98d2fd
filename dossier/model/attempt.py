"""What a search tried and why it ended: a remark, never a result."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

Ending = Literal[
    "found", "no candidate", "infeasible", "numerical failure", "budget spent", "out of reach", "internal fault"
]  # fmt: skip


@dataclass(frozen=True, slots=True)
class Attempt:
    """One search: `subject` is the criterion or operating point it served, `work` counts what was spent.

    `work` holds machine-independent counts only (solves, iterations, boxes), never seconds.
    """

    subject: str
    method: str
    ending: Ending
    remark: str
    work: Mapping[str, int] = field(default_factory=dict)
