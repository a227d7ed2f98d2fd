"""Names a user may give: letters, digits and underscores, none twice, none that formulas already use."""

from __future__ import annotations

import re
from collections.abc import Iterable
from typing import Final

from dossier.model.expression import FUNCTIONS
from dossier.project.faults import Ledger
from dossier.project.located import Text

LONGEST_NAME: Final = 60
"""Characters of a name; longer ones do not fit a table of the dossier."""

_NAME: Final = re.compile(r"[A-Za-z_][A-Za-z0-9_]*")
_TAKEN: Final = (*FUNCTIONS, "pi")


EVIDENCE_NAME: Final = re.compile(r"[BELMNPRVW][0-9]*|nominal|tight|free|cells|boxes|wide|given")
"""Names under an operating point that the program gives to its own evidence: E1, L1, R1, M1, V2, ..."""


def check_criterion_names(names: Iterable[Text], ledger: Ledger) -> None:
    """Report names of criteria that would be taken for those of evidence of the same operating point."""
    for name in names:
        if not name.is_absent and EVIDENCE_NAME.fullmatch(name) is not None:
            ledger.fault(
                name, f"{name} is how the dossier names its own evidence", expected="another name for the criterion",
                hint=f"such as C{name[1:] or 1}" if name[1:].isdigit() or len(name) == 1 else f"such as {name}_case",
            )  # fmt: skip


def check_names(names: Iterable[tuple[Text, str]], ledger: Ledger, *, in_formulas: bool) -> None:
    """Report names that cannot be used or are used twice; warn of two that differ only in case.

    `names` are pairs of a name and what it is.
    """
    seen: dict[str, tuple[Text, str]] = {}
    for name, kind in names:
        if name.is_absent:
            continue
        if _NAME.fullmatch(name) is None or len(name) > LONGEST_NAME:
            ledger.fault(
                name, f"the name of {_one(kind)} has other signs or is too long",
                expected=f"letters, digits and underscores, at most {LONGEST_NAME}, not beginning with a digit",
                hint="rename it",
            )  # fmt: skip
        elif in_formulas and name in _TAKEN:
            ledger.fault(name, f"{name} already means something in formulas", expected="another name", hint="rename it")
        folded = name.lower()
        if folded in seen:
            other, what = seen[folded]
            if other == name:
                ledger.fault(
                    name, f"{name} is the name of {_one(what)} already", expected="a name of its own",
                    hint=f"the first is on line {other.line}",
                )  # fmt: skip
            else:
                ledger.warn(name, f"{name} and {other} (line {other.line}) differ only in case")
        else:
            seen[folded] = (name, kind)


def _one(kind: str) -> str:
    return f"{'an' if kind[0] in 'aeiou' else 'a'} {kind}"
